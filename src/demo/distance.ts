import type { FieldGrid, LevelSet } from "./level_set.js";

/** Distances from a level set. */
export interface DistanceMap {
  /** Nearest piece of each node of the grid that the level set was found on; −1 where there is no wall at all. */
  readonly nearest: Int32Array;
  /** Distance of each node, nm; ∞ where there is no wall. */
  readonly nodeNm: Float64Array;
  /** Fills `out` with the unsigned distances (nm) of the points x0 + k·dx at height y. Points surely farther than `reachNm` get
   *  ∞. Every finite value is an exact distance from point to line piece. Points must lie inside the grid. */
  row(y: number, x0: number, dx: number, n: number, reachNm: number, out: Float64Array): void;
}

/** A piece up to 2 % farther (in distance) than the best known may still lead along its line to a nearer one. */
const NEAR = 1.04;

/** Prepares distances from a level set: the nearest piece is handed from node to node over the grid in sweeps (vector propagation,
 *  Danielsson 1980, Comput. Graph. Image Process. 14, 227), at each hand-over walking along the line to where it comes nearest. */
export function distanceMap(grid: FieldGrid, set: LevelSet): DistanceMap {
  const { nx, ny, x0: gx0, y0: gy0, dx: gdx, dy: gdy } = grid;
  const { pieces, links, cells, count } = set;
  const nearest = new Int32Array(nx * ny).fill(-1);
  const best2 = new Float64Array(nx * ny).fill(Number.POSITIVE_INFINITY);

  const squared = (p: number, x: number, y: number): number => {
    const b = 4 * p;
    const ax = pieces[b];
    const ay = pieces[b + 1];
    const ex = pieces[b + 2] - ax;
    const ey = pieces[b + 3] - ay;
    const rx = x - ax;
    const ry = y - ay;
    const l2 = ex * ex + ey * ey;
    let t = l2 > 0 ? (rx * ex + ry * ey) / l2 : 0;
    if (t < 0) t = 0;
    else if (t > 1) t = 1;
    const qx = rx - t * ex;
    const qy = ry - t * ey;
    return qx * qx + qy * qy;
  };
  let found2 = 0;
  /** Walks along the line from piece p while that comes nearer; leaves the squared distance in found2. */
  const walk = (p: number, d2: number, x: number, y: number): number => {
    for (;;) {
      let next = -1;
      const a = links[2 * p];
      if (a >= 0) {
        const da = squared(a, x, y);
        if (da < d2) {
          d2 = da;
          next = a;
        }
      }
      const b = links[2 * p + 1];
      if (b >= 0) {
        const db = squared(b, x, y);
        if (db < d2) {
          d2 = db;
          next = b;
        }
      }
      if (next < 0) break;
      p = next;
    }
    found2 = d2;
    return p;
  };

  const tryPiece = (p: number, d2: number, x: number, y: number): number => {
    const own2 = squared(p, x, y);
    if (own2 >= d2 * NEAR) return d2;
    walk(p, own2, x, y);
    return Math.min(d2, found2);
  };

  const offer = (node: number, p: number, x: number, y: number): void => {
    if (p < 0 || p === nearest[node]) return;
    const d2 = squared(p, x, y);
    if (d2 >= best2[node] * NEAR) return;
    const w = walk(p, d2, x, y);
    if (found2 < best2[node]) {
      best2[node] = found2;
      nearest[node] = w;
    }
  };

  for (let p = 0; p < count; p++) {
    const i = Math.floor(cells[p] / nx);
    const j = cells[p] % nx;
    for (let r = 0; r < 2; r++)
      for (let c = 0; c < 2; c++) offer((i + r) * nx + j + c, p, gx0 + (j + c) * gdx, gy0 + (i + r) * gdy);
  }
  for (let i = 0; i < ny; i++) {
    const y = gy0 + i * gdy;
    for (let j = 0; j < nx; j++) {
      const node = i * nx + j;
      const x = gx0 + j * gdx;
      if (i > 0) {
        offer(node, nearest[node - nx], x, y);
        if (j > 0) offer(node, nearest[node - nx - 1], x, y);
        if (j + 1 < nx) offer(node, nearest[node - nx + 1], x, y);
      }
      if (j > 0) offer(node, nearest[node - 1], x, y);
    }
    for (let j = nx - 2; j >= 0; j--) offer(i * nx + j, nearest[i * nx + j + 1], gx0 + j * gdx, y);
  }
  for (let i = ny - 1; i >= 0; i--) {
    const y = gy0 + i * gdy;
    for (let j = nx - 1; j >= 0; j--) {
      const node = i * nx + j;
      const x = gx0 + j * gdx;
      if (i + 1 < ny) {
        offer(node, nearest[node + nx], x, y);
        if (j > 0) offer(node, nearest[node + nx - 1], x, y);
        if (j + 1 < nx) offer(node, nearest[node + nx + 1], x, y);
      }
      if (j + 1 < nx) offer(node, nearest[node + 1], x, y);
    }
    for (let j = 1; j < nx; j++) offer(i * nx + j, nearest[i * nx + j - 1], gx0 + j * gdx, y);
  }
  const nodeNm = best2;
  for (let k = 0; k < nodeNm.length; k++) nodeNm[k] = Math.sqrt(nodeNm[k]);
  const diagonal = Math.hypot(gdx, gdy);

  return {
    nearest,
    nodeNm,
    row(y, x0, dx, n, reachNm, out) {
      if (count === 0) {
        out.fill(Number.POSITIVE_INFINITY, 0, n);
        return;
      }
      const i = Math.min(ny - 2, Math.max(0, Math.floor((y - gy0) / gdy)));
      for (let k = 0; k < n; k++) {
        const x = x0 + k * dx;
        const j = Math.min(nx - 2, Math.max(0, Math.floor((x - gx0) / gdx)));
        const node = i * nx + j;
        if (nodeNm[node] > reachNm + diagonal) {
          out[k] = Number.POSITIVE_INFINITY;
          continue;
        }
        const p0 = nearest[node];
        const p1 = nearest[node + 1];
        const p2 = nearest[node + nx];
        const p3 = nearest[node + nx + 1];
        walk(p0, squared(p0, x, y), x, y);
        let d2 = found2;
        if (p1 !== p0) d2 = tryPiece(p1, d2, x, y);
        if (p2 !== p0 && p2 !== p1) d2 = tryPiece(p2, d2, x, y);
        if (p3 !== p0 && p3 !== p1 && p3 !== p2) d2 = tryPiece(p3, d2, x, y);
        out[k] = Math.sqrt(d2);
      }
    },
  };
}
