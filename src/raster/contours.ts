import type { PixelSize } from "../model/raster.js";

/** One level line. It is walked with the high side on the left as the image is looked at (x right, y down), so that the unit
 *  normal (ty, −tx) of a step (tx, ty) points to the high side. */
export interface Contour {
  /** Interleaved x, y in nm (x = col·pixel.xNm, y = row·pixel.yNm: pixel centres). A closed line does not repeat its first point. */
  readonly points: Float64Array;
  readonly closed: boolean;
}

/** Level lines of a raster by marching squares on pixel centres with linear interpolation (Lorensen & Cline 1987, Comput.
 *  Graph. 21, 163, in two dimensions), as sub-pixel polylines.
 *
 *  @param data row-major [rows, cols]; NaN = not measured. A cell with a NaN corner holds no line: lines end open there, and at
 *              the image's border, which itself is never a line.
 *  @param join what a saddle cell connects through its middle: "high" lets diagonal high pixels touch (8 neighbours for high,
 *              4 for low), "low" the reverse.
 *  Values equal to the level count as high. Open lines come first, then closed ones, each in scan order of their start.
 *  Length error of clean discs: below 1 % from a radius of 3 pixels (tests/published/contours.test.ts). */
export function traceContours(
  data: Float32Array,
  rows: number,
  cols: number,
  pixel: PixelSize,
  level: number,
  join: "high" | "low",
): Contour[] {
  if (data.length !== rows * cols) throw new RangeError(`${data.length} values for ${rows} × ${cols} pixels`);
  const links = linkEdges(data, rows, cols, level, join === "high");
  const n = rows * cols;
  const out: Contour[] = [];
  const walk: number[] = [];
  const follow = (start: number, closed: boolean): void => {
    walk.length = 0;
    let edge = start;
    do {
      walk.push(edge);
      const next = links.next[edge];
      links.next[edge] = -1;
      edge = next;
    } while (edge >= 0 && edge !== start);
    const points = new Float64Array(2 * walk.length);
    for (let k = 0; k < walk.length; k++) placeCrossing(data, cols, n, walk[k], level, pixel, points, 2 * k);
    out.push({ points, closed });
  };
  // an edge that is left but never entered starts an open line
  for (let e = 0; e < 2 * n; e++) if (links.next[e] >= 0 && links.entered[e] === 0) follow(e, false);
  for (let e = 0; e < 2 * n; e++) if (links.next[e] >= 0) follow(e, true);
  return out;
}

/** For each pixel-to-pixel edge the edge that the line goes to from there, or −1. Edge p joins pixel p with its right neighbour,
 *  edge rows·cols + p joins it with the one below. */
function linkEdges(
  data: Float32Array,
  rows: number,
  cols: number,
  level: number,
  joinHigh: boolean,
): { next: Int32Array; entered: Uint8Array } {
  const n = rows * cols;
  const next = new Int32Array(2 * n).fill(-1);
  const entered = new Uint8Array(2 * n);
  const link = (from: number, to: number): void => {
    next[from] = to;
    entered[to] = 1;
  };
  for (let i = 0; i + 1 < rows; i++) {
    for (let j = 0; j + 1 < cols; j++) {
      const p = i * cols + j;
      const a = data[p];
      const b = data[p + 1];
      const c = data[p + cols + 1];
      const d = data[p + cols];
      if (Number.isNaN(a + b + c + d)) continue;
      const corners = (a >= level ? 1 : 0) | (b >= level ? 2 : 0) | (c >= level ? 4 : 0) | (d >= level ? 8 : 0);
      if (corners === 0 || corners === 15) continue;
      const top = p;
      const right = n + p + 1;
      const bottom = p + cols;
      const left = n + p;
      // corners clockwise from the upper left: a line enters where the values rise going clockwise, and leaves where they fall
      switch (corners) {
        case 1:
          link(left, top);
          break;
        case 2:
          link(top, right);
          break;
        case 3:
          link(left, right);
          break;
        case 4:
          link(right, bottom);
          break;
        case 5:
          link(right, joinHigh ? top : bottom);
          link(left, joinHigh ? bottom : top);
          break;
        case 6:
          link(top, bottom);
          break;
        case 7:
          link(left, bottom);
          break;
        case 8:
          link(bottom, left);
          break;
        case 9:
          link(bottom, top);
          break;
        case 10:
          link(top, joinHigh ? left : right);
          link(bottom, joinHigh ? right : left);
          break;
        case 11:
          link(bottom, right);
          break;
        case 12:
          link(right, left);
          break;
        case 13:
          link(right, top);
          break;
        case 14:
          link(top, left);
          break;
      }
    }
  }
  return { next, entered };
}

function placeCrossing(
  data: Float32Array,
  cols: number,
  n: number,
  edge: number,
  level: number,
  pixel: PixelSize,
  out: Float64Array,
  at: number,
): void {
  const down = edge >= n;
  const p = down ? edge - n : edge;
  const q = down ? p + cols : p + 1;
  const i = Math.floor(p / cols);
  const j = p - i * cols;
  const t = (level - data[p]) / (data[q] - data[p]);
  out[at] = (down ? j : j + t) * pixel.xNm;
  out[at + 1] = (down ? i + t : i) * pixel.yNm;
}

/** Length of a polyline in the unit of its points, the closing step included. */
export function lineLength(points: Float64Array, closed: boolean): number {
  const n = points.length / 2;
  let sum = 0;
  for (let k = closed ? 0 : 1; k < n; k++) {
    const a = k === 0 ? n - 1 : k - 1;
    sum += Math.hypot(points[2 * k] - points[2 * a], points[2 * k + 1] - points[2 * a + 1]);
  }
  return sum;
}

/** Area within a closed polyline, in the square of the unit of its points; never negative. */
export function enclosedArea(points: Float64Array): number {
  const n = points.length / 2;
  let twice = 0;
  for (let k = 0; k < n; k++) {
    const a = k === 0 ? n - 1 : k - 1;
    twice += points[2 * a] * points[2 * k + 1] - points[2 * k] * points[2 * a + 1];
  }
  return Math.abs(twice) / 2;
}
