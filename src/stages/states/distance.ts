import type { PixelSize } from "../../model/raster.js";

/** Larger than any squared distance in an image, in nm². */
const FAR = 1e20;

/** The nearest centre with `source` 1 to every pixel centre, as an index; −1 where there is none. Exact Euclidean distance for unequal
 *  pixel sizes, by lower envelopes of parabolas.
 *  Source: Felzenszwalb & Huttenlocher 2012, Theory Comput. 8, 415. */
export function nearestSource(source: Uint8Array, rows: number, cols: number, pixel: PixelSize): Int32Array {
  const inRow = new Float64Array(rows * cols);
  const column = new Int32Array(rows * cols).fill(-1);
  const px2 = pixel.xNm * pixel.xNm;
  // along rows a scan each way is enough for zero-or-far functions
  for (let i = 0; i < rows; i++) {
    const row = i * cols;
    let last = -1;
    for (let j = 0; j < cols; j++) {
      if (source[row + j] === 1) last = j;
      column[row + j] = last;
      inRow[row + j] = last < 0 ? FAR : (j - last) * (j - last) * px2;
    }
    last = -1;
    for (let j = cols - 1; j >= 0; j--) {
      if (source[row + j] === 1) last = j;
      if (last < 0) continue;
      const d2 = (last - j) * (last - j) * px2;
      if (d2 < inRow[row + j]) {
        inRow[row + j] = d2;
        column[row + j] = last;
      }
    }
  }
  const out = new Int32Array(rows * cols).fill(-1);
  const v = new Int32Array(rows);
  const z = new Float64Array(rows + 1);
  const h = new Float64Array(rows);
  const py2 = pixel.yNm * pixel.yNm;
  for (let j = 0; j < cols; j++) {
    let k = -1;
    for (let i = 0; i < rows; i++) {
      const f = inRow[i * cols + j];
      if (f >= FAR) continue;
      h[i] = f / py2 + i * i;
      let at = -Infinity;
      while (k >= 0) {
        const u = v[k];
        at = (h[i] - h[u]) / (2 * (i - u));
        if (at > z[k]) break;
        k--;
      }
      k++;
      v[k] = i;
      z[k] = k === 0 ? -Infinity : at;
      z[k + 1] = Infinity;
    }
    if (k < 0) continue;
    let m = 0;
    for (let i = 0; i < rows; i++) {
      while (z[m + 1] < i) m++;
      const row = v[m];
      out[i * cols + j] = row * cols + column[row * cols + j];
    }
  }
  return out;
}

/** Distance in nm from each pixel of `from` (0 or 1) to the contour u = level between labels 0 and 1; Infinity where there is none, and
 *  for all other pixels. It goes to the nearest pixel of the own label that touches the other, and on from there by that
 *  pixel's own sub-pixel distance (value over slope): to the pixel alone it would be short by up to half a pixel, more so for walls
 *  across the grid than along it.
 *  @param u a smooth map, the labels being u > level (255: no label) */
export function distanceToContour(
  u: Float32Array,
  level: number,
  labels: Uint8Array,
  from: 0 | 1,
  rows: number,
  cols: number,
  pixel: PixelSize,
): Float32Array {
  const edge = new Uint8Array(rows * cols);
  let any = false;
  const other = 1 - from;
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      if (labels[p] !== from) continue;
      if (
        (j + 1 < cols && labels[p + 1] === other) ||
        (j > 0 && labels[p - 1] === other) ||
        (i + 1 < rows && labels[p + cols] === other) ||
        (i > 0 && labels[p - cols] === other)
      ) {
        edge[p] = 1;
        any = true;
      }
    }
  }
  const out = new Float32Array(rows * cols).fill(Infinity);
  if (!any) return out;
  const half = 0.25 * (pixel.xNm + pixel.yNm);
  const nearest = nearestSource(edge, rows, cols, pixel);
  const depth = new Float32Array(rows * cols);
  for (let p = 0; p < depth.length; p++) {
    if (edge[p] === 0) continue;
    const gx = slope(u, labels, p, p % cols > 0 ? -1 : 0, p % cols < cols - 1 ? 1 : 0) / pixel.xNm;
    const gy = slope(u, labels, p, p >= cols ? -cols : 0, p + cols < depth.length ? cols : 0) / pixel.yNm;
    const g = Math.sqrt(gx * gx + gy * gy);
    depth[p] = g > 0 ? Math.min(2 * half, Math.abs(u[p] - level) / g) : half;
  }
  for (let p = 0; p < out.length; p++) {
    if (labels[p] !== from) continue;
    const q = nearest[p];
    const dx = ((p % cols) - (q % cols)) * pixel.xNm;
    const dy = (Math.floor(p / cols) - Math.floor(q / cols)) * pixel.yNm;
    out[p] = Math.sqrt(dx * dx + dy * dy) + depth[q];
  }
  return out;
}

/** Difference a pixel, central where both neighbours have a label. */
function slope(u: Float32Array, labels: Uint8Array, p: number, back: number, forth: number): number {
  const a = back !== 0 && labels[p + back] <= 1 ? 1 : 0;
  const b = forth !== 0 && labels[p + forth] <= 1 ? 1 : 0;
  return a + b === 0 ? 0 : (u[p + b * forth] - u[p + a * back]) / (a + b);
}
