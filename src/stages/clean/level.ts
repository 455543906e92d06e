import { median } from "../../numerics/quantile.js";
import { choleskyInPlace, choleskySolve } from "../../numerics/cholesky.js";

const MOST_PIXELS = 12_000;
const ITERATIONS = 12;
/** Tukey's constant for 95 % efficiency at the normal distribution. */
const BISQUARE = 4.685;

/** Number of terms x^k y^l with k + l ≤ degree. */
const termsOf = (degree: number): number => ((degree + 1) * (degree + 2)) / 2;

function fillTerms(degree: number, x: number, y: number, out: Float64Array): void {
  let n = 0;
  for (let k = 0; k <= degree; k++) for (let l = 0; k + l <= degree; l++) out[n++] = x ** k * y ** l;
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
  const xOf = (p: number): number => (2 * (p % cols)) / Math.max(1, cols - 1) - 1;
  const yOf = (p: number): number => (2 * Math.floor(p / cols)) / Math.max(1, rows - 1) - 1;
  const start = median(Float64Array.from(picked, (p) => values[p]));
  let coefficients = new Float64Array(terms);
  coefficients[0] = start;
  let ok = picked.length >= 4 * terms && rows > degree && cols > degree;
  const t = new Float64Array(terms);
  const residuals = Float64Array.from(picked, (p) => values[p] - start);
  for (let iteration = 0; ok && iteration < ITERATIONS; iteration++) {
    const scale = 1.4826 * median(residuals.map(Math.abs));
    if (!(scale > 0)) break;
    const a = new Float64Array(terms * terms);
    const b = new Float64Array(terms);
    for (let k = 0; k < picked.length; k++) {
      const p = picked[k];
      const u = Math.abs(residuals[k]) / scale;
      const w = iteration < 3 ? (u <= 1.345 ? 1 : 1.345 / u) : u < BISQUARE ? (1 - (u / BISQUARE) ** 2) ** 2 : 0;
      if (w === 0) continue;
      fillTerms(degree, xOf(p), yOf(p), t);
      for (let m = 0; m < terms; m++) {
        b[m] += w * t[m] * values[p];
        for (let n = 0; n <= m; n++) {
          a[m * terms + n] += w * t[m] * t[n];
          if (n < m) a[n * terms + m] = a[m * terms + n];
        }
      }
    }
    if (!choleskyInPlace(a, terms)) {
      ok = false;
      break;
    }
    choleskySolve(a, terms, b);
    coefficients = b;
    for (let k = 0; k < picked.length; k++) {
      fillTerms(degree, xOf(picked[k]), yOf(picked[k]), t);
      let s = 0;
      for (let m = 0; m < terms; m++) s += b[m] * t[m];
      residuals[k] = values[picked[k]] - s;
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
    fillTerms(degree, 1, (2 * i) / Math.max(1, rows - 1) - 1, t);
    inRow.fill(0);
    let n = 0;
    for (let k = 0; k <= degree; k++) for (let l = 0; k + l <= degree; l++, n++) inRow[k] += coefficients[n] * t[n];
    for (let j = 0; j < cols; j++) {
      const x = (2 * j) / Math.max(1, cols - 1) - 1;
      let s = 0;
      for (let k = degree; k >= 0; k--) s = s * x + inRow[k];
      values[i * cols + j] -= s;
    }
  }
}
