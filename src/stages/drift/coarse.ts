import { selectInPlace, SD_PER_MAD } from "../../numerics/quantile.js";
import { fastLength } from "../../raster/fourier.js";
import { correlate2 } from "../../raster/opencv.js";
import type { CoarseImage } from "./coarse_image.js";

/** A maximum of the correlation, at lags in pixels of the grid: feature at x in the reference lies at x + lag in the moving frame. */
export interface Peak {
  readonly lagX: number;
  readonly lagY: number;
  /** Fisher's transform of the correlation times √(pixels), over its spread at all other lags. */
  readonly height: number;
  /** Standard deviation of the Gaussian of this height and curvature: about the correlation length of the structure; pixels of the grid. */
  readonly widthPx: number;
}

export interface CoarseOptions {
  /** Largest lag as a share of the side, and least overlap as a share of the smaller measured area. */
  readonly largestJump: number;
  readonly leastOverlap: number;
}

const PEAKS = 4;
/** Two maxima nearer than this are one. */
const APART_PX = 3;

/** Best shifts of `moving` against `reference` over all lags, highest first, by masked normalised cross-correlation: at each lag means and
 *  variances are those of the pixels that both frames measured there. Where there are several channels their heights are added, so that what
 *  they agree on stands out. Empty where no lag has overlap enough.
 *  @param channels [reference, moving] of each, all of the same size and pixels
 *  Source: Padfield 2012, IEEE Trans. Image Process. 21, 2706 (all sums by zero-padded transforms). Peaks are ranked by significance,
 *  not by the coefficient itself, which is large by chance where few pixels overlap. */
export function coarsePeaks(
  channels: readonly (readonly [reference: CoarseImage, moving: CoarseImage])[],
  options: CoarseOptions,
): Peak[] {
  const [first] = channels;
  const reachY = Math.floor(options.largestJump * Math.max(first[0].rows, first[1].rows));
  const reachX = Math.floor(options.largestJump * Math.max(first[0].cols, first[1].cols));
  const sum = new Float64Array((2 * reachX + 1) * (2 * reachY + 1)).fill(Number.NaN);
  for (const [reference, moving] of channels) {
    const heights = heightsOf(reference, moving, reachX, reachY, options);
    if (heights === null) continue;
    for (let p = 0; p < sum.length; p++) {
      if (Number.isNaN(heights[p])) continue;
      sum[p] = (Number.isNaN(sum[p]) ? 0 : sum[p]) + heights[p] / Math.sqrt(channels.length);
    }
  }
  return findPeaks(sum, 2 * reachX + 1, 2 * reachY + 1, reachX, reachY);
}

/** Height at each lag, −reach … reach row by row: Fisher's transform of the correlation times √(pixels), over its robust spread. */
function heightsOf(
  reference: CoarseImage,
  moving: CoarseImage,
  reachX: number,
  reachY: number,
  options: CoarseOptions,
): Float64Array | null {
  if (!reference.hasStructure || !moving.hasStructure) return null;
  const { rows, cols } = paddedSize(reference, moving, options);
  const product = new Float64Array(rows * cols);
  correlate2(reference.value(rows, cols), moving.value(rows, cols), rows, cols, product);
  const overlap =
    reference.isWhole && moving.isWhole
      ? wholeOverlaps(reference, moving)
      : maskedOverlaps(reference, moving, rows, cols);

  const least = Math.max(50, options.leastOverlap * Math.min(reference.count, moving.count));
  const width = 2 * reachX + 1;
  const score = new Float64Array(width * (2 * reachY + 1)).fill(Number.NaN);
  const o = { n: 0, sumA: 0, sumB: 0, squareA: 0, squareB: 0 };
  for (let y = -reachY; y <= reachY; y++) {
    const wrapped = (y < 0 ? y + rows : y) * cols;
    for (let x = -reachX; x <= reachX; x++) {
      overlap(y, x, o);
      const m = o.n;
      if (m < least) continue;
      const va = o.squareA - (o.sumA * o.sumA) / m;
      const vb = o.squareB - (o.sumB * o.sumB) / m;
      if (!(va > 1e-6 * m && vb > 1e-6 * m)) continue;
      const p = wrapped + (x < 0 ? x + cols : x);
      const r = Math.max(-0.9999, Math.min(0.9999, (product[p] - (o.sumA * o.sumB) / m) / Math.sqrt(va * vb)));
      score[(y + reachY) * width + x + reachX] = 0.5 * Math.log((1 + r) / (1 - r)) * Math.sqrt(m);
    }
  }
  const spread = spreadOf(score);
  if (spread === null) return null;
  for (let p = 0; p < score.length; p++) score[p] /= spread;
  return score;
}

/** Sums over the pixels that both know at one lag. */
interface Overlap {
  n: number;
  sumA: number;
  sumB: number;
  squareA: number;
  squareB: number;
}

type OverlapAt = (lagY: number, lagX: number, out: Overlap) => void;

