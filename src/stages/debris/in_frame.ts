import type { Tip } from "../../model/cooldown.js";
import { colsOf, dataOf, rowsOf } from "../../model/raster.js";
import type { CleanFrame, Drift } from "../../model/signal.js";
import { heightScores } from "./decide.js";
import { CORE, type DebrisMap, MARGIN } from "./grid.js";
import { reaches } from "./reaches.js";
import { heights } from "./residuals.js";
import type { DebrisSettings } from "./settings.js";
import { growSpots, widen } from "./spots.js";

/** A drift less sure than this many pixels widens the core by its standard deviation. */
const SURE_PX = 0.1;

/** The debris of the sample as it lies in one placed frame. The core is read from the map at each pixel's exact place, and is wider by
 *  the drift's standard deviation.
 *  @returns row-major [rows, cols], CORE, MARGIN or 0; all 0 where the frame was not placed */
export function debrisInFrame(map: DebrisMap, drift: Drift, rows: number, cols: number): Uint8Array {
  const out = new Uint8Array(rows * cols);
  if (drift.xNm === null || drift.yNm === null || map.mask.length === 0) return out;
  const exactCol = (drift.xNm - map.originXNm) / map.pixel.xNm;
  const exactRow = (drift.yNm - map.originYNm) / map.pixel.yNm;
  const atCol = Math.round(exactCol);
  const atRow = Math.round(exactRow);
  const sdX = (drift.sdNm ?? 0) / map.pixel.xNm;
  const sdY = (drift.sdNm ?? 0) / map.pixel.yNm;
  const places = [[0, 0]];
  if (Math.max(sdX, sdY) > SURE_PX) places.push([0, -sdX], [0, sdX], [-sdY, 0], [sdY, 0]);
  for (let i = 0; i < rows; i++) {
    const r = i + atRow;
    if (r < 0 || r >= map.rows) continue;
    for (let j = Math.max(0, -atCol); j < Math.min(cols, map.cols - atCol); j++) {
      const near = map.mask[r * map.cols + j + atCol];
      if (near === 0) continue;
      const core = places.some(([dy, dx]) => strengthAt(map, i + exactRow + dy, j + exactCol + dx) >= 1);
      out[i * cols + j] = core ? CORE : MARGIN;
    }
  }
  return out;
}

/** Strength between the grid's pixels, bilinear; the edge goes on outwards. */
function strengthAt(map: DebrisMap, row: number, col: number): number {
  const y = Math.min(map.rows - 1, Math.max(0, row));
  const x = Math.min(map.cols - 1, Math.max(0, col));
  const r0 = Math.floor(y);
  const c0 = Math.floor(x);
  const r1 = Math.min(map.rows - 1, r0 + 1);
  const c1 = Math.min(map.cols - 1, c0 + 1);
  const fy = y - r0;
  const fx = x - c0;
  const s = map.strength;
  const top = s[r0 * map.cols + c0] * (1 - fx) + s[r0 * map.cols + c1] * fx;
  const bottom = s[r1 * map.cols + c0] * (1 - fx) + s[r1 * map.cols + c1] * fx;
  return top * (1 - fy) + bottom * fy;
}

/** Debris from the topography of one frame alone, for a frame that could not be placed: only clear bumps. Amplitude and phase are not
 *  looked at, since in a single frame a particle cannot be told from a small domain. All 0 without a topography.
 *  @returns row-major [rows, cols], CORE, MARGIN or 0 */
export function findDebrisInFrame(clean: CleanFrame, tip: Tip | null, s: DebrisSettings): Uint8Array {
  const rows = rowsOf(clean.amplitude);
  const cols = colsOf(clean.amplitude);
  const n = rows * cols;
  if (clean.topography === null) return new Uint8Array(n);
  const { ringXPx, ringYPx, marginXPx, marginYPx } = reaches(clean.pixel, tip, s);
  const sum = heights(dataOf(clean.topography), rows, cols, ringXPx, ringYPx);
  const count = new Uint16Array(n);
  for (let p = 0; p < n; p++) {
    if (Number.isNaN(sum[p])) sum[p] = 0;
    else count[p] = 1;
  }
  const score = heightScores({ sum, squares: new Float32Array(n), count }, rows, cols);
  const seed = new Uint8Array(n);
  const candidate = new Uint8Array(n);
  for (let p = 0; p < n; p++) {
    if (score[p] > s.loneFrameHeightSigmas) seed[p] = 1;
    if (score[p] > 0.5 * s.loneFrameHeightSigmas) candidate[p] = 1;
  }
  const spots = growSpots(seed, candidate, rows, cols, s.leastPixels);
  const core = widen(spots, rows, cols, marginXPx, marginYPx);
  const out = widen(spots, rows, cols, 2 * marginXPx, 2 * marginYPx);
  for (let p = 0; p < n; p++) if (out[p] === 1) out[p] = core[p] === 1 ? CORE : MARGIN;
  return out;
}
