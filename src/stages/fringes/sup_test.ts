import { choleskyInPlace } from "../../numerics/cholesky.js";
import { makeRandom, type Random } from "../../numerics/random.js";
import type { Chord } from "./chord.js";
import { shareAt, type FringeTable } from "./basis.js";
import type { Profile } from "./profile.js";

export type Side = "metallic" | "insulating";

/** One way to look for a fringe: a side of the wall, and a period and decay of the grid. */
export interface Candidate {
  readonly side: Side;
  readonly member: number;
}

export interface SupTest {
  readonly pValue: number;
  readonly statistic: number;
  readonly best: Candidate;
}

/** What may make up the profile without a fringe, per bin, row-major [bins, NUISANCES], each at one standard deviation: phase offsets of the
 *  two states beside this wall, and a slow turn of the phase along the normal. Parameters with a normal prior of sd 1: where the profile
 *  reaches far they are as good as free, where it is short they keep an offset from passing for a fringe and a fringe from hiding in an offset. */
export const NUISANCES = 3;

export function nuisanceMatrix(
  profile: Profile,
  table: FringeTable,
  chord: Chord,
  reachNm: number,
  levelSdRad: number,
): Float64Array {
  const out = new Float64Array(profile.count * NUISANCES);
  const scratch = new Float64Array(4);
  for (let k = 0; k < profile.count; k++) {
    const d = profile.distanceNm[k];
    const u = shareAt(d, table.blur, scratch);
    const insulating = levelSdRad * (1 - u) * levelArm(chord, chord.alongInsulating);
    const metallic = levelSdRad * u * levelArm(chord, chord.alongMetallic);
    out[k * NUISANCES] = insulating;
    out[k * NUISANCES + 1] = metallic;
    out[k * NUISANCES + 2] = (insulating + metallic) * (d / reachNm);
  }
  return out;
}

/** How far an offset of 1 rad moves a level across the chord; never less than a tenth of the chord, for errors of its modulus too. */
function levelArm(chord: Chord, along: number): number {
  return Math.max(Math.abs(along), 0.1 * chord.length);
}

/** Columns of a matrix, whitened: solves L y = x in place for each column of length n. */
export function whiten(l: Float64Array, n: number, x: Float64Array): void {
  for (let i = 0; i < n; i++) {
    let s = x[i];
    for (let j = 0; j < i; j++) s -= l[i * n + j] * x[j];
    x[i] = s / l[i * n + i];
  }
}

/** The same for all columns of a row-major matrix [n, columns] at once. */
export function whitenColumns(l: Float64Array, n: number, x: Float64Array, columns: number): void {
  for (let i = 0; i < n; i++) {
    const row = i * columns;
    for (let j = 0; j < i; j++) {
      const f = l[i * n + j];
      for (let c = 0; c < columns; c++) x[row + c] -= f * x[j * columns + c];
    }
    const inverse = 1 / l[i * n + i];
    for (let c = 0; c < columns; c++) x[row + c] *= inverse;
  }
}

/** Lower Cholesky factor of the profile's covariance, with that of the nuisances where they are given; a measured covariance that is not positive definite gets the least
 *  lift of its diagonal that makes it so. */
export function noiseFactor(profile: Profile, nuisances: Float64Array | null): Float64Array {
  const n = profile.count;
  let mean = 0;
  for (let i = 0; i < n; i++) mean += Math.max(0, profile.covariance[i * n + i]) / n;
  const offsets = nuisances ?? new Float64Array(n * NUISANCES);
  // The lift is common to all bins: one with a variance near zero or below it, from a correlation that is poorly measured, must gain too.
  for (let lift = 0; ; lift = lift === 0 ? 1e-6 : lift * 10) {
    if (!(lift < 1e9)) throw new Error("the noise of a fringe profile has no covariance");
    const l = Float64Array.from(profile.covariance);
    for (let i = 0; i < n; i++) {
      l[i * n + i] = Math.max(l[i * n + i], lift === 0 ? l[i * n + i] : 0) + lift * mean;
      for (let j = 0; j <= i; j++) {
        for (let c = 0; c < NUISANCES; c++) l[i * n + j] += offsets[i * NUISANCES + c] * offsets[j * NUISANCES + c];
      }
    }
    if (choleskyInPlace(l, n)) return l;
  }
}

