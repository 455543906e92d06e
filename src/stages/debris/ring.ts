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
 *  itself and what lies inside the ring do not enter. The means of all boxes are taken once, by running sums, so the cost does not depend on the sizes.
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
  const halfX = Math.max(1, Math.round(0.2 * radiusXPx));
  const halfY = Math.max(1, Math.round(0.2 * radiusYPx));
  const atX = Array.from({ length: SECTORS }, (_, k) => Math.round(radiusXPx * Math.cos((2 * Math.PI * k) / SECTORS)));
  const atY = Array.from({ length: SECTORS }, (_, k) => Math.round(radiusYPx * Math.sin((2 * Math.PI * k) / SECTORS)));
  // so far round the image that every sector's place is on the map
  const marginX = Math.max(...atX.map(Math.abs)) + 1;
  const marginY = Math.max(...atY.map(Math.abs)) + 1;
  // blocks lie at even pixels: where all sectors' places do too, the means at odd ones are not asked for
  const even = (at: readonly number[]): boolean => at.every((k) => k % 2 === 0);
  const means = boxMeans(values, rows, cols, halfX, halfY, marginX, marginY, even(atX) ? 2 : 1, even(atY) ? 2 : 1);
  const across = cols + 2 * marginX;
  const step = Int32Array.from(atX, (x, k) => atY[k] * across + x);
  const blockRows = (rows + 1) >> 1;
  const blockCols = (cols + 1) >> 1;
  const reference = new Float32Array(blockRows * blockCols).fill(Number.NaN);
  const spread = new Float32Array(blockRows * blockCols).fill(Number.NaN);
  const widest = new Float32Array(blockRows * blockCols).fill(Number.NaN);
  const found = new Float64Array(SECTORS);
  for (let bi = 0; bi < blockRows; bi++) {
    for (let bj = 0; bj < blockCols; bj++) {
      const here = (2 * bi + marginY) * across + 2 * bj + marginX;
      let n = 0;
      if (!sortEight(means, here, step, found)) {
        for (let k = 0; k < SECTORS; k++) {
          const v = means[here + step[k]];
          if (!Number.isNaN(v)) insert(found, n++, v);
        }
      } else n = SECTORS;
      if (n < leastSectors) continue;
      const middle = n % 2 === 1 ? found[n >> 1] : 0.5 * (found[(n >> 1) - 1] + found[n >> 1]);
      const b = bi * blockCols + bj;
      reference[b] = middle;
      if (n < 3) continue;
      // the furthest lie at the ends
      let low = 0;
      let high = n - 1;
      let away = 0;
      for (let k = 0; k < 3; k++) {
        const below = middle - found[low];
        const above = found[high] - middle;
        if (below > above) {
          away = below;
          low++;
        } else {
          away = above;
          high--;
        }
        if (k === 0) widest[b] = away;
      }
      spread[b] = away;
    }
  }
  return { blockCols, reference, spread, widest };
}

/** Means over boxes of ±halfX, ±halfY round each pixel and each place up to a margin outside the image, [rows + 2 marginY, cols + 2 marginX]; NaN where
 *  less than a quarter of the box was measured, and at all but every `everyX`th and `everyY`th pixel of the image. */
function boxMeans(
  values: Float32Array,
  rows: number,
  cols: number,
  halfX: number,
  halfY: number,
  marginX: number,
  marginY: number,
  everyX: number,
  everyY: number,
): Float64Array {
  const across = cols + 2 * marginX;
  const out = new Float64Array(across * (rows + 2 * marginY)).fill(Number.NaN);
  const least = Math.max(1, ((2 * halfX + 1) * (2 * halfY + 1)) >> 2);
  // sums down the box's rows, column by column, and running along the columns
  const sum = new Float64Array(cols);
  const count = new Int32Array(cols);
  const sumTo = new Float64Array(cols + 1);
  const countTo = new Int32Array(cols + 1);
  const enter = (row: number, sign: number): void => {
    if (row < 0 || row >= rows) return;
    for (let j = 0, p = row * cols; j < cols; j++, p++) {
      const v = values[p];
      if (Number.isNaN(v)) continue;
      count[j] += sign;
      // what is left of a column without pixels is rounding
      sum[j] = count[j] === 0 ? 0 : sum[j] + sign * v;
    }
  };
  for (let i = -marginY - halfY; i < rows + marginY; i++) {
    enter(i + halfY, 1);
    enter(i - halfY - 1, -1);
    if (i < -marginY || i % everyY !== 0) continue;
    for (let j = 0; j < cols; j++) {
      sumTo[j + 1] = sumTo[j] + sum[j];
      countTo[j + 1] = countTo[j] + count[j];
    }
    const row = (i + marginY) * across + marginX;
    const first = Math.max(-marginX, -halfX);
    for (let j = first + (first % everyX === 0 ? 0 : 1); j < Math.min(cols + marginX, cols + halfX); j += everyX) {
      const left = Math.max(0, j - halfX);
      const right = Math.min(cols, j + halfX + 1);
      const c = countTo[right] - countTo[left];
      if (c >= least) out[row + j] = (sumTo[right] - sumTo[left]) / c;
    }
  }
  return out;
}

/** Eight values of `from` in order, by Batcher's network (1968, AFIPS Conf. Proc. 32, 307). @returns false, `out` spoilt, where one of them is NaN */
function sortEight(from: Float64Array, here: number, step: Int32Array, out: Float64Array): boolean {
  const a = from[here + step[0]];
  const b = from[here + step[1]];
  const c = from[here + step[2]];
  const d = from[here + step[3]];
  const e = from[here + step[4]];
  const f = from[here + step[5]];
  const g = from[here + step[6]];
  const h = from[here + step[7]];
  if (Number.isNaN(a + b + c + d + e + f + g + h)) return false;
  // pairs, then fours
  const a1 = Math.min(a, b);
  const b1 = Math.max(a, b);
  const c1 = Math.min(c, d);
  const d1 = Math.max(c, d);
  const e1 = Math.min(e, f);
  const f1 = Math.max(e, f);
  const g1 = Math.min(g, h);
  const h1 = Math.max(g, h);
  const a2 = Math.min(a1, c1);
  const c2 = Math.max(a1, c1);
  const b2 = Math.min(b1, d1);
  const d2 = Math.max(b1, d1);
  const b3 = Math.min(b2, c2);
  const c3 = Math.max(b2, c2);
  const e2 = Math.min(e1, g1);
  const g2 = Math.max(e1, g1);
  const f2 = Math.min(f1, h1);
  const h2 = Math.max(f1, h1);
  const f3 = Math.min(f2, g2);
  const g3 = Math.max(f2, g2);
  // both fours
  const e4 = Math.max(a2, e2);
  const f4 = Math.max(b3, f3);
  const c4 = Math.min(c3, g3);
  const d4 = Math.min(d2, h2);
  const b4 = Math.min(b3, f3);
  const g4 = Math.max(c3, g3);
  const c5 = Math.min(c4, e4);
  const e5 = Math.max(c4, e4);
  const d5 = Math.min(d4, f4);
  const f5 = Math.max(d4, f4);
  out[0] = Math.min(a2, e2);
  out[1] = Math.min(b4, c5);
  out[2] = Math.max(b4, c5);
  out[3] = Math.min(d5, e5);
  out[4] = Math.max(d5, e5);
  out[5] = Math.min(f5, g4);
  out[6] = Math.max(f5, g4);
  out[7] = Math.max(d2, h2);
  return true;
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
