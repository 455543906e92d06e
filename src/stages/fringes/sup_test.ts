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

/** What makes up the profile without a fringe, per bin, row-major [bins, NUISANCES]: offsets of the two states across the chord, and a slow turn
 *  of the phase along the normal. */
export const NUISANCES = 3;

export function nuisanceMatrix(profile: Profile, table: FringeTable, chord: Chord, reachNm: number): Float64Array {
  const out = new Float64Array(profile.count * NUISANCES);
  const scratch = new Float64Array(4);
  for (let k = 0; k < profile.count; k++) {
    const d = profile.distanceNm[k];
    const u = shareAt(d, table.blur, scratch);
    out[k * NUISANCES] = 1 - u;
    out[k * NUISANCES + 1] = u;
    out[k * NUISANCES + 2] = ((1 - u) * chord.alongInsulating + u * chord.alongMetallic) * (d / reachNm);
  }
  return out;
}

/** Columns of a matrix, whitened: solves L y = x in place for each column of length n. */
export function whiten(l: Float64Array, n: number, x: Float64Array): void {
  for (let i = 0; i < n; i++) {
    let s = x[i];
    for (let j = 0; j < i; j++) s -= l[i * n + j] * x[j];
    x[i] = s / l[i * n + i];
  }
}

/** Lower Cholesky factor of the profile's covariance; a measured covariance that is not positive definite gets the least
 *  lift of its diagonal that makes it so. */
export function noiseFactor(profile: Profile): Float64Array {
  const n = profile.count;
  for (let lift = 0; ; lift = lift === 0 ? 1e-6 : lift * 10) {
    const l = Float64Array.from(profile.covariance);
    for (let i = 0; i < n; i++) l[i * n + i] *= 1 + lift;
    if (choleskyInPlace(l, n)) return l;
  }
}

const dot = (a: Float64Array, b: Float64Array): number => {
  let s = 0;
  for (let k = 0; k < a.length; k++) s += a[k] * b[k];
  return s;
};

/** Takes `q` (unit vectors) out of `x`; returns the norm left. */
function remove(x: Float64Array, q: readonly Float64Array[]): number {
  for (const v of q) {
    const s = dot(x, v);
    for (let k = 0; k < x.length; k++) x[k] -= s * v[k];
  }
  return Math.sqrt(dot(x, x));
}

const scaled = (x: Float64Array, f: number): Float64Array => x.map((v) => v * f);

/** Of a candidate less than this is left once the nuisances are out: it cannot be told from them. */
const LEAST_LEFT = 0.02;
/** Directions of the candidates' common space that matter less than this are left out of the simulation. */
const NEGLIGIBLE = 0.03;

/** sup-F test for a fringe whose period, decay and phase do not exist under the null (Davies 1977, Biometrika 64, 247; 1987, 74, 33):
 *  the largest, over a fixed grid of periods and decays on either side, of the drop of χ² that the two linear amplitudes of
 *  A cos(2πx/Λ + ψ) e^{−x/ℓ} bring once the nuisances are out, over the scatter left where that is more than the noise allows. Its distribution under the null is
 *  simulated with the measured covariance; p = (1 + exceeding)/(1 + draws). Beyond what the draws resolve the tail of a
 *  χ² field goes on, P(sup > c) ∝ c e^{−c/2} (Davies 1987; two parameters searched), from the level that a twentieth of the
 *  draws exceed, down to `LEAST_P`. null where no candidate can be told from the nuisances. */
export function supTest(
  profile: Profile,
  table: FringeTable,
  chord: Chord,
  candidates: readonly Candidate[],
  reachNm: number,
  draws: number,
  seed: number,
): SupTest | null {
  const n = profile.count;
  const l = noiseFactor(profile);
  const y = Float64Array.from(profile.value);
  whiten(l, n, y);
  const known: Float64Array[] = [];
  const nuisances = nuisanceMatrix(profile, table, chord, reachNm);
  for (let c = 0; c < NUISANCES; c++) {
    const x = Float64Array.from({ length: n }, (_, k) => nuisances[k * NUISANCES + c]);
    whiten(l, n, x);
    const before = Math.sqrt(dot(x, x));
    const left = remove(x, known);
    if (left > 1e-6 * before) known.push(scaled(x, 1 / left));
  }
  const total = remove(y, known) ** 2;

  // An orthonormal pair a candidate, in the whitened space without the nuisances.
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
    const size = Math.sqrt(dot(a, a) + dot(b, b));
    const left = remove(a, known);
    if (!(left > LEAST_LEFT * size)) continue;
    const qa = scaled(a, 1 / left);
    remove(b, known);
    const rest = remove(b, [qa]);
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
  const dof = n - known.length - 2;
  statistic = studentised(statistic, total, dof);
  const exceeded = simulate(pairs, dof, draws, makeRandom(seed));
  return { pValue: tailProbability(exceeded, statistic), statistic, best };
}

function studentised(drop: number, total: number, dof: number): number {
  return dof > 0 ? drop / Math.max(1, (total - drop) / dof) : drop;
}

/** The statistic in noise alone, `draws` times, sorted downwards. Works in the space that the candidates span, a few tens of dimensions. */
function simulate(pairs: readonly Float64Array[], dof: number, draws: number, random: Random): Float64Array {
  const span: Float64Array[] = [];
  const coordinates: number[][] = [];
  for (const q of pairs) {
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
    coordinates.push(c);
  }
  const r = span.length;
  const flat = new Float64Array(pairs.length * r);
  coordinates.forEach((c, k) => flat.set(c, k * r));
  const rest = dof + 2 - r;
  const out = new Float64Array(draws);
  const xi = new Float64Array(r);
  for (let d = 0; d < draws; d++) {
    let total = 0;
    for (let k = 0; k < r; k++) {
      xi[k] = random.normal();
      total += xi[k] * xi[k];
    }
    total += chiSquared(rest, random);
    let most = 0;
    for (let g = 0; g < pairs.length; g += 2) {
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
    out[d] = studentised(most, total, dof);
  }
  return out.sort((a, b) => b - a);
}

/** χ² of `dof` degrees by Wilson & Hilferty's cube (1931, PNAS 17, 684); 0 for none. */
function chiSquared(dof: number, random: Random): number {
  if (dof <= 0) return 0;
  const a = 2 / (9 * dof);
  return dof * Math.max(0, 1 - a + Math.sqrt(a) * random.normal()) ** 3;
}

/** Smaller ones say nothing about the world: the noise is not known so well. */
export const LEAST_P = 1e-6;
/** With fewer draws above the statistic than this the tail takes over. */
const FEW = 10;

function tailProbability(sorted: Float64Array, statistic: number): number {
  const draws = sorted.length;
  let exceeding = 0;
  while (exceeding < draws && sorted[exceeding] >= statistic) exceeding++;
  const counted = (1 + exceeding) / (1 + draws);
  if (exceeding >= FEW) return counted;
  const anchor = Math.max(FEW, Math.round(draws / 20));
  const level = sorted[anchor - 1];
  const tail = (anchor / draws) * (statistic / level) * Math.exp(-(statistic - level) / 2);
  return Math.max(LEAST_P, Math.min(counted, tail));
}
