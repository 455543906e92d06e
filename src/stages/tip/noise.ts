import { SD_PER_MAD, medianInPlace } from "../../numerics/quantile.js";

/** Pixels looked at along each axis. */
const MOST_PIXELS = 12_000;
const LEAST_PIXELS = 60;
const LAGS = 4;

/** Noise of one image, measured in its flat parts. */
export interface FrameNoise {
  readonly sd: number;
  /** Correlation of the noise at 1, 2 and 3 pixels along x and along y; 0 where it does not stand out from 0. */
  readonly correlationX: readonly number[];
  readonly correlationY: readonly number[];
}

/** Pixel noise and its correlation from second differences v(−k) − 2 v(0) + v(k), k = 1 … 4 pixels, along both axes, at the pixels
 *  with the smallest first differences: to symmetric noise the two are uncorrelated, so that choosing by one does not bias the other,
 *  and edges and particles drop out. Fine relief of the sample that no fit models counts as noise. Assumes noise uncorrelated at 4
 *  pixels.
 *  @param scale each value is multiplied by it before (amplitude, for angles whose noise goes as 1/amplitude), or null
 *  @returns sd 0 where fewer than 60 pixels can be compared */
export function measureFrameNoise(
  values: Float32Array,
  scale: Float32Array | null,
  isAngle: boolean,
  rows: number,
  cols: number,
): FrameNoise {
  const x = alongAxis(values, scale, isAngle, rows, cols, 1, cols);
  const y = alongAxis(values, scale, isAngle, rows, cols, cols, 1);
  if (x === null && y === null) return { sd: 0, correlationX: [0, 0, 0], correlationY: [0, 0, 0] };
  const parts = [x, y].filter((p) => p !== null);
  // Row offsets that were left over show only between rows: the larger of the two is what a cut across rows meets.
  const sd = Math.max(...parts.map((p) => p.sd));
  return { sd, correlationX: x?.correlation ?? [0, 0, 0], correlationY: y?.correlation ?? [0, 0, 0] };
}

function alongAxis(
  values: Float32Array,
  scale: Float32Array | null,
  isAngle: boolean,
  rows: number,
  cols: number,
  step: number,
  across: number,
): { sd: number; correlation: number[] } | null {
  const limit = step === 1 ? cols : rows;
  const position = (p: number): number => (step === 1 ? p % cols : Math.floor(p / cols));
  const other = (p: number): number => (step === 1 ? Math.floor(p / cols) : p % cols);
  const otherLimit = step === 1 ? rows : cols;
  const diff = isAngle
    ? (a: number, b: number): number => {
        const d = a - b;
        return d - 2 * Math.PI * Math.round(d / (2 * Math.PI));
      }
    : (a: number, b: number): number => a - b;
  // A stride that shares no factor with the row length visits all columns.
  let stride = Math.max(1, Math.floor((rows * cols) / MOST_PIXELS));
  while (stride > 1 && cols % stride === 0) stride++;
  const at: number[] = [];
  const slopes: number[] = [];
  for (let p = 0; p < rows * cols; p += stride) {
    const q = position(p);
    const o = other(p);
    if (q < LAGS || q >= limit - LAGS || o < LAGS || o >= otherLimit - LAGS) continue;
    let along = 0;
    let sideways = 0;
    for (let k = 1; k <= LAGS; k++) {
      along += diff(values[p + k * step], values[p - k * step]);
      sideways += diff(values[p + k * across], values[p - k * across]);
    }
    const slope = Math.max(Math.abs(along), Math.abs(sideways)) * (scale === null ? 1 : scale[p]);
    let sum = slope;
    for (let k = 1; k <= LAGS; k++) sum += values[p + k * step] + values[p - k * step];
    if (Number.isNaN(sum)) continue;
    at.push(p);
    slopes.push(slope);
  }
  if (at.length < 2 * LEAST_PIXELS) return null;
  const middle = medianInPlace(Float64Array.from(slopes));
  const flat = at.filter((_, k) => slopes[k] <= middle);
  const d = new Float64Array(flat.length);
  const variance = new Float64Array(LAGS + 1);
  for (let k = 1; k <= LAGS; k++) {
    for (let m = 0; m < flat.length; m++) {
      const p = flat[m];
      const v = values[p];
      d[m] = (diff(values[p - k * step], v) + diff(values[p + k * step], v)) * (scale === null ? 1 : scale[p]);
    }
    variance[k] = clippedMeanSquare(d);
  }
  // White noise gives 6 s² at every lag; four standard errors of the mean square count as white.
  const error = 4 * Math.sqrt(3.9 / flat.length);
  const white = variance[LAGS] <= variance[1] * (1 + error);
  if (white) {
    const s2 = (variance[1] + variance[2]) / 12;
    return { sd: Math.sqrt(s2), correlation: [0, 0, 0] };
  }
  const s2 = variance[LAGS] / 6;
  const bound = (v: number): number => Math.max(0, Math.min(0.95, v));
  const r3 = bound((6 - variance[3] / s2) / 8);
  const r2 = bound((6 - variance[2] / s2) / 8);
  const r1 = bound((6 + 2 * r2 - variance[1] / s2) / 8);
  return { sd: Math.sqrt(s2), correlation: [r1, r2, r3] };
}

/** Mean square without what lies beyond four robust standard deviations. */
function clippedMeanSquare(d: Float64Array): number {
  const scale = SD_PER_MAD * medianInPlace(d.map(Math.abs));
  let sum = 0;
  let n = 0;
  for (const v of d) {
    if (Math.abs(v) > 4 * scale) continue;
    sum += v * v;
    n++;
  }
  return n === 0 ? 0 : sum / n;
}
