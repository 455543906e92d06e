import { RowFilter } from "./row_filter.js";

/** What is left of the row offsets: b_i = x_i + w_i, x a random walk along the rows (what a chain of row differences leaves
 *  behind), w independent from row to row (line noise). Measured y_i = b_i + e_i, sd of e_i known; rows without a measurement have
 *  an infinite one. */
export interface SmoothedRows {
  /** Most probable b_i; its mean over the rows is not removed. */
  readonly offset: Float64Array;
  /** Standard deviation of a row's own measurement, Infinity where there is none. */
  readonly measurementSd: Float64Array;
  /** Standard deviations of one step of the walk and of the independent part. */
  readonly walkSd: number;
  readonly whiteSd: number;
}

/** Steps in units of the typical measurement sd tried for either standard deviation. */
const LADDER = [0, 0.1, 0.2, 0.35, 0.6, 1, 1.8, 3, 6, 12];
const LEAST_ROWS = 8;

/** Row means of the pixels of two states, each about its own level as known so far, with weights 1/variance (0 = no pixels). */
export interface RowMeasurements {
  readonly value: readonly [Float64Array, Float64Array];
  readonly weight: readonly [Float64Array, Float64Array];
}

export interface JointRows extends SmoothedRows {
  /** What the second level must rise by over the first, and its standard deviation; 0 and Infinity where only one state was measured. */
  readonly contrast: number;
  readonly contrastSd: number;
}

/** Row offsets and the contrast of the two levels together, for a local-level model with an independent part.
 *
 *  Taken in turns, levels and rows converge slowly, or to too small a contrast, where the states lie in different rows: offsets take up
 *  the levels' first errors. Here −2 log L is a parabola in the contrast for given variances, so that its minimum is exact; rows that
 *  hold both states pin the contrast directly. Both variances by maximum likelihood on a ladder through the Kalman filter. Where line
 *  noise is far below what the pixels of a row can tell, both come out as 0 and the offsets as one constant: a correction that would
 *  only add noise is not made.
 *  Source: Harvey 1989, Forecasting, Structural Time Series Models and the Kalman Filter, ch. 2 and 3.4 (regression in a state-space
 *  model). */
export function fitRows(m: RowMeasurements): JointRows {
  const n = m.value[0].length;
  const [v0, v1] = m.value;
  const [w0, w1] = m.weight;
  const y = new Float64Array(n);
  const slope = new Float64Array(n);
  const sd = new Float64Array(n).fill(Infinity);
  // −2 log L of the rows that hold both states, as a + b δ + c δ²
  let [a, b, c] = [0, 0, 0];
  let second = false;
  const known: number[] = [];
  for (let i = 0; i < n; i++) {
    const w = w0[i] + w1[i];
    if (!(w > 0)) continue;
    y[i] = (w0[i] * v0[i] + w1[i] * v1[i]) / w;
    slope[i] = w1[i] / w;
    sd[i] = 1 / Math.sqrt(w);
    known.push(sd[i]);
    if (w1[i] > 0) second = true;
    const pair = (w0[i] * w1[i]) / w;
    const d = v1[i] - v0[i];
    a += pair * d * d;
    b -= 2 * pair * d;
    c += pair;
  }
  const none = { contrast: 0, contrastSd: Infinity };
  if (known.length < LEAST_ROWS) {
    const contrast = c > 0 ? { contrast: -b / (2 * c), contrastSd: 1 / Math.sqrt(c) } : none;
    return { offset: new Float64Array(n), measurementSd: sd, walkSd: 0, whiteSd: 0, ...contrast };
  }
  known.sort((p, q) => p - q);
  const unit = known[known.length >> 1];
  const filter = new RowFilter(y, slope, sd, unit);
  let best = { value: Infinity, walk: 0, white: 0, delta: 0, bend: 0 };
  for (const whiteStep of LADDER) {
    for (const walkStep of LADDER) {
      // a walk reaches far with small steps: its ladder starts lower
      const walk = walkStep * 0.3;
      filter.run(walk * walk, whiteStep * whiteStep);
      let value = filter.value + a;
      let delta = 0;
      let bend = 0;
      if (second) {
        bend = 2 * (filter.bend + c);
        const fall = filter.fall - b;
        if (bend > 0) {
          delta = fall / bend;
          value -= (0.5 * fall * fall) / bend;
        }
      }
      if (value < best.value - 1e-9) best = { value, walk: walk * unit, white: whiteStep * unit, delta, bend };
    }
  }
  const shifted = new Float64Array(n);
  for (let i = 0; i < n; i++) shifted[i] = y[i] - best.delta * slope[i];
  const x = smoothWalk(shifted, sd, best.walk, best.white);
  const offset = new Float64Array(n);
  const white2 = best.white * best.white;
  for (let i = 0; i < n; i++) {
    const s2 = sd[i] * sd[i];
    offset[i] = x[i] + (Number.isFinite(s2) && white2 > 0 ? (white2 / (white2 + s2)) * (shifted[i] - x[i]) : 0);
  }
  return {
    offset,
    measurementSd: sd,
    walkSd: best.walk,
    whiteSd: best.white,
    contrast: best.delta,
    contrastSd: best.bend > 0 ? Math.sqrt(2 / best.bend) : Infinity,
  };
}

