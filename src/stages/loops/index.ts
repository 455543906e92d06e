export type { LoopRow } from "./branch.js";
export { findLoops } from "./find_loops.js";
export { type LoopsSettings, settings } from "./settings.js";
