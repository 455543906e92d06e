import type { Chord } from "./chord.js";

/** Lags up to which neighbouring pixels' noise is taken to be correlated. */
export const NEAR_LAG = 3;
/** Neighbouring rows whose offsets may be related. */
export const ROW_LAG = 6;
export const CLASSES = 4;

/** Noise across the chord as measured in one frame, in units of the pixel noise of the state (`sd`). */
export interface NoiseModel {
  /** Correlation of pixels `dy` rows and `dx` columns apart at [dy][dx + NEAR_LAG]; 1 at [0][NEAR_LAG]. */
  readonly near: readonly Float64Array[];
  /** Covariance of two distant pixels of one row by their classes (see `classOf`), CLASSES × CLASSES. */
  readonly row: Float64Array;
  /** Covariance of distant pixels 1 … ROW_LAG rows apart, at index 1 …. */
  readonly rowLag: Float64Array;
  /** Standard deviation of a pixel's noise per state, in signal units. */
  readonly sdInsulating: number;
  readonly sdMetallic: number;
  /** Distance that divides the classes, nm. */
  readonly nearWallNm: number;
}

/** Rows' offsets were taken off from pixels far from walls, so what is left of them is not the same there as near the walls, nor
 *  the same for the two states: 0 insulating near, 1 insulating far, 2 metallic near, 3 metallic far. */
export function classOf(distanceNm: number, nearWallNm: number): number {
  return distanceNm < 0 ? (distanceNm < -nearWallNm ? 1 : 0) : distanceNm > nearWallNm ? 3 : 2;
}

/** Measures the noise from what is left of the component across the chord after its mean at each distance from the walls is taken
 *  off: pixel noise, its correlation between neighbours, and what is left of the offsets of whole rows (pixels of one row too far apart to
 *  be neighbours). A fringe goes with its mean profile; only where it is strong and irregular does it add to the noise. */
export function measureNoise(
  across: Float32Array,
  distanceNm: Float32Array,
  trusted: Uint8Array,
  rows: number,
  cols: number,
  chord: Chord,
  nearWallNm: number,
  binNm: number,
  reachNm: number,
): NoiseModel {
  const n = rows * cols;
  const half = Math.ceil(reachNm / binNm);
  const sum = new Float64Array(2 * half);
  const count = new Int32Array(2 * half);
  const binOf = (d: number): number => Math.max(0, Math.min(2 * half - 1, Math.floor(d / binNm) + half));
  for (let p = 0; p < n; p++) {
    if (trusted[p] === 0) continue;
    const b = binOf(distanceNm[p]);
    sum[b] += across[p];
    count[b]++;
  }
  const e = new Float64Array(n);
  const square = [0, 0];
  const many = [0, 0];
  const clip = 5;
  for (let p = 0; p < n; p++) {
    if (trusted[p] === 0) continue;
    const b = binOf(distanceNm[p]);
    // Each bin's mean has eaten its share of the noise.
    const scale = count[b] > 1 ? Math.sqrt(count[b] / (count[b] - 1)) : 0;
    const metal = distanceNm[p] > 0 ? 1 : 0;
    const sd = metal === 1 ? chord.noiseMetallic : chord.noiseInsulating;
    const v = ((across[p] - sum[b] / count[b]) * scale) / sd;
    e[p] = Math.max(-clip, Math.min(clip, v));
    if (Math.abs(distanceNm[p]) > nearWallNm) {
      square[metal] += e[p] * e[p];
      many[metal]++;
    }
  }
  // The states' noise was measured along with the levels; where it is larger here, believe what is seen.
  const excess = [0, 1].map((k) => (many[k] > 200 ? Math.max(0.5, Math.sqrt(square[k] / many[k])) : 1));
  for (let p = 0; p < n; p++) if (trusted[p] === 1) e[p] /= excess[distanceNm[p] > 0 ? 1 : 0];

  const products = Array.from({ length: NEAR_LAG + 1 }, () => new Float64Array(2 * NEAR_LAG + 1));
  const pairs = Array.from({ length: NEAR_LAG + 1 }, () => new Float64Array(2 * NEAR_LAG + 1));
  for (let i = 0; i < rows; i++) {
    for (let dy = 0; dy <= NEAR_LAG && i + dy < rows; dy++) {
      for (let dx = -NEAR_LAG; dx <= NEAR_LAG; dx++) {
        const from = Math.max(0, -dx);
        const to = Math.min(cols, cols - dx);
        const q = (i + dy) * cols + dx;
        let s = 0;
        let m = 0;
        for (let j = from; j < to; j++) {
          const both = trusted[i * cols + j] & trusted[q + j];
          m += both;
          s += e[i * cols + j] * e[q + j];
        }
        products[dy][dx + NEAR_LAG] += s;
        pairs[dy][dx + NEAR_LAG] += m;
      }
    }
  }
  const { row, rowLag, common } = measureRows(e, distanceNm, trusted, rows, cols, nearWallNm);
  const variance = products[0][NEAR_LAG] / Math.max(1, pairs[0][NEAR_LAG]);
  // What a whole row shares is counted as such.
  const beyondRow = (dy: number, dx: number): number => {
    const m = pairs[dy][dx + NEAR_LAG];
    if (m === 0) return 0;
    const c = (products[dy][dx + NEAR_LAG] / m - (dy === 0 ? common : rowLag[dy])) / variance;
    // Below what the number of pairs can tell it is left out.
    return Math.abs(c) > 3 / Math.sqrt(m) ? c : 0;
  };
  // A filter along the rows and one across them: the correlation is the product of those along the axes, which many pairs tell well.
  const near = products.map((line, dy) =>
    line.map((_, k) => (dy === 0 ? 1 : beyondRow(dy, 0)) * (k === NEAR_LAG ? 1 : beyondRow(0, Math.abs(k - NEAR_LAG)))),
  );
  return {
    near,
    row,
    rowLag,
    sdInsulating: chord.noiseInsulating * excess[0],
    sdMetallic: chord.noiseMetallic * excess[1],
    nearWallNm,
  };
}

