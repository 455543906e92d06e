import { conjugateProduct, fastLength } from "../../raster/fourier.js";
import { maskedBlur } from "../../raster/masked_blur.js";
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
 *  variances are those of the pixels that both frames measured there. Empty where no lag has overlap enough.
 *  Source: Padfield 2012, IEEE Trans. Image Process. 21, 2706 (all sums by zero-padded transforms). Peaks are ranked by significance,
 *  not by the coefficient itself, which is large by chance where few pixels overlap. */
export function coarsePeaks(reference: Grid, moving: Grid, options: CoarseOptions): Peak[] {
  const reachY = Math.floor(options.largestJump * Math.max(reference.rows, moving.rows));
  const reachX = Math.floor(options.largestJump * Math.max(reference.cols, moving.cols));
  const rows = fastLength(Math.max(reference.rows, moving.rows) + reachY + 1);
  const cols = fastLength(Math.max(reference.cols, moving.cols) + reachX + 1);
  const a = padded(reference, rows, cols);
  const b = padded(moving, rows, cols);
  if (a === null || b === null) return [];
  const lag = (p: Float64Array, q: Float64Array): Float64Array => idft2(conjugateProduct(p, q), rows, cols);
  const n = lag(a.mask, b.mask);
  const sumA = lag(a.value, b.mask);
  const sumB = lag(a.mask, b.value);
  const squareA = lag(a.square, b.mask);
  const squareB = lag(a.mask, b.square);
  const product = lag(a.value, b.value);

  const least = Math.max(50, options.leastOverlap * Math.min(a.count, b.count));
  const width = 2 * reachX + 1;
  const height = 2 * reachY + 1;
  const score = new Float64Array(width * height).fill(Number.NaN);
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
  return findPeaks(score, width, height, reachX, reachY);
}

interface Spectra {
  readonly mask: Float64Array;
  readonly value: Float64Array;
  readonly square: Float64Array;
  readonly count: number;
}

/** Transforms of mask, mask·value and mask·value², the value being the structure alone in units of its spread. */
function padded(grid: Grid, rows: number, cols: number): Spectra | null {
  const structure = structureOf(grid);
  if (structure === null) return null;
  const mask = new Float64Array(rows * cols);
  const value = new Float64Array(rows * cols);
  const square = new Float64Array(rows * cols);
  let count = 0;
  for (let i = 0; i < grid.rows; i++) {
    for (let j = 0; j < grid.cols; j++) {
      const p = i * grid.cols + j;
      if (grid.known[p] === 0) continue;
      const q = i * cols + j;
      const v = structure[p];
      mask[q] = 1;
      value[q] = v;
      square[q] = v * v;
      count++;
    }
  }
  return { mask: dft2(mask, rows, cols), value: dft2(value, rows, cols), square: dft2(square, rows, cols), count };
}

/** The grid without its wide relief and without row offsets, bent to ±CLIP robust standard deviations. */
function structureOf(grid: Grid): Float64Array | null {
  const { rows, cols } = grid;
  const wide = maskedBlur(grid.values, grid.known, rows, cols, WIDEST * cols, WIDEST * rows).values;
  const out = new Float64Array(rows * cols);
  const sizes: number[] = [];
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
      sizes.push(Math.abs(out[p]));
    }
  }
  if (sizes.length === 0) return null;
  const spread = 1.4826 * Float64Array.from(sizes).sort()[sizes.length >> 1];
  if (!(spread > 0)) return null;
  for (let p = 0; p < out.length; p++) out[p] = CLIP * Math.tanh(out[p] / (CLIP * spread));
  return out;
}

function findPeaks(score: Float64Array, width: number, height: number, reachX: number, reachY: number): Peak[] {
  const sizes: number[] = [];
  const maxima: number[] = [];
  for (let p = 0; p < score.length; p++) if (!Number.isNaN(score[p])) sizes.push(Math.abs(score[p]));
  if (sizes.length === 0) return [];
  const spread = Math.max(1e-12, 1.4826 * Float64Array.from(sizes).sort()[sizes.length >> 1]);
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