const dot = (a: Float64Array, b: Float64Array): number => {
  let s = 0;
  for (let k = 0; k < a.length; k++) s += a[k] * b[k];
  return s;
};

const scaled = (x: Float64Array, f: number): Float64Array => x.map((v) => v * f);

/** A candidate whose cosine and sine are this much alike has only one amplitude that can be told. */
const LEAST_LEFT = 0.02;
/** Directions of the candidates' common space that matter less than this are left out of the simulation. */
const NEGLIGIBLE = 0.03;

/** sup-F test for a fringe whose period, decay and phase do not exist under the null (Davies 1977, Biometrika 64, 247; 1987, 74, 33):
 *  the largest, over a fixed grid of periods and decays on either side, of the drop of χ² that the two linear amplitudes of
 *  A cos(2πx/Λ + ψ) e^{−x/ℓ} bring, over the scatter left where that is more than the noise allows. Its distribution under the null is
 *  simulated with the measured covariance, nuisances included; p = (1 + exceeding)/(1 + draws). Beyond what the draws resolve the tail of a
 *  χ² field goes on, P(sup > c) ∝ c e^{−c/2} (Davies 1987; two parameters searched), from the level that a twentieth of the
 *  draws exceed, down to `LEAST_P`. null without a candidate. */
export function supTest(
  profile: Profile,
  table: FringeTable,
  chord: Chord,
  candidates: readonly Candidate[],
  reachNm: number,
  levelSdRad: number,
  draws: number,
  seed: number,
): SupTest | null {
  const n = profile.count;
  const l = noiseFactor(profile, nuisanceMatrix(profile, table, chord, reachNm, levelSdRad));
  const y = Float64Array.from(profile.value);
  whiten(l, n, y);
  const total = dot(y, y);

  // An orthonormal pair a candidate, in the whitened space.
  const pairs: Float64Array[] = [];
  const kept: Candidate[] = [];
  const out = new Float64Array(2);
  for (const c of candidates) {
    const a = new Float64Array(n);
    const b = new Float64Array(n);
    for (let k = 0; k < n; k++) {
      table.response(c.member, c.side === "metallic", chord, profile.distanceNm[k], out);
      a[k] = out[0];
      b[k] = out[1];
    }
    whiten(l, n, a);
    whiten(l, n, b);
    const left = Math.sqrt(dot(a, a));
    const size = Math.sqrt(dot(b, b));
    if (!(left > 0 && size > 0)) continue;
    const qa = scaled(a, 1 / left);
    const common = dot(qa, b);
    for (let k = 0; k < n; k++) b[k] -= common * qa[k];
    const rest = Math.sqrt(dot(b, b));
    if (!(rest > LEAST_LEFT * size)) continue;
    pairs.push(qa, scaled(b, 1 / rest));
    kept.push(c);
  }
  if (kept.length === 0) return null;

  let statistic = 0;
  let best = kept[0];
  for (let g = 0; g < kept.length; g++) {
    const drop = dot(pairs[2 * g], y) ** 2 + dot(pairs[2 * g + 1], y) ** 2;
    if (drop > statistic) {
      statistic = drop;
      best = kept[g];
    }
  }
  const dof = n - 2;
  statistic = studentised(statistic, total, dof);
  return { pValue: pValueOf(statistic, pairs, dof, draws, makeRandom(seed)), statistic, best };
}

function studentised(drop: number, total: number, dof: number): number {
  return dof > 0 ? drop / Math.max(1, (total - drop) / dof) : drop;
}

