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

/** What each pixel is like, row-major, 0 where it is not trusted. */
export interface PixelArms {
  /** Its residual over its noise. */
  readonly e: Float32Array;
  /** How far a turn of 1 rad moves it across the chord, over its noise. */
  readonly arm: Float32Array;
  /** One over its noise: `height` of the chord times this is how far a change of its gain moves it. */
  readonly inverse: Float32Array;
  /** 1 far from the walls. */
  readonly far: Uint8Array;
}

export function armsOf({ distanceNm, trusted }: Grid, e: Float32Array, local: Local, nearWallNm: number): PixelArms {
  const n = e.length;
  const arm = new Float32Array(n);
  const inverse = new Float32Array(n);
  const far = new Uint8Array(n);
  for (let p = 0; p < n; p++) {
    if (trusted[p] === 0) continue;
    const d = distanceNm[p];
    inverse[p] = 1 / local.sd(d);
    arm[p] = local.along(d) * inverse[p];
    if (Math.abs(d) > nearWallNm) far[p] = 1;
  }
  return { e, arm, inverse, far };
}

/** Measures it from pixels of one row too far apart to be neighbours, by least squares on their products; near the walls and
 *  far from them apart, as offsets were taken off on the far ones. @see raiseRough for walls that run along the rows. */
export function measureRows(grid: Grid, pixels: PixelArms, height: number, inflation: number): RowNoise {
  const { trusted, rows, cols } = grid;
  const { e, arm, inverse, far } = pixels;
  const sums = new Float64Array(rows * 2 * SUMS);
  for (let i = 0, p = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++, p++) {
      if (trusted[p] === 0) continue;
      const s = (i * 2 + far[p]) * SUMS;
      const lift = height * inverse[p];
      sums[s + P] += arm[p] * e[p];
      sums[s + Q] += lift * e[p];
      sums[s + ZZ] += arm[p] * arm[p];
      sums[s + ZH] += arm[p] * lift;
      sums[s + HH] += lift * lift;
    }
  }
  const product = (a: number, b: number): number => sums[a + P] * sums[b + P] + sums[a + Q] * sums[b + Q];
  const weight = (a: number, b: number): number =>
    sums[a + ZZ] * sums[b + ZZ] + 2 * sums[a + ZH] * sums[b + ZH] + sums[a + HH] * sums[b + HH];
  const apart = new Float64Array(ROW_LAG + 1);
  const same = new Float64Array(4);
  const below = neighboursBelow(grid, pixels, height);
  for (let lag = 0; lag <= ROW_LAG; lag++) {
    const found = new Float64Array(4);
    const weights = new Float64Array(4);
    for (let i = 0; i + lag < rows; i++) {
      // Rows apart share what they share near the walls; far from them it was taken off.
      for (let g = 0; g < (lag === 0 ? 4 : 1); g++) {
        const a = (i * 2 + (g >> 1)) * SUMS;
        const b = ((i + lag) * 2 + (g & 1)) * SUMS;
        found[g] += product(a, b);
        weights[g] += weight(a, b);
      }
    }
    if (lag === 0) leaveOwnNeighbours(found, weights, grid, pixels, height);
    else if (lag <= NEAR_LAG) {
      found[0] -= below.found[lag];
      weights[0] -= below.weights[lag];
    }
    if (lag === 0) {
      for (let g = 0; g < 4; g++) same[g] = weights[g] > 0 ? shrunk(found[g] / weights[g], 1 / weights[g]) : 0;
    } else if (weights[0] > 0 && found[0] > 2 * Math.sqrt(weights[0])) apart[lag] = found[0] / weights[0];
  }
  raiseRough(same, roughness(grid, pixels, inflation));

  return { same, apart, common: commonProducts(grid, e) };
}

/** Mean product of the residuals of pixels 0 … NEAR_LAG rows apart, more than NEAR_LAG columns apart, as they are. */
function commonProducts({ trusted, rows, cols }: Grid, e: Float32Array): Float64Array {
  const total = new Float64Array(rows);
  const count = new Float64Array(rows);
  // Sums over the neighbours within the lag of the last few rows, by row modulo their number.
  const held = NEAR_LAG + 1;
  const near = new Float64Array(held * cols);
  const nearMany = new Float64Array(held * cols);
  const product = new Float64Array(held);
  const pairs = new Float64Array(held);
  for (let i = 0; i < rows; i++) {
    const own = i * cols;
    const ring = (i % held) * cols;
    for (let j = 0; j < cols; j++) {
      total[i] += e[own + j];
      count[i] += trusted[own + j];
    }
    slidingSums(e, own, cols, near, ring);
    slidingSums(trusted, own, cols, nearMany, ring);
    for (let lag = 0; lag <= Math.min(i, NEAR_LAG); lag++) {
      const above = own - lag * cols;
      let s = total[i - lag] * total[i];
      let m = count[i - lag] * count[i];
      for (let j = 0; j < cols; j++) {
        s -= e[above + j] * near[ring + j];
        m -= trusted[above + j] * nearMany[ring + j];
      }
      product[lag] += s;
      pairs[lag] += m;
    }
  }
  return product.map((s, lag) => (pairs[lag] > 0 ? s / pairs[lag] : 0));
}

