import { apparentWidth, apparentWidthWithSlopes } from "../../numerics/kink_width.js";
import { RISE_PER_SIGMA, RISE_PER_W } from "../../model/units.js";
import type { CorrelatedNoise } from "./correlation.js";
import type { ProfileData } from "./profile_data.js";
import {
  CENTRE,
  INSULATING_LEVEL,
  METALLIC_LEVEL,
  PARAMETERS,
  TIP_SIGMA,
  WIDTH_SQUARED,
  type ProfileFitter,
  type SigmaPrior,
} from "./profile_fit.js";

/** Upper 5 % point of ½χ²₀ + ½χ²₁ and one-sided 95 % point of the profile likelihood: χ²₁ at 0.90. */
const DELTA_CHI2 = 2.705543454095404;
const Z95 = Math.sqrt(DELTA_CHI2);

/** w² in its own standard deviations beyond which its likelihood is taken as Gaussian. */
const CLEAR = 12;

//                           I     M     c     tilt  w²     σ
const SHAPE = /*        */ [true, true, true, true, true, false];
const SHAPE_AND_TIP = /**/ [true, true, true, true, true, true];
const STEP = /*         */ [true, true, true, true, false, false];
const STEP_AND_TIP = /* */ [true, true, true, true, false, true];

/** What the pixels of one profile say. Lengths in nm; nulls where they say nothing. */
export interface ProfileEstimate {
  readonly converged: boolean;
  readonly centreNm: number;
  readonly tilt: number;
  readonly insulating: number;
  readonly metallic: number;
  readonly levelSd: { readonly insulating: number; readonly metallic: number };
  readonly resolved: boolean;
  /** Best intrinsic 10–90 width with the tip as stated; 0 at the boundary. */
  readonly bestWidthNm: number;
  readonly widthSdNm: number | null;
  readonly widthSdTipNm: number | null;
  readonly upper95Nm: number | null;
  /** Smallest width that would be called resolved with this noise and tip. */
  readonly detectionNm: number | null;
  readonly apparentNm: number;
  readonly apparentSdNm: number | null;
  /** Unscaled: data χ² over its degrees of freedom, with the measured noise. */
  readonly reducedChi2: number;
  /** sd of `reducedChi2` where the model is right. */
  readonly reducedChi2Sd: number;
  /** The fitted curve: kink of this w under a Gaussian of this sigma. */
  readonly shape: { readonly wNm: number; readonly sigmaNm: number };
}

/** Fits one profile with the tip's response known to the prior: best width, test against a width of zero, upper limit.
 *
 *  Resolved: χ²(w = 0) − χ²_min > 2.706, the 5 % point of ½χ²₀ + ½χ²₁ at a boundary (Chernoff 1954, Ann. Math. Stat. 25, 573;
 *  Self & Liang 1987, JASA 82, 605). Upper limit: the w above the minimum where the profile likelihood has risen by 2.706. Both
 *  profile over the levels, position, tilt and, where its sd is not 0, the tip's σ. Under correlated noise χ² is divided by the
 *  sandwich's inflation of the variance of w² first. */
