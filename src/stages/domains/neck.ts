import type { FrameDomains } from "../../model/domains.js";
import { pixelShift, type Placed } from "./overlap.js";

/** True where regions `p` and `q` of one frame come nearer to each other than `neckNm` (edge to edge). */
export function gapIsNarrow(f: FrameDomains, p: number, q: number, neckNm: number): boolean {
  const { rows, cols, pixel } = f.map;
  const rx = Math.ceil(neckNm / pixel.xNm) + 1;
  const ry = Math.ceil(neckNm / pixel.yNm) + 1;
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      if (f.labels[i * cols + j] !== p) continue;
      for (let a = Math.max(0, i - ry); a <= Math.min(rows - 1, i + ry); a++) {
        for (let b = Math.max(0, j - rx); b <= Math.min(cols - 1, j + rx); b++) {
          if (f.labels[a * cols + b] !== q) continue;
          // Edge to edge: half a pixel less at either end, along the axis of each.
          const dx = Math.max(0, Math.abs(b - j) - 1) * pixel.xNm;
          const dy = Math.max(0, Math.abs(a - i) - 1) * pixel.yNm;
          if (dx * dx + dy * dy <= neckNm * neckNm) return true;
        }
      }
    }
  }
  return false;
}

/** True where region `q` of `now` is held together between the former regions `p1` and `p2` of `before` only by necks
 *  narrower than `neckNm`: with a rim of half that width taken off, no piece of it meets both. */
export function neckIsNarrow(
  now: FrameDomains,
  q: number,
  before: FrameDomains,
  p1: number,
  p2: number,
  atNow: Placed,
  atBefore: Placed,
  neckNm: number,
): boolean {
  const { rows, cols, pixel } = now.map;
  const kept = erode(now, q, neckNm / 2);
  const { rows: shiftRows, cols: shiftCols } = pixelShift(atBefore, atNow, pixel);
  const stack: number[] = [];
  for (let start = 0; start < kept.length; start++) {
    if (kept[start] !== 1) continue;
    let meets = 0;
    kept[start] = 0;
    stack.push(start);
    for (let at = stack.pop(); at !== undefined; at = stack.pop()) {
      const i = Math.floor(at / cols);
      const j = at - i * cols;
      const ib = i + shiftRows;
      const jb = j + shiftCols;
      if (ib >= 0 && jb >= 0 && ib < before.map.rows && jb < before.map.cols) {
        const label = before.labels[ib * before.map.cols + jb];
        if (label === p1) meets |= 1;
        if (label === p2) meets |= 2;
        if (meets === 3) return false;
      }
      for (let a = Math.max(0, i - 1); a <= Math.min(rows - 1, i + 1); a++) {
        for (let b = Math.max(0, j - 1); b <= Math.min(cols - 1, j + 1); b++) {
          if (kept[a * cols + b] !== 1) continue;
          kept[a * cols + b] = 0;
          stack.push(a * cols + b);
        }
      }
    }
  }
  return true;
}

/** 1 for pixels of the region whose edge is farther than `rimNm`. */
function erode(f: FrameDomains, label: number, rimNm: number): Uint8Array {
  const { rows, cols, pixel } = f.map;
  const rx = Math.ceil(rimNm / pixel.xNm + 0.5);
  const ry = Math.ceil(rimNm / pixel.yNm + 0.5);
  const out = new Uint8Array(rows * cols);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      if (f.labels[i * cols + j] !== label) continue;
      let deep = true;
      for (let a = Math.max(0, i - ry); deep && a <= Math.min(rows - 1, i + ry); a++) {
        for (let b = Math.max(0, j - rx); deep && b <= Math.min(cols - 1, j + rx); b++) {
          if (f.labels[a * cols + b] === label) continue;
          const dx = Math.max(0, Math.abs(b - j) - 0.5) * pixel.xNm;
          const dy = Math.max(0, Math.abs(a - i) - 0.5) * pixel.yNm;
          deep = dx * dx + dy * dy > rimNm * rimNm;
        }
      }
      out[i * cols + j] = deep ? 1 : 0;
    }
  }
  return out;
}
