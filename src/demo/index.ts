export {
  type CooldownSpec,
  defaultSpec,
  mergeSpec,
  type Particle,
  type SeriesSpec,
  type SpecOverrides,
} from "./spec.js";
export {
  type FramePlan,
  type SimulatedCooldown,
  type SimulatedFrame,
  type SimulatedTruth,
  simulateCooldown,
} from "./simulate.js";
export { type CooldownTruth, type CycleTruth, type FrameTruth, readTruth, TRUTH_FILE } from "./truth.js";
export { fringeSeen, type SeenFringe } from "./fringe_seen.js";
export { fractionAt } from "./half_temperature.js";
export { generateStack } from "./write_stack.js";
export { type DemoOptions, demoSpecs, writeDemo } from "./scenario.js";
