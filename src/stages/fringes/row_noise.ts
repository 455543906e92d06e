import type { Grid } from "./grid.js";
import type { Local } from "./local.js";

/** Lags, in pixels, up to which neighbouring pixels' noise is taken to be correlated. */
export const NEAR_LAG = 3;
/** Neighbouring rows whose offsets may be related. */
export const ROW_LAG = 6;

/** What is left of the offsets of whole rows, phase (rad) and log gain alike: a row's error ρ + iγ moves the signal z by i z ρ + z γ, and the
 *  component across the chord by (z·e) ρ + h γ, h the chord's distance from the origin. Both were taken off with the same pixels,
 *  so both have this variance. */
export interface RowNoise {
  /** Covariance of two pixels of one row: near-near, near-far, far-near, far-far. */
  readonly same: Float64Array;
  /** Covariance of two pixels 1 … ROW_LAG rows apart, at index 1 …. */
  readonly apart: Float64Array;
  /** What it adds to the products of neighbours' residuals, by rows apart. */
  readonly common: Float64Array;
}

/** Sums of one row over its pixels of one group, all over the pixel noise: of z·e and h times the residual, and of their squares. */
const P = 0;
const Q = 1;
const ZZ = 2;
const ZH = 3;
const HH = 4;
const SUMS = 5;

/** Measures it from pixels of one row too far apart to be neighbours, by least squares on their products; near the walls and
 *  far from them apart, as offsets were taken off on the far ones. @see raiseRough for walls that run along the rows. */
export function measureRows(
  grid: Grid,
  e: Float64Array,
  across: Float32Array,
  local: Local,
  nearWallNm: number,
  inflation: number,
): RowNoise {
  const { distanceNm, trusted, rows, cols } = grid;
  const h = local.chord.height;
  const sums = new Float64Array(rows * 2 * SUMS);
  const arm = new Float64Array(rows * cols);
  const lift = new Float64Array(rows * cols);
  for (let p = 0; p < arm.length; p++) {
    if (trusted[p] === 0) continue;
    const sd = local.sd(distanceNm[p]);
    arm[p] = local.along(distanceNm[p]) / sd;
    lift[p] = h / sd;
    const s = (Math.floor(p / cols) * 2 + (Math.abs(distanceNm[p]) > nearWallNm ? 1 : 0)) * SUMS;
    sums[s + P] += arm[p] * e[p];
    sums[s + Q] += lift[p] * e[p];
    sums[s + ZZ] += arm[p] * arm[p];
    sums[s + ZH] += arm[p] * lift[p];
    sums[s + HH] += lift[p] * lift[p];
  }
  const product = (a: number, b: number): number => sums[a + P] * sums[b + P] + sums[a + Q] * sums[b + Q];
  const weight = (a: number, b: number): number =>
    sums[a + ZZ] * sums[b + ZZ] + 2 * sums[a + ZH] * sums[b + ZH] + sums[a + HH] * sums[b + HH];
  const apart = new Float64Array(ROW_LAG + 1);
  const same = new Float64Array(4);
  for (let lag = 0; lag <= ROW_LAG; lag++) {
    const found = new Float64Array(4);
    const weights = new Float64Array(4);
    for (let i = 0; i + lag < rows; i++) {
      for (let g = 0; g < 4; g++) {
        const a = (i * 2 + (g >> 1)) * SUMS;
        const b = ((i + lag) * 2 + (g & 1)) * SUMS;
        found[g] += product(a, b);
        weights[g] += weight(a, b);
      }
    }
    if (lag <= NEAR_LAG) leaveNeighbours(found, weights, lag, grid, e, arm, lift, nearWallNm);
    if (lag === 0) {
      for (let g = 0; g < 4; g++) same[g] = weights[g] > 0 ? shrunk(found[g] / weights[g], 1 / weights[g]) : 0;
    } else if (weights[0] > 0 && found[0] > 2 * Math.sqrt(weights[0])) apart[lag] = found[0] / weights[0];
  }
  raiseRough(same, roughness(grid, across, local, nearWallNm, inflation));

  return { same, apart, common: commonProducts(grid, e) };
}

/** Mean product of the residuals of pixels 0 … NEAR_LAG rows apart, more than NEAR_LAG columns apart, as they are. */
function commonProducts({ trusted, rows, cols }: Grid, e: Float64Array): Float64Array {
  const out = new Float64Array(NEAR_LAG + 1);
  // Running sums along each row, so that the pixels beyond the neighbours need no loop.
  const sum = new Float64Array(rows * (cols + 1));
  const many = new Float64Array(rows * (cols + 1));
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const at = i * (cols + 1) + j;
      sum[at + 1] = sum[at] + e[i * cols + j];
      many[at + 1] = many[at] + trusted[i * cols + j];
    }
  }
  for (let lag = 0; lag <= NEAR_LAG; lag++) {
    let s = 0;
    let m = 0;
    for (let i = 0; i + lag < rows; i++) {
      const line = (i + lag) * (cols + 1);
      for (let j = 0; j < cols; j++) {
        if (trusted[i * cols + j] === 0) continue;
        const from = line + Math.max(0, j - NEAR_LAG);
        const to = line + Math.min(cols, j + NEAR_LAG + 1);
        s += e[i * cols + j] * (sum[line + cols] - sum[to] + sum[from] - sum[line]);
        m += many[line + cols] - many[to] + many[from] - many[line];
      }
    }
    out[lag] = m > 0 ? s / m : 0;
  }
  return out;
}

