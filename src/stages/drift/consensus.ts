import { makeRandom } from "../../numerics/random.js";
import { closuresOf, type Difference } from "./closures.js";

/** A pair as the search for agreement sees it. */
export interface Claim extends Difference {
  /** Believed by itself; false: one of several peaks, or a peak made by one or two particles. Such a peak comes back in every pair that sees the same
   *  particles, so that agreement among doubtful claims proves nothing: they place no frame, and sharpen those that sure ones have placed. */
  readonly sure: boolean;
  /** Where it is all that holds a frame to the others, it may place it. */
  readonly alone: boolean;
  /** 0 … 1, larger is better. */
  readonly quality: number;
  /** Largest disagreement that its errors explain. */
  readonly tolerance: number;
}

export interface Consensus {
  /** Whether each claim agrees with the places found. */
  readonly agrees: readonly boolean[];
  /** Number of the connected group of each node, from 0 in order of their first node. */
  readonly group: Int32Array;
}

const TREES = 60;

/** The largest set of claims that agree with one another. A wrong peak of a correlation is off by many pixels and no robust
 *  loss is sure to reject it where few pairs meet: so trees are drawn that span the graph, preferring pairs whose triangles close, and the tree with which
 *  most pairs agree is kept. A group that hangs on the rest by a single pair is cut off where another sure pair over the same gap contradicts
 *  it.
 *  @param seed of the trees' order; the same input gives the same answer */
export function agreeingPairs(nodes: number, claims: readonly Claim[], seed: number): Consensus {
  const support = supportOf(claims);
  const sure = claims.flatMap((c, k) => (c.sure ? [k] : []));
  const random = makeRandom(seed);
  let best: { agrees: boolean[]; score: number } | null = null;
  for (let t = 0; t < TREES; t++) {
    const key = claims.map((c, k) => support[k] + 0.3 * c.quality + (t === 0 ? 0 : 0.8 * random.uniform()));
    const order = [...sure].sort((p, q) => key[q] - key[p] || p - q);
    const places = spanningPlaces(nodes, claims, order);
    let score = 0;
    const agrees = claims.map((c) => {
      const off = Math.hypot(places[2 * c.b] - places[2 * c.a] - c.x, places[2 * c.b + 1] - places[2 * c.a + 1] - c.y);
      const fits = off <= c.tolerance;
      if (fits && c.sure) score++;
      return fits;
    });
    if (best === null || score > best.score) best = { agrees, score };
  }
  const agrees = best?.agrees ?? [];
  cutDoubtfulBridges(nodes, claims, agrees);
  cutWeakBridges(nodes, claims, agrees);
  const group = groupsOf(nodes, claims, agrees);
  // places of different groups have nothing to do with one another
  return { agrees: agrees.map((a, k) => a && group[claims[k].a] === group[claims[k].b]), group };
}

/** −1 … 1: share of a claim's triangles that close minus share that do not; 0 where it is in none. */
function supportOf(claims: readonly Claim[]): Float64Array {
  const good = new Float64Array(claims.length);
  const bad = new Float64Array(claims.length);
  for (const c of closuresOf(claims)) {
    const sides = [c.ij, c.jk, c.ik];
    const closes = Math.hypot(c.x, c.y) <= Math.hypot(...sides.map((k) => claims[k].tolerance));
    for (const k of sides) (closes ? good : bad)[k]++;
  }
  return good.map((g, k) => (g - bad[k]) / (g + bad[k] + 1));
}

