import { choleskyInPlace, choleskyInvert, choleskySolve } from "../../numerics/cholesky.js";
import { fastKink, fastKinks } from "../../numerics/kink.js";
import type { ProfileData } from "./profile_data.js";

/** Parameters of a profile: y = I·alpha·(1−u) + M·beta·u, u = kink(distance − centre − tilt·arc; w, σ), with w² as the parameter:
 *  near w = 0 the profile depends on w² only, and in w the gradient would vanish. */
export const INSULATING_LEVEL = 0;
export const METALLIC_LEVEL = 1;
export const CENTRE = 2;
export const TILT = 3;
export const WIDTH_SQUARED = 4;
export const TIP_SIGMA = 5;
export const PARAMETERS = 6;

export type FitStatus = "converged" | "not-converged" | "singular";

/** How well the direction of the traced line is known (tangent of the angle): tracing lets noise tilt it by less than this. Without
 *  it, a wide wall in noise would be fitted askew. */
const TILT_SD = 0.1;

/** The tip's sigma as measured before: enters as ((σ − σ₀)/sd)². */
export interface SigmaPrior {
  readonly sigmaNm: number;
  readonly sdNm: number;
}

/** Levenberg–Marquardt on the normal equations of one profile (Marquardt 1963, J. SIAM 11, 431) with the analytic derivatives of
 *  the convolved kink; w² and σ are kept non-negative. All storage belongs to the object; nothing is allocated while fitting. */
export class ProfileFitter {
  readonly p = new Float64Array(PARAMETERS);
  /** χ² at `p`: data (times `scale`) plus prior. */
  cost = 0;
  /** JᵀJ over all six parameters at `p`, prior included. */
  readonly normal = new Float64Array(PARAMETERS * PARAMETERS);
  iterations = 0;
  /** Data χ² and its derivatives are multiplied by this: 1/(variance inflation) where the noise is correlated. */
  scale = 1;

  private readonly gradient = new Float64Array(PARAMETERS);
  private readonly trial = new Float64Array(PARAMETERS);
  private readonly trialNormal = new Float64Array(PARAMETERS * PARAMETERS);
  private readonly trialGradient = new Float64Array(PARAMETERS);
  private readonly a = new Float64Array(PARAMETERS * PARAMETERS);
  private readonly b = new Float64Array(PARAMETERS);
  private readonly free = new Int32Array(PARAMETERS);
  private readonly u = new Float64Array(4);
  /** Distance of each pixel from the wall as it is tried, and the kink there with its derivatives, four numbers a pixel. */
  private x = new Float64Array(0);
  private kinks = new Float64Array(0);

  /** Fit the parameters named in `free` (true = free) from the values in `this.p`. `settled`: predicted fall of χ² at which it ends. */
  fit(data: ProfileData, free: readonly boolean[], prior: SigmaPrior | null, most = 40, settled = 1e-5): FitStatus {
    const { p, trial } = this;
    this.cost = this.evaluate(data, p, this.normal, this.gradient, prior);
    let lambda = 1e-3;
    for (this.iterations = 1; this.iterations <= most; this.iterations++) {
      const m = this.chooseFree(free);
      if (!this.solve(m, lambda)) return "singular";
      trial.set(p);
      let predicted = 0;
      for (let k = 0; k < m; k++) {
        const step = -this.b[k];
        trial[this.free[k]] += step;
        predicted -= step * this.gradient[this.free[k]];
      }
      // a bare kink (σ = 0) has no limit of zero width to rest on
      const least = p[TIP_SIGMA] > 0 ? 0 : 0.1 * p[WIDTH_SQUARED];
      if (trial[WIDTH_SQUARED] < least) trial[WIDTH_SQUARED] = least;
      if (trial[TIP_SIGMA] < 0.3 * p[TIP_SIGMA]) trial[TIP_SIGMA] = 0.3 * p[TIP_SIGMA];
      const cost = this.evaluate(data, trial, this.trialNormal, this.trialGradient, prior);
      if (cost <= this.cost) {
        p.set(trial);
        this.normal.set(this.trialNormal);
        this.gradient.set(this.trialGradient);
        const fall = this.cost - cost;
        this.cost = cost;
        lambda = Math.max(1e-9, lambda / 10);
        if (predicted < settled || (fall < settled && lambda < 1e-3)) return "converged";
      } else {
        if (predicted < settled) return "converged";
        lambda *= 10;
        if (lambda > 1e8) return "not-converged";
      }
    }
    return "not-converged";
  }