/** Takes pairs of neighbours out of the sums: their own correlation is no offset of a row. */
function leaveNeighbours(
  found: Float64Array,
  weights: Float64Array,
  lag: number,
  { distanceNm, trusted, rows, cols }: Grid,
  e: Float64Array,
  arm: Float64Array,
  lift: Float64Array,
  nearWallNm: number,
): void {
  for (let i = 0; i + lag < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      if (trusted[p] === 0) continue;
      const far = Math.abs(distanceNm[p]) > nearWallNm ? 2 : 0;
      for (let k = Math.max(0, j - NEAR_LAG); k <= Math.min(cols - 1, j + NEAR_LAG); k++) {
        const q = (i + lag) * cols + k;
        if (trusted[q] === 0) continue;
        const g = far + (Math.abs(distanceNm[q]) > nearWallNm ? 1 : 0);
        const a = arm[p] * arm[q] + lift[p] * lift[q];
        found[g] -= a * e[p] * e[q];
        weights[g] -= a * a;
      }
    }
  }
}

/** Shrunk by what chance alone would give (positive-part James & Stein). */
function shrunk(c: number, variance: number): number {
  return c === 0 ? 0 : c * Math.max(0, 1 - variance / (c * c));
}

/** Weights of a third difference: what is smooth over four rows, a fringe along them too, has little of it. */
const THIRD = [1, -3, 3, -1] as const;
/** Sum of their squared autocorrelations in white noise: so many fewer of them are independent. */
const THIRD_REPEAT = 1 + 2 * (0.75 ** 2 + 0.3 ** 2 + 0.05 ** 2);
const THIRD_SQUARES = 20;

/** Where a wall runs along the rows, rows and distances are one and the same, and offsets of rows leave with the mean profile. They are
 *  told from a fringe by being rough: the variance of one row's phase from third differences of the rows' mean phase, with one
 *  standard deviation of that estimate on top, as few rows tell it badly and too small a value calls rows fringes. Near the walls, far from them, and all. */
function roughness(
  { distanceNm, trusted, rows, cols }: Grid,
  across: Float32Array,
  local: Local,
  nearWallNm: number,
  inflation: number,
): readonly number[] {
  return ["near", "far", "all"].map((which) => {
    const sum = new Float64Array(rows);
    const weight = new Float64Array(rows);
    for (let p = 0; p < across.length; p++) {
      if (trusted[p] === 0) continue;
      if (which !== "all" && (which === "near") !== Math.abs(distanceNm[p]) <= nearWallNm) continue;
      const variance = local.sd(distanceNm[p]) ** 2;
      const along = local.along(distanceNm[p]);
      sum[Math.floor(p / cols)] += (along * across[p]) / variance;
      weight[Math.floor(p / cols)] += (along * along) / variance;
    }
    let excess = 0;
    let weights = 0;
    let pixels = 0;
    let squares = 0;
    for (let i = 0; i + 3 < rows; i++) {
      let difference = 0;
      let expected = 0;
      for (let k = 0; k < 4; k++) {
        difference += (THIRD[k] * sum[i + k]) / weight[i + k];
        expected += (THIRD[k] ** 2 * inflation) / weight[i + k];
      }
      if (!Number.isFinite(difference)) continue;
      const w = 1 / expected ** 2;
      excess += (w * (difference ** 2 - expected)) / THIRD_SQUARES;
      pixels += (w * expected) / THIRD_SQUARES;
      weights += w;
      squares += w * w;
    }
    if (weights === 0) return 0;
    const found = Math.max(0, excess / weights);
    return found + (found + pixels / weights) * Math.sqrt((2 * THIRD_REPEAT * squares) / weights ** 2);
  });
}

/** Raises the covariances to the roughness, and bounds them to what rows can have: below 0, where offsets were taken off with the
 *  pixels' own noise, is left out (the test is the more careful for it), and near and far share no more than each has. */
function raiseRough(same: Float64Array, [near, far, all]: readonly number[]): void {
  same[0] = Math.max(0, same[0], near, all);
  same[3] = Math.max(0, same[3], far, all);
  const most = Math.sqrt(same[0] * same[3]);
  const both = Math.max(same[1], Math.min(all, most));
  same[1] = Math.max(-most, Math.min(most, both));
  same[2] = same[1];
}
