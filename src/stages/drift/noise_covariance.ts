import { conjugateProduct, fastLength } from "../../raster/fourier.js";
import { dft2, idft2 } from "../../raster/opencv.js";
import type { Sym2 } from "./score_covariance.js";

/** What the score Σ u·e is made of; all row-major [rows, cols], 0 where a pixel does not take part. */
export interface ScoreParts {
  readonly rows: number;
  readonly cols: number;
  /** Weighted residuals with the mean of every row taken off. */
  readonly residual: Float32Array;
  /** 1 where a pixel takes part. */
  readonly usable: Uint8Array;
  /** Gradient with the mean of every row taken off. */
  readonly ux: Float32Array;
  readonly uy: Float32Array;
}

/** Covariance of Σ u·e for noise e that is alike everywhere: Σ_lag C(lag) Γ(lag), C the autocovariance of the residuals up to `reach` pixels,
 *  Γ that of u. Steadier than the scatter of block sums where few blocks overlap, but blind to noise that sits where the structure is.
 *  Taking off row means lowers C by a constant along each row of lags, Σ_x C/N, which is put back. */
export function stationaryCovariance(parts: ScoreParts, reachX: number, reachY: number): Sym2 | null {
  const rows = fastLength(parts.rows + reachY);
  const cols = fastLength(parts.cols + reachX);
  const mask = pad(parts.usable, parts, rows, cols);
  const maskT = dft2(mask, rows, cols);
  const e = dft2(pad(parts.residual, parts, rows, cols), rows, cols);
  const sum = idft2(conjugateProduct(e, e), rows, cols);
  const count = idft2(conjugateProduct(maskT, maskT), rows, cols);
  let rowsSeen = 0;
  for (let i = 0; i < parts.rows; i++)
    if (parts.usable.subarray(i * parts.cols, (i + 1) * parts.cols).includes(1)) rowsSeen++;
  const perRow = count[0] / Math.max(1, rowsSeen);
  if (!(perRow > 2 * (2 * reachX + 1))) return null;
  const c = new Float64Array(rows * cols);
  for (let y = -reachY; y <= reachY; y++) {
    const at = (y < 0 ? y + rows : y) * cols;
    let total = 0;
    for (let x = -reachX; x <= reachX; x++) {
      const p = at + (x < 0 ? x + cols : x);
      if (count[p] < 0.5) continue;
      c[p] = sum[p] / count[p];
      total += c[p];
    }
    const lost = total / (perRow - (2 * reachX + 1));
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
  const n = rows * cols;
  return xx > 0 && yy > 0 && xx * yy > xy * xy ? { xx: xx / n, xy: xy / n, yy: yy / n } : null;
}

function pad(data: Float32Array | Uint8Array, parts: ScoreParts, rows: number, cols: number): Float64Array {
  const out = new Float64Array(rows * cols);
  for (let i = 0; i < parts.rows; i++) out.set(data.subarray(i * parts.cols, (i + 1) * parts.cols), i * cols);
  return out;
}
