import { connectedComponents } from "../../raster/opencv.js";

/** Regions of `candidate` (joined over sides and corners) that hold at least one pixel of `seed` and at least `leastPixels`. */
export function growSpots(
  seed: Uint8Array,
  candidate: Uint8Array,
  rows: number,
  cols: number,
  leastPixels: number,
): Uint8Array {
  const mask = new Uint8Array(rows * cols);
  const { count, labels } = connectedComponents(candidate, rows, cols, 8);
  const size = new Int32Array(count + 1);
  const seeded = new Uint8Array(count + 1);
  for (let p = 0; p < mask.length; p++) {
    const l = labels[p];
    if (l === 0) continue;
    size[l]++;
    if (seed[p] === 1) seeded[l] = 1;
  }
  for (let p = 0; p < mask.length; p++) {
    const l = labels[p];
    if (l !== 0 && seeded[l] === 1 && size[l] >= leastPixels) mask[p] = 1;
  }
  return mask;
}

/** The mask widened by an ellipse of half axes given in columns and rows. */
export function widen(mask: Uint8Array, rows: number, cols: number, reachXPx: number, reachYPx: number): Uint8Array {
  const out = mask.slice();
  const most = Math.floor(reachYPx);
  // per row offset, how far the ellipse reaches along the row
  const reach = Array.from({ length: most + 1 }, (_, k) =>
    Math.floor(reachXPx * Math.sqrt(Math.max(0, 1 - (k / Math.max(reachYPx, 1e-9)) ** 2))),
  );
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      if (mask[i * cols + j] === 0) continue;
      for (let di = -most; di <= most; di++) {
        const r = i + di;
        if (r < 0 || r >= rows) continue;
        const w = reach[Math.abs(di)];
        out.fill(1, r * cols + Math.max(0, j - w), r * cols + Math.min(cols, j + w + 1));
      }
    }
  }
  return out;
}

/** Means of sums over 3 × 3 neighbourhoods weighted 1-2-1 each way, each pixel by its own count: Σ w·sum / Σ w·count.
 *  `effective` is the count that a plain mean of the same scatter would have. */
export function smoothedMean(
  sum: Float32Array,
  count: Uint16Array,
  rows: number,
  cols: number,
): { readonly mean: Float32Array; readonly effective: Float32Array } {
  const mean = new Float32Array(rows * cols).fill(Number.NaN);
  const effective = new Float32Array(rows * cols);
  // down the columns first; a column on either side stays 0
  const s = new Float64Array(cols + 2);
  const n = new Float64Array(cols + 2);
  const squares = new Float64Array(cols + 2);
  for (let i = 0; i < rows; i++) {
    const row = i * cols;
    const up = i > 0 ? row - cols : -1;
    const down = i + 1 < rows ? row + cols : -1;
    for (let j = 0; j < cols; j++) {
      const counts = (up < 0 ? 0 : count[up + j]) + (down < 0 ? 0 : count[down + j]);
      s[j + 1] = 2 * sum[row + j] + (up < 0 ? 0 : sum[up + j]) + (down < 0 ? 0 : sum[down + j]);
      n[j + 1] = 2 * count[row + j] + counts;
      squares[j + 1] = 4 * count[row + j] + counts;
    }
    for (let j = 0, p = row; j < cols; j++, p++) {
      if (count[p] === 0) continue;
      const total = 2 * n[j + 1] + n[j] + n[j + 2];
      mean[p] = (2 * s[j + 1] + s[j] + s[j + 2]) / total;
      effective[p] = (total * total) / (4 * squares[j + 1] + squares[j] + squares[j + 2]);
    }
  }
  return { mean, effective };
}
