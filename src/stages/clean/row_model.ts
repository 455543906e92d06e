import { median } from "../../numerics/quantile.js";
import type { RowLinks } from "./row_links.js";

/** Fewer links than this say nothing about how rows scatter. */
const LEAST_LINKS = 16;
/** Differences beyond this many robust standard deviations are jumps, not part of the scatter. */
const JUMP_SIGMAS = 5;
/** A link that could not be measured: the chain starts anew. */
const BROKEN = 1e6;

/** Offsets of the rows, split by what can be told about them. One value per row of the image, 0 where nothing is known. */
export interface RowOffsets {
  /** The part that is independent from row to row, already shrunk by its own uncertainty. */
  readonly white: Float64Array;
  /** The part that walks from row to row, shrunk likewise; its mean is 0. */
  readonly walk: Float64Array;
  /** Single rows that stand out and come back, and lasting jumps, beyond the scatter. */
  readonly outlying: Float64Array;
  readonly jumps: Float64Array;
  /** Standard deviation of the independent part as it was, before the correction. */
  readonly whiteSd: number;
  /** Standard deviation of one row's step of the walk, the chain's own error taken out. */
  readonly walkSd: number;
}

/** Splits chained row differences d_k = w_k − w_{k−1} + g_k into offsets w that are independent from row to row (line noise) and
 *  steps g of a walk: slow drift, slow content of the image, and the chain's error.
 *
 *  The variances are those of a local-level model by maximum likelihood through the Kalman filter (Harvey 1989, Forecasting,
 *  Structural Time Series Models and the Kalman Filter, ch. 2). The smoothed w is then scaled by τ²/(τ² + ν²), ν² being the
 *  variance of a row's mean (a Wiener factor): where line noise is below what the pixels can measure, next to nothing is
 *  corrected, and a sum of errors never enters. The walk is scaled by ω²/(ω² + v), v from `chainVariance`. */
export function splitRowOffsets(links: RowLinks, rows: number): RowOffsets {
  const none = (): Float64Array => new Float64Array(rows);
  const empty = { white: none(), walk: none(), outlying: none(), jumps: none(), whiteSd: 0, walkSd: 0 };
  const n = links.rows.length;
  const known: number[] = [];
  for (let k = 1; k < n; k++) if (!Number.isNaN(links.difference[k])) known.push(k);
  if (known.length < LEAST_LINKS) return empty;
  const centre = median(Float64Array.from(known, (k) => links.difference[k]));
  const scale = 1.4826 * median(Float64Array.from(known, (k) => Math.abs(links.difference[k] - centre)));
  if (!(scale > 0)) return empty;
  const d = new Float64Array(n);
  const excess = new Float64Array(n);
  const spacing = new Float64Array(n).fill(BROKEN);
  let vSum = 0;
  for (const k of known) {
    const c = links.difference[k] - centre;
    d[k] = Math.max(-JUMP_SIGMAS * scale, Math.min(JUMP_SIGMAS * scale, c));
    // all of an outlying difference is taken as the jump: what is left of it says nothing
    if (d[k] !== c) {
      excess[k] = c;
      d[k] = 0;
    }
    spacing[k] = links.rows[k] - links.rows[k - 1];
    vSum += links.chainVariance[k];
  }
  const { tau2, lambda } = fitLocalLevel(d, spacing);
  const q = lambda * tau2;
  const w = smoothWhite(d, spacing, tau2, q);
  const line2 = Math.max(0, tau2 - links.rowVariance);
  const v = vSum / known.length;
  const walk2 = Math.max(0, q - v);
  const keep = tau2 > 0 ? line2 / tau2 : 0;
  const keepWalk = q > 0 ? walk2 / q : 0;
  // a steady drift is one number from all links: it is believed where it is far above its own scatter
  const steady = Math.abs(centre) > 4 * scale * Math.sqrt(Math.PI / 2 / known.length) ? 1 : keepWalk;
  let walk = 0;
  for (let k = 0; k < n; k++) {
    const row = links.rows[k];
    empty.white[row] = keep * w[k];
    if (k > 0 && spacing[k] < BROKEN) walk += keepWalk * (d[k] - (w[k] - w[k - 1])) + steady * centre;
    empty.walk[row] = walk;
  }
  centreOver(empty.walk, links.rows);
  splitExcess(excess, links.rows, empty.outlying, empty.jumps);
  return { ...empty, whiteSd: Math.sqrt(line2), walkSd: Math.sqrt(walk2) };
}

