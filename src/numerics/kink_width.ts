import { KINK_VARIANCE, kink } from "./kink_exact.js";

const RISE_OF_STEP = 2 * 1.2815515655446004;

/** 10–90 % rise of the kink of width `w` seen through a Gaussian of standard deviation `sigma`, and its derivatives. */
export interface ApparentWidth {
  readonly width: number;
  readonly byW: number;
  readonly bySigma: number;
}

/** Distance over which u(x; w, σ) rises from 0.1 to 0.9, in the unit of `w` and `sigma` (≥ 0, not both 0: RangeError). */
export function apparentWidth(w: number, sigma: number): number {
  return 2 * solve90(w, sigma, new Float64Array(4));
}

/** As `apparentWidth`, with ∂/∂w and ∂/∂σ. */
export function apparentWidthWithSlopes(w: number, sigma: number): ApparentWidth {
  const out = new Float64Array(4);
  const x = solve90(w, sigma, out);
  return { width: 2 * x, byW: (-4 * w * out[2]) / out[1], bySigma: (-2 * out[3]) / out[1] };
}

/** The x with u = 0.9 by Newton's method; leaves u and its derivatives there in `out`. The profile is concave on this side and the
 *  start close, so that a handful of steps reaches rounding. */
function solve90(w: number, sigma: number, out: Float64Array): number {
  const total = KINK_VARIANCE * w * w + sigma * sigma;
  let x = Math.sqrt(total) * (1.2815515655446004 - (0.0701 * KINK_VARIANCE * w * w) / total);
  kink(x, w, sigma, out);
  for (let i = 0; i < 20; i++) {
    const step = (0.9 - out[0]) / out[1];
    x += step;
    kink(x, w, sigma, out);
    if (Math.abs(step) <= 1e-9 * x) break;
  }
  return x;
}

/** The kink width w (rise = w ln 9) whose apparent 10–90 % rise through a Gaussian of `sigma` is `apparent`; NaN where `apparent`
 *  is below the rise of a blurred step, which no kink can have. Newton's method in w², in which the problem is nearly linear. */
export function kinkWidthFromApparent(apparent: number, sigma: number): number {
  const least = RISE_OF_STEP * sigma;
  if (!(apparent >= least)) return Number.NaN;
  if (apparent === least) return 0;
  const out = new Float64Array(4);
  let v = (apparent * apparent - least * least) / Math.log(9) ** 2;
  for (let i = 0; i < 50; i++) {
    const half = solve90(Math.sqrt(v), sigma, out);
    // width² is the smoother function of w²: d(width²)/d(w²) = 2·width·(−2 u_v/u_x)
    const width = 2 * half;
    const slope = (-4 * width * out[2]) / out[1];
    const step = (apparent * apparent - width * width) / slope;
    const next = Math.max(v + step, v / 10);
    const done = Math.abs(next - v) <= 1e-14 * next;
    v = next;
    if (done) break;
  }
  return Math.sqrt(v);
}
