export { checkTip, missingForWidths } from "./check_tip.js";
export { fitWalls } from "./fit_walls.js";
export { settings, type WallsSettings } from "./settings.js";
export { summariseWidths } from "./summary.js";
export { traceWalls } from "./trace.js";
