import type { PixelSize } from "../model/raster.js";
import type { Wall } from "../model/walls.js";

/** Every step of every wall of a frame, laid end to end. */
export interface Segments {
  readonly count: number;
  /** Start and end of each step, nm. */
  readonly x0: Float64Array;
  readonly y0: Float64Array;
  readonly x1: Float64Array;
  readonly y1: Float64Array;
  /** Index of its wall. */
  readonly wall: Int32Array;
  /** Steps before and after on the same wall; −1 beyond an open end. */
  readonly before: Int32Array;
  readonly after: Int32Array;
  /** Arc length at the start, and of the step, nm. */
  readonly arc0: Float64Array;
  readonly span: Float64Array;
  /** Unit normals at start and end, towards the metallic side. */
  readonly nx0: Float64Array;
  readonly ny0: Float64Array;
  readonly nx1: Float64Array;
  readonly ny1: Float64Array;
  /** First segment of each wall, and one past the last. */
  readonly first: Int32Array;
}

export function segmentsOf(walls: readonly Wall[]): Segments {
  const first = new Int32Array(walls.length + 1);
  for (let k = 0; k < walls.length; k++) {
    const points = walls[k].points.length / 2;
    first[k + 1] = first[k] + (walls[k].closed ? points : points - 1);
  }
  const count = first[walls.length];
  const f = (): Float64Array => new Float64Array(count);
  const s = {
    count,
    x0: f(),
    y0: f(),
    x1: f(),
    y1: f(),
    wall: new Int32Array(count),
    before: new Int32Array(count),
    after: new Int32Array(count),
    arc0: f(),
    span: f(),
    nx0: f(),
    ny0: f(),
    nx1: f(),
    ny1: f(),
    first,
  };
  for (let k = 0; k < walls.length; k++) {
    const { points, normals, arcNm, closed, lengthNm } = walls[k];
    const n = points.length / 2;
    for (let g = first[k]; g < first[k + 1]; g++) {
      const a = g - first[k];
      const b = a + 1 === n ? 0 : a + 1;
      s.x0[g] = points[2 * a];
      s.y0[g] = points[2 * a + 1];
      s.x1[g] = points[2 * b];
      s.y1[g] = points[2 * b + 1];
      s.nx0[g] = normals[2 * a];
      s.ny0[g] = normals[2 * a + 1];
      s.nx1[g] = normals[2 * b];
      s.ny1[g] = normals[2 * b + 1];
      s.wall[g] = k;
      s.arc0[g] = arcNm[a];
      s.span[g] = (b === 0 ? lengthNm : arcNm[b]) - arcNm[a];
      s.before[g] = g > first[k] ? g - 1 : closed ? first[k + 1] - 1 : -1;
      s.after[g] = g + 1 < first[k + 1] ? g + 1 : closed ? first[k] : -1;
    }
  }
  return s;
}

/** Squared distance, nm², of a point from one step of a wall. */
export function distanceSquared(s: Segments, g: number, x: number, y: number): number {
  const ax = s.x0[g];
  const ay = s.y0[g];
  const ux = s.x1[g] - ax;
  const uy = s.y1[g] - ay;
  const px = x - ax;
  const py = y - ay;
  const uu = ux * ux + uy * uy;
  let t = uu > 0 ? (px * ux + py * uy) / uu : 0;
  t = t < 0 ? 0 : t > 1 ? 1 : t;
  const dx = px - t * ux;
  const dy = py - t * uy;
  return dx * dx + dy * dy;
}

/** Where each pixel lies relative to the walls. Row-major. */
export interface NearestWall {
  /** Nearest step (index into Segments), −1 where there is no wall at all. */
  readonly segment: Int32Array;
  /** Signed distance from it, nm: negative insulating, positive metallic. */
  readonly distanceNm: Float32Array;
  /** Arc length of the foot point on its wall, nm. */
  readonly arcNm: Float32Array;
  /** 1 where the foot point is the open end of a wall: the wall goes on unseen, and the distance is not its own. */
  readonly beyondEnd: Uint8Array;
}

const known = new WeakMap<readonly Wall[], { readonly segments: Segments; readonly near: NearestWall }>();

/** Steps of the walls and the nearest of them to every pixel of their frame. Widths and fringes ask for the same: it is worked out once for
 *  one array of walls, and must not be changed. */
export function nearestOf(
  walls: readonly Wall[],
  rows: number,
  cols: number,
  pixel: PixelSize,
): { readonly segments: Segments; readonly near: NearestWall } {
  let found = known.get(walls);
  if (found === undefined || found.near.segment.length !== rows * cols) {
    const segments = segmentsOf(walls);
    found = { segments, near: nearestWall(segments, rows, cols, pixel) };
    known.set(walls, found);
  }
  return found;
}

/** Nearest wall of every pixel centre, exact point-to-step distances in nm (no rasterised lines, no assumption of square pixels).
 *  Candidates travel from pixel to pixel in raster sweeps (Danielsson 1980, Comput. Graph. Image Process. 14, 227) and are refined along
 *  the wall, so the nearest step is missed only where two parts of walls are equally near. */
