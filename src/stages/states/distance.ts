import type { PixelSize } from "../../model/raster.js";

/** Larger than any squared distance in an image, in nm². */
const FAR = 1e20;

/** Exact squared distance in nm² from every pixel centre to the nearest centre with `source` 1; FAR where there is none.
 *  Two passes of lower envelopes of parabolas, for unequal pixel sizes.
 *  Source: Felzenszwalb & Huttenlocher 2012, Theory Comput. 8, 415. */
export function squaredDistance(source: Uint8Array, rows: number, cols: number, pixel: PixelSize): Float64Array {
  const out = new Float64Array(rows * cols);
  const px2 = pixel.xNm * pixel.xNm;
  // along rows: a scan each way is enough for zero-or-far functions
  for (let i = 0; i < rows; i++) {
    const row = i * cols;
    let run = -1;
    for (let j = 0; j < cols; j++) {
      if (source[row + j] === 1) run = 0;
      else if (run >= 0) run++;
      out[row + j] = run < 0 ? FAR : run * run * px2;
    }
    run = -1;
    for (let j = cols - 1; j >= 0; j--) {
      if (source[row + j] === 1) run = 0;
      else if (run >= 0) run++;
      if (run >= 0) out[row + j] = Math.min(out[row + j], run * run * px2);
    }
  }
  // along columns: lower envelope
  const f = new Float64Array(rows);
  const v = new Int32Array(rows);
  const z = new Float64Array(rows + 1);
  const py2 = pixel.yNm * pixel.yNm;
  for (let j = 0; j < cols; j++) {
    let k = -1;
    for (let i = 0; i < rows; i++) {
      const fi = out[i * cols + j];
      f[i] = fi;
      if (fi >= FAR) continue;
      let at = -Infinity;
      while (k >= 0) {
        const u = v[k];
        at = (fi / py2 + i * i - f[u] / py2 - u * u) / (2 * (i - u));
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
      const d = i - v[m];
      out[i * cols + j] = f[v[m]] + d * d * py2;
    }
  }
  return out;
}

/** Unsigned distance in nm from each labelled pixel to the boundary between labels 0 and 1; Infinity where there is no boundary,
 *  and where the label is neither. The boundary is taken half a pixel beyond the nearest pixel that touches the other label. */
export function distanceToBoundary(labels: Uint8Array, rows: number, cols: number, pixel: PixelSize): Float32Array {
  const edge = new Uint8Array(rows * cols);
  let any = false;
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      const own = labels[p];
      if (own > 1) continue;
      if (j + 1 < cols && labels[p + 1] === 1 - own) edge[p] = edge[p + 1] = 1;
      if (i + 1 < rows && labels[p + cols] === 1 - own) edge[p] = edge[p + cols] = 1;
    }
  }
  for (const e of edge) {
    if (e === 1) {
      any = true;
      break;
    }
  }
  const out = new Float32Array(rows * cols).fill(Infinity);
  if (!any) return out;
  const half = 0.25 * (pixel.xNm + pixel.yNm);
  const squared = squaredDistance(edge, rows, cols, pixel);
  for (let p = 0; p < out.length; p++) if (labels[p] <= 1) out[p] = Math.sqrt(squared[p]) + half;
  return out;
}