export function estimateWithTip(
  data: ProfileData,
  fitter: ProfileFitter,
  noise: CorrelatedNoise,
  prior: SigmaPrior,
  startWidthSquared: number,
): ProfileEstimate | null {
  const { p } = fitter;
  const start0 = p.slice();
  fitter.scale = 1;
  const tryFrom = (q: number): { ok: boolean; cost: number } => {
    p.set(start0);
    p[WIDTH_SQUARED] = q;
    p[TIP_SIGMA] = prior.sigmaNm;
    const status = fitter.fit(data, SHAPE, null);
    return { ok: status === "converged", cost: fitter.cost };
  };
  let first = tryFrom(startWidthSquared);
  if (!first.ok || p[WIDTH_SQUARED] <= 0) {
    const kept = p.slice();
    const s2 = prior.sigmaNm * prior.sigmaNm;
    let best = first;
    // the minimum on the boundary is checked from one side of the tip's width, a lost fit from three
    for (const q of first.ok ? [s2] : [0.09 * s2, s2, 9 * s2]) {
      const again = tryFrom(q);
      if ((again.ok && !best.ok) || (again.ok === best.ok && again.cost < best.cost - 1e-3)) {
        best = again;
        kept.set(p);
      }
    }
    p.set(kept);
    first = best;
    // once more from there, for the matrix that goes with the point
    first = { ok: fitter.fit(data, SHAPE, null) === "converged", cost: fitter.cost };
  }
  const best = p.slice();
  const chi2 = fitter.cost;
  const free = new Float64Array(PARAMETERS * PARAMETERS);
  if (!fitter.covariance(SHAPE, free)) return null;
  const naive = free[WIDTH_SQUARED * PARAMETERS + WIDTH_SQUARED];
  const dof = Math.max(1, data.count - noise.widen(data, fitter, SHAPE, free));
  const variance = free[WIDTH_SQUARED * PARAMETERS + WIDTH_SQUARED];
  // pixels that never see the wall: what is left is rounding, of either sign
  if (!(variance > 0)) return null;
  const q = best[WIDTH_SQUARED];
  const qSd = Math.sqrt(variance);
  const w = Math.sqrt(q);

  // what a wrong σ does to w²: −(JᵀJ)⁻¹ Jᵀ ∂r/∂σ, first order
  let byTip = 0;
  const plain = new Float64Array(PARAMETERS * PARAMETERS);
  fitter.covariance(SHAPE, plain);
  for (let k = 0; k < TIP_SIGMA; k++) {
    byTip -= plain[WIDTH_SQUARED * PARAMETERS + k] * fitter.normal[k * PARAMETERS + TIP_SIGMA];
  }

  // Likelihood of w with the tip's own uncertainty in it.
  const tip = prior.sdNm > 0 ? prior : null;
  fitter.scale = naive / variance;
  let least = chi2 * fitter.scale;
  if (tip !== null) {
    fitter.fit(data, SHAPE_AND_TIP, tip, 25);
    least = Math.min(least, fitter.cost);
  }
  const bestQ = p[WIDTH_SQUARED];
  const atMinimum = p.slice();
  const totalSd = Math.hypot(qSd, tip === null ? 0 : byTip * prior.sdNm);
  const rise = (at: number): number => {
    p[WIDTH_SQUARED] = at;
    fitter.fit(data, tip === null ? STEP : STEP_AND_TIP, tip, 25, 1e-4);
    return Math.sqrt(Math.max(0, fitter.cost - least)) - Z95;
  };
  let resolved = q > 0;
  if (q > 0 && q < 6 * totalSd) resolved = rise(0) > 0;
  p.set(atMinimum);
  // far from the boundary the likelihood of w² is Gaussian where it matters
  const upperQ =
    bestQ > CLEAR * totalSd ? bestQ + Z95 * totalSd : riseTo(rise, bestQ, totalSd, 100 * (bestQ + prior.sigmaNm ** 2));

  // The width as seen: where the fit sits on the boundary the tip is let go, so that a wall sharper than the tip shows.
  let apparentNm: number;
  let apparentSdNm: number | null;
  if (q > 0) {
    const a = apparentWidthWithSlopes(w, prior.sigmaNm);
    apparentNm = a.width;
    apparentSdNm = (Math.abs(a.byW) / (2 * w)) * qSd;
  } else {
    p.set(best);
    fitter.scale = 1;
    fitter.fit(data, STEP_AND_TIP, null);
    const sharp = new Float64Array(PARAMETERS * PARAMETERS);
    const ok = fitter.covariance(STEP_AND_TIP, sharp);
    noise.widen(data, fitter, STEP_AND_TIP, sharp);
    apparentNm = RISE_PER_SIGMA * p[TIP_SIGMA];
    const sd = RISE_PER_SIGMA * Math.sqrt(sharp[TIP_SIGMA * PARAMETERS + TIP_SIGMA]);
    apparentSdNm = ok && sd > 0 ? sd : null;
  }
  p.set(best);
  return {
    converged: first.ok,
    centreNm: best[CENTRE],
    tilt: best[3],
    insulating: best[INSULATING_LEVEL],
    metallic: best[METALLIC_LEVEL],
    levelSd: levelSd(free),
    resolved,
    bestWidthNm: RISE_PER_W * w,
    widthSdNm: w > 0 ? (RISE_PER_W * qSd) / (2 * w) : null,
    widthSdTipNm: w > 0 ? (RISE_PER_W * Math.abs(byTip) * prior.sdNm) / (2 * w) : null,
    upper95Nm: upperQ === null ? null : RISE_PER_W * Math.sqrt(upperQ),
    detectionNm: totalSd > 0 ? RISE_PER_W * Math.sqrt(Z95 * totalSd) : null,
    apparentNm,
    apparentSdNm,
    reducedChi2: chi2 / dof,
    reducedChi2Sd: Math.sqrt((2 * noise.squaredSum) / dof),
    shape: { wNm: w, sigmaNm: prior.sigmaNm },
  };
}

