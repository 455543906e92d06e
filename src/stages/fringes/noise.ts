import type { Blur } from "./basis.js";
import type { Chord } from "./chord.js";
import { Local } from "./local.js";
import { armsOf, measureRows, NEAR_LAG, type RowNoise } from "./row_noise.js";
import { CLIP, type Grid } from "./grid.js";

/** Noise across the chord as measured in one frame. */
export interface NoiseModel {
  readonly local: Local;
  /** Correlation of pixels `dy` rows and `dx` columns apart at [dy][dx + NEAR_LAG]; 1 at [0][NEAR_LAG]. */
  readonly near: readonly Float64Array[];
  readonly rows: RowNoise;
}

/** Enough pixels of one state to correct the noise that was measured along with its level. */
const ENOUGH = 200;

/** Measures the noise from what is left of the component across the chord after its mean at each distance from the walls is taken
 *  off: pixel noise, its correlation between neighbours, and what is left of the offsets of whole rows. A fringe goes with its mean
 *  profile; only where it is strong and irregular does it add to the noise.
 *  @param nearWallNm rows were referenced on pixels farther from the walls than this */
export function measureNoise(
  grid: Grid,
  chord: Chord,
  blur: Blur,
  nearWallNm: number,
  binNm: number,
  reachNm: number,
): NoiseModel {
  const { distanceNm, trusted, rows, cols } = grid;
  const n = rows * cols;
  const first = new Local(chord, blur, reachNm);
  const e = residuals(grid, first, binNm, reachNm);
  const square = [0, 0];
  const many = [0, 0];
  for (let p = 0; p < n; p++) {
    if (trusted[p] === 0 || Math.abs(distanceNm[p]) <= nearWallNm) continue;
    const state = distanceNm[p] > 0 ? 1 : 0;
    square[state] += e[p] * e[p];
    many[state]++;
  }
  const excess = (k: number): number => (many[k] > ENOUGH ? Math.max(0.5, Math.sqrt(square[k] / many[k])) : 1);
  const local = new Local(chord, blur, reachNm, [excess(0), excess(1)]);
  for (let p = 0; p < n; p++) {
    if (trusted[p] === 1) e[p] *= first.sd(distanceNm[p]) / local.sd(distanceNm[p]);
  }

  const lag = lagProducts(e, grid);
  const variance = lag.products[0][NEAR_LAG] / Math.max(1, lag.pairs[0][NEAR_LAG]);
  const x = [1, 2, 3].reduce((a, dx) => a + lag.products[0][NEAR_LAG + dx] / lag.products[0][NEAR_LAG], 0);
  const pixels = armsOf(grid, e, local, nearWallNm);
  const found = measureRows(grid, pixels, chord.height, 1 + 2 * Math.max(0, x));
  const correlation = (dy: number, dx: number): number => {
    const m = lag.pairs[dy][dx + NEAR_LAG];
    if (m === 0) return 0;
    // What a whole row shares is counted as such.
    const c = (lag.products[dy][dx + NEAR_LAG] / m - found.common[dy]) / variance;
    // Below what the number of pairs can tell it is left out.
    return Math.abs(c) > 3 / Math.sqrt(m) ? c : 0;
  };
  // A filter along the rows and one across them: the correlation is the product of those along the axes, which many pairs tell well.
  const near = lag.products.map((line, dy) =>
    line.map(
      (_, k) => (dy === 0 ? 1 : correlation(dy, 0)) * (k === NEAR_LAG ? 1 : correlation(0, Math.abs(k - NEAR_LAG))),
    ),
  );
  return { local, near, rows: found };
}

/** The component across the chord less its mean at that distance, in units of the pixel noise; 0 where it is not trusted. */
function residuals(grid: Grid, local: Local, binNm: number, reachNm: number): Float32Array {
  const { across, distanceNm, trusted } = grid;
  const half = Math.ceil(reachNm / binNm);
  const sum = new Float64Array(2 * half);
  const count = new Int32Array(2 * half);
  const binOf = (d: number): number => Math.max(0, Math.min(2 * half - 1, Math.floor(d / binNm) + half));
  for (let p = 0; p < across.length; p++) {
    if (trusted[p] === 0) continue;
    const b = binOf(distanceNm[p]);
    sum[b] += across[p];
    count[b]++;
  }
  const e = new Float32Array(across.length);
  for (let p = 0; p < e.length; p++) {
    if (trusted[p] === 0) continue;
    const b = binOf(distanceNm[p]);
    // Each bin's mean has eaten its share of the noise.
    const scale = count[b] > 1 ? Math.sqrt(count[b] / (count[b] - 1)) : 0;
    e[p] = Math.max(-CLIP, Math.min(CLIP, ((across[p] - sum[b] / count[b]) * scale) / local.sd(distanceNm[p])));
  }
  return e;
}

/** Sums of products of pixels' residuals and numbers of pairs, along the axes: [dy][0 columns apart] and [0][dx]. */
function lagProducts(e: Float32Array, { trusted, rows, cols }: Grid) {
  const products = Array.from({ length: NEAR_LAG + 1 }, () => new Float64Array(2 * NEAR_LAG + 1));
  const pairs = Array.from({ length: NEAR_LAG + 1 }, () => new Float64Array(2 * NEAR_LAG + 1));
  for (let k = 0; k <= NEAR_LAG; k++) {
    for (const [dy, dx] of k === 0
      ? [[0, 0]]
      : [
          [0, k],
          [k, 0],
        ]) {
      let s = 0;
      let m = 0;
      const shift = dy * cols + dx;
      for (let i = 0; i + dy < rows; i++) {
        const end = (i + 1) * cols - dx;
        for (let p = i * cols; p < end; p++) {
          m += trusted[p] & trusted[p + shift];
          s += e[p] * e[p + shift];
        }
      }
      products[dy][dx + NEAR_LAG] = s;
      pairs[dy][dx + NEAR_LAG] = m;
    }
  }
  return { products, pairs };
}
