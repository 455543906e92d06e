import { choleskyInPlace, choleskyInvert } from "../../numerics/cholesky.js";
import { leastSquares, type LeastSquaresProblem } from "../../numerics/least_squares.js";
import { shareAt, type FringeTable } from "./basis.js";
import type { Chord } from "./chord.js";
import { FRINGE_PARAMETERS, FringeForward } from "./forward.js";
import type { Profile } from "./profile.js";
import type { FringeSettings } from "./settings.js";
import { noiseFactor, NUISANCES, nuisanceMatrix, whiten, type Candidate } from "./sup_test.js";

export interface FringeEstimate {
  readonly contrastRad: number | null;
  readonly contrastSdRad: number | null;
  readonly offsetNm: number | null;
  readonly periodNm: number | null;
  readonly periodSdNm: number | null;
  readonly decayNm: number | null;
  readonly decaySdNm: number | null;
  readonly fitted?: FittedCurve;
}

/** What the fit puts at each bin of the profile: the fringe's change across and along the chord, and the offsets of the levels (across). */
export interface FittedCurve {
  readonly across: Float64Array;
  readonly along: Float64Array;
  readonly offset: Float64Array;
}

const PARAMETERS = NUISANCES + FRINGE_PARAMETERS;
/** What bends of the wall, its neighbours and slow errors of the rows do to period and decay beyond the noise, relative, 1 sd: without it, 90 and
 *  89 % of the intervals held the truth in 155 simulated fringes (other cooldowns than those the study reports on). */
export const MODEL_SD = { period: 0.0025, decay: 0.045 } as const;
/** Step of the search for the largest departure, nm. */
const SEARCH_NM = 2;

/** Strength, place, period and decay of the fringe that the test liked best.
 *  @param free fit period and decay too; without it they stay at the candidate's, and only the two amplitudes are fitted */
export function estimateFringe(
  profile: Profile,
  table: FringeTable,
  chord: Chord,
  candidate: Candidate,
  reachNm: number,
  levelSdRad: number,
  free: boolean,
  s: FringeSettings,
): FringeEstimate {
  const n = profile.count;
  const l = noiseFactor(profile, null);
  const forward = new FringeForward(candidate.side, chord, table.blur, reachNm);
  const nuisances = nuisanceMatrix(profile, table, chord, reachNm, levelSdRad);
  const sideReach = candidate.side === "metallic" ? profile.reachMetallicNm : profile.reachInsulatingNm;
  const member = table.members[candidate.member];
  const shortest = Math.log(table.members.reduce((a, m) => Math.min(a, m.periodNm), Infinity) / 1.5);
  const longest = Math.log(6 * reachNm);
  const fitted = free ? PARAMETERS : PARAMETERS - 2;
  const fixed = [Math.log(member.periodNm), Math.log(member.decayNm)];
  const p = new Float64Array(PARAMETERS);
  const out = new Float64Array(2 + 2 * FRINGE_PARAMETERS);
  const column = new Float64Array(n);

  const problem: LeastSquaresProblem = {
    parameters: fitted,
    residuals: n + NUISANCES,
    evaluate(q, r, jacobian) {
      p.set(q);
      if (!free) p.set(fixed, NUISANCES + 2);
      const [logPeriod, logDecay] = [p[NUISANCES + 2], p[NUISANCES + 3]];
      if (logPeriod < shortest || logPeriod > longest || logDecay < shortest - 2 || logDecay > longest + 1)
        return false;
      if (!forward.set(p, NUISANCES)) return false;
      for (let k = 0; k < n; k++) {
        forward.change(profile.distanceNm[k], out, jacobian !== null);
        let m = out[0];
        for (let c = 0; c < NUISANCES; c++) m += p[c] * nuisances[k * NUISANCES + c];
        r[k] = m - profile.value[k];
        if (jacobian === null) continue;
        for (let c = 0; c < NUISANCES; c++) jacobian[k * fitted + c] = nuisances[k * NUISANCES + c];
        for (let c = NUISANCES; c < fitted; c++) jacobian[k * fitted + c] = out[2 + c - NUISANCES];
      }
      whiten(l, n, r);
      for (let c = 0; c < NUISANCES; c++) {
        r[n + c] = p[c];
        if (jacobian === null) continue;
        for (let a = 0; a < fitted; a++) jacobian[(n + c) * fitted + a] = a === c ? 1 : 0;
      }
      if (jacobian === null) return true;
      for (let c = 0; c < fitted; c++) {
        for (let k = 0; k < n; k++) column[k] = jacobian[k * fitted + c];
        whiten(l, n, column);
        for (let k = 0; k < n; k++) jacobian[k * fitted + c] = column[k];
      }
      return true;
    },
  };

  const start = new Float64Array(fitted);
  if (free) start.set(fixed, NUISANCES + 2);
  linearStart(problem, start);
  const fit = leastSquares(problem, start, { maxIterations: 60 });
  if (fit.status === "singular" || !fit.parameters.every(Number.isFinite)) return NOTHING;
  problem.evaluate(fit.parameters, new Float64Array(n + NUISANCES), null);

  const contrast = largestDeparture(forward, table, chord, candidate.side === "metallic" ? 1 : -1, sideReach);
  const variance = departureVariance(forward, table, chord, contrast.distanceNm, fit.covariance, fitted);
  const nothing = {
    ...NOTHING,
    contrastRad: contrast.rad,
    contrastSdRad: Math.sqrt(variance),
    offsetNm: contrast.distanceNm,
    fitted: fittedCurve(profile, forward, nuisances, p),
  };
  if (!free || fit.status !== "converged") return nothing;

  const sdLogPeriod = Math.sqrt(fit.covariance[(NUISANCES + 2) * fitted + NUISANCES + 2]);
  const sdLogDecay = Math.sqrt(fit.covariance[(NUISANCES + 3) * fitted + NUISANCES + 3]);
  const periodNm = Math.exp(fit.parameters[NUISANCES + 2]);
  const decayNm = Math.exp(fit.parameters[NUISANCES + 3]);
  // An oscillation is only one where the data hold enough of it, and it is not gone before it has begun.
  const oscillates = sideReach >= s.leastPeriods * periodNm && decayNm >= periodNm / 4;
  if (!oscillates || !(sdLogPeriod <= s.largestPeriodError)) return nothing;
  const holdsDecay = sdLogDecay <= s.largestDecayError;
  return {
    ...nothing,
    periodNm,
    periodSdNm: periodNm * Math.hypot(sdLogPeriod, MODEL_SD.period),
    decayNm: holdsDecay ? decayNm : null,
    decaySdNm: holdsDecay ? decayNm * Math.hypot(sdLogDecay, MODEL_SD.decay) : null,
  };
}

