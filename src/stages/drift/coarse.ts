import { dropNaNInPlace, selectInPlace, SD_PER_MAD } from "../../numerics/quantile.js";
import { conjugateProduct, fastLength } from "../../raster/fourier.js";
import { dft2, idft2 } from "../../raster/opencv.js";
import type { Grid } from "./grid.js";

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

/** Relief wider than this share of the side (tilt, bow) is taken off before correlating: it is the same at any shift. */
const WIDEST = 0.2;
/** Structure is bent smoothly to this many robust standard deviations, so that one high particle does not outvote the rest. */
const CLIP = 4;
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
  const { rows, cols } = paddedSize(reference, moving, options);
  const a = reference.spectra(rows, cols);
  const b = moving.spectra(rows, cols);
  if (a === null || b === null) return null;
  const lag = (p: Float64Array, q: Float64Array): Float64Array => idft2(conjugateProduct(p, q), rows, cols);
  const n = lag(a.mask, b.mask);
  const sumA = lag(a.value, b.mask);
  const sumB = lag(a.mask, b.value);
  const squareA = lag(a.square, b.mask);
  const squareB = lag(a.mask, b.square);
  const product = lag(a.value, b.value);

  const least = Math.max(50, options.leastOverlap * Math.min(a.count, b.count));
  const width = 2 * reachX + 1;
  const score = new Float64Array(width * (2 * reachY + 1)).fill(Number.NaN);
  for (let y = -reachY; y <= reachY; y++) {
    const wrapped = (y < 0 ? y + rows : y) * cols;
    for (let x = -reachX; x <= reachX; x++) {
      const p = wrapped + (x < 0 ? x + cols : x);
      const m = n[p];
      if (m < least) continue;
      const va = squareA[p] - (sumA[p] * sumA[p]) / m;
      const vb = squareB[p] - (sumB[p] * sumB[p]) / m;
      if (!(va > 1e-6 * m && vb > 1e-6 * m)) continue;
      const r = Math.max(-0.9999, Math.min(0.9999, (product[p] - (sumA[p] * sumB[p]) / m) / Math.sqrt(va * vb)));
      score[(y + reachY) * width + x + reachX] = Math.atanh(r) * Math.sqrt(m);
    }
  }
  const spread = spreadOf(score);
  return spread === null ? null : score.map((v) => v / spread);
}

/** Robust standard deviation about 0 of what is not NaN. */
function spreadOf(score: Float64Array): number | null {
  const sizes = score.map(Math.abs);
  const count = dropNaNInPlace(sizes);
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

interface Spectra {
  readonly mask: Float64Array;
  readonly value: Float64Array;
  readonly square: Float64Array;
  readonly count: number;
}

/** One image of the coarse step. What depends on it alone is computed once: it takes part in many pairs. */
export class CoarseImage {
  readonly rows: number;
  readonly cols: number;
  private readonly structure: Float64Array | null;
  private kept: { rows: number; cols: number; spectra: Spectra } | null = null;

  constructor(readonly grid: Grid) {
    this.rows = grid.rows;
    this.cols = grid.cols;
    this.structure = structureOf(grid);
  }

  /** Transforms, zero-padded to rows × cols, of mask, mask·value and mask·value², the value being the structure alone in units of its
   *  spread. null where there is none. */
  spectra(rows: number, cols: number): Spectra | null {
    if (this.structure === null) return null;
    if (this.kept !== null && this.kept.rows === rows && this.kept.cols === cols) return this.kept.spectra;
    const mask = new Float64Array(rows * cols);
    const value = new Float64Array(rows * cols);
    const square = new Float64Array(rows * cols);
    let count = 0;
    for (let i = 0; i < this.rows; i++) {
      for (let j = 0; j < this.cols; j++) {
        const p = i * this.cols + j;
        if (this.grid.known[p] === 0) continue;
        const q = i * cols + j;
        const v = this.structure[p];
        mask[q] = 1;
        value[q] = v;
        square[q] = v * v;
        count++;
      }
    }
    const spectra = {
      mask: dft2(mask, rows, cols),
      value: dft2(value, rows, cols),
      square: dft2(square, rows, cols),
      count,
    };
    this.kept = { rows, cols, spectra };
    return spectra;
  }
}

/** The grid without its wide relief and without row offsets, bent to ±CLIP robust standard deviations. */
function structureOf(grid: Grid): Float64Array | null {
  const { rows, cols } = grid;
  const wide = boxMean(grid, Math.round(WIDEST * cols), Math.round(WIDEST * rows));
  const out = new Float64Array(rows * cols);
  const sizes = new Float64Array(rows * cols);
  let count = 0;
  for (let i = 0; i < rows; i++) {
    let sum = 0;
    let n = 0;
    for (let p = i * cols; p < (i + 1) * cols; p++) {
      if (grid.known[p] === 0) continue;
      out[p] = grid.values[p] - wide[p];
      sum += out[p];
      n++;
    }
    for (let p = i * cols; p < (i + 1) * cols; p++) {
      if (grid.known[p] === 0) continue;
      out[p] -= sum / n;
      sizes[count++] = Math.abs(out[p]);
    }
  }
  if (count === 0) return null;
  const spread = SD_PER_MAD * selectInPlace(sizes, count >> 1, count);
  if (!(spread > 0)) return null;
  for (let p = 0; p < out.length; p++) out[p] = CLIP * Math.tanh(out[p] / (CLIP * spread));
  return out;
}

/** Mean of the known pixels in the box of ±halfX, ±halfY round each pixel, by summed areas. */
function boxMean(grid: Grid, halfX: number, halfY: number): Float64Array {
  const { rows, cols, values, known } = grid;
  const width = cols + 1;
  const sum = new Float64Array((rows + 1) * width);
  const count = new Float64Array((rows + 1) * width);
  for (let i = 0; i < rows; i++) {
    let s = 0;
    let n = 0;
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      if (known[p] > 0) {
        s += values[p];
        n++;
      }
      const q = (i + 1) * width + j + 1;
      sum[q] = sum[q - width] + s;
      count[q] = count[q - width] + n;
    }
  }
  const out = new Float64Array(rows * cols);
  for (let i = 0; i < rows; i++) {
    const top = Math.max(0, i - halfY) * width;
    const bottom = Math.min(rows, i + halfY + 1) * width;
    for (let j = 0; j < cols; j++) {
      const left = Math.max(0, j - halfX);
      const right = Math.min(cols, j + halfX + 1);
      const n = count[bottom + right] - count[top + right] - count[bottom + left] + count[top + left];
      if (n > 0)
        out[i * cols + j] = (sum[bottom + right] - sum[top + right] - sum[bottom + left] + sum[top + left]) / n;
    }
  }
  return out;
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
