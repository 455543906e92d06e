import type { PixelSize } from "../../model/raster.js";

/** The nearest centre with `source` 1 to every pixel centre, as an index; −1 where there is none. Exact Euclidean distance for unequal
 *  pixel sizes, by lower envelopes of parabolas.
 *  Source: Felzenszwalb & Huttenlocher 2012, Theory Comput. 8, 415.
 *  @param out, column room for the answer and for work, rows·cols long each */
export function nearestSource(
  source: Uint8Array,
  rows: number,
  cols: number,
  pixel: PixelSize,
  out: Int32Array = new Int32Array(rows * cols),
  column: Int32Array = new Int32Array(rows * cols),
): Int32Array {
  // along rows a scan each way is enough for zero-or-far functions
  for (let i = 0; i < rows; i++) {
    const row = i * cols;
    let last = -1;
    for (let j = 0; j < cols; j++) {
      if (source[row + j] === 1) last = j;
      column[row + j] = last;
    }
    last = -1;
    for (let j = cols - 1; j >= 0; j--) {
      if (source[row + j] === 1) last = j;
      const before = column[row + j];
      if (last >= 0 && (before < 0 || last - j < j - before)) column[row + j] = last;
    }
  }
  out.fill(-1);
  const aspect2 = (pixel.xNm / pixel.yNm) ** 2;
  const v = new Int32Array(rows);
  const z = new Float64Array(rows + 1);
  const h = new Float64Array(rows);
  for (let j = 0; j < cols; j++) {
    let k = -1;
    for (let i = 0; i < rows; i++) {
      const at0 = column[i * cols + j];
      if (at0 < 0) continue;
      h[i] = (j - at0) * (j - at0) * aspect2 + i * i;
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

/** Distances to contours of maps of one size; keeps its memory from map to map. */
export class ContourDistances {
  private readonly edge: Uint8Array;
  /** From the middle of an edge pixel to its contour, nm. */
  private readonly toX: Float32Array;
  private readonly toY: Float32Array;
  private readonly nearest: Int32Array;
  private readonly column: Int32Array;
  private readonly distance: Float32Array;

  constructor(
    private readonly rows: number,
    private readonly cols: number,
    private readonly pixel: PixelSize,
  ) {
    const n = rows * cols;
    this.edge = new Uint8Array(n);
    this.toX = new Float32Array(n);
    this.toY = new Float32Array(n);
    this.nearest = new Int32Array(n);
    this.column = new Int32Array(n);
    this.distance = new Float32Array(n);
  }

  /** Distance in nm from each pixel of either state to the contour that bounds it: u = `levels[0]` for state 0, which lies below it, and
   *  u = `levels[1]` for state 1, above; Infinity where there is none, and for pixels of no state. It goes to the point of the contour
   *  that lies beside the nearest pixel that a contour passes (value over slope, along the slope): to the pixel itself it would be wrong
   *  by up to half a pixel.
   *  @param u a smooth map
   *  @param states 0 where u ≤ levels[0], 1 where u > levels[1], 2 between them, 255 where nothing was measured
   *  @returns overwritten by the next call */
  of(u: Float32Array, states: Uint8Array, levels: readonly [number, number]): Float32Array {
    const { rows, cols, pixel, edge, toX, toY, distance } = this;
    distance.fill(Infinity);
    if (!this.findEdges(u, states, levels)) return distance;
    const nearest = nearestSource(edge, rows, cols, pixel, this.nearest, this.column);
    for (let i = 0, p = 0; i < rows; i++) {
      for (let j = 0; j < cols; j++, p++) {
        if (states[p] > 1) continue;
        const q = nearest[p];
        const row = Math.floor(q / cols);
        const dx = (q - row * cols - j) * pixel.xNm + toX[q];
        const dy = (row - i) * pixel.yNm + toY[q];
        distance[p] = Math.sqrt(dx * dx + dy * dy);
      }
    }
    return distance;
  }

  /** Marks the pixels that a contour passes beside, and where; false where there is none. */
  private findEdges(u: Float32Array, states: Uint8Array, levels: readonly [number, number]): boolean {
    const { rows, cols, pixel, edge, toX, toY } = this;
    const most = 0.5 * (pixel.xNm + pixel.yNm);
    edge.fill(0);
    let any = false;
    for (let i = 0, p = 0; i < rows; i++) {
      for (let j = 0; j < cols; j++, p++) {
        const k = states[p];
        if (k > 1) continue;
        const left = j > 0 ? states[p - 1] : 255;
        const right = j + 1 < cols ? states[p + 1] : 255;
        const above = i > 0 ? states[p - cols] : 255;
        const below = i + 1 < rows ? states[p + cols] : 255;
        if (same(left, k) && same(right, k) && same(above, k) && same(below, k)) continue;
        edge[p] = 1;
        any = true;
        toX[p] = 0;
        toY[p] = 0;
        const gx = slope(u, p, left === 255 ? 0 : -1, right === 255 ? 0 : 1) / pixel.xNm;
        const gy = slope(u, p, above === 255 ? 0 : -cols, below === 255 ? 0 : cols) / pixel.yNm;
        const g2 = gx * gx + gy * gy;
        if (!(g2 > 0)) continue;
        const g = Math.sqrt(g2);
        const step = Math.max(-most, Math.min(most, (levels[k] - u[p]) / g)) / g;
        toX[p] = step * gx;
        toY[p] = step * gy;
      }
    }
    return any;
  }
}

const same = (state: number, own: number): boolean => state === own || state === 255;

/** Difference a pixel between the neighbours at these steps; 0 is no neighbour. */
function slope(u: Float32Array, p: number, back: number, forth: number): number {
  const n = (back === 0 ? 0 : 1) + (forth === 0 ? 0 : 1);
  return n === 0 ? 0 : (u[p + forth] - u[p + back]) / n;
}
