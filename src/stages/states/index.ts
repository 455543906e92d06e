export { fitLevels } from "./fit_levels.js";
export type { LevelFit, StateEstimate, StateEvidence } from "./level_fit.js";
export { mapStates } from "./map_states.js";
export { correctPixels, readPixels, type Pixels } from "./pixels.js";
export { settings, type StatesSettings } from "./settings.js";
export { trackLevels } from "./track_levels.js";
