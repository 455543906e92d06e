import type { Tip } from "../../model/cooldown.js";
import type { CleanFrame, ComplexValue, NoiseCovariance } from "../../model/signal.js";
import { FWHM_PER_SIGMA } from "../../model/units.js";
import { quantileInPlace } from "../../numerics/quantile.js";
import { maskedBlur } from "../../raster/masked_blur.js";
import { QUANTILES, type LevelFit, type StateEstimate, type StateEvidence } from "./level_fit.js";
import { noiseCorrelation, noiseCovariance, pixelsPerIndependent, sdAlong } from "./noise.js";
import { mainPixels } from "./one_state.js";
import { correctPixels, noCorrection, readPixels, type Pixels, type RowCorrection } from "./pixels.js";
import { amplitudesOf, levelsOf, purePixels, type PurePixels } from "./pure.js";
import { refineRows, type RowRefinement } from "./refine_rows.js";
import type { StatesSettings } from "./settings.js";
import { differenceNoise, splitStates } from "./split.js";

/** Frames with fewer usable pixels tell nothing. */
const LEAST_PIXELS = 200;
const ROUNDS = 3;
/** Turns of levels, contour and walls' width beyond that, where few pixels lie far from walls; and when they have settled, as a share of
 *  the contrast. */
const MOST_ROUNDS = 10;
const SETTLED = 0.001;
/** How wrong the tail of a wall may be as a tanh, as a share of itself: it enters the uncertainty of the levels. */
const TAIL_ERROR = 0.25;
const SMOOTHING_PX = 1.3;

type Levels = readonly [ComplexValue, ComplexValue];

/** Levels of the states in one frame, with what is left of its row gains and phases.
 *
 *  Two candidate levels come from a mixture with a partial-volume part on the smoothed frame (Santago & Gage 1995); they are then
 *  fitted to raw pixels far from every wall, in turns with the row offsets, which are taken from pixels of known state only, so that
 *  neither eats the contrast of the other. Two states are believed only with all of: criterion, separation, contrast, domains
 *  instead of scattered pixels, and a core of pure pixels. A frame that fails is fitted as one state, everything unlike it left out.
 *  @param clean a clean frame
 *  @param debris 1 = debris, row-major; null = none known
 *  @returns `main` null where the frame has too few usable pixels */
export function fitLevels(clean: CleanFrame, debris: Uint8Array | null, tip: Tip | null, s: StatesSettings): LevelFit {
  const raw = readPixels(clean, debris);
  if (raw.count < LEAST_PIXELS) return emptyFit(clean.frame, raw);
  const before = noCorrection(raw.rows);
  return twoStates(clean.frame, raw, raw, before, tip, s) ?? oneState(clean.frame, raw, tip, s);
}

interface Smoothing {
  readonly xPx: number;
  readonly yPx: number;
}

/** For finding the states: one tip sigma, 1 to 2 pixels. */
function smoothingOf(z: Pixels, tip: Tip | null): Smoothing {
  const sigmaNm =
    tip === null ? SMOOTHING_PX * Math.sqrt(z.pixel.xNm * z.pixel.yNm) : tip.resolutionNm / FWHM_PER_SIGMA;
  const within = (px: number): number => Math.min(2, Math.max(1, px));
  return { xPx: within(sigmaNm / z.pixel.xNm), yPx: within(sigmaNm / z.pixel.yNm) };
}

function smoothed(z: Pixels, by: Smoothing): { re: Float32Array; im: Float32Array } {
  const re = maskedBlur(z.re, z.usable, z.rows, z.cols, by.xPx, by.yPx).values;
  const im = z.hasPhase ? maskedBlur(z.im, z.usable, z.rows, z.cols, by.xPx, by.yPx).values : z.im;
  return { re, im };
}

