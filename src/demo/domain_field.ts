import type { Branch } from "../model/cooldown.js";
import { childSeed } from "../numerics/random.js";
import { type Field, latticeField } from "./lattice_field.js";
import type { CooldownSpec } from "./spec.js";

/** Seeds of the parts of a cooldown, so that no two parts share random numbers. */
export const PART = { domains: 1, roughness: 2, waviness: 3, debris: 4, drift: 5, frame: 6, gain: 7 } as const;

function pointwise(value: (x: number, y: number) => number): Field {
  return {
    sampler: (x0, dx, n) => (y, out) => {
      for (let k = 0; k < n; k++) out[k] = value(x0 + k * dx, y);
    },
  };
}

/** The field F whose level sets are the walls of one branch of one cycle: metallic where F > (half − T)/spread. */
export function domainField(spec: CooldownSpec, branch: Branch, cycle: number): Field {
  const d = spec.domains;
  if (d.shape === "random") {
    const own = Math.sqrt(1 - d.memory ** 2);
    const ownBranch = own * Math.sqrt(1 - d.branchMemory ** 2);
    return latticeField(
      [
        { seed: childSeed(spec.sampleSeed, PART.domains), weight: d.memory },
        { seed: childSeed(spec.seed, PART.domains, 0), weight: own * d.branchMemory },
        { seed: childSeed(spec.seed, PART.domains, cycle, branch === "cooling" ? 1 : 2), weight: ownBranch },
      ],
      d.scaleNm,
    );
  }
  // normalDeg turns anticlockwise with y up the page, rows grow down it.
  const nx = Math.cos((d.normalDeg * Math.PI) / 180);
  const ny = -Math.sin((d.normalDeg * Math.PI) / 180);
  const along = (x: number, y: number): number => (x - d.xNm) * nx + (y - d.yNm) * ny;
  const distance = {
    line: along,
    stripe: (x: number, y: number) => d.halfWidthNm - Math.abs(along(x, y)),
    disc: (x: number, y: number) => d.halfWidthNm - Math.hypot(x - d.xNm, y - d.yNm),
  }[d.shape];
  return pointwise((x, y) => distance(x, y) / d.scaleNm);
}

/** The level of the domains' field above which the sample is metallic at this temperature. */
export function thresholdOf(spec: CooldownSpec, branch: Branch, temperatureK: number): number {
  const t = spec.transition;
  return ((branch === "cooling" ? t.coolingHalfK : t.warmingHalfK) - temperatureK) / t.spreadK;
}
