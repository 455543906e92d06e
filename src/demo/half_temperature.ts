import type { Branch } from "../model/cooldown.js";
import { domainField, thresholdOf } from "./domain_field.js";
import type { FramePlan } from "./simulate.js";
import type { CooldownSpec } from "./spec.js";
import type { CycleTruth } from "./truth.js";

/** Metallic fraction of a whole field of view, sharp and without noise. */
export function fractionAt(
  spec: CooldownSpec,
  branch: Branch,
  cycle: number,
  temperatureK: number,
  driftXNm: number,
  driftYNm: number,
): number {
  const { rows, cols, pixel, origin } = spec;
  const sample = domainField(spec, branch, cycle).sampler(origin.xNm + driftXNm, pixel.xNm, cols);
  const threshold = thresholdOf(spec, branch, temperatureK);
  const line = new Float64Array(cols);
  let metallic = 0;
  for (let i = 0; i < rows; i++) {
    sample(origin.yNm + driftYNm + i * pixel.yNm, line);
    for (let j = 0; j < cols; j++) if (line[j] > threshold) metallic++;
  }
  return metallic / (rows * cols);
}

/** Where the fraction of one branch crosses one half: bisection between the two frames on either side of it. */
function halfOf(spec: CooldownSpec, frames: readonly FramePlan[]): number | null {
  const f = (p: FramePlan): number => fractionAt(spec, p.branch, p.cycle, p.temperatureK, p.driftXNm, p.driftYNm) - 0.5;
  let before = f(frames[0]);
  for (let k = 1; k < frames.length; k++) {
    const after = f(frames[k]);
    if (before > 0 !== after > 0) {
      const a = frames[k - 1];
      const b = frames[k];
      let low = 0;
      let high = 1;
      while (high - low > 1e-5) {
        const t = 0.5 * (low + high);
        const mix = (u: number, v: number): number => u + t * (v - u);
        const here = fractionAt(
          spec,
          a.branch,
          a.cycle,
          mix(a.temperatureK, b.temperatureK),
          mix(a.driftXNm, b.driftXNm),
          mix(a.driftYNm, b.driftYNm),
        );
        if (here > 0.5 === before > 0) low = t;
        else high = t;
      }
      return a.temperatureK + 0.5 * (low + high) * (b.temperatureK - a.temperatureK);
    }
    before = after;
  }
  return null;
}

/** Half temperatures of each cycle for the field of view as it drifts. */
export function halfTemperatures(spec: CooldownSpec, plan: readonly FramePlan[]): CycleTruth[] {
  const cycles = [...new Set(plan.map((p) => p.cycle))];
  return cycles.map((cycle) => {
    const half = (branch: Branch): number | null => {
      const frames = plan.filter((p) => p.cycle === cycle && p.branch === branch);
      return frames.length === 0 ? null : halfOf(spec, frames);
    };
    const coolingHalfK = half("cooling");
    const warmingHalfK = half("warming");
    const widthK = coolingHalfK === null || warmingHalfK === null ? null : warmingHalfK - coolingHalfK;
    return { cycle, coolingHalfK, warmingHalfK, widthK };
  });
}