/** Sums of up to 2 · NEAR_LAG + 1 neighbours in a row of `cols` values from `from` on, into `out` from `to` on. */
function slidingSums(v: ArrayLike<number>, from: number, cols: number, out: Float64Array, to: number): void {
  let s = 0;
  for (let k = 0; k < Math.min(cols, NEAR_LAG); k++) s += v[from + k];
  for (let j = 0; j < cols; j++) {
    if (j + NEAR_LAG < cols) s += v[from + j + NEAR_LAG];
    if (j > NEAR_LAG) s -= v[from + j - NEAR_LAG - 1];
    out[to + j] = s;
  }
}

/** Takes pairs of neighbours in one row out of the sums, each pixel with itself too: their own correlation is no offset of a row. */
function leaveOwnNeighbours(
  found: Float64Array,
  weights: Float64Array,
  { rows, cols }: Grid,
  { e, arm, inverse, far }: PixelArms,
  height: number,
): void {
  const height2 = height * height;
  for (let i = 0; i < rows; i++) {
    const end = (i + 1) * cols;
    for (let p = i * cols; p < end; p++) {
      const ap = arm[p];
      const lp = height2 * inverse[p];
      // No trusted pixel: every product with it is 0.
      if (inverse[p] === 0) continue;
      const group = 2 * far[p];
      const own = ap * ap + lp * inverse[p];
      found[group + far[p]] -= own * e[p] * e[p];
      weights[group + far[p]] -= own * own;
      for (let q = p + 1; q <= p + NEAR_LAG && q < end; q++) {
        const a = ap * arm[q] + lp * inverse[q];
        const product = a * e[p] * e[q];
        const square = a * a;
        const g = group + far[q];
        const mirrored = 2 * far[q] + far[p];
        found[g] -= product;
        weights[g] -= square;
        found[mirrored] -= product;
        weights[mirrored] -= square;
      }
    }
  }
}

/** The same for pixels near the walls, 1 … NEAR_LAG rows apart; sums by rows apart. With A = arm · e and L = e/noise the products of a pixel with
 *  its neighbours are A_p ΣA_q + h² L_p ΣL_q, their weights Σ(arm_p arm_q + h² inverse_p inverse_q)²: five sums over neighbours serve all. */
function neighboursBelow(
  { rows, cols }: Grid,
  { e, arm, inverse, far }: PixelArms,
  height: number,
): { found: Float64Array; weights: Float64Array } {
  const found = new Float64Array(NEAR_LAG + 1);
  const weights = new Float64Array(NEAR_LAG + 1);
  const held = NEAR_LAG + 1;
  const PARTS = 5;
  const value = new Float64Array(held * PARTS * cols);
  const near = new Float64Array(PARTS * cols);
  for (let i = 0; i < rows; i++) {
    const ring = (i % held) * PARTS * cols;
    for (let j = 0, p = i * cols; j < cols; j++, p++) {
      const k = far[p] === 1 ? 0 : 1;
      const a = k * arm[p];
      const l = k * height * inverse[p];
      value[ring + j] = a * e[p];
      value[ring + cols + j] = l * e[p];
      value[ring + 2 * cols + j] = a * a;
      value[ring + 3 * cols + j] = Math.SQRT2 * a * l;
      value[ring + 4 * cols + j] = l * l;
    }
    for (let part = 0; part < PARTS; part++) slidingSums(value, ring + part * cols, cols, near, part * cols);
    for (let lag = 1; lag <= Math.min(i, NEAR_LAG); lag++) {
      const above = ((i - lag) % held) * PARTS * cols;
      let f = 0;
      let w = 0;
      for (let j = 0; j < 2 * cols; j++) f += value[above + j] * near[j];
      for (let j = 2 * cols; j < PARTS * cols; j++) w += value[above + j] * near[j];
      found[lag] += f;
      weights[lag] += w;
    }
  }
  return { found, weights };
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
  { across, trusted, rows, cols }: Grid,
  { arm, inverse, far }: PixelArms,
  inflation: number,
): readonly number[] {
  // Near, far and all.
  const sums = [0, 1, 2].map(() => new Float64Array(rows));
  const armsSquared = [0, 1, 2].map(() => new Float64Array(rows));
  for (let i = 0, p = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++, p++) {
      if (trusted[p] === 0) continue;
      sums[far[p]][i] += arm[p] * inverse[p] * across[p];
      armsSquared[far[p]][i] += arm[p] * arm[p];
    }
    sums[2][i] = sums[0][i] + sums[1][i];
    armsSquared[2][i] = armsSquared[0][i] + armsSquared[1][i];
  }
  return sums.map((sum, which) => {
    const weight = armsSquared[which];
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
