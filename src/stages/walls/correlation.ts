import type { ProfileData } from "./profile_data.js";
import { PARAMETERS, type ProfileFitter } from "./profile_fit.js";

/** Correlations below this are left out of the sums. */
const NEGLIGIBLE = 0.01;

/** Autocorrelation of the pixel noise along one axis at lags 0, 1, 2 … pixels. */
export type LagCorrelation = readonly number[];

/** Lags that are looked at, and lags whose mean product stands for slow structure that is no noise (tilt of a level, stray light). */
const LAGS = 6;
const FAR_FROM = 9;
const FAR_TO = 12;
/** Pairs of pixels needed; below, the two neighbour correlations that come with the levels are continued as powers. */
const LEAST_PAIRS = 2000;

/** Autocorrelation along x or y of `deviation` (NaN where the pixel does not count), from pairs of pixels that both count.
 *  @returns null where there are too few */
export function measureLags(
  deviation: Float32Array,
  rows: number,
  cols: number,
  along: "x" | "y",
): LagCorrelation | null {
  const step = along === "x" ? 1 : cols;
  const sum = new Float64Array(FAR_TO + 1);
  const pairs = new Float64Array(FAR_TO + 1);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      const v = deviation[p];
      if (Number.isNaN(v)) continue;
      const room = Math.min(FAR_TO, along === "x" ? cols - 1 - j : rows - 1 - i);
      for (let k = 0; k <= room; k++) {
        const w = deviation[p + k * step];
        if (Number.isNaN(w)) continue;
        sum[k] += v * w;
        pairs[k]++;
      }
    }
  }
  if (pairs[LAGS] < LEAST_PAIRS) return null;
  let far = 0;
  let farPairs = 0;
  for (let k = FAR_FROM; k <= FAR_TO; k++) {
    far += sum[k];
    farPairs += pairs[k];
  }
  const floor = farPairs > LEAST_PAIRS ? far / farPairs : 0;
  const variance = sum[0] / pairs[0] - floor;
  if (!(variance > 0)) return null;
  const out = [1];
  for (let k = 1; k < LAGS; k++) {
    const rho = (sum[k] / pairs[k] - floor) / variance;
    // the first lag that cannot be told from nothing ends it
    if (Math.abs(rho) < Math.max(0.02, 3 / Math.sqrt(pairs[k]))) break;
    out.push(Math.max(-0.9, Math.min(0.95, rho)));
  }
  return out;
}

/** ρ, ρ², ρ³ … : all that can be said from neighbours alone (a first-order filter in time has just this). */
export function powersOf(rho: number): LagCorrelation {
  const r = Math.max(-0.9, Math.min(0.9, rho));
  const out = [1];
  for (let k = 1; k < LAGS && Math.abs(r) ** k >= NEGLIGIBLE; k++) out.push(r ** k);
  return out;
}

/** Effect of noise correlated between neighbouring pixels on a fit that treats them as independent: the sandwich
 *  (JᵀJ)⁻¹ JᵀCJ (JᵀJ)⁻¹ (White 1980, Econometrica 48, 817; Liang & Zeger 1986, Biometrika 73, 13) with the measured correlation,
 *  taken as the product of those along the two axes; and of what the pixels of a row share, a gain of their own that is not known. */
export class CorrelatedNoise {
  readonly white: boolean;
  private readonly slot: Int32Array;
  private readonly offsets: { readonly di: number; readonly dj: number; readonly rho: number }[] = [];
  private jacobian = new Float64Array(0);
  private readonly row = new Float64Array(PARAMETERS);
  private readonly meat = new Float64Array(PARAMETERS * PARAMETERS);
  private readonly byRow = new Map<number, Float64Array>();

  constructor(
    alongX: LagCorrelation,
    alongY: LagCorrelation,
    rows: number,
    private readonly cols: number,
    private readonly rowGainSd: Float32Array | null = null,
  ) {
    for (let di = 0; di < alongY.length; di++) {
      for (let dj = di === 0 ? 1 : 1 - alongX.length; dj < alongX.length; dj++) {
        const rho = alongX[Math.abs(dj)] * alongY[di];
        if (Math.abs(rho) >= NEGLIGIBLE) this.offsets.push({ di, dj, rho });
      }
    }
    this.white = this.offsets.length === 0 && rowGainSd === null;
    this.slot = this.white ? new Int32Array(0) : new Int32Array(rows * cols).fill(-1);
  }

  /** Sum of squared correlations over all lags, 1 for white noise: by this the variance of χ² grows. */
  get squaredSum(): number {
    let sum = 1;
    for (const o of this.offsets) sum += 2 * o.rho * o.rho;
    return sum;
  }

  /** Sum of correlations over all lags, 1 for white noise: by this the variance of a mean over an area grows. */
  get areaFactor(): number {
    let sum = 1;
    for (const o of this.offsets) sum += 2 * o.rho;
    return sum;
  }

