import { fastLength } from "../../raster/fourier.js";
import { correlate2, dft2 } from "../../raster/opencv.js";
import type { Sym2 } from "./score_covariance.js";
import type { Span } from "./shifted.js";

/** What the score Σ u·e is made of; all row-major [rows, cols], 0 where a pixel does not take part. */
export interface ScoreParts {
  readonly rows: number;
  readonly cols: number;
  /** Weighted residuals with the mean of every row taken off. */
  readonly residual: Float64Array;
  /** 1 where a pixel takes part. */
  readonly usable: Float64Array;
  /** Gradient with the mean of every row taken off. */
  readonly ux: Float64Array;
  readonly uy: Float64Array;
  /** Pixels over which a row's mean was taken, on average. */
  readonly rowPixels: number;
}

/** Side of the window in which the noise is looked at. A covariance to a few percent will do, and noise is alike everywhere. */
const SIDE = 144;

/** The part of an overlap that stands for it: all of it, or of a large one the middle. */
export function windowOf({ row0, row1, col0, col1 }: Span): Span {
  const high = Math.min(row1 - row0, Math.max(SIDE, Math.ceil(SIDE ** 2 / (col1 - col0))));
  const wide = Math.min(col1 - col0, Math.max(SIDE, Math.ceil(SIDE ** 2 / (row1 - row0))));
  const top = row0 + ((row1 - row0 - high) >> 1);
  const left = col0 + ((col1 - col0 - wide) >> 1);
  return { row0: top, row1: top + high, col0: left, col1: left + wide };
}

/** Covariance of Σ u·e for noise e that is alike everywhere: Σ_lag C(lag) Γ(lag), C the autocovariance of the residuals up to `reach` pixels,
 *  Γ that of u. Steadier than the scatter of block sums where few blocks overlap, but blind to noise that sits where the structure is.
 *  Taking off row means lowers C by a constant along each row of lags, Σ_x C/N, which is put back.
 *  @param parts of a window of the overlap
 *  @param plain Σ|u|² over the whole overlap, to which the window's sum is scaled
 *  @returns null where too little overlaps to tell */
export function stationaryCovariance(parts: ScoreParts, plain: number, reachX: number, reachY: number): Sym2 | null {
  const { rowPixels } = parts;
  if (!(rowPixels > 2 * (2 * reachX + 1))) return null;
  const rows = fastLength(parts.rows + reachY);
  const cols = fastLength(parts.cols + reachX);
  const n = rows * cols;
  const sum = new Float64Array(n);
  const count = new Float64Array(n);
  const e = dft2(pad(parts.residual, parts, rows, cols), rows, cols);
  correlate2(e, e, rows, cols, sum);
  const mask = dft2(pad(parts.usable, parts, rows, cols), rows, cols);
  correlate2(mask, mask, rows, cols, count);
  const c = new Float64Array(n);
  for (let y = -reachY; y <= reachY; y++) {
    const at = (y < 0 ? y + rows : y) * cols;
    let total = 0;
    for (let x = -reachX; x <= reachX; x++) {
      const p = at + (x < 0 ? x + cols : x);
      if (count[p] < 0.5) continue;
      c[p] = sum[p] / count[p];
      total += c[p];
    }
    const lost = total / (rowPixels - (2 * reachX + 1));
    for (let x = -reachX; x <= reachX; x++) c[at + (x < 0 ? x + cols : x)] += lost;
  }
  // C is real and even: so is its transform
  const power = dft2(c, rows, cols);
  const ux = dft2(pad(parts.ux, parts, rows, cols), rows, cols);
  const uy = dft2(pad(parts.uy, parts, rows, cols), rows, cols);
  let xx = 0;
  let xy = 0;
  let yy = 0;
  for (let k = 0; k < power.length; k += 2) {
    const w = power[k];
    xx += w * (ux[k] * ux[k] + ux[k + 1] * ux[k + 1]);
    xy += w * (ux[k] * uy[k] + ux[k + 1] * uy[k + 1]);
    yy += w * (uy[k] * uy[k] + uy[k + 1] * uy[k + 1]);
  }
  if (!(xx > 0 && yy > 0 && xx * yy > xy * xy)) return null;
  let seen = 0;
  for (let p = 0; p < parts.ux.length; p++) seen += parts.ux[p] * parts.ux[p] + parts.uy[p] * parts.uy[p];
  const share = plain / (n * seen);
  return { xx: share * xx, xy: share * xy, yy: share * yy };
}

function pad(data: Float64Array, parts: ScoreParts, rows: number, cols: number): Float64Array {
  const out = new Float64Array(rows * cols);
  for (let i = 0; i < parts.rows; i++) out.set(data.subarray(i * parts.cols, (i + 1) * parts.cols), i * cols);
  return out;
}
