import type { PixelSize } from "../../model/raster.js";
import type { Wall } from "../../model/walls.js";
import { nearestOf } from "../../raster/nearest_wall.js";
import type { FringeSettings } from "./settings.js";

/** A piece of a wall and the pixels that are tested with it. */
export interface Stretch {
  readonly wall: number;
  readonly stretch: number;
  readonly arcFromNm: number;
  readonly arcToNm: number;
  /** Row-major indices. */
  readonly pixels: Int32Array;
}

export interface FrameStretches {
  readonly stretches: readonly Stretch[];
  /** Signed distance of each pixel from its nearest wall, nm, metallic positive; NaN where there is none. */
  readonly distanceNm: Float32Array;
  /** 1 where the distance is trusted: usable, not beyond the open end of a wall, and not nearer to where nothing is seen. */
  readonly trusted: Uint8Array;
}

/** A row with a smaller share of usable pixels was not measured: walls may hide in it. */
const ROW_SEEN = 0.5;

/** Cuts the walls of a frame into stretches of equal length and gives every usable pixel to the stretch of its nearest wall.
 *  Left out are pixels whose foot point is the open end of a wall, and pixels nearer to the image's edge or to unmeasured rows than to their
 *  wall: a wall that is not seen may be nearer. */
export function cutStretches(
  walls: readonly Wall[],
  usable: Uint8Array,
  rows: number,
  cols: number,
  pixel: PixelSize,
  s: FringeSettings,
): FrameStretches {
  const { segments, near } = nearestOf(walls, rows, cols, pixel);
  const edgeRow = distanceToUnseenRow(usable, rows, cols, pixel.yNm);
  const trusted = new Uint8Array(rows * cols);
  const pieces = walls.map((w) =>
    w.lengthNm < s.leastStretchNm ? 0 : Math.max(1, Math.round(w.lengthNm / s.stretchNm)),
  );
  const first = [0];
  for (const n of pieces) first.push(first[first.length - 1] + n);
  const owner = new Int32Array(rows * cols).fill(-1);
  const count = new Int32Array(first[walls.length]);
  for (let i = 0, p = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++, p++) {
      const g = near.segment[p];
      if (g < 0 || usable[p] === 0 || near.beyondEnd[p] === 1) continue;
      const d = Math.abs(near.distanceNm[p]);
      const edge = Math.min(edgeRow[i], (j + 0.5) * pixel.xNm, (cols - j - 0.5) * pixel.xNm);
      if (d > edge) continue;
      trusted[p] = 1;
      const wall = segments.wall[g];
      if (pieces[wall] === 0 || d > s.reachNm) continue;
      const piece = Math.floor((near.arcNm[p] / walls[wall].lengthNm) * pieces[wall]);
      owner[p] = first[wall] + Math.min(pieces[wall] - 1, Math.max(0, piece));
      count[owner[p]]++;
    }
  }
  const lists = Array.from(count, (n) => new Int32Array(n));
  const at = new Int32Array(count.length);
  for (let p = 0; p < owner.length; p++) if (owner[p] >= 0) lists[owner[p]][at[owner[p]]++] = p;
  const stretches: Stretch[] = [];
  walls.forEach((w, k) => {
    for (let n = 0; n < pieces[k]; n++) {
      stretches.push({
        wall: w.wall,
        stretch: n,
        arcFromNm: (n / pieces[k]) * w.lengthNm,
        arcToNm: ((n + 1) / pieces[k]) * w.lengthNm,
        pixels: lists[first[k] + n],
      });
    }
  });
  return { stretches, distanceNm: near.distanceNm, trusted };
}

/** How far the tip sees, in its standard deviations, and by how much the distance must rise over that length, relative to it, where one wall is the nearest. */
const SEES = 2;
const LEAST_RISE = 0.9;

/** 1 midway between two walls, or two parts of one, where the tip sees both: a mixture of the states as elsewhere, but no fringe of one wall. The
 *  distance rises there and falls again, and its mean slope over the tip's sight is less than 1. Nearer than that to a wall nothing is marked:
 *  there a wall's own wiggles would be.
 *  @param sigmaNm standard deviation of the tip's response */
export function betweenWalls(
  distanceNm: Float32Array,
  rows: number,
  cols: number,
  pixel: PixelSize,
  sigmaNm: number,
): Uint8Array {
  const out = new Uint8Array(rows * cols);
  const across = Math.max(1, Math.round((SEES * sigmaNm) / pixel.xNm));
  const down = Math.max(1, Math.round((SEES * sigmaNm) / pixel.yNm));
  const nearNm = SEES * sigmaNm;
  for (let i = 0; i < rows; i++) {
    const up = Math.max(0, i - down);
    const low = Math.min(rows - 1, i + down);
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      if (Math.abs(distanceNm[p]) <= nearNm) continue;
      const left = Math.max(0, j - across);
      const right = Math.min(cols - 1, j + across);
      const x = (distanceNm[i * cols + right] - distanceNm[i * cols + left]) / ((right - left) * pixel.xNm);
      const y = (distanceNm[low * cols + j] - distanceNm[up * cols + j]) / ((low - up) * pixel.yNm);
      if (x * x + y * y < LEAST_RISE * LEAST_RISE) out[p] = 1;
    }
  }
  return out;
}

/** Distance in nm of each row from the nearest row that was not measured, or from the image's edge. */
function distanceToUnseenRow(usable: Uint8Array, rows: number, cols: number, yNm: number): Float64Array {
  const out = new Float64Array(rows);
  const seen = Array.from({ length: rows }, (_, i) => {
    let n = 0;
    for (let j = 0; j < cols; j++) n += usable[i * cols + j] === 0 ? 0 : 1;
    return n >= ROW_SEEN * cols;
  });
  let last = -1;
  for (let i = 0; i < rows; i++) {
    if (!seen[i]) last = i;
    out[i] = (i - last - 0.5) * yNm;
  }
  last = rows;
  for (let i = rows - 1; i >= 0; i--) {
    if (!seen[i]) last = i;
    out[i] = Math.max(0, Math.min(out[i], (last - i - 0.5) * yNm));
  }
  return out;
}
