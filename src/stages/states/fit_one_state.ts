import type { Tip } from "../../model/cooldown.js";
import type { ComplexValue } from "../../model/signal.js";
import { levelsOfCells } from "./cell_levels.js";
import { seeSignal, type SeenSignal } from "./cells.js";
import { fitTwoStates } from "./fit_two_states.js";
import type { LevelFit, StateEstimate } from "./level_fit.js";
import { pixelsPerIndependent, sdAlong } from "./noise.js";
import { mainCells } from "./one_state.js";
import { correctPixels, noCorrection } from "./pixels.js";
import type { PureCells } from "./pure.js";
import { refineRows, type RowRefinement } from "./refine_rows.js";
import { firstLimits, limitsOf, residualsOf, type Residuals } from "./residuals.js";
import type { StatesSettings } from "./settings.js";
import { smoothingOf } from "./smooth_signal.js";
import { differenceNoise } from "./split.js";
import { commonPart } from "./summarise_fit.js";

/** One state and its rows; what is unlike it is left out. Two states after all, where they show once the rows are corrected.
 *  @param raw the frame as it was cleaned
 *  @param noise0 pixel noise of either component */
export function fitOneState(
  frame: number,
  raw: SeenSignal,
  noise0: ComplexValue,
  tip: Tip | null,
  s: StatesSettings,
): LevelFit {
  const by = smoothingOf(raw.z, tip);
  const leastSd = Math.max(noise0.re, noise0.im, 1e-30) / Math.sqrt(4 * Math.PI * by.xPx * by.yPx);
  const white2 = noise0.re ** 2 + noise0.im ** 2;
  const before = noCorrection(raw.z.rows);
  const pure = mainCells(raw, leastSd);
  const main = levelsOfCells(raw.cells, pure);
  const { levels, noise, correlation } = residualsOf(
    raw.z,
    pure,
    main.levels,
    firstLimits(white2, main.variance),
    s.refineRows ? "some" : "all",
  );
  if (!s.refineRows) return oneStateFit(frame, raw, pure, { levels, noise, correlation });
  const inflation = pixelsPerIndependent(correlation.x, 0);
  // a single state: the second of each pair is never asked for
  const rows = refineRows(raw.z, pure, levels, [noise[0], noise[0]], before, inflation);
  const seen = seeSignal(correctPixels(raw.z, rows.correction), by, raw);
  // a small minority may have hidden behind the rows
  const again = fitTwoStates(frame, raw.z, seen, differenceNoise(seen.z), rows.correction, tip, s);
  if (again !== null) return again;
  const left = mainCells(seen, leastSd);
  const about = levelsOfCells(seen.cells, left).levels;
  const last = residualsOf(seen.z, left, about, limitsOf(noise), "all");
  return oneStateFit(frame, raw, left, { ...last, correlation }, rows);
}

function oneStateFit(
  frame: number,
  raw: SeenSignal,
  pure: PureCells,
  { levels, noise: [noise], correlation }: Residuals,
  rows: RowRefinement | null = null,
): LevelFit {
  const level: ComplexValue = levels[0];
  const m = Math.max(Math.hypot(level.re, level.im), 1e-30);
  const n = Math.max(1, pure.count[0] / pixelsPerIndependent(correlation.x, correlation.y));
  const main: StateEstimate = {
    level,
    logSd: sdAlong(noise, level.re / m, level.im / m) / m / Math.sqrt(n),
    phaseSdRad: sdAlong(noise, -level.im / m, level.re / m) / m / Math.sqrt(n),
    tailSd: 0,
    noise,
    purePixels: pure.count[0],
    share: 1,
  };
  return {
    ...commonPart(frame, raw.z, rows?.correction ?? noCorrection(raw.z.rows), rows, correlation),
    main,
    second: null,
    evidence: { deltaBic: 0, separation: 0, clustering: 0, twoStates: false },
    apparentWidthNm: null,
  };
}