/** Smaller ones say nothing about the world: the noise is not known so well. */
export const LEAST_P = 1e-6;
/** With fewer draws above the statistic than this at the end the tail takes over; with twice as many before it the simulation stops. */
const FEW = 10;
/** Draws after which a statistic far beyond all of them is left to the tail. */
const FIRST = 199;

/** Draws the statistic in noise alone until it has exceeded the one found 20 times, then p = 20/draws (Besag & Clifford 1991,
 *  Biometrika 78, 301), or `draws` times, then p = (1 + exceeding)/(1 + draws). */
function pValueOf(
  statistic: number,
  pairs: readonly Float64Array[],
  dof: number,
  draws: number,
  random: Random,
): number {
  const nothing = new NullStatistic(pairs, dof, random);
  const drawn = new Float64Array(draws);
  let exceeding = 0;
  for (let d = 0; d < draws; d++) {
    drawn[d] = nothing.draw();
    if (drawn[d] >= statistic && ++exceeding === 2 * FEW) return exceeding / (d + 1);
    if (d + 1 === FIRST && exceeding === 0) {
      const tail = tailBeyond(drawn.slice(0, FIRST), statistic);
      if (tail < LEAST_P / 10) return LEAST_P;
    }
  }
  const counted = (1 + exceeding) / (1 + draws);
  if (exceeding >= FEW) return counted;
  return Math.max(LEAST_P, Math.min(counted, tailBeyond(drawn, statistic)));
}

/** P(sup > c) ∝ c e^{−c/2} from the level that a twentieth of the draws exceed. */
function tailBeyond(drawn: Float64Array, statistic: number): number {
  const anchor = Math.max(FEW, Math.round(drawn.length / 20));
  const level = drawn.sort((a, b) => b - a)[anchor - 1];
  return (anchor / drawn.length) * (statistic / level) * Math.exp(-(statistic - level) / 2);
}

/** The statistic in noise alone. Works in the space that the candidates span, a few tens of dimensions; the rest of the noise
 *  enters through its χ² only. */
class NullStatistic {
  private readonly flat: Float64Array;
  private readonly r: number;
  private readonly rest: number;
  private readonly xi: Float64Array;

  constructor(
    private readonly pairs: readonly Float64Array[],
    private readonly dof: number,
    private readonly random: Random,
  ) {
    const span: Float64Array[] = [];
    const coordinates = pairs.map((q) => {
      const x = Float64Array.from(q);
      const c: number[] = [];
      for (const v of span) {
        const s = dot(x, v);
        c.push(s);
        for (let k = 0; k < x.length; k++) x[k] -= s * v[k];
      }
      const left = Math.sqrt(dot(x, x));
      if (left > NEGLIGIBLE) {
        c.push(left);
        span.push(scaled(x, 1 / left));
      }
      return c;
    });
    this.r = span.length;
    this.flat = new Float64Array(pairs.length * this.r);
    coordinates.forEach((c, k) => this.flat.set(c, k * this.r));
    this.rest = dof + 2 - this.r;
    this.xi = new Float64Array(this.r);
  }

  draw(): number {
    const { flat, r, xi, random, dof } = this;
    let total = chiSquared(this.rest, random);
    for (let k = 0; k < r; k++) {
      xi[k] = random.normal();
      total += xi[k] * xi[k];
    }
    let most = 0;
    for (let g = 0; g < this.pairs.length; g += 2) {
      let a = 0;
      let b = 0;
      const ga = g * r;
      const gb = ga + r;
      for (let k = 0; k < r; k++) {
        a += flat[ga + k] * xi[k];
        b += flat[gb + k] * xi[k];
      }
      const drop = a * a + b * b;
      if (drop > most) most = drop;
    }
    return studentised(most, total, dof);
  }
}

/** χ² of `dof` degrees by Wilson & Hilferty's cube (1931, PNAS 17, 684); 0 for none. */
function chiSquared(dof: number, random: Random): number {
  if (dof <= 0) return 0;
  const a = 2 / (9 * dof);
  return dof * Math.max(0, 1 - a + Math.sqrt(a) * random.normal()) ** 3;
}
