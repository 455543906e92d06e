import { choleskyInPlace, choleskyInvert } from "../../numerics/cholesky.js";
import { leastSquares, type LeastSquaresProblem } from "../../numerics/least_squares.js";
import { shareAt, type FringeTable } from "./basis.js";
import type { Chord } from "./chord.js";
import { FRINGE_PARAMETERS, type FringeForward, type Places } from "./forward.js";
import type { Profile } from "./profile.js";
import type { FringeSettings } from "./settings.js";
import { noiseFactor, NUISANCES, nuisanceMatrix, whiten, whitenColumns, type Candidate } from "./sup_test.js";

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

/** How well a wall's place is known over the length of a stretch, nm: distances near the wall and far from it, which see other parts of the wall, are
 *  off by so much against each other (1.5 nm a pixel in simulated frames, averaged over the stretch; it is gone with the true distances). */
const PLACE_SD_NM = 0.8;
/** A fringe is felt over this many decay lengths. */
const FELT_DECAYS = 1.5;

/** What the place of the wall adds to the relative standard deviation of the period. */
export function placeError(sideReachNm: number, decayNm: number): number {
  return PLACE_SD_NM / Math.min(sideReachNm, FELT_DECAYS * decayNm);
}

/** Strength, place, period and decay of the fringe that the test liked best, of one profile. */
export class FringeFit {
  private readonly n: number;
  private readonly l: Float64Array;
  private readonly places: Places;
  private readonly metallic: boolean;
  private readonly fixed: readonly [number, number];
  private readonly whiteValue: Float64Array;
  private readonly changed: Float64Array;

  constructor(
    private readonly profile: Profile,
    private readonly table: FringeTable,
    private readonly forward: FringeForward,
    private readonly chord: Chord,
    candidate: Candidate,
    private readonly reachNm: number,
  ) {
    this.n = profile.count;
    this.l = noiseFactor(profile, null);
    this.places = forward.places(profile.distanceNm);
    this.metallic = candidate.side === "metallic";
    const member = table.members[candidate.member];
    this.fixed = [Math.log(member.periodNm), Math.log(member.decayNm)];
    this.whiteValue = Float64Array.from(profile.value);
    whiten(this.l, this.n, this.whiteValue);
    this.changed = new Float64Array(this.n);
  }

  private get sideReachNm(): number {
    return this.metallic ? this.profile.reachMetallicNm : this.profile.reachInsulatingNm;
  }

  /** Largest departure of the optical phase by the fringe of the candidate's period and decay with the two amplitudes that fit best, rad. */
  roughContrastRad(levelSdRad: number): number {
    const problem = this.problem(levelSdRad, false);
    const start = new Float64Array(NUISANCES + 2);
    linearStart(problem, start);
    if (!problem.evaluate(start, new Float64Array(problem.residuals), null)) return 0;
    return this.forward.largestDeparture(this.sideReachNm).rad;
  }

  /** @param free fit period and decay too; without it they stay at the candidate's, and only the two amplitudes are fitted
   *  @param told give them, where they are known well enough; without it they only serve the contrast */
  estimate(levelSdRad: number, free: boolean, told: boolean, s: FringeSettings): FringeEstimate {
    const { forward, sideReachNm } = this;
    const problem = this.problem(levelSdRad, free);
    const fitted = problem.parameters;
    const start = new Float64Array(fitted);
    if (free) start.set(this.fixed, NUISANCES + 2);
    linearStart(problem, start);
    const fit = leastSquares(problem, start, { maxIterations: 60 });
    if (fit.status === "singular" || !fit.parameters.every(Number.isFinite)) return NOTHING;
    problem.evaluate(fit.parameters, new Float64Array(problem.residuals), null);

    const contrast = forward.largestDeparture(sideReachNm);
    const nothing = {
      ...NOTHING,
      contrastRad: contrast.rad,
      contrastSdRad: Math.sqrt(this.departureVariance(contrast.distanceNm, fit.covariance, fitted)),
      offsetNm: contrast.distanceNm,
      fitted: this.curve(problem.nuisances, fit.parameters),
    };
    if (!free || !told || fit.status !== "converged") return nothing;

    const sdLogPeriod = Math.sqrt(fit.covariance[(NUISANCES + 2) * fitted + NUISANCES + 2]);
    const sdLogDecay = Math.sqrt(fit.covariance[(NUISANCES + 3) * fitted + NUISANCES + 3]);
    const periodNm = Math.exp(fit.parameters[NUISANCES + 2]);
    const decayNm = Math.exp(fit.parameters[NUISANCES + 3]);
    // An oscillation is only one where the data hold enough of it, and it is not gone before it has begun.
    const oscillates = sideReachNm >= s.leastPeriods * periodNm && decayNm >= periodNm / 4;
    if (!oscillates || !(sdLogPeriod <= s.largestPeriodError)) return nothing;
    const holdsDecay = sdLogDecay <= s.largestDecayError;
    return {
      ...nothing,
      periodNm,
      periodSdNm: periodNm * Math.hypot(sdLogPeriod, placeError(sideReachNm, decayNm)),
      decayNm: holdsDecay ? decayNm : null,
      decaySdNm: holdsDecay ? decayNm * sdLogDecay : null,
    };
  }

