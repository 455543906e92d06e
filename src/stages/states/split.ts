import { medianInPlace, quantileInPlace } from "../../numerics/quantile.js";
import { fitMixture, fitOneState, histogramOf, type MixtureFit } from "./mixture.js";
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
/** Median absolute difference of two normal numbers over the standard deviation of one. */
const SD_PER_MEDIAN_DIFFERENCE = 1 / (0.6744897501960817 * Math.SQRT2);

/** Pixel noise along each component, from differences of neighbours along the rows: blind to anything smooth. */
export function differenceNoise(z: Pixels): { readonly re: number; readonly im: number } {
  const one = (data: Float32Array): number => {
    const d = new Float32Array(z.count);
    let n = 0;
    for (let i = 0; i < z.rows; i++) {
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
 *  @param re, im smoothed signal; NaN where nothing is near
 *  @param effectivePixels number of independent pixels of the smoothed image: likelihoods of dependent pixels are too sharp
 *  @param smoothedSd noise left after the smoothing
 *  Source of the criterion: Schwarz 1978, Ann. Stat. 6, 461. */
export function splitStates(
  re: Float32Array,
  im: Float32Array,
  usable: Uint8Array,
  effectivePixels: number,
  smoothedSd: number,
): Split | null {
  let [n, mr, mi] = [0, 0, 0];
  for (let p = 0; p < re.length; p++) {
    if (usable[p] === 0) continue;
    n++;
    mr += re[p];
    mi += im[p];
  }
  if (n < 100) return null;
  mr /= n;
  mi /= n;
  let [rr, ri, ii] = [0, 0, 0];
  for (let p = 0; p < re.length; p++) {
    if (usable[p] === 0) continue;
    const a = re[p] - mr;
    const b = im[p] - mi;
    rr += a * a;
    ri += a * b;
    ii += b * b;
  }
  const angle = 0.5 * Math.atan2(2 * ri, rr - ii);
  const axisRe = Math.cos(angle);
  const axisIm = Math.sin(angle);
  const v = new Float32Array(n);
  let k = 0;
  for (let p = 0; p < re.length; p++) if (usable[p] === 1) v[k++] = axisRe * re[p] + axisIm * im[p];
  const sorted = v.slice();
  const at = (q: number): number => quantileInPlace(sorted, q);
  const low = at(0.0005) - 4 * smoothedSd;
  const high = at(0.9995) + 4 * smoothedSd;
  if (!(high > low)) return null;
  const h = histogramOf(v, low, high, BINS);
  const one = fitOneState(h);
  let best: MixtureFit | null = null;
  for (const [qa, qb] of STARTS) {
    const fit = fitMixture(h, at(qa), at(qb), Math.max(0.5 * smoothedSd, 0.5 * h.step));
    if (!(fit.high > fit.low) || !Number.isFinite(fit.logLikelihood)) continue;
    if (best === null || fit.logLikelihood > best.logLikelihood) best = fit;
  }
  if (best === null) return null;
  const deltaBic = -2 * effectivePixels * (best.logLikelihood - one.logLikelihood) + 5 * Math.log(effectivePixels);
  return { axisRe, axisIm, mixture: best, deltaBic };
}