const NOTHING: FringeEstimate = {
  contrastRad: null,
  contrastSdRad: null,
  offsetNm: null,
  periodNm: null,
  periodSdNm: null,
  decayNm: null,
  decaySdNm: null,
};

function fittedCurve(profile: Profile, forward: FringeForward, nuisances: Float64Array, p: Float64Array): FittedCurve {
  const n = profile.count;
  const curve = { across: new Float64Array(n), along: new Float64Array(n), offset: new Float64Array(n) };
  const out = new Float64Array(2 + 2 * FRINGE_PARAMETERS);
  for (let k = 0; k < n; k++) {
    forward.change(profile.distanceNm[k], out, false);
    curve.across[k] = out[0];
    curve.along[k] = out[1];
    for (let c = 0; c < NUISANCES; c++) curve.offset[k] += p[c] * nuisances[k * NUISANCES + c];
  }
  return curve;
}

/** The two amplitudes and the nuisances are nearly linear: one step from zero finds them. */
function linearStart(problem: LeastSquaresProblem, start: Float64Array): void {
  const m = problem.parameters;
  const linear = NUISANCES + 2;
  const r = new Float64Array(problem.residuals);
  const jacobian = new Float64Array(problem.residuals * m);
  problem.evaluate(Float64Array.from(start), r, jacobian);
  const normal = new Float64Array(linear * linear);
  const gradient = new Float64Array(linear);
  for (let k = 0; k < r.length; k++) {
    for (let a = 0; a < linear; a++) {
      gradient[a] -= jacobian[k * m + a] * r[k];
      for (let b = 0; b < linear; b++) normal[a * linear + b] += jacobian[k * m + a] * jacobian[k * m + b];
    }
  }
  for (let a = 0; a < linear; a++) normal[a * linear + a] *= 1 + 1e-9;
  if (!choleskyInPlace(normal, linear)) return;
  const inverse = new Float64Array(linear * linear);
  choleskyInvert(normal, linear, inverse);
  for (let a = 0; a < linear; a++) for (let b = 0; b < linear; b++) start[a] += inverse[a * linear + b] * gradient[b];
}

/** Departure of the optical phase from that of the two-state step alone, as the tip sees both, rad. */
function departure(forward: FringeForward, table: FringeTable, chord: Chord, d: number, out: Float64Array): number {
  const u = shareAt(d, table.blur, scratch);
  const along = (1 - u) * chord.alongInsulating + u * chord.alongMetallic;
  forward.change(d, out, false);
  return Math.atan2(chord.height + out[0], along + out[1]) - Math.atan2(chord.height, along);
}
const scratch = new Float64Array(4);

function largestDeparture(
  forward: FringeForward,
  table: FringeTable,
  chord: Chord,
  sign: number,
  reachNm: number,
): { rad: number; distanceNm: number } {
  const out = new Float64Array(2 + 2 * FRINGE_PARAMETERS);
  const from = -3 * table.blur.sigmaNm;
  const steps = Math.max(2, Math.ceil((reachNm - from) / SEARCH_NM));
  const values = Float64Array.from({ length: steps + 1 }, (_, k) => {
    const phi = departure(forward, table, chord, sign * (from + k * SEARCH_NM), out);
    return Math.atan2(Math.sin(phi), Math.cos(phi));
  });
  let best = 0;
  for (let k = 1; k <= steps; k++) if (Math.abs(values[k]) > Math.abs(values[best])) best = k;
  let shift = 0;
  if (best > 0 && best < steps) {
    const bend = values[best - 1] - 2 * values[best] + values[best + 1];
    if (bend !== 0) shift = Math.max(-0.5, Math.min(0.5, (0.5 * (values[best - 1] - values[best + 1])) / bend));
  }
  return { rad: values[best], distanceNm: sign * (from + (best + shift) * SEARCH_NM) };
}

/** Variance of the departure at one place; at an extremum its place does not matter to first order. */
function departureVariance(
  forward: FringeForward,
  table: FringeTable,
  chord: Chord,
  d: number,
  covariance: Float64Array,
  fitted: number,
): number {
  const out = new Float64Array(2 + 2 * FRINGE_PARAMETERS);
  const u = shareAt(d, table.blur, scratch);
  forward.change(d, out, true);
  const along = (1 - u) * chord.alongInsulating + u * chord.alongMetallic + out[1];
  const across = chord.height + out[0];
  const size2 = along * along + across * across;
  const count = fitted - NUISANCES;
  const slope = Array.from({ length: count }, (_, m) => (along * out[2 + m] - across * out[6 + m]) / size2);
  let v = 0;
  for (let a = 0; a < count; a++)
    for (let b = 0; b < count; b++) v += slope[a] * slope[b] * covariance[(NUISANCES + a) * fitted + NUISANCES + b];
  return Math.max(0, v);
}