  /** Residuals in the whitened space; parameters are the nuisances, then the fringe's, the last two of them only if `free`. */
  private problem(levelSdRad: number, free: boolean): FringeProblem {
    const { n, l, forward, places, table, whiteValue, changed } = this;
    const nuisances = nuisanceMatrix(this.profile, table, this.chord, this.reachNm, levelSdRad);
    const white = Float64Array.from(nuisances);
    whitenColumns(l, n, white, NUISANCES);
    const own = free ? FRINGE_PARAMETERS : FRINGE_PARAMETERS - 2;
    const fitted = NUISANCES + own;
    const shortest = Math.log(table.members.reduce((a, m) => Math.min(a, m.periodNm), Infinity) / 1.5);
    const longest = Math.log(6 * this.reachNm);
    const p = new Float64Array(FRINGE_PARAMETERS);
    const slopes = new Float64Array(n * own);
    return {
      nuisances,
      parameters: fitted,
      residuals: n + NUISANCES,
      evaluate: (q, r, jacobian) => {
        p.set(q.subarray(NUISANCES));
        if (!free) p.set(this.fixed, 2);
        const [, , logPeriod, logDecay] = p;
        if (logPeriod < shortest || logPeriod > longest || logDecay < shortest - 2 || logDecay > longest + 1)
          return false;
        if (!forward.set(p, 0)) return false;
        forward.acrossAt(places, changed);
        whiten(l, n, changed);
        for (let k = 0; k < n; k++) {
          let m = changed[k] - whiteValue[k];
          for (let c = 0; c < NUISANCES; c++) m += q[c] * white[k * NUISANCES + c];
          r[k] = m;
        }
        for (let c = 0; c < NUISANCES; c++) r[n + c] = q[c];
        if (jacobian === null) return true;
        forward.acrossSlopesAt(places, own, slopes);
        whitenColumns(l, n, slopes, own);
        jacobian.fill(0, n * fitted);
        for (let k = 0; k < n; k++) {
          for (let c = 0; c < NUISANCES; c++) jacobian[k * fitted + c] = white[k * NUISANCES + c];
          for (let c = 0; c < own; c++) jacobian[k * fitted + NUISANCES + c] = slopes[k * own + c];
        }
        for (let c = 0; c < NUISANCES; c++) jacobian[(n + c) * fitted + c] = 1;
        return true;
      },
    };
  }

  private curve(nuisances: Float64Array, p: Float64Array): FittedCurve {
    const { n, forward, places } = this;
    const curve = { across: new Float64Array(n), along: new Float64Array(n), offset: new Float64Array(n) };
    forward.acrossAt(places, curve.across);
    forward.lengthwiseAt(places, curve.along);
    for (let k = 0; k < n; k++)
      for (let c = 0; c < NUISANCES; c++) curve.offset[k] += p[c] * nuisances[k * NUISANCES + c];
    return curve;
  }

  /** Variance of the departure at one place; at an extremum its place does not matter to first order. */
  private departureVariance(distanceNm: number, covariance: Float64Array, fitted: number): number {
    const { forward, chord } = this;
    const here = forward.places([distanceNm]);
    const u = shareAt(distanceNm, this.table.blur, scratch);
    const [across, along] = [new Float64Array(1), new Float64Array(1)];
    forward.acrossAt(here, across);
    forward.lengthwiseAt(here, along);
    across[0] += chord.height;
    along[0] += (1 - u) * chord.alongInsulating + u * chord.alongMetallic;
    const size2 = along[0] * along[0] + across[0] * across[0];
    const count = fitted - NUISANCES;
    const [acrossSlope, alongSlope] = [new Float64Array(count), new Float64Array(count)];
    forward.acrossSlopesAt(here, count, acrossSlope);
    forward.lengthwiseSlopesAt(here, count, alongSlope);
    let v = 0;
    const slope = acrossSlope.map((a, m) => (along[0] * a - across[0] * alongSlope[m]) / size2);
    for (let a = 0; a < count; a++)
      for (let b = 0; b < count; b++) v += slope[a] * slope[b] * covariance[(NUISANCES + a) * fitted + NUISANCES + b];
    return Math.max(0, v);
  }
}

interface FringeProblem extends LeastSquaresProblem {
  /** Row-major [bins, NUISANCES], not whitened. */
  readonly nuisances: Float64Array;
}

const scratch = new Float64Array(4);

const NOTHING: FringeEstimate = {
  contrastRad: null,
  contrastSdRad: null,
  offsetNm: null,
  periodNm: null,
  periodSdNm: null,
  decayNm: null,
  decaySdNm: null,
};

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
