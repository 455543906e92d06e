import type { Tip } from "../../model/cooldown.js";
import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import { FWHM_PER_SIGMA } from "../../model/units.js";
import { maskedBlur } from "../../raster/masked_blur.js";
import { smoothed, smoothingOf, type Smoothing } from "./smooth_signal.js";
import { judge } from "./judge.js";
import type { LevelFit } from "./level_fit.js";
import { noiseCorrelation, noiseCovariance, pixelsPerIndependent, sdAlong } from "./noise.js";
import { correctPixels, type Pixels, type RowCorrection } from "./pixels.js";
import { amplitudesOf, levelsOf, purePixels, type PurePixels } from "./pure.js";
import { refineRows, type RowRefinement } from "./refine_rows.js";
import type { StatesSettings } from "./settings.js";
import { differenceNoise, splitStates } from "./split.js";
import { twoStateFit } from "./summarise_fit.js";

const ROUNDS = 3;
/** Turns of levels, contour and walls' width beyond that, where few pixels lie far from walls; and when they have settled, as a share of
 *  the contrast. */
const MOST_ROUNDS = 10;
const SETTLED = 0.001;

type Levels = readonly [ComplexValue, ComplexValue];

/** Two states and their rows, or null where the frame does not show two. */
export function fitTwoStates(
  frame: number,
  raw: Pixels,
  start: Pixels,
  before: RowCorrection,
  tip: Tip | null,
  s: StatesSettings,
): LevelFit | null {
  const by = smoothingOf(raw, tip);
  const noise0 = differenceNoise(start);
  const blurArea = 4 * Math.PI * by.xPx * by.yPx;
  const smooth = smoothed(start, by);
  const pixelSd = Math.hypot(noise0.re, noise0.im) / (raw.hasPhase ? Math.SQRT2 : 1);
  const split = splitStates(smooth.re, smooth.im, start.usable, raw.count / blurArea, pixelSd / Math.sqrt(blurArea));
  if (split === null || split.deltaBic > s.deltaBic) return null;
  const { mixture } = split;
  const along = Math.hypot(noise0.re * split.axisRe, noise0.im * split.axisIm);
  if (mixture.high - mixture.low < s.leastSeparation * along) return null;

  let z = start;
  let correction = before;
  let rows: RowRefinement | null = null;
  let eRe = split.axisRe;
  let eIm = split.axisIm;
  let low = mixture.low;
  let high = mixture.high;
  let pure: PurePixels | null = null;
  let levels: Levels = [
    { re: 0, im: 0 },
    { re: 0, im: 0 },
  ];
  let last = levels;
  let noise: [NoiseCovariance, NoiseCovariance] | null = null;
  let inflation = { x: 0, y: 0 };
  for (let round = 0; round < MOST_ROUNDS; round++) {
    const u = smoothedShare(z, round === 0 ? smooth : null, eRe, eIm, low, high, by);
    pure = purePixels(u, z, {
      smoothingNm: Math.sqrt(by.xPx * z.pixel.xNm * by.yPx * z.pixel.yNm),
      tipNm: tip === null ? 0 : tip.resolutionNm / FWHM_PER_SIGMA,
      noiseSd: Math.hypot(noise0.re * eRe, noise0.im * eIm) / (high - low),
    });
    if (pure.count[0] === 0 || pure.count[1] === 0) return null;
    levels = levelsOf(z, pure, null, Infinity);
    noise = [noiseCovariance(z, pure, 0, levels), noiseCovariance(z, pure, 1, levels)];
    const clip2 = clip2Of(noise);
    levels = levelsOf(z, pure, levels, clip2);
    if (!Number.isFinite(levels[0].re) || !Number.isFinite(levels[1].re)) return null;
    if (s.refineRows && round > 0 && round < ROUNDS) {
      inflation = noiseCorrelation(z, pure, levels, clip2);
      rows = refineRows(z, pure, levels, noise, correction, pixelsPerIndependent(inflation.x, 0));
      correction = rows.correction;
      z = correctPixels(raw, correction);
      levels = levelsOf(z, pure, levels, clip2);
    }
    const dr = levels[1].re - levels[0].re;
    const di = levels[1].im - levels[0].im;
    const d = Math.hypot(dr, di);
    if (!(d > 0)) return null;
    const moved = Math.hypot(
      levels[0].re - last[0].re,
      levels[0].im - last[0].im,
      levels[1].re - last[1].re,
      levels[1].im - last[1].im,
    );
    last = levels;
    if (round >= ROUNDS - 1 && moved < SETTLED * d) break;
    eRe = dr / d;
    eIm = di / d;
    low = levels[0].re * eRe + levels[0].im * eIm;
    high = levels[1].re * eRe + levels[1].im * eIm;
  }
  if (pure === null || noise === null) return null;
  const evidence = judge(z, pure, levels, noise, split.deltaBic, eRe, eIm, s);
  if (!evidence.twoStates) return null;
  if (raw.hasPhase) levels = amplitudesOf(z, pure, levels, acrossOf(levels, noise), clip2Of(noise));
  return twoStateFit(frame, raw, z, pure, levels, noise, evidence, correction, rows, inflation);
}

/** Residuals beyond 4 sd of the noisier state are left out. */
const clip2Of = (noise: readonly [NoiseCovariance, NoiseCovariance]): number =>
  16 * Math.max(noise[0].rr + noise[0].ii, noise[1].rr + noise[1].ii);

/** Variance of the noise across each level. */
function acrossOf(levels: Levels, noise: readonly [NoiseCovariance, NoiseCovariance]): [number, number] {
  const one = (k: 0 | 1): number => {
    const m = Math.hypot(levels[k].re, levels[k].im) || 1;
    return sdAlong(noise[k], -levels[k].im / m, levels[k].re / m) ** 2;
  };
  return [one(0), one(1)];
}

/** Share of state 1 in the smoothed signal, along the chord between the levels. */
function smoothedShare(
  z: Pixels,
  smooth: { re: Float32Array; im: Float32Array } | null,
  eRe: number,
  eIm: number,
  low: number,
  high: number,
  by: Smoothing,
): Float32Array {
  const n = z.re.length;
  const u = new Float32Array(n);
  const scale = 1 / (high - low);
  const source = smooth ?? z;
  for (let p = 0; p < n; p++) u[p] = (source.re[p] * eRe + source.im[p] * eIm - low) * scale;
  return smooth === null ? maskedBlur(u, z.usable, z.rows, z.cols, by.xPx, by.yPx).values : u;
}
