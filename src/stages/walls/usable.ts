import type { DomainMap, Signal } from "../../model/signal.js";

/** Pixels that may enter fits: measured, and farther than `clearNm` from patches of the signal that are not in the domain map
 *  (islands below the least area): those are neither plateau nor wall. */
export function usableForFits(signal: Signal, map: DomainMap, patches: Uint8Array, clearNm: number): Uint8Array {
  const { rows, cols, pixel } = map;
  const usable = signal.usable.slice();
  const ri = Math.ceil(clearNm / pixel.yNm);
  const rj = Math.ceil(clearNm / pixel.xNm);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      if (patches[i * cols + j] === 0) continue;
      for (let a = Math.max(0, i - ri); a <= Math.min(rows - 1, i + ri); a++) {
        for (let b = Math.max(0, j - rj); b <= Math.min(cols - 1, j + rj); b++) {
          if (Math.hypot((a - i) * pixel.yNm, (b - j) * pixel.xNm) <= clearNm) usable[a * cols + b] = 0;
        }
      }
    }
  }
  return usable;
}

/** Distance of each pixel's centre from the edge of the measured field (the smallest box that holds all usable pixels), nm. */
export function distanceFromEdge(signal: Signal): Float32Array {
  const { rows, cols, pixel, usable } = signal;
  let top = rows;
  let bottom = -1;
  let left = cols;
  let right = -1;
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      if (usable[i * cols + j] === 0) continue;
      if (i < top) top = i;
      if (i > bottom) bottom = i;
      if (j < left) left = j;
      if (j > right) right = j;
    }
  }
  const out = new Float32Array(rows * cols);
  for (let i = top; i <= bottom; i++) {
    const dy = Math.min(i - top, bottom - i) * pixel.yNm;
    for (let j = left; j <= right; j++) {
      out[i * cols + j] = Math.min(dy, Math.min(j - left, right - j) * pixel.xNm);
    }
  }
  return out;
}
