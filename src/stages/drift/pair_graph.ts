import {
  addBlock,
  blockPattern,
  factorBlocks,
  solveBlocks,
  zeroBlocks,
  type BlockMatrix,
} from "../../numerics/block_factor.js";
import { eliminationOrder, type EliminationOrder } from "../../numerics/elimination_order.js";
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
}

/** Places of `nodes` points from differences: minimum of Σ ρ(|r| in standard deviations), ρ Huber's with the threshold `huber`
 *  (Infinity: least squares), by reweighting from least squares. Every node must hang together with node 0.
 *  @returns null where it does not
 *  Source: Huber 1964, Ann. Math. Stat. 35, 73; reweighting Holland & Welsch 1977, Commun. Stat. A 6, 813. */
export function solvePairGraph(nodes: number, pairs: readonly GraphPair[], huber: number): GraphSolution | null {
  if (!connected(nodes, pairs)) return null;
  const weights = new Float64Array(pairs.length).fill(1);
  const inverses = pairs.map((p) => invert(p.covariance));
  const places = new Float64Array(2 * nodes);
  const pattern = blockPattern(
    eliminationOrder(
      nodes - 1,
      pairs.map((p) => freeNodes(p)),
    ),
  );
  const matrix = zeroBlocks(pattern);
  const right = new Float64Array(2 * (nodes - 1));
  for (let iteration = 0; iteration < 200; iteration++) {
    matrix.diagonal.fill(0);
    matrix.below.fill(0);
    right.fill(0);
    pairs.forEach((p, k) => {
      addPair(matrix, pattern, p, times(weights[k], inverses[k]));
      addRight(right, p, inverses[k], weights[k]);
    });
    const factor = factorBlocks(matrix, pattern);
    if (factor === null) return null;
    solveBlocks(factor, right);
    let moved = 0;
    for (let q = 0; q < right.length; q++) {
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
  return { places, weights };
}

function connected(nodes: number, pairs: readonly GraphPair[]): boolean {
  const others: number[][] = Array.from({ length: nodes }, () => []);
  for (const { a, b } of pairs) {
    others[a].push(b);
    others[b].push(a);
  }
  const reached = new Uint8Array(nodes);
  reached[0] = 1;
  const list = [0];
  for (const i of list) {
    for (const j of others[i]) {
      if (reached[j] === 1) continue;
      reached[j] = 1;
      list.push(j);
    }
  }
  return list.length === nodes;
}

/** Nodes of a pair less the fixed one, counted from node 1. */
export function freeNodes(p: GraphPair): number[] {
  return [p.a - 1, p.b - 1].filter((i, k, both) => i >= 0 && both.indexOf(i) === k);
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

/** Adds Jᵀ g J to a matrix over the nodes from 1 on, J the difference that the pair measures. */
export function addPair(to: BlockMatrix, order: EliminationOrder, p: GraphPair, g: Sym2): void {
  const half = [0.5 * g.xx, 0.5 * g.xy, 0.5 * g.xy, 0.5 * g.yy] as const;
  if (p.a > 0) addBlock(to, order, p.a - 1, p.a - 1, 1, half);
  if (p.b > 0) addBlock(to, order, p.b - 1, p.b - 1, 1, half);
  if (p.a > 0 && p.b > 0) addBlock(to, order, p.a - 1, p.b - 1, -1, [g.xx, g.xy, g.xy, g.yy]);
}

function addRight(r: Float64Array, p: GraphPair, i: Sym2, w: number): void {
  const gx = w * (i.xx * p.x + i.xy * p.y);
  const gy = w * (i.xy * p.x + i.yy * p.y);
  if (p.a > 0) {
    r[2 * p.a - 2] -= gx;
    r[2 * p.a - 1] -= gy;
  }
  if (p.b > 0) {
    r[2 * p.b - 2] += gx;
    r[2 * p.b - 1] += gy;
  }
}

export function times(w: number, c: Sym2): Sym2 {
  return { xx: w * c.xx, xy: w * c.xy, yy: w * c.yy };
}
