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
