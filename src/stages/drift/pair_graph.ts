import { choleskyInPlace, choleskyInvert, choleskySolve } from "../../numerics/cholesky.js";
import type { Sym2 } from "./score_covariance.js";

/** A measured difference of two places: place(b) − place(a) = (x, y), with its covariance. */
export interface GraphPair {
  readonly a: number;
  readonly b: number;
  readonly x: number;
  readonly y: number;
  readonly covariance: Sym2;
}

export interface GraphSolution {
  /** Interleaved x, y; node 0 at (0, 0). */
  readonly places: Float64Array;
  /** Weight that each pair ended with, 1 = full. */
  readonly weights: Float64Array;
  /** Inverse of the (weighted) normal matrix over nodes 1 …, row-major 2(n − 1) square: the covariance of the places if the pairs' errors
   *  are independent. */
  readonly inverse: Float64Array;
}

/** Places of `nodes` points from differences: minimum of Σ ρ(|r| in standard deviations), ρ Huber's with the threshold `huber`
 *  (Infinity: least squares), by reweighting from least squares. Every node must hang together with node 0.
 *  @returns null where it does not
 *  Source: Huber 1964, Ann. Math. Stat. 35, 73; reweighting Holland & Welsch 1977, Commun. Stat. A 6, 813. */
export function solvePairGraph(nodes: number, pairs: readonly GraphPair[], huber: number): GraphSolution | null {
  const n = 2 * (nodes - 1);
  const weights = new Float64Array(pairs.length).fill(1);
  const inverses = pairs.map((p) => invert(p.covariance));
  const places = new Float64Array(2 * nodes);
  const matrix = new Float64Array(n * n);
  const right = new Float64Array(n);
  for (let iteration = 0; iteration < 200; iteration++) {
    matrix.fill(0);
    right.fill(0);
    pairs.forEach((p, k) => addPair(matrix, right, n, p, inverses[k], weights[k]));
    if (!choleskyInPlace(matrix, n)) return null;
    choleskySolve(matrix, n, right);
    let moved = 0;
    for (let q = 0; q < n; q++) {
      moved = Math.max(moved, Math.abs(right[q] - places[q + 2]));
      places[q + 2] = right[q];
    }
    let changed = 0;
    pairs.forEach((p, k) => {
      const size = misfit(p, inverses[k], places);
      const w = size > huber ? huber / size : 1;
      changed = Math.max(changed, Math.abs(w - weights[k]));
      weights[k] = w;
    });
    if (changed < 1e-10 || (iteration > 0 && moved === 0)) break;
  }
  const inverse = new Float64Array(n * n);
  choleskyInvert(matrix, n, inverse);
  return { places, weights, inverse };
}

export function invert(c: Sym2): Sym2 {
  const det = c.xx * c.yy - c.xy * c.xy;
  return { xx: c.yy / det, xy: -c.xy / det, yy: c.xx / det };
}

/** Length of a pair's residual in its standard deviations. */
function misfit(p: GraphPair, inverse: Sym2, places: Float64Array): number {
  const x = places[2 * p.b] - places[2 * p.a] - p.x;
  const y = places[2 * p.b + 1] - places[2 * p.a + 1] - p.y;
  return Math.sqrt(Math.max(0, inverse.xx * x * x + 2 * inverse.xy * x * y + inverse.yy * y * y));
}

function addPair(m: Float64Array, r: Float64Array, n: number, p: GraphPair, i: Sym2, w: number): void {
  const a = 2 * p.a - 2;
  const b = 2 * p.b - 2;
  const gx = w * (i.xx * p.x + i.xy * p.y);
  const gy = w * (i.xy * p.x + i.yy * p.y);
  const add = (row: number, col: number, sign: number): void => {
    m[row * n + col] += sign * w * i.xx;
    m[row * n + col + 1] += sign * w * i.xy;
    m[(row + 1) * n + col] += sign * w * i.xy;
    m[(row + 1) * n + col + 1] += sign * w * i.yy;
  };
  if (a >= 0) {
    add(a, a, 1);
    r[a] -= gx;
    r[a + 1] -= gy;
  }
  if (b >= 0) {
    add(b, b, 1);
    r[b] += gx;
    r[b + 1] += gy;
  }
  if (a >= 0 && b >= 0) {
    add(a, b, -1);
    add(b, a, -1);
  }
}