  /** Parameters that can move: a width held at zero by its bound is left out. */
  private chooseFree(free: readonly boolean[]): number {
    let m = 0;
    for (let k = 0; k < PARAMETERS; k++) {
      if (!free[k]) continue;
      if (k === WIDTH_SQUARED && this.p[k] <= 0 && this.gradient[k] >= 0) continue;
      this.free[m++] = k;
    }
    return m;
  }

  private solve(m: number, lambda: number): boolean {
    const { a, b, free, normal } = this;
    for (let r = 0; r < m; r++) {
      for (let c = 0; c < m; c++) a[r * m + c] = normal[free[r] * PARAMETERS + free[c]];
      if (!(a[r * m + r] > 0)) return false;
      a[r * m + r] *= 1 + lambda;
      b[r] = this.gradient[free[r]];
    }
    if (!choleskyInPlace(a, m)) return false;
    choleskySolve(a, m, b);
    return true;
  }

  /** Inverse of the normal matrix of the free parameters, written as rows and columns of `out` (6 × 6; the rest 0). */
  covariance(free: readonly boolean[], out: Float64Array): boolean {
    let m = 0;
    for (let k = 0; k < PARAMETERS; k++) if (free[k]) this.free[m++] = k;
    const { a, trialNormal } = this;
    for (let r = 0; r < m; r++) {
      for (let c = 0; c < m; c++) a[r * m + c] = this.normal[this.free[r] * PARAMETERS + this.free[c]];
    }
    if (!choleskyInPlace(a, m)) return false;
    choleskyInvert(a, m, trialNormal);
    out.fill(0);
    for (let r = 0; r < m; r++) {
      for (let c = 0; c < m; c++) out[this.free[r] * PARAMETERS + this.free[c]] = trialNormal[r * m + c];
    }
    return true;
  }

