/** A difference of two places, as far as closures need it. */
export interface Difference {
  readonly a: number;
  readonly b: number;
  readonly x: number;
  readonly y: number;
}

/** Three pairs that close a triangle, by their index in the list: d(i→j) + d(j→k) − d(i→k). */
export interface Closure {
  readonly ij: number;
  readonly jk: number;
  readonly ik: number;
  readonly x: number;
  readonly y: number;
}

/** All triangles among pairs with a < b, each pair of nodes at most once. */
export function closuresOf(pairs: readonly Difference[]): Closure[] {
  const from = new Map<number, Map<number, number>>();
  pairs.forEach((p, k) => {
    const row = from.get(p.a) ?? new Map<number, number>();
    row.set(p.b, k);
    from.set(p.a, row);
  });
  const out: Closure[] = [];
  pairs.forEach((p, ij) => {
    const further = from.get(p.b);
    const direct = from.get(p.a);
    if (further === undefined || direct === undefined) return;
    for (const [k, jk] of further) {
      const ik = direct.get(k);
      if (ik === undefined) continue;
      const q = pairs[jk];
      const r = pairs[ik];
      out.push({ ij, jk, ik, x: p.x + q.x - r.x, y: p.y + q.y - r.y });
    }
  });
  return out;
}
