import { medianInPlace, wrapAngle } from "../../numerics/quantile.js";
import { type NoiseByLevel, sdAt, shortWay } from "./noise.js";

/** Rows further apart than this (unmeasured ones between) are not compared. */
const LONGEST_GAP = 16;
/** Bisquare constant: wide, so that nearly all pixels of one state keep a weight near 1 (see `v` below). */
const BISQUARE = 6;
const ITERATIONS = 3;
/** The start of a bisquare mean and its scale are told from this many pixels of a row. */
const START_PIXELS = 192;

/** Differences from one measured row to the next. Index k ≥ 1 is the link from `rows[k − 1]` to `rows[k]`; index 0 is empty. */
export interface RowLinks {
  /** Indices of the rows that enter, in order. */
  readonly rows: Int32Array;
  /** Offset of row k over row k − 1; NaN where they could not be compared. */
  readonly difference: Float64Array;
  /** Variance that this link adds to the chain: what does not cancel against the link before. */
  readonly chainVariance: Float64Array;
  /** Variance of a row's mean over the pixels of each link; NaN where they could not be compared. */
  readonly ownVariance: Float64Array;
  /** Its mean: the part of the links' noise that cancels along the chain. */
  readonly rowVariance: number;
}

/** Robust differences of adjacent rows, over pixels of unchanged state.
 *
 *  Each is a bisquare mean of pixel differences, weighted by 1/noise², started from the median. The median alone (or any robust
 *  estimate with few pixels in full weight) makes errors that are independent from link to link, so that their sum walks away;
 *  differences of plain means telescope to the two end rows. With a wide bisquare on pixels known to be of one state nearly all
 *  weights are equal and the errors telescope but for the pixels whose weight changes: that remainder is `chainVariance`.
 *  @param values row-major [rows, cols]; NaN = not measured. Angles in rad where `isAngle`
 *  @param level the amplitude, for the noise at each pixel; null where the noise is one number
 *  @param flat 1 = no state boundary near in the direction of the columns; null = all pixels
 *  Source: median of differences and angle of Σ z_i z*_{i−1} are standard practice; the weights and variances are ours. */
export function linkRows(
  values: Float32Array,
  level: Float32Array | null,
  flat: Uint8Array | null,
  noise: NoiseByLevel,
  rows: number,
  cols: number,
  isAngle: boolean,
  leastPixels: number,
): RowLinks {
  const entering: number[] = [];
  for (let i = 0; i < rows; i++) {
    let n = 0;
    for (let j = 0; j < cols; j++) if (!Number.isNaN(values[i * cols + j])) n++;
    if (n >= leastPixels) entering.push(i);
  }
  const count = entering.length;
  const difference = new Float64Array(count).fill(Number.NaN);
  const chainVariance = new Float64Array(count).fill(Number.NaN);
  const ownVariance = new Float64Array(count).fill(Number.NaN);
  let weight = new Float64Array(cols);
  let before = new Float64Array(cols);
  let hasBefore = false;
  const e = new Float64Array(cols);
  const scratch = new Float64Array(cols);
  const inverseVariance = new Float64Array(cols);
  const column = new Int32Array(cols);
  let rowVarianceSum = 0;
  let links = 0;
  const leastSd = 1e-9 + 0.05 * noise.sd;
  const variance = (at: number): number => Math.max(level === null ? noise.sd : sdAt(noise, at), leastSd) ** 2;
  for (let k = 1; k < count; k++) {
    const up = entering[k - 1] * cols;
    const down = entering[k] * cols;
    let n = 0;
    if (entering[k] - entering[k - 1] <= LONGEST_GAP) {
      for (let j = 0; j < cols; j++) {
        const step = values[down + j] - values[up + j];
        if (Number.isNaN(step) || (flat !== null && (flat[up + j] & flat[down + j]) === 0)) continue;
        inverseVariance[n] = 1 / (level === null ? variance(0) : variance(0.5 * (level[up + j] + level[down + j])));
        e[n] = isAngle ? shortWay(step) : step;
        column[n++] = j;
      }
    }
    if (n < leastPixels) {
      hasBefore = false;
      continue;
    }
    const every = Math.ceil(n / START_PIXELS);
    let turn = 0;
    if (isAngle) {
      let c = 0;
      let s = 0;
      for (let m = 0; m < n; m += every) {
        c += inverseVariance[m] * Math.cos(e[m]);
        s += inverseVariance[m] * Math.sin(e[m]);
      }
      turn = Math.atan2(s, c);
      for (let m = 0; m < n; m++) e[m] = shortWay(e[m] - turn);
    }
    let some = 0;
    for (let m = 0; m < n; m += every) scratch[some++] = e[m];
    let d = medianInPlace(scratch, some);
    // relief and texture make differences wider than the noise; twice the noise is the most that is believed
    some = 0;
    for (let m = 0; m < n; m += every) scratch[some++] = Math.abs(e[m] - d) * Math.sqrt(inverseVariance[m] / 2);
    const spread = medianInPlace(scratch, some);
    const scale = level === null ? Math.max(1, 1.4826 * spread) : Math.min(2, Math.max(1, 1.4826 * spread));
    const perVariance = 1 / (2 * BISQUARE * BISQUARE * scale * scale);
    let total = 0;
    for (let iteration = 0; iteration < ITERATIONS; iteration++) {
      let sum = 0;
      total = 0;
      for (let m = 0; m < n; m++) {
        const r = e[m] - d;
        const one = 1 - r * r * inverseVariance[m] * perVariance;
        const w = one > 0 ? one * one * inverseVariance[m] : 0;
        scratch[m] = w;
        total += w;
        sum += w * r;
      }
      if (!(total > 0)) break;
      d += sum / total;
    }
    if (!(total > 0)) {
      hasBefore = false;
      continue;
    }
    difference[k] = isAngle ? wrapAngle(d + turn) : d;
    weight.fill(0);
    for (let m = 0; m < n; m++) weight[column[m]] = scratch[m];
    let chain = 0;
    let own = 0;
    for (let j = 0; j < cols; j++) {
      const w = weight[j] / total;
      weight[j] = w;
      const b = hasBefore ? before[j] : w;
      if (w === 0 && b === 0) continue;
      const v = level === null ? variance(0) : variance(level[up + j]);
      chain += v * (w - b) * (w - b);
      own += v * w * w;
    }
    chainVariance[k] = chain;
    ownVariance[k] = own;
    rowVarianceSum += own;
    links++;
    [weight, before] = [before, weight];
    hasBefore = true;
  }
  return {
    rows: Int32Array.from(entering),
    difference,
    chainVariance,
    ownVariance,
    rowVariance: links > 0 ? rowVarianceSum / links : 0,
  };
}
