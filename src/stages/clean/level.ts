import { SD_PER_MAD, median, medianInPlace } from "../../numerics/quantile.js";
import { choleskyInPlace, choleskySolve } from "../../numerics/cholesky.js";

/** Pixels looked at: a surface of six numbers is no better known from more than it is spoiled by relief. */
const MOST_PIXELS = 2_500;
const ITERATIONS = 8;
/** A surface that moves by less than this share of the scatter anywhere is settled. */
const SETTLED = 1e-3;
/** Tukey's constant for 95 % efficiency at the normal distribution. */
const BISQUARE = 4.685;
/** Huber's, likewise. */
const HUBER = 1.345;

/** An index as a coordinate from −1 to 1. */
const scaled = (k: number, n: number): number => (n > 1 ? (2 * k) / (n - 1) - 1 : 0);

/** Number of terms x^k y^l with k + l ≤ degree. */
const termsOf = (degree: number): number => ((degree + 1) * (degree + 2)) / 2;

function fillTerms(degree: number, x: number, y: number, out: Float64Array): void {
  let n = 0;
  for (let k = 0, xk = 1; k <= degree; k++, xk *= x)
    for (let l = 0, yl = 1; k + l <= degree; l++, yl *= y) out[n++] = xk * yl;
}

/** Takes a polynomial surface Σ c_kl x^k y^l, k + l ≤ degree ≤ 2, off `values` (row-major [rows, cols], NaN = not measured),
 *  in place. Fitted by iterated reweighting with Tukey's bisquare, scale 1.4826 · MAD, from a start by Huber's weights, so that
 *  islands and particles of less than about a third of the area do not tilt it (Huber 1964, Ann. Math. Stat. 35, 73).
 *  @returns false where too few pixels are measured to fit: then only the median is taken off */
export function levelSurface(values: Float32Array, rows: number, cols: number, degree: number): boolean {
  const terms = termsOf(degree);
  const stride = Math.max(1, Math.round(Math.sqrt((rows * cols) / MOST_PIXELS)));
  const picked: number[] = [];
  for (let i = 0; i < rows; i += stride) {
    // the columns shift from row to row so that no stripe of the image is left out
    for (let j = (i * 7) % stride; j < cols; j += stride)
      if (!Number.isNaN(values[i * cols + j])) picked.push(i * cols + j);
  }
  if (picked.length === 0) return false;
  const count = picked.length;
  const design = new Float64Array(count * terms);
  const t = new Float64Array(terms);
  picked.forEach((p, k) => {
    fillTerms(degree, scaled(p % cols, cols), scaled(Math.floor(p / cols), rows), t);
    design.set(t, k * terms);
  });
  const z = Float64Array.from(picked, (p) => values[p]);
  const start = median(z);
  let coefficients = new Float64Array(terms);
  coefficients[0] = start;
  let ok = count >= 4 * terms && rows > degree && cols > degree;
  const residuals = z.map((v) => v - start);
  const scratch = new Float64Array(count);
  for (let iteration = 0; ok && iteration < ITERATIONS; iteration++) {
    for (let k = 0; k < count; k++) scratch[k] = Math.abs(residuals[k]);
    const scale = SD_PER_MAD * medianInPlace(scratch);
    if (!(scale > 0)) break;
    const a = new Float64Array(terms * terms);
    const b = new Float64Array(terms);
    for (let k = 0; k < count; k++) {
      const u = Math.abs(residuals[k]) / scale;
      const w = iteration < 2 ? (u <= HUBER ? 1 : HUBER / u) : u < BISQUARE ? (1 - (u / BISQUARE) ** 2) ** 2 : 0;
      if (w === 0) continue;
      for (let m = 0; m < terms; m++) {
        const wt = w * design[k * terms + m];
        b[m] += wt * z[k];
        for (let n = 0; n <= m; n++) a[m * terms + n] += wt * design[k * terms + n];
      }
    }
    for (let m = 0; m < terms; m++) for (let n = 0; n < m; n++) a[n * terms + m] = a[m * terms + n];
    if (!choleskyInPlace(a, terms)) {
      ok = false;
      break;
    }
    choleskySolve(a, terms, b);
    let moved = 0;
    for (let m = 0; m < terms; m++) moved += Math.abs(b[m] - coefficients[m]);
    coefficients = b;
    if (iteration > 2 && moved < SETTLED * scale) break;
    for (let k = 0; k < count; k++) {
      let r = z[k];
      for (let m = 0; m < terms; m++) r -= b[m] * design[k * terms + m];
      residuals[k] = r;
    }
  }
  if (!ok) {
    coefficients = new Float64Array(terms);
    coefficients[0] = start;
  }
  subtract(values, rows, cols, degree, coefficients);
  return ok;
}

function subtract(values: Float32Array, rows: number, cols: number, degree: number, coefficients: Float64Array): void {
  const t = new Float64Array(coefficients.length);
  const inRow = new Float64Array(degree + 1);
  for (let i = 0; i < rows; i++) {
    // the row's polynomial in x alone: coefficients of x^k summed over the powers of y
    fillTerms(degree, 1, scaled(i, rows), t);
    inRow.fill(0);
    let n = 0;
    for (let k = 0; k <= degree; k++) for (let l = 0; k + l <= degree; l++, n++) inRow[k] += coefficients[n] * t[n];
    for (let j = 0; j < cols; j++) {
      const x = scaled(j, cols);
      let s = 0;
      for (let k = degree; k >= 0; k--) s = s * x + inRow[k];
      values[i * cols + j] -= s;
    }
  }
}