  /** For each bin the sum over its pairs of pixels of ρ·a·b, with a and b their `factor`s: in white noise the sum of squares. */
  summedByBin(data: ProfileData, bin: ArrayLike<number>, factor: Float64Array, bins: number): Float64Array {
    const { slot, cols } = this;
    const n = data.count;
    const sum = new Float64Array(bins);
    if (slot.length > 0) for (let k = 0; k < n; k++) slot[data.pixel[k]] = k;
    for (let k = 0; k < n; k++) {
      sum[bin[k]] += factor[k] * factor[k];
      const p = data.pixel[k];
      const j = p % cols;
      for (const o of this.offsets) {
        const q = p + o.di * cols + o.dj;
        if (j + o.dj < 0 || j + o.dj >= cols || q >= slot.length) continue;
        const other = slot[q];
        if (other >= 0 && bin[other] === bin[k]) sum[bin[k]] += 2 * o.rho * factor[k] * factor[other];
      }
    }
    if (slot.length > 0) for (let k = 0; k < n; k++) slot[data.pixel[k]] = -1;
    for (let b = 0; b < bins; b++) sum[b] = Math.max(0, sum[b]);
    return sum;
  }

  /** Turns `covariance` (unscaled inverse normal matrix over the free parameters, 6 × 6) into the sandwich, in place.
   *  @returns what the fit takes off the expected χ²: the trace of (JᵀJ)⁻¹ JᵀCJ, the number of free parameters in white noise */
  widen(data: ProfileData, fitter: ProfileFitter, free: readonly boolean[], covariance: Float64Array): number {
    if (this.white) return free.reduce((n, f) => n + (f ? 1 : 0), 0);
    const { slot, cols, row, meat } = this;
    const n = data.count;
    if (this.jacobian.length < n * PARAMETERS) this.jacobian = new Float64Array(2 * n * PARAMETERS);
    const jac = this.jacobian;
    for (let k = 0; k < n; k++) {
      slot[data.pixel[k]] = k;
      fitter.residual(data, fitter.p, k, row);
      for (let i = 0; i < PARAMETERS; i++) jac[k * PARAMETERS + i] = free[i] ? row[i] : 0;
    }
    meat.fill(0);
    for (let k = 0; k < n; k++) {
      const p = data.pixel[k];
      const j = p % cols;
      // what the correlated neighbours add up to, both of a pair counted by symmetrising below
      row.fill(0);
      for (const o of this.offsets) {
        const jj = j + o.dj;
        const q = p + o.di * cols + o.dj;
        if (jj < 0 || jj >= cols || q >= slot.length) continue;
        const other = slot[q];
        if (other < 0) continue;
        for (let i = 0; i < PARAMETERS; i++) row[i] += o.rho * jac[other * PARAMETERS + i];
      }
      for (let a = 0; a < PARAMETERS; a++) {
        const own = jac[k * PARAMETERS + a];
        for (let b = 0; b < PARAMETERS; b++) {
          meat[a * PARAMETERS + b] += own * (jac[k * PARAMETERS + b] + row[b]) + row[a] * jac[k * PARAMETERS + b];
        }
      }
    }
    for (let k = 0; k < n; k++) slot[data.pixel[k]] = -1;
    let taken = 0;
    for (let k = 0; k < PARAMETERS * PARAMETERS; k++) taken += covariance[k] * meat[k];
    this.addRowGains(data, jac);
    sandwich(covariance, meat);
    return taken;
  }

  /** A row whose gain is off by ε has all its residuals off by ε·value/sd: Σ over rows of sd(ε)²·g·gᵀ, g the sum of its derivatives. */
  private addRowGains(data: ProfileData, jac: Float64Array): void {
    const { rowGainSd, cols, meat, byRow } = this;
    if (rowGainSd === null) return;
    byRow.clear();
    for (let k = 0; k < data.count; k++) {
      const i = Math.floor(data.pixel[k] / cols);
      let g = byRow.get(i);
      if (g === undefined) byRow.set(i, (g = new Float64Array(PARAMETERS)));
      const off = data.value[k] * data.weight[k];
      for (let a = 0; a < PARAMETERS; a++) g[a] += jac[k * PARAMETERS + a] * off;
    }
    for (const [i, g] of byRow) {
      const variance = rowGainSd[i] ** 2;
      for (let a = 0; a < PARAMETERS; a++)
        for (let b = 0; b < PARAMETERS; b++) meat[a * PARAMETERS + b] += variance * g[a] * g[b];
    }
  }
}

function sandwich(bread: Float64Array, meat: Float64Array): void {
  const n = PARAMETERS;
  const half = new Float64Array(n * n);
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) {
      let s = 0;
      for (let k = 0; k < n; k++) s += bread[i * n + k] * meat[k * n + j];
      half[i * n + j] = s;
    }
  }
  const full = new Float64Array(n * n);
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) {
      let s = 0;
      for (let k = 0; k < n; k++) s += half[i * n + k] * bread[k * n + j];
      full[i * n + j] = s;
    }
  }
  bread.set(full);
}
