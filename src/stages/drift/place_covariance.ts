import { invert, type GraphPair, type GraphSolution } from "./pair_graph.js";
import type { Sym2 } from "./score_covariance.js";

/** A pair with what its errors share with those of other pairs of the same frames. */
export interface NoisyPair extends GraphPair {
  /** Variance an axis that belongs to this pair alone, beyond its covariance (interpolation, closures that do not close). */
  readonly alone: number;
  /** Share of its covariance that is the two frames' own noise seen through the overlap, half each; the rest is new in each pair. */
  readonly framed: number;
  /** Overlap in each frame's own coordinates: x from, to, y from, to. */
  readonly windowA: Window;
  readonly windowB: Window;
}

export type Window = readonly [number, number, number, number];

/** Covariance (xx, xy, yy interleaved) of each node's place.
 *
 *  The noise of one frame enters all its pairs: d_ij = p_j − p_i + e_j − e_i with e of the pixels that both saw. A graph of many pairs that treated them as
 *  independent would promise errors that fall with the number of pairs, which they do not. Two pairs (f, g), (f, h) share the pixels of f in
 *  both overlaps; with A the areas, the correlation of f's part is A∩/√(A₁A₂). The places are linear in the measured
 *  differences, p = B d, so their covariance is B Σ Bᵀ with that Σ. */
export function placeCovariance(nodes: number, pairs: readonly NoisyPair[], solution: GraphSolution): Float64Array {
  const n = 2 * (nodes - 1);
  const out = new Float64Array(3 * nodes);
  const touching: { pair: number; atA: boolean }[][] = Array.from({ length: nodes }, () => []);
  pairs.forEach((p, k) => {
    touching[p.a].push({ pair: k, atA: true });
    touching[p.b].push({ pair: k, atA: false });
  });
  // influence of a pair's error on each place, B_e = K (J_eᵀ w C⁻¹), 2 × 2 a node
  const influence = pairs.map((p, k) => influenceOf(p, solution, n, solution.weights[k]));
  const roots = pairs.map((p) => root(p.covariance));
  const add = (node: number, u: Float64Array, c: readonly number[], v: Float64Array, factor: number): void => {
    // u c vᵀ, symmetrised
    const [c00, c01, c10, c11] = c;
    const q = 4 * node;
    const a00 = u[q] * c00 + u[q + 1] * c10;
    const a01 = u[q] * c01 + u[q + 1] * c11;
    const a10 = u[q + 2] * c00 + u[q + 3] * c10;
    const a11 = u[q + 2] * c01 + u[q + 3] * c11;
    out[3 * node] += factor * (a00 * v[q] + a01 * v[q + 1]);
    out[3 * node + 1] += 0.5 * factor * (a00 * v[q + 2] + a01 * v[q + 3] + a10 * v[q] + a11 * v[q + 1]);
    out[3 * node + 2] += factor * (a10 * v[q + 2] + a11 * v[q + 3]);
  };
  pairs.forEach((p, k) => {
    const c = p.covariance;
    const own = [c.xx + p.alone, c.xy, c.xy, c.yy + p.alone];
    for (let node = 1; node < nodes; node++) add(node, influence[k], own, influence[k], 1);
  });
  for (let f = 0; f < nodes; f++) {
    for (const e of touching[f]) {
      for (const g of touching[f]) {
        if (e.pair >= g.pair) continue;
        const p = pairs[e.pair];
        const q = pairs[g.pair];
        const shared = sharedShare(e.atA ? p.windowA : p.windowB, g.atA ? q.windowA : q.windowB);
        const factor = 0.5 * shared * Math.sqrt(p.framed * q.framed) * (e.atA === g.atA ? 1 : -1);
        if (factor === 0) continue;
        const r = roots[e.pair];
        const s = roots[g.pair];
        // L_e L_gᵀ
        const c = [r[0] * s[0], r[0] * s[1], r[1] * s[0], r[1] * s[1] + r[2] * s[2]];
        // the sum holds (e, g) and (g, e): twice the symmetrised product
        for (let node = 1; node < nodes; node++) add(node, influence[e.pair], c, influence[g.pair], 2 * factor);
      }
    }
  }
  return out;
}

function influenceOf(p: GraphPair, solution: GraphSolution, n: number, weight: number): Float64Array {
  const k = solution.inverse;
  const i = invert(p.covariance);
  const nodes = n / 2 + 1;
  const out = new Float64Array(4 * nodes);
  const a = 2 * p.a - 2;
  const b = 2 * p.b - 2;
  for (let node = 1; node < nodes; node++) {
    for (let axis = 0; axis < 2; axis++) {
      const row = (2 * node - 2 + axis) * n;
      const kx = (b >= 0 ? k[row + b] : 0) - (a >= 0 ? k[row + a] : 0);
      const ky = (b >= 0 ? k[row + b + 1] : 0) - (a >= 0 ? k[row + a + 1] : 0);
      out[4 * node + 2 * axis] = weight * (kx * i.xx + ky * i.xy);
      out[4 * node + 2 * axis + 1] = weight * (kx * i.xy + ky * i.yy);
    }
  }
  return out;
}

/** Lower Cholesky factor of a 2 × 2 covariance: l00, l10, l11. */
function root(c: Sym2): readonly [number, number, number] {
  const l00 = Math.sqrt(c.xx);
  const l10 = c.xy / l00;
  return [l00, l10, Math.sqrt(Math.max(0, c.yy - l10 * l10))];
}

function area(w: Window): number {
  return Math.max(0, w[1] - w[0]) * Math.max(0, w[3] - w[2]);
}

function sharedShare(v: Window, w: Window): number {
  const both = area([Math.max(v[0], w[0]), Math.min(v[1], w[1]), Math.max(v[2], w[2]), Math.min(v[3], w[3])]);
  return both === 0 ? 0 : both / Math.sqrt(area(v) * area(w));
}