export function nearestWall(s: Segments, rows: number, cols: number, pixel: PixelSize): NearestWall {
  const n = rows * cols;
  const segment = new Int32Array(n).fill(-1);
  const best = new Float64Array(n).fill(Number.POSITIVE_INFINITY);
  const offer = (p: number, x: number, y: number, from: number): void => {
    let g = from;
    let d = distanceSquared(s, g, x, y);
    if (d >= best[p] && segment[p] === from) return;
    // walk along the wall while it comes nearer
    for (let way = 0; way < 2; way++) {
      for (;;) {
        const next = way === 0 ? s.after[g] : s.before[g];
        if (next < 0) break;
        const e = distanceSquared(s, next, x, y);
        if (e >= d) break;
        d = e;
        g = next;
      }
    }
    if (d < best[p]) {
      best[p] = d;
      segment[p] = g;
    }
  };
  for (let g = 0; g < s.count; g++) {
    const i0 = Math.floor(Math.min(s.y0[g], s.y1[g]) / pixel.yNm);
    const i1 = Math.ceil(Math.max(s.y0[g], s.y1[g]) / pixel.yNm);
    const j0 = Math.floor(Math.min(s.x0[g], s.x1[g]) / pixel.xNm);
    const j1 = Math.ceil(Math.max(s.x0[g], s.x1[g]) / pixel.xNm);
    for (let i = Math.max(0, i0); i <= Math.min(rows - 1, i1); i++) {
      for (let j = Math.max(0, j0); j <= Math.min(cols - 1, j1); j++) {
        const d = distanceSquared(s, g, j * pixel.xNm, i * pixel.yNm);
        const p = i * cols + j;
        if (d < best[p]) {
          best[p] = d;
          segment[p] = g;
        }
      }
    }
  }
  if (s.count > 0) {
    for (let round = 0; round < 2; round++) {
      for (let forward = 0; forward < 2; forward++) sweep(segment, rows, cols, pixel, forward === 0, offer);
    }
  }
  return measure(s, segment, rows, cols, pixel);
}

function sweep(
  segment: Int32Array,
  rows: number,
  cols: number,
  pixel: PixelSize,
  forward: boolean,
  offer: (p: number, x: number, y: number, from: number) => void,
): void {
  const dir = forward ? 1 : -1;
  for (let row = 0; row < rows; row++) {
    const i = forward ? row : rows - 1 - row;
    const y = i * pixel.yNm;
    for (let turn = 0; turn < 2; turn++) {
      const right = turn === 0;
      for (let col = 0; col < cols; col++) {
        const j = right ? col : cols - 1 - col;
        const p = i * cols + j;
        const x = j * pixel.xNm;
        const beside = right ? j - 1 : j + 1;
        let last = -1;
        if (beside >= 0 && beside < cols && segment[i * cols + beside] >= 0) {
          last = segment[i * cols + beside];
          offer(p, x, y, last);
        }
        if (turn === 1) continue;
        const a = i - dir;
        if (a < 0 || a >= rows) continue;
        for (let b = Math.max(0, j - 1); b <= Math.min(cols - 1, j + 1); b++) {
          const g = segment[a * cols + b];
          if (g >= 0 && g !== last) {
            offer(p, x, y, g);
            last = g;
          }
        }
      }
    }
  }
}

function measure(s: Segments, segment: Int32Array, rows: number, cols: number, pixel: PixelSize): NearestWall {
  const n = rows * cols;
  const distanceNm = new Float32Array(n).fill(Number.NaN);
  const arcNm = new Float32Array(n);
  const beyondEnd = new Uint8Array(n);
  for (let p = 0; p < n; p++) {
    const g = segment[p];
    if (g < 0) continue;
    const i = Math.floor(p / cols);
    const px = (p - i * cols) * pixel.xNm - s.x0[g];
    const py = i * pixel.yNm - s.y0[g];
    const ux = s.x1[g] - s.x0[g];
    const uy = s.y1[g] - s.y0[g];
    const uu = ux * ux + uy * uy;
    const free = uu > 0 ? (px * ux + py * uy) / uu : 0;
    const t = Math.min(1, Math.max(0, free));
    const dx = px - t * ux;
    const dy = py - t * uy;
    // between steps the side is told by the normal there, not by one of the two steps
    const nx = s.nx0[g] * (1 - t) + s.nx1[g] * t;
    const ny = s.ny0[g] * (1 - t) + s.ny1[g] * t;
    const side = dx * nx + dy * ny;
    distanceNm[p] = (side < 0 ? -1 : 1) * Math.hypot(dx, dy);
    arcNm[p] = s.arc0[g] + t * s.span[g];
    if ((free < 0 && s.before[g] < 0) || (free > 1 && s.after[g] < 0)) beyondEnd[p] = 1;
  }
  return { segment, distanceNm, arcNm, beyondEnd };
}

/** How far one can go from a wall along its normal before another wall, or another part of the same one, is nearer: half the gap.
 *  @returns per step of the walls (at its start), nm, insulating and metallic side; capped at `mostNm` */
export function freeReach(
  s: Segments,
  near: NearestWall,
  rows: number,
  cols: number,
  pixel: PixelSize,
  mostNm: number,
): { insulating: Float64Array; metallic: Float64Array } {
  const insulating = new Float64Array(s.count).fill(mostNm);
  const metallic = new Float64Array(s.count).fill(mostNm);
  const step = Math.min(pixel.xNm, pixel.yNm) / 2;
  for (let side = -1; side <= 1; side += 2) {
    const out = side < 0 ? insulating : metallic;
    for (let g = 0; g < s.count; g++) {
      for (let reach = 4 * step; reach < mostNm; reach += step) {
        const x = s.x0[g] + side * reach * s.nx0[g];
        const y = s.y0[g] + side * reach * s.ny0[g];
        const i = Math.round(y / pixel.yNm);
        const j = Math.round(x / pixel.xNm);
        if (i < 0 || j < 0 || i >= rows || j >= cols) break;
        const other = near.segment[i * cols + j];
        // wiggles of the wall's own line bring its neighbourhood a little nearer than the normal says
        const least = reach - Math.max(0.6 * step, 0.05 * reach);
        if (distanceSquared(s, other, x, y) < least * least) {
          out[g] = reach;
          break;
        }
      }
    }
  }
  return { insulating, metallic };
}
