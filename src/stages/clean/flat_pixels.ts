import { median, medianInPlace } from "../../numerics/quantile.js";
import { type NoiseByLevel, sdAt } from "./noise.js";

/** Half windows compared: rows above and below, columns to either side. The small one sees sharp walls, the large one wide ones. */
const SCALES = [
  { rows: 3, cols: 3 },
  { rows: 8, cols: 7 },
] as const;
const SIGMAS = 3.5;
const MEDIAN_COLUMNS = 192;
/** The large window is given up where it leaves less than this share of the pixels. */
const LEAST_SHARE = 0.25;
/** A step that all pixels of a row share is the rows' own, up to this many standard deviations of their scatter. */
const ROW_SIGMAS = 3;

/** Pixels with no state boundary above or below them: the mean of the logarithm of the amplitude over a box of rows above equals
 *  that below within the noise. Differences from row to row over these pixels are offsets of the rows and not domains. A
 *  boundary that runs along the columns does not matter to such differences and is not excluded. A step that a whole row shares is no
 *  boundary where the scatter of the rows explains it.
 *  @param logAmplitude row-major [rows, cols], NaN = not measured
 *  @param rowSd scatter of the rows' logarithmic gains, as it was before they were aligned
 *  @returns 1 = flat, 0 = not, or not to be told */
export function flatPixels(
  logAmplitude: Float32Array,
  amplitude: Float32Array,
  noise: NoiseByLevel,
  rows: number,
  cols: number,
  rowSd: number,
): Uint8Array {
  const sums = integral(logAmplitude, rows, cols);
  const small = flatAtScale(sums, amplitude, noise, rows, cols, SCALES[0], rowSd);
  const large = flatAtScale(sums, amplitude, noise, rows, cols, SCALES[1], rowSd);
  let both = 0;
  for (let p = 0; p < large.length; p++) if ((large[p] &= small[p]) === 1) both++;
  return both >= LEAST_SHARE * rows * cols ? large : small;
}

interface Integral {
  readonly sum: Float64Array;
  readonly count: Int32Array;
}

function integral(values: Float32Array, rows: number, cols: number): Integral {
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
  return { sum, count };
}

function flatAtScale(
  { sum, count }: Integral,
  amplitude: Float32Array,
  noise: NoiseByLevel,
  rows: number,
  cols: number,
  scale: { readonly rows: number; readonly cols: number },
  rowSd: number,
): Uint8Array {
  const width = cols + 1;
  const step = new Float32Array(rows * cols).fill(Number.NaN);
  const difference = new Float64Array(cols);
  const sds = new Float64Array(cols);
  const scratch = new Float64Array(cols);
  const mostShared = ROW_SIGMAS * rowSd * Math.sqrt(2 / scale.rows);
  const sample: number[] = [];
  // nearly all boxes are whole
  let boxes = { up: 0, down: 0, sd: 0 };
  // a row's median from so many columns will do
  const every = Math.ceil(cols / MEDIAN_COLUMNS);
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
      const l = Math.max(0, j - scale.cols);
      const r = Math.min(cols, j + scale.cols + 1);
      const nUp = count[upper + r] - count[upper + l] - count[top + r] + count[top + l];
      const nDown = count[bottom + r] - count[bottom + l] - count[lower + r] + count[lower + l];
      if (Number.isNaN(amplitude[p]) || nUp + nDown < 3) continue;
      if (nUp < 3 || nDown < 3) {
        // beside rows that were not measured one side is silent: the pixel is not refused for that
        step[p] = 0;
        continue;
      }
      const up = sum[upper + r] - sum[upper + l] - sum[top + r] + sum[top + l];
      const down = sum[bottom + r] - sum[bottom + l] - sum[lower + r] + sum[lower + l];
      if (nUp !== boxes.up || nDown !== boxes.down)
        boxes = { up: nUp, down: nDown, sd: Math.sqrt(1 / nUp + 1 / nDown) };
      sds[j] = sdAt(noise, amplitude[p]) * boxes.sd;
      difference[j] = down / nDown - up / nUp;
      if (j % every === 0) scratch[told++] = difference[j];
    }
    const shared = told === 0 ? 0 : medianInPlace(scratch, told);
    const rowStep = Math.max(-mostShared, Math.min(mostShared, shared));
    for (let j = 0; j < cols; j++) {
      if (Number.isNaN(difference[j])) continue;
      const p = i * cols + j;
      step[p] = sds[j] > 0 ? (difference[j] - rowStep) / sds[j] : 0;
      if (p % 11 === 0) sample.push(Math.abs(step[p]));
    }
  }
  const flat = new Uint8Array(rows * cols);
  if (sample.length === 0) return flat;
  // texture or noise that hangs together makes all steps larger; twice the white noise is the most that is believed
  const spread = Math.min(2, Math.max(1, 1.4826 * median(Float64Array.from(sample))));
  for (let p = 0; p < flat.length; p++) if (Math.abs(step[p]) <= SIGMAS * spread) flat[p] = 1;
  return flat;
}
