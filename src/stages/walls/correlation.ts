import type { ProfileData } from "./profile_data.js";
import { PARAMETERS, type ProfileFitter } from "./profile_fit.js";

/** Correlations below this are left out of the sums. */
const NEGLIGIBLE = 0.01;

/** Effect of noise correlated between neighbouring pixels on a fit that treats them as independent: the sandwich
 *  (JᵀJ)⁻¹ JᵀCJ (JᵀJ)⁻¹ (White 1980, Econometrica 48, 817; Liang & Zeger 1986, Biometrika 73, 13) with the measured correlation,
 *  ρ_x^|columns| · ρ_y^|rows|. */
export class CorrelatedNoise {
  readonly white: boolean;
  private readonly slot: Int32Array;
  private readonly offsets: { readonly di: number; readonly dj: number; readonly rho: number }[] = [];
  private jacobian = new Float64Array(0);
  private readonly row = new Float64Array(PARAMETERS);
  private readonly meat = new Float64Array(PARAMETERS * PARAMETERS);

  constructor(
    rhoX: number,
    rhoY: number,
    rows: number,
    private readonly cols: number,
  ) {
    const x = Math.abs(rhoX) < NEGLIGIBLE ? 0 : Math.max(-0.9, Math.min(0.9, rhoX));
    const y = Math.abs(rhoY) < NEGLIGIBLE ? 0 : Math.max(-0.9, Math.min(0.9, rhoY));
    const most = 8;
    for (let di = 0; di <= most; di++) {
      for (let dj = di === 0 ? 1 : -most; dj <= most; dj++) {
        const rho = x ** Math.abs(dj) * y ** di;
        if (Math.abs(rho) >= NEGLIGIBLE) this.offsets.push({ di, dj, rho });
      }
    }
    this.white = this.offsets.length === 0;
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
    sandwich(covariance, meat);
    return taken;
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