/** Covariances of distant pixels of one row, by class; and how they go on over neighbouring rows. */
function measureRows(
  e: Float64Array,
  distanceNm: Float32Array,
  trusted: Uint8Array,
  rows: number,
  cols: number,
  nearWallNm: number,
): { row: Float64Array; rowLag: Float64Array; common: number } {
  const product = new Float64Array(CLASSES * CLASSES);
  const pair = new Float64Array(CLASSES * CLASSES);
  const sums = new Float64Array(rows * CLASSES);
  const counts = new Float64Array(rows * CLASSES);
  const classes = new Uint8Array(cols);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      classes[j] = trusted[p] === 0 ? CLASSES : classOf(distanceNm[p], nearWallNm);
      if (classes[j] === CLASSES) continue;
      sums[i * CLASSES + classes[j]] += e[p];
      counts[i * CLASSES + classes[j]]++;
    }
    // All pairs of the row, less those of near neighbours.
    for (let a = 0; a < CLASSES; a++) {
      for (let b = 0; b < CLASSES; b++) {
        product[a * CLASSES + b] += sums[i * CLASSES + a] * sums[i * CLASSES + b];
        pair[a * CLASSES + b] += counts[i * CLASSES + a] * counts[i * CLASSES + b];
      }
    }
    for (let j = 0; j < cols; j++) {
      if (classes[j] === CLASSES) continue;
      for (let k = Math.max(0, j - NEAR_LAG); k <= Math.min(cols - 1, j + NEAR_LAG); k++) {
        if (classes[k] === CLASSES) continue;
        product[classes[j] * CLASSES + classes[k]] -= e[i * cols + j] * e[i * cols + k];
        pair[classes[j] * CLASSES + classes[k]]--;
      }
    }
  }
  const row = new Float64Array(CLASSES * CLASSES);
  let common = 0;
  let all = 0;
  for (let k = 0; k < row.length; k++) {
    common += product[k];
    all += pair[k];
    if (pair[k] <= 0) continue;
    // Shrunk by what chance alone would give with so few pairs (positive-part James & Stein).
    const c = product[k] / pair[k];
    row[k] = c * Math.max(0, 1 - 1 / (pair[k] * c * c));
  }
  common = all > 0 ? common / all : 0;
  const rowLag = new Float64Array(ROW_LAG + 1);
  for (let lag = 1; lag <= ROW_LAG; lag++) {
    let s = 0;
    let m = 0;
    for (let i = 0; i + lag < rows; i++) {
      const a = i * CLASSES;
      const b = (i + lag) * CLASSES;
      // Near the walls only: nothing was taken off there.
      s += (sums[a] + sums[a + 2]) * (sums[b] + sums[b + 2]);
      m += (counts[a] + counts[a + 2]) * (counts[b] + counts[b + 2]);
      if (lag > NEAR_LAG) continue;
      for (let j = 0; j < cols; j++) {
        const p = i * cols + j;
        if (trusted[p] === 0 || Math.abs(distanceNm[p]) > nearWallNm) continue;
        for (let k = Math.max(0, j - NEAR_LAG); k <= Math.min(cols - 1, j + NEAR_LAG); k++) {
          const q = (i + lag) * cols + k;
          if (trusted[q] === 0 || Math.abs(distanceNm[q]) > nearWallNm) continue;
          s -= e[p] * e[q];
          m--;
        }
      }
    }
    rowLag[lag] = m > 0 && s > 2 * Math.sqrt(m) ? s / m : 0;
  }
  return { row, rowLag, common };
}
