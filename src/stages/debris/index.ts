export { DebrisAccumulator } from "./accumulator.js";
export type { DebrisMap } from "./grid.js";
export { debrisInFrame, findDebrisInFrame } from "./in_frame.js";
export { type DebrisSettings, settings as debrisSettings } from "./settings.js";
