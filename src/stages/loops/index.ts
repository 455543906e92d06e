export type { LoopRow } from "./branch.js";
export { checkCourse } from "./check_course.js";
export { findLoops } from "./find_loops.js";
export { type LoopsSettings, settings } from "./settings.js";
