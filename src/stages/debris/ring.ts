/** Boxes whose means stand for the surroundings, evenly round the ring. */
const SECTORS = 8;
/** So many of them must have been measured: an edge of the image leaves five, a corner three. */
const LEAST_SECTORS = 5;

/** The surroundings of each block of 2 × 2 pixels: [blockRows, blockCols], blocks in reading order. */
export interface Ring {
  readonly blockCols: number;
  /** Median of the sectors' means; NaN where too little was measured. */
  readonly reference: Float32Array;
  /** Distance from the reference to the sector that is third furthest from it: two sectors may lie on another particle. */
  readonly spread: Float32Array;
  /** Distance from the reference to the sector that is furthest from it. */
  readonly widest: Float32Array;
}

/** Surroundings of every pixel: the mean over small boxes at eight places on a ring of radius `radius`, and their median. The pixel
 *  itself and what lies inside the ring do not enter. By summed areas, so the cost does not depend on the sizes (Crow 1984,
 *  Comput. Graph. 18, 207).
 *  @param values row-major [rows, cols], NaN = not measured
 *  @param radiusXPx, radiusYPx of the ring, in columns and rows
 *  @param leastSectors of the eight that must have been measured; with fewer than three there is no spread */
export function ringOf(
  values: Float32Array,
  rows: number,
  cols: number,
  radiusXPx: number,
  radiusYPx: number,
  leastSectors = LEAST_SECTORS,
): Ring {
  const width = cols + 1;
  const sum = new Float64Array((rows + 1) * width);
  const count = new Int32Array((rows + 1) * width);
  for (let i = 0; i < rows; i++) {
    let s = 0;
    let c = 0;
    for (let j = 0; j < cols; j++) {
      const v = values[i * cols + j];
      if (!Number.isNaN(v)) {
        s += v;
        c++;
      }
      const q = (i + 1) * width + j + 1;
      sum[q] = sum[q - width] + s;
      count[q] = count[q - width] + c;
    }
  }
  const halfX = Math.max(1, Math.round(0.2 * radiusXPx));
  const halfY = Math.max(1, Math.round(0.2 * radiusYPx));
  const atX = Array.from({ length: SECTORS }, (_, k) => Math.round(radiusXPx * Math.cos((2 * Math.PI * k) / SECTORS)));
  const atY = Array.from({ length: SECTORS }, (_, k) => Math.round(radiusYPx * Math.sin((2 * Math.PI * k) / SECTORS)));
  const blockRows = (rows + 1) >> 1;
  const blockCols = (cols + 1) >> 1;
  const reference = new Float32Array(blockRows * blockCols).fill(Number.NaN);
  const spread = new Float32Array(blockRows * blockCols).fill(Number.NaN);
  const widest = new Float32Array(blockRows * blockCols).fill(Number.NaN);
  const least = Math.max(1, ((2 * halfX + 1) * (2 * halfY + 1)) >> 2);
  const found = new Float64Array(SECTORS);
  const away = new Float64Array(SECTORS);
  for (let bi = 0; bi < blockRows; bi++) {
    for (let bj = 0; bj < blockCols; bj++) {
      let n = 0;
      for (let k = 0; k < SECTORS; k++) {
        const i = 2 * bi + atY[k];
        const j = 2 * bj + atX[k];
        const top = Math.max(0, i - halfY);
        const bottom = Math.min(rows, i + halfY + 1);
        const left = Math.max(0, j - halfX);
        const right = Math.min(cols, j + halfX + 1);
        if (top >= bottom || left >= right) continue;
        const c =
          count[bottom * width + right] -
          count[bottom * width + left] -
          count[top * width + right] +
          count[top * width + left];
        if (c < least) continue;
        const s =
          sum[bottom * width + right] - sum[bottom * width + left] - sum[top * width + right] + sum[top * width + left];
        insert(found, n++, s / c);
      }
      if (n < leastSectors) continue;
      const middle = n % 2 === 1 ? found[n >> 1] : 0.5 * (found[(n >> 1) - 1] + found[n >> 1]);
      for (let k = 0; k < n; k++) insert(away, k, Math.abs(found[k] - middle));
      const b = bi * blockCols + bj;
      reference[b] = middle;
      spread[b] = away[n - 3];
      widest[b] = away[n - 1];
    }
  }
  return { blockCols, reference, spread, widest };
}

/** Puts `v` in its place among the first n values, which are in order. */
function insert(a: Float64Array, n: number, v: number): void {
  let k = n;
  while (k > 0 && a[k - 1] > v) {
    a[k] = a[k - 1];
    k--;
  }
  a[k] = v;
}
