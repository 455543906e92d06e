import { distanceTransform } from "../../raster/opencv.js";
import { maskedBlur } from "../../raster/masked_blur.js";

/** Pixels nearer than this to a wall between the states show the wall, not the sample. */
const WALL_PX = 4;
/** Two groups of values are two states where their means are this many of their own spreads apart. */
const APART = 4;
const LEAST_SHARE = 0.003;
/** Blur before the states are told apart, pixels. */
const CALM_PX = 1.5;

/** What an amplitude image shows of the sample itself: its departure from the level of the state that each pixel is in, as a share of that
 *  level, away from the walls. Walls move with temperature and would drag a shift along; particles and film texture do not move. A frame of one state is
 *  divided by its one level. Slow variation across the frame is left in; the coarse step takes it off.
 *  @returns row-major; `usable` 0 near walls and where not measured */
export function stateMarks(
  amplitude: Float32Array,
  rows: number,
  cols: number,
): { values: Float32Array; usable: Uint8Array } {
  const usable = new Uint8Array(amplitude.length);
  for (let p = 0; p < amplitude.length; p++) usable[p] = Number.isNaN(amplitude[p]) ? 0 : 1;
  const calm = maskedBlur(amplitude, usable, rows, cols, CALM_PX, CALM_PX).values;
  const threshold = twoStates(calm, usable);
  const high = new Uint8Array(amplitude.length);
  const low = new Uint8Array(amplitude.length).fill(1);
  if (threshold !== null) {
    for (let p = 0; p < amplitude.length; p++) {
      high[p] = calm[p] > threshold ? 1 : 0;
      low[p] = 1 - high[p];
    }
    const insideHigh = distanceTransform(high, rows, cols);
    const insideLow = distanceTransform(low, rows, cols);
    for (let p = 0; p < amplitude.length; p++) if (Math.max(insideHigh[p], insideLow[p]) <= WALL_PX) usable[p] = 0;
  }
  const levels = [low, high].map((mask) => medianWhere(amplitude, mask, usable));
  const values = new Float32Array(amplitude.length);
  for (let p = 0; p < amplitude.length; p++) {
    const level = levels[high[p]];
    if (usable[p] === 0 || level === null || !(level > 0)) usable[p] = 0;
    else values[p] = amplitude[p] / level - 1;
  }
  return { values, usable };
}

/** Threshold between two groups of values (least squares within the groups), or null where there is one group only. */
function twoStates(calm: Float32Array, usable: Uint8Array): number | null {
  const sorted = calm.filter((v, p) => usable[p] === 1 && !Number.isNaN(v)).sort();
  const n = sorted.length;
  if (n < 50) return null;
  const sum = new Float64Array(n + 1);
  const square = new Float64Array(n + 1);
  for (let k = 0; k < n; k++) {
    sum[k + 1] = sum[k] + sorted[k];
    square[k + 1] = square[k] + sorted[k] * sorted[k];
  }
  const least = Math.max(10, Math.ceil(LEAST_SHARE * n));
  let best = -1;
  let cut = -1;
  for (let k = least; k <= n - least; k++) {
    const between = k * (n - k) * (sum[k] / k - (sum[n] - sum[k]) / (n - k)) ** 2;
    if (between > best) {
      best = between;
      cut = k;
    }
  }
  if (cut < 0) return null;
  const below = sorted.subarray(0, cut);
  const above = sorted.subarray(cut);
  const middle = (v: Float32Array, q: number): number => v[Math.min(v.length - 1, Math.floor(q * v.length))];
  // spread from the outer half of each group: the inner one holds the walls
  const spreadBelow = (middle(below, 0.5) - middle(below, 0.16)) / 1;
  const spreadAbove = (middle(above, 0.84) - middle(above, 0.5)) / 1;
  const apart = middle(above, 0.5) - middle(below, 0.5);
  if (apart < APART * Math.max(spreadBelow, spreadAbove)) return null;
  return 0.5 * (middle(above, 0.5) + middle(below, 0.5));
}

function medianWhere(data: Float32Array, mask: Uint8Array, usable: Uint8Array): number | null {
  const chosen = data.filter((_, p) => mask[p] === 1 && usable[p] === 1).sort();
  return chosen.length < 20 ? null : chosen[chosen.length >> 1];
}
