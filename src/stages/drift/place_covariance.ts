import { addBlock, blockPattern, factorBlocks, zeroBlocks } from "../../numerics/block_factor.js";
import { eliminationOrder } from "../../numerics/elimination_order.js";
import { selectedInverse } from "../../numerics/selected_inverse.js";
import { addPair, freeNodes, invert, times, type GraphPair } from "./pair_graph.js";
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
 *  differences, p = B d, so their covariance is B Σ Bᵀ with that Σ. B = K Jᵀ W C⁻¹ with K the inverse of the normal matrix, J the pairs'
 *  differences, W their weights and C their covariances, so it is K M K with M = JᵀW C⁻¹ Σ C⁻¹W J, which ties only frames that share a partner.
 *  Its diagonal blocks need no more of K than `selectedInverse` finds.
 *  @param weights one a pair, from `solvePairGraph`
 *  @returns null where the nodes do not hang together */
export function placeCovariance(
  nodes: number,
  pairs: readonly NoisyPair[],
  weights: Float64Array,
): Float64Array | null {
  const touching: End[][] = Array.from({ length: nodes }, () => []);
  pairs.forEach((p, k) => {
    touching[p.a].push({ pair: k, atA: true });
    touching[p.b].push({ pair: k, atA: false });
  });
  const pattern = blockPattern(
    eliminationOrder(
      nodes - 1,
      touching.map((ends) => [...new Set(ends.flatMap((e) => freeNodes(pairs[e.pair])))]),
    ),
  );
  const normal = zeroBlocks(pattern);
  const m = zeroBlocks(pattern);
  const inverses = pairs.map((p, k) => times(weights[k], invert(p.covariance)));
  // W C⁻¹ times the root of C, so that what two pairs share is a number times one of these by the transpose of the other
  const roots = pairs.map((p, k) => rooted(inverses[k], root(p.covariance)));
  pairs.forEach((p, k) => {
    addPair(normal, pattern, p, inverses[k]);
    const i = inverses[k];
    const own = { xx: p.covariance.xx + p.alone, xy: p.covariance.xy, yy: p.covariance.yy + p.alone };
    addPair(m, pattern, p, sandwich(i, own));
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
        const [r, s] = [roots[e.pair], roots[g.pair]];
        const x = [
          factor * (r[0] * s[0] + r[1] * s[1]),
          factor * (r[0] * s[2] + r[1] * s[3]),
          factor * (r[2] * s[0] + r[3] * s[1]),
          factor * (r[2] * s[2] + r[3] * s[3]),
        ] as const;
        // pair p takes −1 of its a and +1 of its b, q likewise
        if (p.a > 0 && q.a > 0) addBlock(m, pattern, p.a - 1, q.a - 1, 1, x);
        if (p.a > 0 && q.b > 0) addBlock(m, pattern, p.a - 1, q.b - 1, -1, x);
        if (p.b > 0 && q.a > 0) addBlock(m, pattern, p.b - 1, q.a - 1, -1, x);
        if (p.b > 0 && q.b > 0) addBlock(m, pattern, p.b - 1, q.b - 1, 1, x);
      }
    }
  }
  const factor = factorBlocks(normal, pattern);
  if (factor === null) return null;
  const { product } = selectedInverse(factor, m);
  const out = new Float64Array(3 * nodes);
  for (let i = 1; i < nodes; i++) {
    const at = 4 * (i - 1);
    out.set([product[at], 0.5 * (product[at + 1] + product[at + 2]), product[at + 3]], 3 * i);
  }
  return out;
}

/** One of the two ends of a pair. */
interface End {
  readonly pair: number;
  readonly atA: boolean;
}

/** i c i. */
function sandwich(i: Sym2, c: Sym2): Sym2 {
  const a00 = i.xx * c.xx + i.xy * c.xy;
  const a01 = i.xx * c.xy + i.xy * c.yy;
  const a10 = i.xy * c.xx + i.yy * c.xy;
  const a11 = i.xy * c.xy + i.yy * c.yy;
  return { xx: a00 * i.xx + a01 * i.xy, xy: a00 * i.xy + a01 * i.yy, yy: a10 * i.xy + a11 * i.yy };
}

/** i times the lower triangle r, row-major. */
function rooted(i: Sym2, r: readonly [number, number, number]): readonly [number, number, number, number] {
  return [i.xx * r[0] + i.xy * r[1], i.xy * r[2], i.xy * r[0] + i.yy * r[1], i.yy * r[2]];
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
