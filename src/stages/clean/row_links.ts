import { medianInPlace, wrapAngle } from "../../numerics/quantile.js";
import type { ColumnGroups } from "./column_groups.js";
import { shortWay } from "./noise.js";

/** Rows further apart than this (unmeasured ones between) are not compared. */
const LONGEST_GAP = 16;
/** Bisquare constant: wide, so that nearly all groups of one state keep a weight near 1 (see `v` below). */
const BISQUARE = 6;
/** Newton's steps from the median; the second moves by less than a hundredth of what the first left. */
const STEPS = 2;
/** The start and its scatter are told from this many groups of a row, the turn round which angles are compared from fewer. */
const START_GROUPS = 64;
const TURN_GROUPS = 32;

/** Differences from one measured row to the next. Index k ≥ 1 is the link from `rows[k − 1]` to `rows[k]`; index 0 is empty. */
export interface RowLinks {
  /** Indices of the rows that enter, in order. */
  readonly rows: Int32Array;
  /** Offset of row k over row k − 1; NaN where they could not be compared. */
  readonly difference: Float64Array;
  /** Variance that this link adds to the chain: what does not cancel against the link before. */
  readonly chainVariance: Float64Array;
  /** Variance of a row's mean over what enters each link; NaN where they could not be compared. */
  readonly ownVariance: Float64Array;
  /** Its mean: the part of the links' noise that cancels along the chain. */
  readonly rowVariance: number;
}

/** Robust differences of adjacent rows, over groups of unchanged state.
 *
 *  Each is a bisquare mean of the groups' differences, weighted by 1/noise², from the median by Newton's steps. The median alone (or any robust
 *  estimate with few groups in full weight) makes errors that are independent from link to link, so that their sum walks away;
 *  differences of plain means telescope to the two end rows. With a wide bisquare on groups known to be of one state nearly all
 *  weights are equal and the errors telescope but for the groups whose weight changes: that remainder is `chainVariance`.
 *  @param groups of values; angles in rad where `isAngle`
 *  @param variance of the noise of each group
 *  @param flat 1 = no state boundary near in the direction of the columns; null = all groups
 *  @param leastPixels rows are compared over at least so many pixels
 *  @param mostSpread differences scatter by more than the noise where there is relief or texture: at most so many times is believed
 *  Source: median of differences and angle of Σ z_i z*_{i−1} are standard practice; the weights and variances are ours. */
export function linkRows(
  groups: ColumnGroups,
  variance: Float32Array,
  flat: Uint8Array | null,
  isAngle: boolean,
  leastPixels: number,
  mostSpread: number,
): RowLinks {
  const { values, cols } = groups;
  const least = Math.ceil(leastPixels / groups.each);
  const entering = enteringRows(groups, least);
  const count = entering.length;
  const difference = new Float64Array(count).fill(Number.NaN);
  const chainVariance = new Float64Array(count).fill(Number.NaN);
  const ownVariance = new Float64Array(count).fill(Number.NaN);
  let weight = new Float64Array(cols);
  let before = new Float64Array(cols);
  let hasBefore = false;
  const row = { e: new Float64Array(cols), inverseVariance: new Float64Array(cols), weight: new Float64Array(cols) };
  const { e, inverseVariance } = row;
  const scratch = new Float64Array(cols);
  const column = new Int32Array(cols);
  let rowVarianceSum = 0;
  let links = 0;
  for (let k = 1; k < count; k++) {
    const up = entering[k - 1] * cols;
    const down = entering[k] * cols;
    let n = 0;
    if (entering[k] - entering[k - 1] <= LONGEST_GAP) {
      for (let j = 0; j < cols; j++) {
        const step = values[down + j] - values[up + j];
        if (Number.isNaN(step) || (flat !== null && (flat[up + j] & flat[down + j]) === 0)) continue;
        inverseVariance[n] = 2 / (variance[up + j] + variance[down + j]);
        e[n] = isAngle ? shortWay(step) : step;
        column[n++] = j;
      }
    }
    hasBefore &&= n >= least;
    if (n < least) continue;
    const turn = isAngle ? commonTurn(e, inverseVariance, n) : 0;
    if (turn !== 0) for (let m = 0; m < n; m++) e[m] = shortWay(e[m] - turn);
    const every = Math.ceil(n / START_GROUPS);
    let some = 0;
    for (let m = 0; m < n; m += every) scratch[some++] = e[m];
    const start = medianInPlace(scratch, some);
    some = 0;
    for (let m = 0; m < n; m += every) scratch[some++] = (e[m] - start) * (e[m] - start) * inverseVariance[m];
    const spread = 1.4826 * Math.sqrt(medianInPlace(scratch, some) / 2);
    const { mean, total } = bisquareMean(row, n, start, Math.min(mostSpread, Math.max(1, spread)));
    hasBefore &&= total > 0;
    if (!(total > 0)) continue;
    difference[k] = isAngle ? wrapAngle(mean + turn) : mean;
    weight.fill(0);
    for (let m = 0; m < n; m++) weight[column[m]] = row.weight[m] / total;
    let chain = 0;
    let own = 0;
    for (let j = 0; j < cols; j++) {
      const w = weight[j];
      const b = hasBefore ? before[j] : w;
      const v = variance[up + j];
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

/** Rows in which enough was measured. */
function enteringRows({ values, rows, cols }: ColumnGroups, least: number): number[] {
  const out: number[] = [];
  for (let i = 0; i < rows; i++) {
    let n = 0;
    for (let p = i * cols; p < (i + 1) * cols; p++) if (!Number.isNaN(values[p])) n++;
    if (n >= least) out.push(i);
  }
  return out;
}

/** Mean direction of some of the first n angles. */
function commonTurn(e: Float64Array, weight: Float64Array, n: number): number {
  const every = Math.ceil(n / TURN_GROUPS);
  let c = 0;
  let s = 0;
  for (let m = 0; m < n; m += every) {
    c += weight[m] * Math.cos(e[m]);
    s += weight[m] * Math.sin(e[m]);
  }
  return Math.atan2(s, c);
}

/** Bisquare mean of the first n differences, each of twice the variance given; their weights go into `row.weight`. */
function bisquareMean(
  row: { readonly e: Float64Array; readonly inverseVariance: Float64Array; readonly weight: Float64Array },
  n: number,
  start: number,
  spread: number,
): { mean: number; total: number } {
  const { e, inverseVariance, weight } = row;
  const perVariance = 1 / (2 * BISQUARE * BISQUARE * spread * spread);
  let mean = start;
  let total = 0;
  for (let step = 0; step < STEPS; step++) {
    let sum = 0;
    let slope = 0;
    total = 0;
    for (let m = 0; m < n; m++) {
      const r = e[m] - mean;
      const u = r * r * inverseVariance[m] * perVariance;
      const one = u < 1 ? (1 - u) * inverseVariance[m] : 0;
      const w = one * (1 - u);
      weight[m] = w;
      total += w;
      sum += w * r;
      slope += one * (1 - 5 * u);
    }
    if (!(total > 0)) break;
    // among many outliers the weighted mean's own, shorter step
    mean += sum / (slope > 0.5 * total ? slope : total);
  }
  return { mean, total };
}