/** Places along the tree that takes the claims in the given order; a node without any keeps the place of its own tree's root at 0. */
function spanningPlaces(nodes: number, claims: readonly Claim[], order: readonly number[]): Float64Array {
  const parent = Int32Array.from({ length: nodes }, (_, i) => i);
  // place of a node relative to its parent
  const x = new Float64Array(nodes);
  const y = new Float64Array(nodes);
  const root = (i: number): number => {
    if (parent[i] === i) return i;
    const above = parent[i];
    const top = root(above);
    if (above !== top) {
      x[i] += x[above];
      y[i] += y[above];
      parent[i] = top;
    }
    return top;
  };
  for (const k of order) {
    const c = claims[k];
    const ra = root(c.a);
    const rb = root(c.b);
    if (ra === rb) continue;
    parent[rb] = ra;
    x[rb] = (c.a === ra ? 0 : x[c.a]) + c.x - (c.b === rb ? 0 : x[c.b]);
    y[rb] = (c.a === ra ? 0 : y[c.a]) + c.y - (c.b === rb ? 0 : y[c.b]);
  }
  const places = new Float64Array(2 * nodes);
  for (let i = 0; i < nodes; i++) {
    if (root(i) === i) continue;
    places[2 * i] = x[i];
    places[2 * i + 1] = y[i];
  }
  return places;
}

function groupsOf(nodes: number, claims: readonly Claim[], used: readonly boolean[], without = -1): Int32Array {
  const parent = Int32Array.from({ length: nodes }, (_, i) => i);
  const root = (i: number): number => {
    let r = i;
    while (parent[r] !== r) r = parent[r];
    for (let p = i; parent[p] !== r;) {
      const next = parent[p];
      parent[p] = r;
      p = next;
    }
    return r;
  };
  claims.forEach((c, k) => {
    if (!used[k] || !c.sure || k === without) return;
    const ra = root(c.a);
    const rb = root(c.b);
    if (ra !== rb) parent[Math.max(ra, rb)] = Math.min(ra, rb);
  });
  const number = new Int32Array(nodes).fill(-1);
  let next = 0;
  return Int32Array.from({ length: nodes }, (_, i) => {
    const r = root(i);
    if (number[r] < 0) number[r] = next++;
    return number[r];
  });
}

/** Takes out, in place, single sure pairs on which a group hangs and which another sure pair contradicts. */
function cutDoubtfulBridges(nodes: number, claims: readonly Claim[], agrees: boolean[]): void {
  for (let again = true; again;) {
    again = false;
    for (const k of bridgesOf(
      nodes,
      claims,
      agrees.map((a, q) => a && claims[q].sure),
    )) {
      const group = groupsOf(nodes, claims, agrees, k);
      const a = group[claims[k].a];
      const b = group[claims[k].b];
      const contradicted = claims.some(
        (c, q) =>
          !agrees[q] &&
          c.sure &&
          c.quality > 0.5 * claims[k].quality &&
          ((group[c.a] === a && group[c.b] === b) || (group[c.a] === b && group[c.b] === a)),
      );
      if (!contradicted) continue;
      agrees[k] = false;
      again = true;
    }
  }
}

/** Takes out, in place, pairs on which a group hangs and which are not to be believed alone. */
function cutWeakBridges(nodes: number, claims: readonly Claim[], agrees: boolean[]): void {
  for (let weak = [-1]; weak.length > 0;) {
    weak = bridgesOf(nodes, claims, agrees).filter((k) => !claims[k].alone);
    for (const k of weak) agrees[k] = false;
  }
}

/** Pairs whose removal leaves their two frames apart (Tarjan 1974, Inf. Process. Lett. 2, 160). */
export function bridgesOf(nodes: number, claims: readonly Difference[], used: readonly boolean[]): number[] {
  const edges: number[][] = Array.from({ length: nodes }, () => []);
  claims.forEach((c, k) => {
    if (!used[k]) return;
    edges[c.a].push(k);
    edges[c.b].push(k);
  });
  const seen = new Int32Array(nodes);
  const low = new Int32Array(nodes);
  const bridges: number[] = [];
  let clock = 0;
  const visit = (node: number, by: number): void => {
    seen[node] = low[node] = ++clock;
    for (const k of edges[node]) {
      if (k === by) continue;
      const other = claims[k].a === node ? claims[k].b : claims[k].a;
      if (seen[other] > 0) {
        low[node] = Math.min(low[node], seen[other]);
        continue;
      }
      visit(other, k);
      low[node] = Math.min(low[node], low[other]);
      if (low[other] > seen[node]) bridges.push(k);
    }
  };
  for (let i = 0; i < nodes; i++) if (seen[i] === 0) visit(i, -1);
  return bridges;
}