/** Two states and their rows, or null where the frame does not show two. */
function twoStates(
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
  return assemble(frame, raw, z, pure, levels, noise, evidence, correction, rows, inflation);
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

/** All the tests of S2-kind at once: see `fitLevels`. */
function judge(
  z: Pixels,
  pure: PurePixels,
  levels: Levels,
  noise: readonly [NoiseCovariance, NoiseCovariance],
  deltaBic: number,
  eRe: number,
  eIm: number,
  s: StatesSettings,
): StateEvidence {
  const [a, b] = levels;
  const contrast = Math.hypot(b.re - a.re, b.im - a.im);
  const larger = Math.max(Math.hypot(a.re, a.im), Math.hypot(b.re, b.im));
  const separation = contrast / Math.max(sdAlong(noise[0], eRe, eIm), sdAlong(noise[1], eRe, eIm), 1e-30);
  const middle = 0.5 * ((a.re + b.re) * eRe + (a.im + b.im) * eIm);
  let [ones, pairs, ends, alike] = [0, 0, 0, 0];
  for (let i = 0; i < z.rows; i++) {
    let last = 255;
    for (let j = 0, p = i * z.cols; j < z.cols; j++, p++) {
      const k = z.usable[p] === 0 ? 255 : z.re[p] * eRe + z.im[p] * eIm > middle ? 1 : 0;
      if (k === 1) ones++;
      if (k !== 255 && last !== 255) {
        pairs++;
        ends += k + last;
        if (k === 1 && last === 1) alike++;
      }
      last = k;
    }
  }
  const minority = ones * 2 > z.count ? 0 : 1;
  // pairs of (0,0) follow from the other counts
  const alikeMinority = minority === 1 ? alike : pairs - ends + alike;
  const endsMinority = minority === 1 ? ends : 2 * pairs - ends;
  const clustering = endsMinority > 0 ? (2 * alikeMinority) / endsMinority : 0;
  const share = Math.min(ones, z.count - ones) / z.count;
  const twoStates =
    deltaBic <= s.deltaBic &&
    separation >= s.leastSeparation &&
    contrast >= s.leastContrast * larger &&
    clustering > share + 0.4 * (1 - share) &&
    Math.min(pure.count[0], pure.count[1]) >= s.leastPurePixels;
  return { deltaBic, separation, clustering, twoStates };
}

function assemble(
  frame: number,
  raw: Pixels,
  z: Pixels,
  pure: PurePixels,
  levels: Levels,
  noise: readonly [NoiseCovariance, NoiseCovariance],
  evidence: StateEvidence,
  correction: RowCorrection,
  rows: RowRefinement | null,
  correlation: { readonly x: number; readonly y: number },
): LevelFit {
  const [a, b] = levels;
  const middle = 0.5 * ((a.re + b.re) * (b.re - a.re) + (a.im + b.im) * (b.im - a.im));
  let ones = 0;
  for (let p = 0; p < z.re.length; p++) {
    if (z.usable[p] === 1 && z.re[p] * (b.re - a.re) + z.im[p] * (b.im - a.im) > middle) ones++;
  }
  const share1 = ones / z.count;
  const contrast = Math.hypot(b.re - a.re, b.im - a.im);
  const perIndependent = pixelsPerIndependent(correlation.x, correlation.y);
  const own = ([0, 1] as const).map((k) => {
    const level = levels[k];
    const m = Math.max(Math.hypot(level.re, level.im), 1e-30);
    const n = Math.max(1, pure.count[k] / perIndependent);
    return {
      log2: sdAlong(noise[k], level.re / m, level.im / m) ** 2 / (m * m * n),
      phase2: sdAlong(noise[k], -level.im / m, level.re / m) ** 2 / (m * m * n),
      tail: (TAIL_ERROR * pure.tail[k] * contrast) / m,
    };
  });
  // what the rows add to the error of the contrast is shared out evenly
  const fromRows = (sd: number | undefined, white: number): number =>
    sd === undefined || !Number.isFinite(sd) ? 0 : 0.5 * Math.max(0, sd * sd - white);
  const rowLog2 = fromRows(rows?.gain.contrastSd, own[0].log2 + own[1].log2);
  const rowPhase2 = fromRows(rows?.phase.contrastSd, own[0].phase2 + own[1].phase2);
  const estimate = (k: 0 | 1): StateEstimate => ({
    level: levels[k],
    logSd: Math.sqrt(own[k].log2 + own[k].tail ** 2 + rowLog2),
    phaseSdRad: Math.sqrt(own[k].phase2 + own[k].tail ** 2 + rowPhase2),
    tailSd: own[k].tail,
    noise: noise[k],
    purePixels: pure.count[k],
    share: k === 1 ? share1 : 1 - share1,
  });
  const main = share1 > 0.5 ? 1 : 0;
  return {
    ...common(frame, raw, correction, rows, correlation),
    main: estimate(main),
    second: estimate(main === 1 ? 0 : 1),
    evidence,
    apparentWidthNm: Number.isNaN(pure.apparentWidthNm) ? null : pure.apparentWidthNm,
  };
}

function oneState(frame: number, raw: Pixels, tip: Tip | null, s: StatesSettings): LevelFit {
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
      const again = twoStates(frame, raw, z, correction, tip, s);
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
    ...common(frame, raw, correction, rows, correlation),
    main,
    second: null,
    evidence: { deltaBic: 0, separation: 0, clustering: 0, twoStates: false },
    apparentWidthNm: null,
  };
}

function common(
  frame: number,
  raw: Pixels,
  correction: RowCorrection,
  rows: RowRefinement | null,
  correlation: { readonly x: number; readonly y: number },
): Omit<LevelFit, "main" | "second" | "evidence" | "apparentWidthNm"> {
  const amplitude = new Float32Array(raw.count);
  let k = 0;
  for (let p = 0; p < raw.re.length; p++) if (raw.usable[p] === 1) amplitude[k++] = Math.hypot(raw.re[p], raw.im[p]);
  return {
    frame,
    rows: raw.rows,
    cols: raw.cols,
    hasPhase: raw.hasPhase,
    usablePixels: raw.count,
    correction,
    rowLogGainSd: rows === null ? new Float32Array(raw.rows) : Float32Array.from(rows.gain.measurementSd),
    rowWalkSd: rows?.gain.walkSd ?? 0,
    rowWhiteSd: rows?.gain.whiteSd ?? 0,
    noiseCorrelationX: correlation.x,
    noiseCorrelationY: correlation.y,
    amplitudeQuantiles: QUANTILES.map((q) => quantileInPlace(amplitude, q)),
  };
}

function emptyFit(frame: number, raw: Pixels): LevelFit {
  return {
    ...common(frame, raw, noCorrection(raw.rows), null, { x: 0, y: 0 }),
    main: null,
    second: null,
    evidence: { deltaBic: 0, separation: 0, clustering: 0, twoStates: false },
    apparentWidthNm: null,
  };
}
