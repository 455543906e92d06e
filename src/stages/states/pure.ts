import { RISE_PER_W } from "../../model/units.js";
import type { Cells } from "./cells.js";
import type { ContourDistances } from "./distance.js";
import { meanWidth, tailTable, TABLE_STEPS, TABLE_WIDTHS, type WallBlur } from "./wall_tail.js";

/** Cells whose state is known, with the small share of the other one that the tail of the nearest wall leaves there. */
export interface PureCells {
  /** Columns of cells. */
  readonly cols: number;
  /** 0 or 1 for the two states, 255 for all others. */
  readonly state: Uint8Array;
  /** Expected share of state 1. */
  readonly share: Float32Array;
  /** Pixels in them. */
  readonly count: readonly [number, number];
  /** Mean share of the wrong state that the tail of the walls puts into each. */
  readonly tail: readonly [number, number];
  /** 10–90 rise of the walls in the smoothed map, nm; NaN where there is no wall. */
  readonly apparentWidthNm: number;
}

/** Distances from a wall tried, in its apparent 10–90 widths: the farthest that leaves pixels enough. At 1.25 widths a tanh wall has
 *  0.4 % of the other state, at 0.5 widths 10 %. */
const REACHES = [1.6, 1.4, 1.25, 1.1, 1, 0.9, 0.8, 0.7, 0.6, 0.5] as const;
/** Pixels of one state that are enough to stop coming nearer to the walls. */
const ENOUGH = 600;
const ENOUGH_SHARE = 0.02;

/** The foot of a wall: this share of the other state, or this many standard deviations of the smoothed map's noise. */
const LEAST_FOOT = 0.12;
const FOOT_SIGMAS = 5;

/** Cells far from any wall of a smoothed map of the mixing u, on either side of the walls.
 *  Each state takes the farthest reach that leaves it enough pixels, and never less than half a width.
 *  @param distances for maps of the size of `cells` */
export function pureCells(
  u: Float32Array,
  cells: Cells,
  usablePixels: number,
  blur: WallBlur,
  distances: ContourDistances,
): PureCells {
  const n = u.length;
  const { cols, count: inCell } = cells;
  const mapWidth = meanWidth(u, cells, blur);
  const widthNm = RISE_PER_W * mapWidth;
  const walls = !Number.isNaN(widthNm);
  // distances from the foot of the walls, so that domains too small to reach ½ keep their surroundings out as well
  const foot = Math.min(0.4, Math.max(LEAST_FOOT, FOOT_SIGMAS * blur.mapNoise));
  const fromMiddle = walls ? mapWidth * Math.atanh(1 - 2 * foot) : 0;
  const labels = new Uint8Array(n);
  for (let c = 0; c < n; c++) labels[c] = inCell[c] === 0 ? 255 : u[c] <= foot ? 0 : u[c] > 1 - foot ? 1 : 2;
  const distance = distances.of(u, labels, [foot, 1 - foot]);
  const reach = reachesOf(distance, labels, inCell, fromMiddle, widthNm, Math.max(ENOUGH, ENOUGH_SHARE * usablePixels));
  const state = new Uint8Array(n).fill(255);
  const share = new Float32Array(n);
  const table = walls ? tailTable(mapWidth, widthNm, blur) : new Float64Array(1);
  const perNm = walls ? TABLE_STEPS / (TABLE_WIDTHS * widthNm) : 0;
  const count: [number, number] = [0, 0];
  const tail: [number, number] = [0, 0];
  for (let c = 0; c < n; c++) {
    const k = labels[c];
    if (k > 1) continue;
    const d = distance[c] + fromMiddle;
    if (!(d >= reach[k])) continue;
    const at = Math.round(d * perNm);
    const other = at < table.length ? table[at] : 0;
    state[c] = k;
    share[c] = k === 0 ? other : 1 - other;
    count[k] += inCell[c];
    tail[k] += inCell[c] * other;
  }
  tail[0] /= Math.max(1, count[0]);
  tail[1] /= Math.max(1, count[1]);
  return { cols, state, share, count, tail, apparentWidthNm: widthNm };
}

/** Distances from the walls that leave either state enough pixels, nm; 0 without walls. */
function reachesOf(
  distance: Float32Array,
  labels: Uint8Array,
  inCell: Uint8Array,
  fromMiddle: number,
  widthNm: number,
  enough: number,
): [number, number] {
  if (Number.isNaN(widthNm)) return [0, 0];
  // pixels of either state by the farthest reach that takes them; those that none takes come last
  const counts = [new Float64Array(REACHES.length + 1), new Float64Array(REACHES.length + 1)];
  const ends = Float64Array.from(REACHES, (r) => r * widthNm - fromMiddle);
  for (let c = 0; c < labels.length; c++) {
    const k = labels[c];
    if (k > 1) continue;
    const d = distance[c];
    let r = 0;
    while (r < ends.length && d < ends[r]) r++;
    counts[k][r] += inCell[c];
  }
  const reach = (of: Float64Array): number => {
    let sum = 0;
    for (let r = 0; r < REACHES.length; r++) {
      sum += of[r];
      if (sum >= enough) return REACHES[r] * widthNm;
    }
    return REACHES[REACHES.length - 1] * widthNm;
  };
  return [reach(counts[0]), reach(counts[1])];
}
