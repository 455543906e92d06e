import type { FrameInfo } from "../../model/cooldown.js";
import type { PolarLevels } from "./combine_levels.js";
import type { StatesSettings } from "./settings.js";
import { fitCourse } from "./smooth_course.js";

/** Gain of each frame relative to the first one that was told, which has 1; 1 where the frame was not told.
 *  Levels are taken to follow one smooth course along temperature, the same in all series; what a frame departs from it by is its
 *  gain. */
export function fitGains(
  levels: readonly (PolarLevels | null)[],
  frames: readonly FrameInfo[],
  rangeK: readonly [number, number],
  s: StatesSettings,
): number[] {
  const known = levels.flatMap((l, k) => (l === null ? [] : [{ k, l }]));
  const course = fitCourse(
    known.map(({ k }) => frames[k].temperatureK),
    known.map(({ l }) => l.logLower),
    known.map(({ l }) => Math.hypot(l.logLowerSd, s.gainSd)),
    rangeK,
    s.levelSlope,
  );
  if (course === null) return levels.map(() => 1);
  const logs = levels.map((l, k) => (l === null ? 0 : l.logLower - course.at(frames[k].temperatureK).mean));
  const first = known[0].k;
  return levels.map((l, k) => (l === null ? 1 : Math.exp(logs[k] - logs[first])));
}
