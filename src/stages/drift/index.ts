export { prepareForDrift } from "./prepare.js";
export { choosePairs, furtherPairs } from "./choose_pairs.js";
export { measurePair } from "./pair.js";
export { solveDrift, type DriftSolution, type LooseGroup } from "./solve.js";
export type { DriftImage, FailedShift, MeasuredShift, PairShift } from "./types.js";
export type { DriftSettings } from "./settings.js";
