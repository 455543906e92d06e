import { INSULATING, type DomainMap } from "../../model/signal.js";

function find(parent: Int32Array, p: number): number {
  let root = p;
  while (parent[root] !== root) root = parent[root];
  while (parent[p] !== root) {
    const next = parent[p];
    parent[p] = root;
    p = next;
  }
  return root;
}

function join(parent: Int32Array, p: number, q: number): void {
  const a = find(parent, p);
  const b = find(parent, q);
  // The smaller index stays the root: a component is named by its first pixel in reading order.
  if (a < b) parent[b] = a;
  else parent[a] = b;
}

/** For each pixel the first pixel (in reading order) of its connected component. Insulating pixels join their 4 neighbours,
 *  metallic ones and unmeasured ones their 8; equal values only. Union-find over the image (Hoshen & Kopelman 1976,
 *  Phys. Rev. B 14, 3438). */
export function componentRoots(map: DomainMap): Int32Array {
  const { rows, cols, states } = map;
  const parent = new Int32Array(rows * cols);
  for (let i = 0, p = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++, p++) {
      parent[p] = p;
      const v = states[p];
      if (j > 0 && states[p - 1] === v) join(parent, p, p - 1);
      if (i === 0) continue;
      if (states[p - cols] === v) join(parent, p, p - cols);
      if (v === INSULATING) continue;
      if (j > 0 && states[p - cols - 1] === v) join(parent, p, p - cols - 1);
      if (j < cols - 1 && states[p - cols + 1] === v) join(parent, p, p - cols + 1);
    }
  }
  for (let p = 0; p < parent.length; p++) parent[p] = parent[parent[p]];
  return parent;
}
