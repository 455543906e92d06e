import type { Wall } from "../../model/walls.js";
import type { NearestWall, Segments } from "../../raster/nearest_wall.js";

/** One piece of a wall and the pixels that belong to it. */
export interface Stretch {
  readonly wall: number;
  /** Index along the wall, from 0. */
  readonly profile: number;
  readonly middleNm: number;
  readonly lengthNm: number;
  /** Point and unit normal (to the metallic side) at the middle. */
  readonly middle: { readonly x: number; readonly y: number; readonly nx: number; readonly ny: number };
  /** Median half gap on either side, nm. */
  readonly freeInsulatingNm: number;
  readonly freeMetallicNm: number;
  /** Mean curvature over the stretch, 1/nm, without sign. */
  readonly curvaturePerNm: number;
  /** Its pixels: stretches.pixels[from … to − 1]. */
  readonly from: number;
  readonly to: number;
}

/** All stretches of a frame. Walls are cut into equal pieces near the asked-for length; pixels are sorted by piece once. */
export class Stretches {
  readonly list: Stretch[] = [];
  /** Row-major pixel indices, stretch by stretch. */
  readonly pixels: Int32Array;
  /** Half gap at each of these pixels' foot points, on the pixel's own side, nm. */
  readonly freeNm: Float32Array;

  get pixelCount(): number {
    return this.pixels.length;
  }

  constructor(
    walls: readonly Wall[],
    s: Segments,
    near: NearestWall,
    free: { insulating: Float64Array; metallic: Float64Array },
    usable: Uint8Array,
    spacingNm: number,
  ) {
    const firstOf = new Int32Array(walls.length + 1);
    for (let k = 0; k < walls.length; k++) {
      firstOf[k + 1] = firstOf[k] + Math.max(1, Math.round(walls[k].lengthNm / spacingNm));
    }
    const total = firstOf[walls.length];
    const starts = new Int32Array(total + 1);
    const n = near.segment.length;
    const owner = new Int32Array(n).fill(-1);
    for (let p = 0; p < n; p++) {
      const g = near.segment[p];
      if (g < 0 || usable[p] === 0 || near.beyondEnd[p] === 1) continue;
      const wall = s.wall[g];
      const pieces = firstOf[wall + 1] - firstOf[wall];
      const piece = Math.min(pieces - 1, Math.floor((near.arcNm[p] / walls[wall].lengthNm) * pieces));
      owner[p] = firstOf[wall] + piece;
      starts[owner[p] + 1]++;
    }
    for (let k = 0; k < total; k++) starts[k + 1] += starts[k];
    this.pixels = new Int32Array(starts[total]);
    this.freeNm = new Float32Array(starts[total]);
    const at = starts.slice(0, total);
    for (let p = 0; p < n; p++) {
      if (owner[p] < 0) continue;
      const m = at[owner[p]]++;
      this.pixels[m] = p;
      this.freeNm[m] = (near.distanceNm[p] < 0 ? free.insulating : free.metallic)[near.segment[p]];
    }
    for (let wall = 0; wall < walls.length; wall++) {
      const pieces = firstOf[wall + 1] - firstOf[wall];
      const length = walls[wall].lengthNm / pieces;
      for (let k = 0; k < pieces; k++) {
        const id = firstOf[wall] + k;
        this.list.push({
          wall,
          profile: k,
          middleNm: (k + 0.5) * length,
          lengthNm: length,
          ...describe(s, wall, k * length, (k + 1) * length, free),
          from: starts[id],
          to: starts[id + 1],
        });
      }
    }
  }
}

function describe(
  s: Segments,
  wall: number,
  arcFrom: number,
  arcTo: number,
  free: { insulating: Float64Array; metallic: Float64Array },
): Pick<Stretch, "middle" | "freeInsulatingNm" | "freeMetallicNm" | "curvaturePerNm"> {
  const insulating: number[] = [];
  const metallic: number[] = [];
  let middle = { x: s.x0[s.first[wall]], y: s.y0[s.first[wall]], nx: 1, ny: 0 };
  let turn = 0;
  let length = 0;
  const half = (arcFrom + arcTo) / 2;
  for (let g = s.first[wall]; g < s.first[wall + 1]; g++) {
    const arc = s.arc0[g];
    if (half >= arc && half <= arc + s.span[g]) {
      const t = s.span[g] > 0 ? (half - arc) / s.span[g] : 0;
      const nx = s.nx0[g] * (1 - t) + s.nx1[g] * t;
      const ny = s.ny0[g] * (1 - t) + s.ny1[g] * t;
      const size = Math.hypot(nx, ny) || 1;
      middle = {
        x: s.x0[g] + t * (s.x1[g] - s.x0[g]),
        y: s.y0[g] + t * (s.y1[g] - s.y0[g]),
        nx: nx / size,
        ny: ny / size,
      };
    }
    if (arc + s.span[g] < arcFrom || arc > arcTo) continue;
    insulating.push(free.insulating[g]);
    metallic.push(free.metallic[g]);
    turn += Math.atan2(s.nx0[g] * s.ny1[g] - s.ny0[g] * s.nx1[g], s.nx0[g] * s.nx1[g] + s.ny0[g] * s.ny1[g]);
    length += s.span[g];
  }
  const median = (v: number[]): number => (v.sort((a, b) => a - b), v.length === 0 ? 0 : v[v.length >> 1]);
  return {
    middle,
    freeInsulatingNm: median(insulating),
    freeMetallicNm: median(metallic),
    curvaturePerNm: length > 0 ? Math.abs(turn) / length : 0,
  };
}
