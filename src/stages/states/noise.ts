import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import type { Pixels } from "./pixels.js";
import type { PurePixels } from "./pure.js";

/** Residuals beyond this many standard deviations are not noise (debris that was missed, scars); ±4 sd hold all but 1e-3 of a normal
 *  variance, so no correction is made. */
const CLIP = 4;
const ROUNDS = 3;

/** Covariance of the pixel noise of state `which`: second moments of its pure pixels about the expected signal, clipped. */
export function noiseCovariance(
  z: Pixels,
  pure: PurePixels,
  which: 0 | 1,
  levels: readonly [ComplexValue, ComplexValue],
): NoiseCovariance {
  const [a0, a1] = levels;
  let limit = Infinity;
  let out: NoiseCovariance = { rr: 0, ri: 0, ii: 0 };
  for (let round = 0; round < ROUNDS; round++) {
    let [n, sr, si, rr, ri, ii] = [0, 0, 0, 0, 0, 0];
    for (let p = 0; p < pure.state.length; p++) {
      if (pure.state[p] !== which) continue;
      const u = pure.share[p];
      const a = z.re[p] - (u === 0 ? a0.re : u === 1 ? a1.re : (1 - u) * a0.re + u * a1.re);
      const b = z.im[p] - (u === 0 ? a0.im : u === 1 ? a1.im : (1 - u) * a0.im + u * a1.im);
      if (a * a + b * b > limit) continue;
      n++;
      sr += a;
      si += b;
      rr += a * a;
      ri += a * b;
      ii += b * b;
    }
    if (n < 2) return out;
    out = {
      rr: (rr - (sr * sr) / n) / (n - 1),
      ri: (ri - (sr * si) / n) / (n - 1),
      ii: (ii - (si * si) / n) / (n - 1),
    };
    // a robust first limit: the spread with outliers in it would let them stay
    limit = CLIP * CLIP * (out.rr + out.ii);
  }
  return out;
}

/** Standard deviation of Re(z e*) for a unit vector e. */
export function sdAlong(c: NoiseCovariance, eRe: number, eIm: number): number {
  return Math.sqrt(Math.max(0, c.rr * eRe * eRe + 2 * c.ri * eRe * eIm + c.ii * eIm * eIm));
}

/** Correlation of the noise of neighbours one column apart (x) and one row apart (y), over pairs of pure pixels of one state; those
 *  off by more than `clip2` (squared) are left out. */
export function noiseCorrelation(
  z: Pixels,
  pure: PurePixels,
  levels: readonly [ComplexValue, ComplexValue],
  clip2: number,
): { readonly x: number; readonly y: number } {
  const { rows, cols } = z;
  const [a0, a1] = levels;
  const a = new Float32Array(rows * cols);
  const b = new Float32Array(rows * cols);
  const good = new Uint8Array(rows * cols);
  for (let p = 0; p < good.length; p++) {
    const s = pure.state[p];
    if (s > 1) continue;
    const u = pure.share[p];
    a[p] = z.re[p] - (u === 0 ? a0.re : u === 1 ? a1.re : (1 - u) * a0.re + u * a1.re);
    b[p] = z.im[p] - (u === 0 ? a0.im : u === 1 ? a1.im : (1 - u) * a0.im + u * a1.im);
    if (a[p] * a[p] + b[p] * b[p] <= clip2) good[p] = 1 + s;
  }
  const lag = (step: number, lastCol: number, lastRow: number): number => {
    let cross = 0;
    let own = 0;
    for (let i = 0; i < lastRow; i++) {
      for (let j = 0; j < lastCol; j++) {
        const p = i * cols + j;
        const q = p + step;
        if (good[p] === 0 || good[q] !== good[p]) continue;
        cross += a[p] * a[q] + b[p] * b[q];
        own += 0.5 * (a[p] * a[p] + b[p] * b[p] + a[q] * a[q] + b[q] * b[q]);
      }
    }
    return own > 0 ? Math.max(-0.95, Math.min(0.95, cross / own)) : 0;
  };
  return { x: lag(1, cols - 1, rows), y: lag(cols, cols, rows - 1) };
}

/** Pixels per independent pixel for noise that falls off by ρ from neighbour to neighbour along each axis: (1 + ρ)/(1 − ρ), never
 *  below 1. */
export function pixelsPerIndependent(correlationX: number, correlationY: number): number {
  const one = (r: number): number => (1 + Math.max(0, r)) / (1 - Math.max(0, Math.min(0.95, r)));
  return one(correlationX) * one(correlationY);
}
