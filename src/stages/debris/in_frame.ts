import type { Tip } from "../../model/cooldown.js";
import { colsOf, dataOf, rowsOf } from "../../model/raster.js";
import type { CleanFrame, Drift } from "../../model/signal.js";
import { heightScores } from "./decide.js";
import type { DebrisMap } from "./grid.js";
import { reaches } from "./reaches.js";
import { heights } from "./residuals.js";
import type { DebrisSettings } from "./settings.js";
import { growSpots, widen } from "./spots.js";

/** The debris of the sample as it lies in one placed frame.
 *  @returns row-major [rows, cols], 1 = debris; all 0 where the frame was not placed */
export function debrisInFrame(map: DebrisMap, drift: Drift, rows: number, cols: number): Uint8Array {
  const out = new Uint8Array(rows * cols);
  if (drift.xNm === null || drift.yNm === null || map.mask.length === 0) return out;
  const atCol = Math.round((drift.xNm - map.originXNm) / map.pixel.xNm);
  const atRow = Math.round((drift.yNm - map.originYNm) / map.pixel.yNm);
  for (let i = 0; i < rows; i++) {
    const r = i + atRow;
    if (r < 0 || r >= map.rows) continue;
    for (let j = Math.max(0, -atCol); j < Math.min(cols, map.cols - atCol); j++) {
      out[i * cols + j] = map.mask[r * map.cols + j + atCol];
    }
  }
  return out;
}

/** Debris from the topography of one frame alone, for a frame that could not be placed: only clear bumps. Amplitude and phase are not
 *  looked at, since in a single frame a particle cannot be told from a small domain. All 0 without a topography. */
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
  return widen(growSpots(seed, candidate, rows, cols, s.leastPixels), rows, cols, 2 * marginXPx, 2 * marginYPx);
}
