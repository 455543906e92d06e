import { medianInPlace, SD_PER_MAD } from "../../numerics/quantile.js";
import type { SeenSignal } from "./cells.js";
import type { PureCells } from "./pure.js";
import { someCells } from "./split.js";

/** Smoothed signal further than this many robust standard deviations from the main level may be another state, or debris. */
const OFF_SIGMAS = 4.5;

/** Cells of the one main state of a frame: all whose smoothed signal is near the most common one. The rest (small domains of the
 *  other state with their walls, debris that was missed) has no state here. */
export function mainCells({ cells, smoothRe: re, smoothIm: im }: SeenSignal, leastSd: number): PureCells {
  const some = someCells(cells.count);
  const n = some.length;
  const a = new Float32Array(n);
  const b = new Float32Array(n);
  for (let k = 0; k < n; k++) {
    a[k] = re[some[k]];
    b[k] = im[some[k]];
  }
  const centreRe = medianInPlace(a);
  const centreIm = medianInPlace(b);
  // along and across the direction of the level: gain and phase scatter differently
  const m = Math.hypot(centreRe, centreIm) || 1;
  const er = centreRe / m;
  const ei = centreIm / m;
  for (let k = 0; k < n; k++) {
    const dr = re[some[k]] - centreRe;
    const di = im[some[k]] - centreIm;
    a[k] = Math.abs(dr * er + di * ei);
    b[k] = Math.abs(di * er - dr * ei);
  }
  const along = Math.max(leastSd, SD_PER_MAD * medianInPlace(a));
  const across = Math.max(leastSd, SD_PER_MAD * medianInPlace(b));
  const state = new Uint8Array(re.length).fill(255);
  let kept = 0;
  for (let c = 0; c < state.length; c++) {
    if (cells.count[c] === 0) continue;
    const dr = re[c] - centreRe;
    const di = im[c] - centreIm;
    const x = (dr * er + di * ei) / along;
    const y = (di * er - dr * ei) / across;
    if (x * x + y * y > OFF_SIGMAS * OFF_SIGMAS) continue;
    state[c] = 0;
    kept += cells.count[c];
  }
  const share = new Float32Array(state.length);
  return { cols: cells.cols, state, share, count: [kept, 0], tail: [0, 0], apparentWidthNm: Number.NaN };
}
