import { medianInPlace } from "../../numerics/quantile.js";
import { SIDE, type SeenSignal } from "./cells.js";
import { fitMixture, fitOneState, histogramOf, startAt, type MixtureFit } from "./mixture.js";
import type { Pixels } from "./pixels.js";

const BINS = 160;
/** Starting levels, as quantiles: even shares, and small minorities on either side. */
const STARTS: readonly (readonly [number, number])[] = [
  [0.1, 0.9],
  [0.01, 0.6],
  [0.4, 0.99],
  [0.002, 0.6],
  [0.4, 0.998],
];
/** Steps from each start, and from the best two of them on. */
const TRIAL_ITERATIONS = 12;
const ITERATIONS = 50;
/** Median absolute difference of two normal numbers over the standard deviation of one. */
const SD_PER_MEDIAN_DIFFERENCE = 1 / (0.6744897501960817 * Math.SQRT2);

/** Differences that tell the noise to half a percent: rows are left out, evenly, where there are more. */
const DIFFERENCES = 25_000;

/** Pixel noise along each component, from differences of neighbours along the rows: blind to anything smooth. */
export function differenceNoise(z: Pixels): { readonly re: number; readonly im: number } {
  const every = Math.max(1, Math.floor(z.count / DIFFERENCES));
  const d = new Float32Array(Math.ceil(z.rows / every) * z.cols);
  const one = (data: Float32Array): number => {
    let n = 0;
    for (let i = 0; i < z.rows; i += every) {
      for (let j = 1, p = i * z.cols + 1; j < z.cols; j++, p++) {
        if (z.usable[p] === 1 && z.usable[p - 1] === 1) d[n++] = Math.abs(data[p] - data[p - 1]);
      }
    }
    return n === 0 ? 0 : medianInPlace(d, n) * SD_PER_MEDIAN_DIFFERENCE;
  };
  return { re: one(z.re), im: z.hasPhase ? one(z.im) : 0 };
}

/** Two candidate levels along the axis of largest spread of a smoothed frame. */
export interface Split {
  /** Unit vector of the axis in the complex plane, and the two levels along it. */
  readonly axisRe: number;
  readonly axisIm: number;
  readonly mixture: MixtureFit;
  readonly deltaBic: number;
}

/** Looks for two states in the smoothed signal: principal axis, then a mixture with a partial-volume part along it.
 *  @param effectivePixels number of independent pixels of the smoothed image: likelihoods of dependent pixels are too sharp
 *  @param smoothedSd noise left after the smoothing
 *  Source of the criterion: Schwarz 1978, Ann. Stat. 6, 461. */
export function splitStates(seen: SeenSignal, effectivePixels: number, smoothedSd: number): Split | null {
  const { smoothRe: re, smoothIm: im } = seen;
  const whole = someCells(seen.cells.count);
  const n = whole.length;
  if (n < LEAST_CELLS) return null;
  let [mr, mi] = [0, 0];
  for (const c of whole) {
    mr += re[c];
    mi += im[c];
  }
  mr /= n;
  mi /= n;
  let [rr, ri, ii] = [0, 0, 0];
  for (const c of whole) {
    const a = re[c] - mr;
    const b = im[c] - mi;
    rr += a * a;
    ri += a * b;
    ii += b * b;
  }
  const angle = 0.5 * Math.atan2(2 * ri, rr - ii);
  const axisRe = Math.cos(angle);
  const axisIm = Math.sin(angle);
  const v = new Float32Array(n);
  for (let k = 0; k < n; k++) v[k] = axisRe * re[whole[k]] + axisIm * im[whole[k]];
  const at = quantilesOf(v);
  const low = at(0.0005) - 4 * smoothedSd;
  const high = at(0.9995) + 4 * smoothedSd;
  if (!(high > low)) return null;
  const h = histogramOf(v, low, high, BINS);
  const one = fitOneState(h);
  const leastSd = Math.max(0.5 * smoothedSd, 0.5 * h.step);
  const tried = STARTS.map(([qa, qb]) => fitMixture(h, startAt(at(qa), at(qb), leastSd), leastSd, TRIAL_ITERATIONS))
    .filter((f) => f.high > f.low && Number.isFinite(f.logLikelihood))
    .sort((a, b) => b.logLikelihood - a.logLikelihood)
    .slice(0, 2);
  let best: MixtureFit | null = null;
  for (const start of tried) {
    const fit = fitMixture(h, start, leastSd, ITERATIONS);
    if (!(fit.high > fit.low) || !Number.isFinite(fit.logLikelihood)) continue;
    if (best === null || fit.logLikelihood > best.logLikelihood) best = fit;
  }
  if (best === null) return null;
  const deltaBic = -2 * effectivePixels * (best.logLikelihood - one.logLikelihood) + 5 * Math.log(effectivePixels);
  return { axisRe, axisIm, mixture: best, deltaBic };
}

const LEAST_CELLS = 50;

/** A blur spreads over more cells than lie between those taken of a large frame: the rest would say the same again. */
const SOME_CELLS = 1 << 14;

/** Cells of which at least half is usable, evenly spread ones where there are many. */
export function someCells(count: Uint8Array): Int32Array {
  const every = Math.max(1, Math.floor(count.length / SOME_CELLS));
  const out = new Int32Array(Math.ceil(count.length / every));
  let n = 0;
  for (let c = 0; c < count.length; c += every) if (2 * count[c] >= SIDE * SIDE) out[n++] = c;
  return out.subarray(0, n);
}

/** Quantiles, to the nearest value. */
function quantilesOf(values: Float32Array): (q: number) => number {
  const sorted = values.slice().sort();
  return (q) => sorted[Math.round(q * (sorted.length - 1))];
}