function centreOver(values: Float64Array, rows: Int32Array): void {
  let sum = 0;
  for (const row of rows) sum += values[row];
  const mean = rows.length > 0 ? sum / rows.length : 0;
  for (const row of rows) values[row] -= mean;
}

/** A jump up followed at once by a jump down is a row that stands out; what does not come back is a lasting jump. */
function splitExcess(excess: Float64Array, rows: Int32Array, outlying: Float64Array, jumps: Float64Array): void {
  let level = 0;
  for (let k = 1; k < rows.length; k++) {
    const here = excess[k];
    const next = k + 1 < rows.length ? excess[k + 1] : 0;
    if (here * next < 0) {
      const size = Math.sign(here) * Math.min(Math.abs(here), Math.abs(next));
      outlying[rows[k]] += size;
      excess[k] -= size;
      excess[k + 1] += size;
    }
    level += excess[k];
    jumps[rows[k]] = level;
  }
  centreOver(jumps, rows);
}

/** Variance τ² of the independent part and λ = q/τ², q the variance of one row's step, by concentrated likelihood. */
function fitLocalLevel(d: Float64Array, spacing: Float64Array): { tau2: number; lambda: number } {
  const n = d.length;
  let sigma2 = 0;
  const minusTwoLogL = (logLambda: number): number => {
    const lambda = Math.exp(logLambda);
    let y = 0;
    let a = 0;
    let p = 1;
    let squares = 0;
    let logs = 0;
    let used = 0;
    for (let k = 1; k < n; k++) {
      y += d[k];
      if (spacing[k] === BROKEN) {
        a = y;
        p = 1;
        continue;
      }
      const predicted = p + lambda * spacing[k];
      const f = predicted + 1;
      const innovation = y - a;
      squares += (innovation * innovation) / f;
      logs += Math.log(f);
      a += (predicted / f) * innovation;
      p = predicted / f;
      used++;
    }
    sigma2 = squares / used;
    return used * Math.log(sigma2) + logs;
  };
  let best = -12;
  let least = Infinity;
  for (let l = -12; l <= 10; l += 1) {
    const value = minusTwoLogL(l);
    if (value < least) [least, best] = [value, l];
  }
  for (let step = 0.5; step > 0.02; step /= 2) {
    for (const l of [best - step, best + step]) {
      const value = minusTwoLogL(l);
      if (value < least) [least, best] = [value, l];
    }
  }
  minusTwoLogL(best);
  return { tau2: sigma2, lambda: Math.exp(best) };
}

/** Most probable w: least Σ w²/τ² + Σ (d_k − w_k + w_{k−1})²/q_k, a tridiagonal system. */
function smoothWhite(d: Float64Array, spacing: Float64Array, tau2: number, q: number): Float64Array {
  const n = d.length;
  const w = new Float64Array(n);
  if (!(tau2 > 0)) return w;
  const precision = new Float64Array(n + 1);
  for (let k = 1; k < n; k++) precision[k] = spacing[k] === BROKEN ? 0 : 1 / Math.max(q * spacing[k], 1e-9 * tau2);
  const upper = new Float64Array(n);
  for (let k = 0; k < n; k++) {
    const right = k + 1 < n ? precision[k + 1] * d[k + 1] : 0;
    let diagonal = 1 / tau2 + precision[k] + precision[k + 1];
    let rhs = precision[k] * d[k] - right;
    if (k > 0) {
      diagonal -= precision[k] * upper[k - 1];
      rhs += precision[k] * w[k - 1];
    }
    upper[k] = precision[k + 1] / diagonal;
    w[k] = rhs / diagonal;
  }
  for (let k = n - 2; k >= 0; k--) w[k] += upper[k] * w[k + 1];
  return w;
}
