import type { DomainRegion } from "../../model/domains.js";
import { largestAssignment } from "../../numerics/assignment.js";
import type { Link, PairOverlap } from "./overlap.js";

/** What became of the regions of one frame in the next one; arrays by label, 0 = none. */
export interface Step {
  /** Label in the next frame that carries on this region's identity. */
  readonly successor: Int32Array;
  /** Label in the next frame into which it was merged. */
  readonly mergedInto: Int32Array;
  /** Label in this frame whose identity the next frame's region carries on. */
  readonly predecessor: Int32Array;
  readonly splitFrom: Int32Array;
  readonly hiddenA: Uint8Array;
  readonly hiddenB: Uint8Array;
}

/** Resolves the overlap graph of two frames piece by piece: where one region meets several, identity goes with the largest of
 *  them; where several meet several, by the assignment with the largest total overlap. Regions left over that overlap another one
 *  were merged or have split off; those that overlap nothing have come or gone. */
export function matchStep(a: readonly DomainRegion[], b: readonly DomainRegion[], pair: PairOverlap): Step {
  const step: Step = {
    successor: new Int32Array(a.length + 1),
    mergedInto: new Int32Array(a.length + 1),
    predecessor: new Int32Array(b.length + 1),
    splitFrom: new Int32Array(b.length + 1),
    hiddenA: pair.hiddenA,
    hiddenB: pair.hiddenB,
  };
  for (const piece of pieces(a.length, b.length, pair.links)) {
    const as = [...new Set(piece.map((l) => l.a))];
    const bs = [...new Set(piece.map((l) => l.b))];
    const weight = new Float64Array(as.length * bs.length);
    for (const l of piece) {
      const w = as.length === 1 ? b[l.b - 1].areaNm2 : bs.length === 1 ? a[l.a - 1].areaNm2 : l.pixels;
      weight[as.indexOf(l.a) * bs.length + bs.indexOf(l.b)] = w;
    }
    const to = largestAssignment(weight, as.length, bs.length);
    as.forEach((label, k) => {
      if (to[k] < 0) return;
      step.successor[label] = bs[to[k]];
      step.predecessor[bs[to[k]]] = label;
    });
    for (const label of as) if (step.successor[label] === 0) step.mergedInto[label] = largest(piece, "a", label);
    for (const label of bs) if (step.predecessor[label] === 0) step.splitFrom[label] = largest(piece, "b", label);
  }
  return step;
}

/** The partner with the largest overlap. */
function largest(piece: readonly Link[], side: "a" | "b", label: number): number {
  let best: Link | null = null;
  for (const l of piece) if (l[side] === label && (best === null || l.pixels > best.pixels)) best = l;
  return best === null ? 0 : side === "a" ? best.b : best.a;
}

/** Connected pieces of the graph, as lists of links. */
function pieces(na: number, nb: number, links: readonly Link[]): Link[][] {
  const parent = Int32Array.from({ length: na + nb + 2 }, (_, k) => k);
  const find = (k: number): number => {
    while (parent[k] !== k) k = parent[k] = parent[parent[k]];
    return k;
  };
  for (const l of links) parent[find(l.a)] = find(na + 1 + l.b);
  const byRoot = new Map<number, Link[]>();
  for (const l of links) {
    const root = find(l.a);
    const piece = byRoot.get(root);
    if (piece === undefined) byRoot.set(root, [l]);
    else piece.push(l);
  }
  return [...byRoot.values()];
}
