import { join } from "node:path";
import { childSeed } from "../numerics/random.js";
import { type CooldownSpec, defaultSpec } from "./spec.js";
import { generateStack } from "./write_stack.js";

export interface DemoOptions {
  readonly seed?: number;
  /** `full`: 2 × 24 frames of 192 × 192; `small`: 2 × 16 frames of 112 × 112, for tests. */
  readonly size?: "full" | "small";
}

const SMALL_COOLING_K = [190, 165, 159, 155, 151, 147, 140, 120];
const SMALL_WARMING_K = [122, 148, 155, 159, 163, 167, 174, 192];

/** The two cooldowns of the demo: sample KV-14, region A; the first has fringes on the metallic side of its walls. */
export function demoSpecs(options: DemoOptions = {}): CooldownSpec[] {
  const seed = options.seed ?? 14;
  const small = options.size === "small";
  const common = {
    sample: "KV-14",
    region: "A",
    sampleSeed: childSeed(seed, 1),
    ...(small
      ? {
          rows: 112,
          cols: 112,
          series: [
            { branch: "cooling", temperaturesK: SMALL_COOLING_K },
            { branch: "warming", temperaturesK: SMALL_WARMING_K },
          ] as const,
          drift: { stepSdNm: 25, jumpNm: 150, limitNm: 180 },
          unmeasured: { chance: 0.25, maxRows: 8 },
        }
      : {}),
  };
  return [
    defaultSpec({
      ...common,
      cooldown: "kv14-run1",
      seed: childSeed(seed, 2),
      fringe: { side: "metallic", amplitudeRad: 0.35, periodNm: 240, decayNm: 150, phaseRad: -1.3 },
    }),
    defaultSpec({
      ...common,
      cooldown: "kv14-run2",
      seed: childSeed(seed, 3),
      // The stage does not come back to the same spot to the nanometre after a warm-up.
      origin: { xNm: 63.7, yNm: -41.2 },
      transition: { coolingHalfK: 152.2, warmingHalfK: 160.6 },
      wall: { widthNm: 85 },
    }),
  ];
}

/** Writes the demo's cooldowns below `dir`, a folder each. Returns the paths of their YAML files. */
export function writeDemo(dir: string, options: DemoOptions = {}): string[] {
  return demoSpecs(options).map((spec) => generateStack(spec, join(dir, spec.cooldown)));
}