/** The w² above `from` where `rise` passes zero, by secants; null where none is found below `most`. */
function riseTo(rise: (q: number) => number, from: number, sd: number, most: number): number | null {
  if (!(sd > 0)) return null;
  let a = from;
  let fa = -Z95;
  let b = from + Z95 * sd;
  let fb = rise(b);
  for (let k = 0; k < 20 && b < most; k++) {
    if (Math.abs(fb) < 5e-3) return b;
    let next: number;
    if (fb < 0) {
      // not far enough: extrapolate, but by no more than fourfold
      const slope = (fb - fa) / (b - a);
      next = b + Math.min(3 * (b - from), slope > 0 ? (-fb / slope) * 1.1 : 3 * (b - from));
      a = b;
      fa = fb;
    } else {
      next = a + ((b - a) * -fa) / (fb - fa);
      // keep the root bracketed
      if (!(next > a && next < b)) next = (a + b) / 2;
      const f = rise(next);
      if (Math.abs(f) < 5e-3) return next;
      if (f < 0) {
        a = next;
        fa = f;
        continue;
      }
      b = next;
      fb = f;
      continue;
    }
    b = next;
    fb = rise(b);
  }
  return null;
}

/** Without a tip resolution only the width as seen can be had. The blurred step and the bare tanh are fitted, the two ends of the
 *  family; the better one gives the width, both together its upper limit, which also bounds the intrinsic width: blur only widens. */
export function estimateWithoutTip(
  data: ProfileData,
  fitter: ProfileFitter,
  noise: CorrelatedNoise,
  apparentStartNm: number,
): ProfileEstimate | null {
  const { p } = fitter;
  const start = p.slice();
  fitter.scale = 1;
  const covariance = new Float64Array(PARAMETERS * PARAMETERS);
  let found: (ProfileEstimate & { chi2: number }) | null = null;
  let upper = 0;
  for (const shape of ["tanh", "step"] as const) {
    p.set(start);
    const isTanh = shape === "tanh";
    p[WIDTH_SQUARED] = isTanh ? (apparentStartNm / RISE_PER_W) ** 2 : 0;
    p[TIP_SIGMA] = isTanh ? 0 : apparentStartNm / RISE_PER_SIGMA;
    const free = isTanh ? SHAPE : STEP_AND_TIP;
    const ok = fitter.fit(data, free, null) === "converged";
    if (!fitter.covariance(free, covariance)) continue;
    const dof = Math.max(1, data.count - noise.widen(data, fitter, free, covariance));
    const index = isTanh ? WIDTH_SQUARED : TIP_SIGMA;
    const sd = Math.sqrt(covariance[index * PARAMETERS + index]);
    if (!(sd > 0)) continue;
    const width = isTanh ? apparentWidth(Math.sqrt(p[WIDTH_SQUARED]), 0) : RISE_PER_SIGMA * p[TIP_SIGMA];
    const widthSd = isTanh ? (RISE_PER_W * sd) / (2 * Math.sqrt(p[WIDTH_SQUARED])) : RISE_PER_SIGMA * sd;
    const better = found === null || fitter.cost < found.chi2;
    if (found === null || Math.abs(fitter.cost - found.chi2) < 4) upper = Math.max(upper, width + Z95 * widthSd);
    else if (better) upper = width + Z95 * widthSd;
    if (!better) continue;
    found = {
      converged: ok,
      centreNm: p[CENTRE],
      tilt: p[3],
      insulating: p[INSULATING_LEVEL],
      metallic: p[METALLIC_LEVEL],
      levelSd: levelSd(covariance),
      resolved: false,
      bestWidthNm: Number.NaN,
      widthSdNm: null,
      widthSdTipNm: null,
      upper95Nm: null,
      detectionNm: null,
      apparentNm: width,
      apparentSdNm: widthSd,
      reducedChi2: fitter.cost / dof,
      reducedChi2Sd: Math.sqrt((2 * noise.squaredSum) / dof),
      shape: { wNm: Math.sqrt(p[WIDTH_SQUARED]), sigmaNm: p[TIP_SIGMA] },
      chi2: fitter.cost,
    };
  }
  return found === null ? null : { ...found, upper95Nm: upper };
}

function levelSd(covariance: Float64Array): { insulating: number; metallic: number } {
  return {
    insulating: Math.sqrt(covariance[INSULATING_LEVEL * (PARAMETERS + 1)]),
    metallic: Math.sqrt(covariance[METALLIC_LEVEL * (PARAMETERS + 1)]),
  };
}
