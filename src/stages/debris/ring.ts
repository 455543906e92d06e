/** Boxes whose means stand for the surroundings, evenly round the ring. */
const SECTORS = 8;
/** So many of them must have been measured: an edge of the image leaves five, a corner three. */
const LEAST_SECTORS = 5;

/** A block's side is the largest power of 2 that is at most the ring's radius over this, or 1: all its pixels have nearly the same surroundings. */
const RADIUS_OVER_SIDE = 3;

/** The surroundings of each block of pixels (mostly 2 × 2 or 4 × 4): [blockRows, blockCols], blocks in reading order. */
export interface Ring {
  /** Pixel (i, j) lies in block (i >> shift, j >> shift). */
  readonly shift: number;
  readonly blockCols: number;
  /** Median of the sectors' means; NaN where too little was measured. */
  readonly reference: Float32Array;
  /** Distance from the reference to the sector that is third furthest from it: two sectors may lie on another particle. */
  readonly spread: Float32Array;
  /** Distance from the reference to the sector that is furthest from it. */
  readonly widest: Float32Array;
}

/** Surroundings of every block: the mean over small boxes at eight places on a ring of radius `radius`, and their median. The block
 *  itself and what lies inside the ring do not enter. The means of all boxes are taken once, by running sums, so the cost does not depend on the sizes;
 *  boxes lie whole blocks apart, so that those of all blocks are the same.
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
  const shift = Math.max(0, Math.floor(Math.log2(Math.min(radiusXPx, radiusYPx) / RADIUS_OVER_SIDE)));
  const side = 1 << shift;
  const places = (radius: number, of: (angle: number) => number): number[] =>
    Array.from({ length: SECTORS }, (_, k) => Math.round((radius / side) * of((2 * Math.PI * k) / SECTORS)));
  // in blocks
  const atX = places(radiusXPx, Math.cos);
  const atY = places(radiusYPx, Math.sin);
  const blocks = { rows: Math.ceil(rows / side), cols: Math.ceil(cols / side), side };
  const margin = { x: Math.max(...atX.map(Math.abs)), y: Math.max(...atY.map(Math.abs)) };
  const half = { x: Math.max(1, Math.round(0.2 * radiusXPx)), y: Math.max(1, Math.round(0.2 * radiusYPx)) };
  const means = boxMeans(values, rows, cols, blocks, half, margin);
  const across = blocks.cols + 2 * margin.x;
  const step = Int32Array.from(atX, (x, k) => atY[k] * across + x);
  const n = blocks.rows * blocks.cols;
  const reference = new Float32Array(n).fill(Number.NaN);
  const spread = new Float32Array(n).fill(Number.NaN);
  const widest = new Float32Array(n).fill(Number.NaN);
  const found = new Float64Array(SECTORS);
  for (let b = 0, bi = 0; bi < blocks.rows; bi++) {
    for (let bj = 0; bj < blocks.cols; bj++, b++) {
      const here = (bi + margin.y) * across + bj + margin.x;
      let count = 0;
      if (!sortEight(means, here, step, found)) {
        for (let k = 0; k < SECTORS; k++) {
          const v = means[here + step[k]];
          if (!Number.isNaN(v)) insert(found, count++, v);
        }
      } else count = SECTORS;
      if (count < leastSectors) continue;
      const middle = count % 2 === 1 ? found[count >> 1] : 0.5 * (found[(count >> 1) - 1] + found[count >> 1]);
      reference[b] = middle;
      if (count < 3) continue;
      // the furthest lie at the ends
      let low = 0;
      let high = count - 1;
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
  return { shift, blockCols: blocks.cols, reference, spread, widest };
}

/** Means over boxes of ±half.x, ±half.y pixels round the middle of each block and each place up to a margin of blocks outside the image,
 *  [blocks.rows + 2 margin.y, blocks.cols + 2 margin.x]; NaN where less than a quarter of the box was measured. The middle of a block of even
 *  side is the pixel above and left of it. */
function boxMeans(
  values: Float32Array,
  rows: number,
  cols: number,
  blocks: { readonly rows: number; readonly cols: number; readonly side: number },
  half: { readonly x: number; readonly y: number },
  margin: { readonly x: number; readonly y: number },
): Float64Array {
  const { side } = blocks;
  const across = blocks.cols + 2 * margin.x;
  const out = new Float64Array(across * (blocks.rows + 2 * margin.y)).fill(Number.NaN);
  const least = Math.max(1, ((2 * half.x + 1) * (2 * half.y + 1)) >> 2);
  const middle = (side - 1) >> 1;
  // sums down the box's rows, column by column, and running along the columns
  const sum = new Float64Array(cols);
  const count = new Int32Array(cols);
  const sumTo = new Float64Array(cols + 1);
  const countTo = new Int32Array(cols + 1);
  for (let bi = -margin.y; bi < blocks.rows + margin.y; bi++) {
    const i = bi * side + middle;
    const top = Math.max(0, i - half.y);
    const bottom = Math.min(rows - 1, i + half.y);
    if (bottom < top) continue;
    sum.fill(0);
    count.fill(0);
    for (let row = top; row <= bottom; row++) {
      for (let j = 0, p = row * cols; j < cols; j++, p++) {
        const v = values[p];
        if (Number.isNaN(v)) continue;
        count[j]++;
        sum[j] += v;
      }
    }
    for (let j = 0; j < cols; j++) {
      sumTo[j + 1] = sumTo[j] + sum[j];
      countTo[j + 1] = countTo[j] + count[j];
    }
    const line = (bi + margin.y) * across + margin.x;
    for (let bj = -margin.x; bj < blocks.cols + margin.x; bj++) {
      const j = bj * side + middle;
      const left = Math.max(0, j - half.x);
      const right = Math.min(cols, j + half.x + 1);
      if (right <= left) continue;
      const c = countTo[right] - countTo[left];
      if (c >= least) out[line + bj] = (sumTo[right] - sumTo[left]) / c;
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
