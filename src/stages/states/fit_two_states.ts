import type { Tip } from "../../model/cooldown.js";
import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import { FWHM_PER_SIGMA } from "../../model/units.js";
import { amplitudesOf } from "./amplitudes.js";
import { levelsOfCells, type Levels } from "./cell_levels.js";
import { seeSignal, type SeenSignal } from "./cells.js";
import { ContourDistances } from "./distance.js";
import { judge } from "./judge.js";
import type { LevelFit } from "./level_fit.js";
import { pixelsPerIndependent, sdAlong } from "./noise.js";
import { correctPixels, type Pixels, type RowCorrection } from "./pixels.js";
import { pureCells, type PureCells } from "./pure.js";
import { refineRows, type RowRefinement } from "./refine_rows.js";
import { firstLimits, limitsOf, residualsOf } from "./residuals.js";
import type { StatesSettings } from "./settings.js";
import { smoothingOf } from "./smooth_signal.js";
import { splitStates } from "./split.js";
import { twoStateFit } from "./summarise_fit.js";

const ROUNDS = 3;
/** Turns of levels, contour and walls' width beyond that, where few pixels lie far from walls; and when they have settled, as a share of
 *  the contrast. */
const MOST_ROUNDS = 10;
const SETTLED = 0.001;

/** Two states and their rows, or null where the frame does not show two. The turns are taken on cells, each row's own gain and phase and
 *  the last answer on the pixels of the cells found pure.
 *  @param start the raw pixels with `before` taken off
 *  @param noise0 pixel noise of either component */
export function fitTwoStates(
  frame: number,
  raw: Pixels,
  start: SeenSignal,
  noise0: ComplexValue,
  before: RowCorrection,
  tip: Tip | null,
  s: StatesSettings,
): LevelFit | null {
  const by = smoothingOf(raw, tip);
  const blurArea = 4 * Math.PI * by.xPx * by.yPx;
  const pixelSd = Math.hypot(noise0.re, noise0.im) / (raw.hasPhase ? Math.SQRT2 : 1);
  const split = splitStates(start, raw.count / blurArea, pixelSd / Math.sqrt(blurArea));
  if (split === null || split.deltaBic > s.deltaBic) return null;
  const { mixture } = split;
  const along = Math.hypot(noise0.re * split.axisRe, noise0.im * split.axisIm);
  if (mixture.high - mixture.low < s.leastSeparation * along) return null;

  const smoothingNm = Math.sqrt(by.xPx * raw.pixel.xNm * by.yPx * raw.pixel.yNm);
  const tipNm = tip === null ? 0 : tip.resolutionNm / FWHM_PER_SIGMA;
  const distances = new ContourDistances(start.cells.rows, start.cells.cols, start.cells.pixel);
  let seen = start;
  let correction = before;
  let rows: RowRefinement | null = null;
  let eRe = split.axisRe;
  let eIm = split.axisIm;
  let low = mixture.low;
  let high = mixture.high;
  let pure: PureCells | null = null;
  let levels: Levels | null = null;
  let limits: readonly [number, number] = [Infinity, Infinity];
  for (let round = 0; round < MOST_ROUNDS; round++) {
    const mapNoise = Math.hypot(noise0.re * eRe, noise0.im * eIm) / (high - low) / Math.sqrt(blurArea);
    const blur = { smoothingNm, tipNm, mapNoise };
    pure = pureCells(shareOf(seen, eRe, eIm, low, high), seen.cells, raw.count, blur, distances);
    if (pure.count[0] === 0 || pure.count[1] === 0) return null;
    const last: Levels | null = levels;
    const found = levelsOfCells(seen.cells, pure);
    levels = found.levels;
    if (round <= 1) limits = firstLimits(noise0.re ** 2 + noise0.im ** 2, found.variance);
    if (!Number.isFinite(levels[0].re) || !Number.isFinite(levels[1].re)) return null;
    if (s.refineRows && round > 0 && round < ROUNDS) {
      const { noise, correlation } = residualsOf(seen.z, pure, levels, limits, "some");
      limits = limitsOf(noise);
      rows = refineRows(seen.z, pure, levels, noise, correction, pixelsPerIndependent(correlation.x, 0));
      correction = rows.correction;
      seen = seeSignal(correctPixels(raw, correction), by, start);
      levels = levelsOfCells(seen.cells, pure).levels;
    }
    const dr = levels[1].re - levels[0].re;
    const di = levels[1].im - levels[0].im;
    const d = Math.hypot(dr, di);
    if (!(d > 0)) return null;
    if (round >= ROUNDS - 1 && last !== null && moved(levels, last) < SETTLED * d) break;
    eRe = dr / d;
    eIm = di / d;
    low = levels[0].re * eRe + levels[0].im * eIm;
    high = levels[1].re * eRe + levels[1].im * eIm;
  }
  if (pure === null || levels === null) return null;
  const last = residualsOf(seen.z, pure, levels, limits, "all");
  const { evidence, share1 } = judge(seen.z, pure, last.levels, last.noise, split.deltaBic, s);
  if (!evidence.twoStates) return null;
  const final = raw.hasPhase
    ? amplitudesOf(seen.z, pure, last.levels, acrossOf(last.levels, last.noise), limitsOf(last.noise))
    : last.levels;
  return twoStateFit(frame, raw, share1, pure, final, last.noise, evidence, correction, rows, last.correlation);
}

const moved = (a: Levels, b: Levels): number =>
  Math.hypot(a[0].re - b[0].re, a[0].im - b[0].im, a[1].re - b[1].re, a[1].im - b[1].im);

/** Variance of the noise across each level. */
function acrossOf(levels: Levels, noise: readonly [NoiseCovariance, NoiseCovariance]): [number, number] {
  const one = (k: 0 | 1): number => {
    const m = Math.hypot(levels[k].re, levels[k].im) || 1;
    return sdAlong(noise[k], -levels[k].im / m, levels[k].re / m) ** 2;
  };
  return [one(0), one(1)];
}

/** Share of state 1 in the smoothed signal, along the chord between the levels. */
function shareOf(seen: SeenSignal, eRe: number, eIm: number, low: number, high: number): Float32Array {
  const { smoothRe, smoothIm } = seen;
  const u = new Float32Array(smoothRe.length);
  const re = eRe / (high - low);
  const im = eIm / (high - low);
  const offset = low / (high - low);
  for (let c = 0; c < u.length; c++) u[c] = smoothRe[c] * re + smoothIm[c] * im - offset;
  return u;
}
