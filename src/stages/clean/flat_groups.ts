import { medianInPlace } from "../../numerics/quantile.js";
import type { ColumnGroups } from "./column_groups.js";

/** Half windows compared, in pixels: rows above and below, columns to either side. The small one sees sharp walls, the large one wide ones. */
const SCALES = [
  { rows: 3, cols: 3 },
  { rows: 8, cols: 7 },
] as const;
/** Pixels in one of the larger boxes: what moves its mean by little is little. */
export const BOX_PIXELS = 120;
const SIGMAS = 3.5;
/** The large window is given up where it leaves less than this share of the pixels. */
const LEAST_SHARE = 0.25;
/** A step that all pixels of a row share is the rows' own, up to this many standard deviations of their scatter. */
const ROW_SIGMAS = 3;
/** Steps that their usual size is told from, and those that the step shared by a row is. */
const MOST_STEPS = 10_000;
const MOST_IN_ROW = 64;

/** Groups of pixels with no state boundary above or below them: the mean of the logarithm of the amplitude over a box of rows above equals
 *  that below within the noise. Differences from row to row over these groups are offsets of the rows and not domains. A
 *  boundary that runs along the columns does not matter to such differences and is not excluded. A step that a whole row shares is no
 *  boundary where the scatter of the rows explains it.
 *  @param log logarithm of the amplitude
 *  @param variance of the noise in it, a group
 *  @param rowSd scatter of the rows' logarithmic gains, as it was before they were aligned
 *  @returns 1 = flat, 0 = not, or not to be told */
export function flatGroups(log: ColumnGroups, variance: Float32Array, rowSd: number): Uint8Array {
  const sums = integral(log);
  const small = flatAtScale(sums, log, variance, SCALES[0], rowSd);
  const large = flatAtScale(sums, log, variance, SCALES[1], rowSd);
  let both = 0;
  for (let p = 0; p < large.length; p++) both += large[p] &= small[p];
  return both >= LEAST_SHARE * large.length ? large : small;
}

interface Integral {
  readonly sum: Float64Array;
  readonly count: Int32Array;
}

function integral({ values, rows, cols }: ColumnGroups): Integral {
  const width = cols + 1;
  const sum = new Float64Array((rows + 1) * width);
  const count = new Int32Array((rows + 1) * width);
  for (let i = 0; i < rows; i++) {
    let s = 0;
    let c = 0;
    for (let p = i * cols, q = (i + 1) * width + 1; p < (i + 1) * cols; p++, q++) {
      const v = values[p];
      if (!Number.isNaN(v)) {
        s += v;
        c++;
      }
      sum[q] = sum[q - width] + s;
      count[q] = count[q - width] + c;
    }
  }
  return { sum, count };
}

function flatAtScale(
  { sum, count }: Integral,
  { values, rows, cols, each }: ColumnGroups,
  variance: Float32Array,
  scale: { readonly rows: number; readonly cols: number },
  rowSd: number,
): Uint8Array {
  const width = cols + 1;
  const half = Math.floor(scale.cols / each);
  const step = new Float32Array(rows * cols).fill(Number.NaN);
  const difference = new Float64Array(cols);
  const perVariance = new Float64Array(cols);
  const scratch = new Float64Array(cols);
  const mostShared = ROW_SIGMAS * rowSd * Math.sqrt(2 / scale.rows);
  const every = Math.ceil(cols / MOST_IN_ROW);
  const stride = Math.ceil((rows * cols) / MOST_STEPS);
  const sample = new Float64Array(Math.ceil((rows * cols) / stride));
  let sampled = 0;
  // nearly all boxes are whole
  let boxes = { up: 0, down: 0, share: 0 };
  for (let i = 0; i < rows; i++) {
    // at the frame's edge the window on that side shrinks, down to the pixel's own row
    const top = Math.max(0, i - scale.rows) * width;
    const upper = Math.max(1, i) * width;
    const lower = Math.min(rows - 1, i + 1) * width;
    const bottom = Math.min(rows, i + 1 + scale.rows) * width;
    let told = 0;
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      difference[j] = Number.NaN;
      if (Number.isNaN(values[p])) continue;
      const l = j > half ? j - half : 0;
      const r = j + half + 1 < cols ? j + half + 1 : cols;
      const up = count[upper + r] - count[upper + l] - count[top + r] + count[top + l];
      const down = count[bottom + r] - count[bottom + l] - count[lower + r] + count[lower + l];
      if (each * (up + down) < 3) continue;
      if (each * up < 3 || each * down < 3) {
        // beside rows that were not measured one side is silent: the group is not refused for that
        step[p] = 0;
        continue;
      }
      if (up !== boxes.up || down !== boxes.down) boxes = { up, down, share: 1 / up + 1 / down };
      perVariance[j] = variance[p] > 0 ? 1 / (variance[p] * boxes.share) : 0;
      difference[j] =
        (sum[bottom + r] - sum[bottom + l] - sum[lower + r] + sum[lower + l]) / down -
        (sum[upper + r] - sum[upper + l] - sum[top + r] + sum[top + l]) / up;
      if (j % every === 0) scratch[told++] = difference[j];
    }
    const shared = told === 0 ? 0 : medianInPlace(scratch, told);
    const rowStep = Math.max(-mostShared, Math.min(mostShared, shared));
    for (let j = 0, p = i * cols; j < cols; j++, p++) {
      const d = difference[j] - rowStep;
      if (Number.isNaN(d)) continue;
      // squared, in variances
      step[p] = d * d * perVariance[j];
      if (p % stride === 0) sample[sampled++] = step[p];
    }
  }
  const flat = new Uint8Array(rows * cols);
  if (sampled === 0) return flat;
  // texture or noise that hangs together makes all steps larger; twice the white noise is the most that is believed
  const spread = Math.min(2, Math.max(1, 1.4826 * Math.sqrt(medianInPlace(sample, sampled))));
  const most = (SIGMAS * spread) ** 2;
  for (let p = 0; p < flat.length; p++) if (step[p] <= most) flat[p] = 1;
  return flat;
}
