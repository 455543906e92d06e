/** Connected regions of a map, held as runs along its rows: far fewer than pixels. */
export interface Regions {
  /** Pixels of each region. */
  readonly sizes: readonly number[];
  /** Calls `each` with the first pixel of every run of a region and the one past its last. */
  forRuns(region: number, each: (from: number, to: number) => void): void;
}

/** Regions of the pixels of a map that have `value`, joined over sides (4) or sides and corners (8), in the order of their first pixel.
 *  Runs of one row are joined with those of the row before that they touch (union–find).
 *  Source: Rosenfeld & Pfaltz 1966, J. ACM 13, 471. */
export function regionsOf(map: Uint8Array, value: number, rows: number, cols: number, connectivity: 4 | 8): Regions {
  const from: number[] = [];
  const to: number[] = [];
  const parent: number[] = [];
  const root = (r: number): number => {
    while (parent[r] !== r) {
      parent[r] = parent[parent[r]];
      r = parent[r];
    }
    return r;
  };
  // how far beyond its ends a run reaches in the row before
  const reach = connectivity === 8 ? 1 : 0;
  let above = 0;
  for (let i = 0; i < rows; i++) {
    const first = from.length;
    const end = (i + 1) * cols;
    let a = above;
    for (let p = i * cols; p < end; p++) {
      if (map[p] !== value) continue;
      const start = p;
      do p++;
      while (p < end && map[p] === value);
      const r = from.length;
      from.push(start);
      to.push(p);
      parent.push(r);
      while (a < first && to[a] + reach <= start - cols) a++;
      // the last one touched may touch the next run too
      for (let b = a; b < first && from[b] < p - cols + reach; b++) {
        const [x, y] = [root(b), root(r)];
        if (x < y) parent[y] = x;
        else parent[x] = y;
      }
    }
    above = first;
  }
  return collect(
    from,
    to,
    parent.map((_, r) => root(r)),
  );
}

function collect(from: readonly number[], to: readonly number[], roots: readonly number[]): Regions {
  const sizes: number[] = [];
  const regionOf = new Map<number, number>();
  const runs: number[][] = [];
  roots.forEach((root, r) => {
    let region = regionOf.get(root);
    if (region === undefined) {
      region = sizes.length;
      regionOf.set(root, region);
      sizes.push(0);
      runs.push([]);
    }
    sizes[region] += to[r] - from[r];
    runs[region].push(r);
  });
  return {
    sizes,
    forRuns(region, each) {
      for (const r of runs[region]) each(from[r], to[r]);
    },
  };
}
