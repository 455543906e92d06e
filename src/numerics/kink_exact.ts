import { normalCdf } from "./erf.js";

/* The wall between two states seen through a Gaussian response: u(x; w, σ) = ½(1 + tanh(x/w)) ∗ Gaussian(σ).
 *
 * Two trapezoid sums, each exponentially exact in its range (for the trapezoid rule on such integrals see Trefethen & Weideman
 * 2014, SIAM Rev. 56, 385): over the Gaussian where the kink is the wider of the two, over ½ sech² where the Gaussian is. Gauss–
 * Hermite nodes would fail for narrow kinks. u depends on w² alone near w = 0, so that is the variable of the derivative. */

const STEP = 0.25;
const GAUSS_NODES = 73;
const SECH_NODES = 76;
const INV_SQRT_2PI = 0.3989422804014327;

/** Nodes s = −9 … 9 and weights of the standard normal. */
const gaussNode = Float64Array.from({ length: GAUSS_NODES }, (_, k) => (k - 36) * STEP);
const gaussWeight = gaussNode.map((s) => STEP * INV_SQRT_2PI * Math.exp(-0.5 * s * s));
/** Nodes t = 0.25 … 19 (the sums run over ±t) and weights of ½ sech²; t = 0 has weight STEP/2. */
const sechNode = Float64Array.from({ length: SECH_NODES }, (_, k) => (k + 1) * STEP);
const sechWeight = sechNode.map((t) => (0.5 * STEP) / Math.cosh(t) ** 2);

/** The variance of ½ sech²(x/w)/w, a wall's line spread, in units of w²: π²/12. */
export const KINK_VARIANCE = (Math.PI * Math.PI) / 12;

/** u, ∂u/∂x, ∂u/∂(w²) and ∂u/∂σ into `out[0 … 3]`, absolute error below 5e-14 in units of 1, 1/s, 1/s² and 1/s with s = max(w, σ).
 *  `x`, `w` ≥ 0 and `sigma` ≥ 0 in one unit of length, not both 0 (RangeError). Some 5 µs a call: for fits take `fastKink`. */
export function kink(x: number, w: number, sigma: number, out: Float64Array): void {
  kinkWithCurvature(x, w, sigma, out);
  out[3] *= sigma;
}

/** As `kink`, but `out[3]` is ∂²u/∂x²; ∂u/∂σ is σ times that (the Gaussian obeys the heat equation). */
export function kinkWithCurvature(x: number, w: number, sigma: number, out: Float64Array): void {
  if (!(w >= 0 && sigma >= 0 && w + sigma > 0)) throw new RangeError(`no kink of width ${w} with blur ${sigma}`);
  // The left tail is a small number of its own, not a difference from 1; the right side is its mirror image.
  const a = -Math.abs(x);
  let u = 0;
  let ux = 0;
  let uv = 0;
  let uxx = 0;
  if (w >= sigma) {
    for (let k = 0; k < GAUSS_NODES; k++) {
      const y = (a - sigma * gaussNode[k]) / w;
      const e = Math.exp(-2 * Math.abs(y));
      const g = gaussWeight[k];
      const low = e / (1 + e);
      const slope = (g * 2 * low) / (1 + e);
      u += y < 0 ? g * low : g / (1 + e);
      ux += slope;
      uv -= slope * y;
      uxx -= slope * Math.tanh(y);
    }
    ux /= w;
    uv /= 2 * w * w;
    uxx *= 2 / (w * w);
  } else {
    const z = a / sigma;
    const ratio = w / sigma;
    const centre = INV_SQRT_2PI * Math.exp(-0.5 * z * z);
    u = 0.5 * STEP * normalCdf(z);
    ux = 0.5 * STEP * centre;
    uxx = -0.5 * STEP * z * centre;
    for (let k = 0; k < SECH_NODES; k++) {
      const t = sechNode[k];
      const g = sechWeight[k];
      const shift = ratio * t;
      // The pair ±t: the larger density is the one shifted towards x, the other is e^{−2q} of it.
      const near = z + shift;
      const far = z - shift;
      const q = -z * shift;
      const density = INV_SQRT_2PI * Math.exp(-0.5 * near * near);
      const other = density * Math.exp(-2 * q);
      u += g * (normalCdf(near) + normalCdf(far));
      ux += g * (density + other);
      uxx -= g * (near * density + far * other);
      // (density − other)/(2q), which stays finite for w → 0.
      const mean =
        q > 0.01 ? (density - other) / (2 * q) : q === 0 ? density : (-Math.expm1(-2 * q) * density) / (2 * q);
      uv -= g * t * t * z * mean;
    }
    ux /= sigma;
    uv /= sigma * sigma;
    uxx /= sigma * sigma;
  }
  out[0] = x > 0 ? 1 - u : u;
  out[1] = ux;
  out[2] = x > 0 ? -uv : uv;
  out[3] = x > 0 ? -uxx : uxx;
}