  /** χ² at `p` with its normal matrix and half gradient. The loop over pixels is written out: it is where the time goes. */
  private evaluate(
    data: ProfileData,
    p: Float64Array,
    normal: Float64Array,
    gradient: Float64Array,
    prior: SigmaPrior | null,
  ): number {
    const { distance, arc, value, alpha, beta, weight, count } = data;
    if (this.x.length < count) {
      this.x = new Float64Array(2 * count);
      this.kinks = new Float64Array(8 * count);
    }
    const { x, kinks } = this;
    const low = p[INSULATING_LEVEL];
    const high = p[METALLIC_LEVEL];
    const centre = p[CENTRE];
    const tilt = p[TILT];
    for (let k = 0; k < count; k++) x[k] = distance[k] - centre - tilt * arc[k];
    fastKinks(x, count, Math.sqrt(p[WIDTH_SQUARED]), p[TIP_SIGMA], kinks);
    let cost = 0;
    let gi = 0,
      gm = 0,
      gc = 0,
      gt = 0,
      gq = 0,
      gs = 0;
    let ii = 0,
      mi = 0,
      mm = 0,
      ci = 0,
      cm = 0,
      cc = 0,
      ti = 0,
      tm = 0,
      tc = 0,
      tt = 0,
      qi = 0,
      qm = 0,
      qc = 0,
      qt = 0,
      qq = 0,
      si = 0,
      sm = 0,
      sc = 0,
      st = 0,
      sq = 0,
      ss = 0;
    for (let k = 0, at = 0; k < count; k++, at += 4) {
      const along = arc[k];
      const u = kinks[at];
      const wi = alpha[k] * weight[k];
      const wm = beta[k] * weight[k];
      const rise = high * wm - low * wi;
      const di = wi * (1 - u);
      const dm = wm * u;
      const dc = -rise * kinks[at + 1];
      const dt = dc * along;
      const dq = rise * kinks[at + 2];
      const ds = rise * kinks[at + 3];
      const r = low * di + high * dm - value[k] * weight[k];
      cost += r * r;
      gi += di * r;
      gm += dm * r;
      gc += dc * r;
      gt += dt * r;
      gq += dq * r;
      gs += ds * r;
      ii += di * di;
      mi += dm * di;
      mm += dm * dm;
      ci += dc * di;
      cm += dc * dm;
      cc += dc * dc;
      ti += dt * di;
      tm += dt * dm;
      tc += dt * dc;
      tt += dt * dt;
      qi += dq * di;
      qm += dq * dm;
      qc += dq * dc;
      qt += dq * dt;
      qq += dq * dq;
      si += ds * di;
      sm += ds * dm;
      sc += ds * dc;
      st += ds * dt;
      sq += ds * dq;
      ss += ds * ds;
    }
    const { scale } = this;
    cost *= scale;
    gradient[0] = gi * scale;
    gradient[1] = gm * scale;
    gradient[2] = gc * scale;
    gradient[3] = gt * scale;
    gradient[4] = gq * scale;
    gradient[5] = gs * scale;
    normal[0] = ii * scale;
    normal[6] = normal[1] = mi * scale;
    normal[7] = mm * scale;
    normal[12] = normal[2] = ci * scale;
    normal[13] = normal[8] = cm * scale;
    normal[14] = cc * scale;
    normal[18] = normal[3] = ti * scale;
    normal[19] = normal[9] = tm * scale;
    normal[20] = normal[15] = tc * scale;
    normal[21] = tt * scale;
    normal[24] = normal[4] = qi * scale;
    normal[25] = normal[10] = qm * scale;
    normal[26] = normal[16] = qc * scale;
    normal[27] = normal[22] = qt * scale;
    normal[28] = qq * scale;
    normal[30] = normal[5] = si * scale;
    normal[31] = normal[11] = sm * scale;
    normal[32] = normal[17] = sc * scale;
    normal[33] = normal[23] = st * scale;
    normal[34] = normal[29] = sq * scale;
    normal[35] = ss * scale;
    // the arcs of a stretch are even about its middle, so this prior does not move the centre
    const bend = p[TILT] / TILT_SD;
    cost += bend * bend;
    gradient[TILT] += bend / TILT_SD;
    normal[TILT * (PARAMETERS + 1)] += 1 / (TILT_SD * TILT_SD);
    if (prior !== null && prior.sdNm > 0) {
      const r = (p[TIP_SIGMA] - prior.sigmaNm) / prior.sdNm;
      cost += r * r;
      gradient[TIP_SIGMA] += r / prior.sdNm;
      normal[TIP_SIGMA * (PARAMETERS + 1)] += 1 / (prior.sdNm * prior.sdNm);
    }
    return cost;
  }

  /** Weighted residual (model − value) of pixel k, its derivatives in `row`. */
  residual(data: ProfileData, p: Float64Array, k: number, row: Float64Array): number {
    const arc = data.arc[k];
    const x = data.distance[k] - p[CENTRE] - p[TILT] * arc;
    const { u } = this;
    fastKink(x, Math.sqrt(p[WIDTH_SQUARED]), p[TIP_SIGMA], u);
    const weight = data.weight[k];
    const low = data.alpha[k] * weight;
    const high = data.beta[k] * weight;
    const rise = p[METALLIC_LEVEL] * high - p[INSULATING_LEVEL] * low;
    row[INSULATING_LEVEL] = low * (1 - u[0]);
    row[METALLIC_LEVEL] = high * u[0];
    row[CENTRE] = -rise * u[1];
    row[TILT] = -rise * u[1] * arc;
    row[WIDTH_SQUARED] = rise * u[2];
    row[TIP_SIGMA] = rise * u[3];
    return (
      p[INSULATING_LEVEL] * row[INSULATING_LEVEL] + p[METALLIC_LEVEL] * row[METALLIC_LEVEL] - data.value[k] * weight
    );
  }
}