/** Diagonal of the posterior precision of the walk; off-diagonals are −1/q. */
function walkPrecision(sd: Float64Array, walkSd: number, whiteSd: number): { diagonal: Float64Array; link: number } {
  const n = sd.length;
  const link = 1 / Math.max(walkSd * walkSd, 1e-20);
  const diagonal = new Float64Array(n);
  for (let i = 0; i < n; i++) {
    const v = sd[i] * sd[i] + whiteSd * whiteSd;
    diagonal[i] = (Number.isFinite(v) ? 1 / v : 0) + (i > 0 ? link : 0) + (i + 1 < n ? link : 0);
  }
  return { diagonal, link };
}

/** Solves the tridiagonal system with `diagonal` and −link beside it (Thomas algorithm). */
function solveTridiagonal(diagonal: Float64Array, link: number, rhs: Float64Array): Float64Array {
  const n = diagonal.length;
  const c = new Float64Array(n);
  const x = new Float64Array(n);
  let m = diagonal[0];
  c[0] = -link / m;
  x[0] = rhs[0] / m;
  for (let i = 1; i < n; i++) {
    m = diagonal[i] + link * c[i - 1];
    c[i] = -link / m;
    x[i] = (rhs[i] + link * x[i - 1]) / m;
  }
  for (let i = n - 2; i >= 0; i--) x[i] -= c[i] * x[i + 1];
  return x;
}

function smoothWalk(y: Float64Array, sd: Float64Array, walkSd: number, whiteSd: number): Float64Array {
  const n = y.length;
  if (walkSd === 0) {
    let sum = 0;
    let weights = 0;
    for (let i = 0; i < n; i++) {
      if (!Number.isFinite(sd[i])) continue;
      const w = 1 / (sd[i] * sd[i] + whiteSd * whiteSd);
      sum += w * y[i];
      weights += w;
    }
    return new Float64Array(n).fill(weights > 0 ? sum / weights : 0);
  }
  const { diagonal, link } = walkPrecision(sd, walkSd, whiteSd);
  const rhs = new Float64Array(n);
  for (let i = 0; i < n; i++) {
    if (Number.isFinite(sd[i])) rhs[i] = y[i] / (sd[i] * sd[i] + whiteSd * whiteSd);
  }
  return solveTridiagonal(diagonal, link, rhs);
}

/** Variance that the remaining errors of the row offsets give to Σ c_i b_i, the common part of all rows left out (it belongs to the
 *  levels, which are fitted to the same pixels). */
export function offsetVariance(
  c: Float64Array,
  measurementSd: ArrayLike<number>,
  walkSd: number,
  whiteSd: number,
): number {
  const n = c.length;
  const sd = Float64Array.from(measurementSd);
  const white2 = whiteSd * whiteSd;
  let variance = 0;
  const left = new Float64Array(n);
  for (let i = 0; i < n; i++) {
    const s2 = sd[i] * sd[i];
    const known = Number.isFinite(s2);
    variance += c[i] * c[i] * (known ? (white2 * s2) / (white2 + s2 || 1) : white2);
    left[i] = c[i] * (known ? s2 / (white2 + s2 || 1) : 1);
  }
  if (walkSd === 0) return variance;
  // the common part is measured by every row together
  let sum = 0;
  let weights = 0;
  const share = new Float64Array(n);
  for (let i = 0; i < n; i++) {
    sum += left[i];
    const v = sd[i] * sd[i] + white2;
    if (Number.isFinite(v)) {
      share[i] = 1 / v;
      weights += share[i];
    }
  }
  if (weights > 0) for (let i = 0; i < n; i++) left[i] -= (sum * share[i]) / weights;
  const { diagonal, link } = walkPrecision(sd, walkSd, whiteSd);
  const solved = solveTridiagonal(diagonal, link, left);
  for (let i = 0; i < n; i++) variance += left[i] * solved[i];
  return variance;
}