/** Two images without gaps overlap in a rectangle: its sums come from summed areas (Crow 1984, Comput. Graph. 18, 207; for correlation Lewis 1995). */
function wholeOverlaps(a: CoarseImage, b: CoarseImage): OverlapAt {
  const areaA = a.areas();
  const areaB = b.areas();
  const box = (t: Float64Array, width: number, top: number, left: number, height: number, across: number): number => {
    const upper = top * width + left;
    const lower = upper + height * width;
    return t[lower + across] - t[lower] - t[upper + across] + t[upper];
  };
  return (y, x, out) => {
    const top = Math.max(0, -y);
    const left = Math.max(0, -x);
    const height = Math.min(a.rows, b.rows - y) - top;
    const across = Math.min(a.cols, b.cols - x) - left;
    out.n = height > 0 && across > 0 ? height * across : 0;
    if (out.n === 0) return;
    out.sumA = box(areaA.value, a.cols + 1, top, left, height, across);
    out.squareA = box(areaA.square, a.cols + 1, top, left, height, across);
    out.sumB = box(areaB.value, b.cols + 1, top + y, left + x, height, across);
    out.squareB = box(areaB.square, b.cols + 1, top + y, left + x, height, across);
  };
}

/** With gaps the sums are correlations too. */
function maskedOverlaps(a: CoarseImage, b: CoarseImage, rows: number, cols: number): OverlapAt {
  const lag = (p: Float64Array, q: Float64Array): Float64Array => {
    const out = new Float64Array(rows * cols);
    correlate2(p, q, rows, cols, out);
    return out;
  };
  const gapsA = a.gaps(rows, cols);
  const gapsB = b.gaps(rows, cols);
  const n = lag(gapsA.mask, gapsB.mask);
  const sumA = lag(a.value(rows, cols), gapsB.mask);
  const sumB = lag(gapsA.mask, b.value(rows, cols));
  const squareA = lag(gapsA.square, gapsB.mask);
  const squareB = lag(gapsA.mask, gapsB.square);
  return (y, x, out) => {
    const p = (y < 0 ? y + rows : y) * cols + (x < 0 ? x + cols : x);
    out.n = n[p];
    out.sumA = sumA[p];
    out.sumB = sumB[p];
    out.squareA = squareA[p];
    out.squareB = squareB[p];
  };
}

/** Robust standard deviation about 0 of what is not NaN; every third value will do. */
function spreadOf(score: Float64Array): number | null {
  const sizes = new Float64Array(Math.ceil(score.length / 3));
  let count = 0;
  for (let p = 0; p < score.length; p += 3) if (!Number.isNaN(score[p])) sizes[count++] = Math.abs(score[p]);
  return count === 0 ? null : Math.max(1e-12, SD_PER_MAD * selectInPlace(sizes, count >> 1, count));
}

function paddedSize(a: CoarseImage, b: CoarseImage, o: CoarseOptions): { rows: number; cols: number } {
  const rows = Math.max(a.rows, b.rows);
  const cols = Math.max(a.cols, b.cols);
  return {
    rows: fastLength(rows + Math.floor(o.largestJump * rows) + 1),
    cols: fastLength(cols + Math.floor(o.largestJump * cols) + 1),
  };
}

function findPeaks(score: Float64Array, width: number, height: number, reachX: number, reachY: number): Peak[] {
  const spread = spreadOf(score);
  if (spread === null) return [];
  const maxima: number[] = [];
  for (let y = 1; y < height - 1; y++) {
    for (let x = 1; x < width - 1; x++) {
      const p = y * width + x;
      const v = score[p];
      if (!(v > 2 * spread)) continue;
      if (
        v >= at(score, p - 1) &&
        v > at(score, p + 1) &&
        v >= at(score, p - width) &&
        v > at(score, p + width) &&
        v >= at(score, p - width - 1) &&
        v >= at(score, p - width + 1) &&
        v > at(score, p + width - 1) &&
        v > at(score, p + width + 1)
      ) {
        maxima.push(p);
      }
    }
  }
  maxima.sort((p, q) => score[q] - score[p] || p - q);
  const peaks: Peak[] = [];
  for (const p of maxima) {
    const x = p % width;
    const y = Math.floor(p / width);
    const lagX = x - reachX + vertex(score[p - 1], score[p], score[p + 1]);
    const lagY = y - reachY + vertex(score[p - width], score[p], score[p + width]);
    if (peaks.some((q) => Math.hypot(q.lagX - lagX, q.lagY - lagY) < APART_PX)) continue;
    const bend = 0.5 * (score[p - 1] + score[p + 1] + score[p - width] + score[p + width] - 4 * score[p]);
    const widthPx = bend < 0 ? Math.min(10, Math.sqrt(-score[p] / bend)) : 1;
    peaks.push({ lagX, lagY, height: score[p] / spread, widthPx });
    if (peaks.length === PEAKS) break;
  }
  return peaks;
}

const at = (score: Float64Array, p: number): number => (Number.isNaN(score[p]) ? Number.NEGATIVE_INFINITY : score[p]);

/** Place of the maximum of the parabola through three neighbouring values, within ±½. */
function vertex(before: number, middle: number, after: number): number {
  const bend = before - 2 * middle + after;
  if (!(bend < 0)) return 0;
  return Math.max(-0.5, Math.min(0.5, (0.5 * (before - after)) / bend));
}
