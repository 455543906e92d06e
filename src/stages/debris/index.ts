export { DebrisAccumulator } from "./accumulator.js";
export { CORE, type DebrisMap, MARGIN } from "./grid.js";
export { debrisInFrame, findDebrisInFrame } from "./in_frame.js";
export { type DebrisSettings, settings as debrisSettings } from "./settings.js";
