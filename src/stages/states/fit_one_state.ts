import type { Tip } from "../../model/cooldown.js";
import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import { smoothed, smoothingOf } from "./smooth_signal.js";
import { fitTwoStates } from "./fit_two_states.js";
import type { LevelFit, StateEstimate } from "./level_fit.js";
import { noiseCorrelation, noiseCovariance, pixelsPerIndependent, sdAlong } from "./noise.js";
import { mainPixels } from "./one_state.js";
import { correctPixels, noCorrection, type Pixels } from "./pixels.js";
import { levelsOf } from "./pure.js";
import { refineRows, type RowRefinement } from "./refine_rows.js";
import type { StatesSettings } from "./settings.js";
import { differenceNoise } from "./split.js";
import { commonPart } from "./summarise_fit.js";

const ROUNDS = 2;

/** One state and its rows; what is unlike it is left out. Two states after all, where they show once the rows are corrected. */
export function fitOneState(frame: number, raw: Pixels, tip: Tip | null, s: StatesSettings): LevelFit {
  const by = smoothingOf(raw, tip);
  const noise0 = differenceNoise(raw);
  const leastSd = Math.max(noise0.re, noise0.im, 1e-30) / Math.sqrt(4 * Math.PI * by.xPx * by.yPx);
  let z = raw;
  let correction = noCorrection(raw.rows);
  let rows: RowRefinement | null = null;
  let pure = mainPixels(raw.re, raw.im, raw, leastSd);
  let noise: NoiseCovariance = { rr: 0, ri: 0, ii: 0 };
  let level: ComplexValue = { re: 0, im: 0 };
  let correlation = { x: 0, y: 0 };
  for (let round = 0; round < ROUNDS; round++) {
    const smooth = smoothed(z, by);
    pure = mainPixels(smooth.re, smooth.im, z, leastSd);
    [level] = levelsOf(z, pure, null, Infinity);
    noise = noiseCovariance(z, pure, 0, [level, level]);
    const clip2 = 16 * (noise.rr + noise.ii);
    [level] = levelsOf(z, pure, [level, level], clip2);
    if (!s.refineRows || round === ROUNDS - 1) break;
    correlation = noiseCorrelation(z, pure, [level, level], clip2);
    rows = refineRows(z, pure, [level, level], [noise, noise], correction, pixelsPerIndependent(correlation.x, 0));
    correction = rows.correction;
    z = correctPixels(raw, correction);
    if (round === 0) {
      // a small minority may have hidden behind the rows
      const again = fitTwoStates(frame, raw, z, correction, tip, s);
      if (again !== null) return again;
    }
  }
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
    ...commonPart(frame, raw, correction, rows, correlation),
    main,
    second: null,
    evidence: { deltaBic: 0, separation: 0, clustering: 0, twoStates: false },
    apparentWidthNm: null,
  };
}
