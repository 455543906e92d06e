import { choleskyInPlace } from "../../numerics/cholesky.js";
import { makeRandom, type Random } from "../../numerics/random.js";
import type { Chord } from "./chord.js";
import { shareAt, type FringeTable } from "./basis.js";
import type { Profile } from "./profile.js";
import type { SearchBasis } from "./search_basis.js";

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

/** A candidate whose cosine and sine are this much alike has only one amplitude that can be told. */
const LEAST_LEFT = 0.02;
/** Directions of the candidates' common space that matter less than this are left out. */
const NEGLIGIBLE = 0.03;

/** Bases of a frame, by side. */
export type SearchBases = Readonly<Record<Side, SearchBasis>>;

/** sup-F test for a fringe whose period, decay and phase do not exist under the null (Davies 1977, Biometrika 64, 247; 1987, 74, 33):
 *  the largest, over a fixed grid of periods and decays on either side, of the drop of χ² that the two linear amplitudes of
 *  A cos(2πx/Λ + ψ) e^{−x/ℓ} bring, over the scatter left where that is more than the noise allows. Its distribution under the null is
 *  simulated with the measured covariance, nuisances included; p = (1 + exceeding)/(1 + draws). Beyond what the draws resolve the tail of a
 *  χ² field goes on, P(sup > c) ∝ c e^{−c/2} (Davies 1987; two parameters searched), from the level that a twentieth of the
 *  draws exceed, down to `LEAST_P`. null without a candidate. */
export function supTest(
  profile: Profile,
  table: FringeTable,
  bases: SearchBases,
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
  let total = 0;
  for (let k = 0; k < n; k++) total += y[k] * y[k];

  const space = new CandidateSpace(profile, l, y, bases, candidates);
  if (space.count === 0) return null;
  const found = space.largestDrop(space.y);
  const dof = n - 2;
  const statistic = studentised(found.drop, total, dof);
  const best = space.kept[found.pair];
  return { pValue: pValueOf(statistic, space, dof, draws, makeRandom(seed)), statistic, best };
}

function studentised(drop: number, total: number, dof: number): number {
  return dof > 0 ? drop / Math.max(1, (total - drop) / dof) : drop;
}

/** The space that the candidates span in the whitened profile, with orthonormal axes: those of the metallic side first, so that its candidates
 *  have no component along the rest. */
class CandidateSpace {
  readonly dimensions: number;
  readonly kept: Candidate[] = [];
  /** The profile's coordinates. */
  readonly y: Float64Array;
  private readonly metallic: number;
  /** An orthonormal pair a candidate, row-major [2 · candidates, dimensions]. */
  private readonly pairs: Float64Array;

  constructor(
    profile: Profile,
    l: Float64Array,
    y: Float64Array,
    bases: SearchBases,
    candidates: readonly Candidate[],
  ) {
    const n = profile.count;
    const km = candidates.some((c) => c.side === "metallic") ? bases.metallic.size : 0;
    const ki = candidates.some((c) => c.side === "insulating") ? bases.insulating.size : 0;
    const r = km + ki;
    const white = new Float64Array(n * r);
    if (km > 0) bases.metallic.at(profile.distanceNm, white, r, 0);
    if (ki > 0) bases.insulating.at(profile.distanceNm, white, r, km);
    whitenColumns(l, n, white, r);
    const gram = new Float64Array(r * r);
    const withY = new Float64Array(r);
    for (let k = 0; k < n; k++) {
      const row = k * r;
      for (let a = 0; a < r; a++) {
        const v = white[row + a];
        // Functions of the metallic side are 0 far on the other one.
        if (v === 0) continue;
        withY[a] += v * y[k];
        const line = a * r;
        for (let b = 0; b <= a; b++) gram[line + b] += v * white[row + b];
      }
    }
    const { coordinates, axes, reach } = axesOf(gram, r);
    const d = axes.length;
    this.dimensions = d;
    this.metallic = axes.filter((a) => a < km).length;
    this.y = new Float64Array(d);
    axes.forEach((a, j) => {
      let s = withY[a];
      for (let i = 0; i < j; i++) s -= coordinates[a * r + i] * this.y[i];
      this.y[j] = s / coordinates[a * r + j];
    });
    const pairs = new Float64Array(2 * candidates.length * d);
    this.pairs = pairs;
    for (const c of candidates) {
      const at = 2 * this.kept.length * d;
      const from = c.side === "metallic" ? 0 : km;
      const { size, coefficients } = bases[c.side];
      pairs.fill(0, at, at + 2 * d);
      for (let part = 0; part < 2; part++) {
        const own = (2 * c.member + part) * size;
        const to = at + part * d;
        for (let b = 0; b < size; b++) {
          const f = coefficients[own + b];
          const line = (from + b) * r;
          const many = reach[from + b];
          for (let a = 0; a < many; a++) pairs[to + a] += f * coordinates[line + a];
        }
      }
      if (orthonormalise(pairs, at, d)) this.kept.push(c);
    }
  }

  get count(): number {
    return this.kept.length;
  }

  /** The largest drop of χ² that a candidate brings where the coordinates are x, and which. */
  largestDrop(x: Float64Array): { drop: number; pair: number } {
    let drop = 0;
    let pair = 0;
    for (let g = 0; g < this.kept.length; g++) {
      const d = this.dropOf(g, x);
      if (d > drop) {
        drop = d;
        pair = g;
      }
    }
    return { drop, pair };
  }

  /** The same, the drop alone. */
  mostOf(x: Float64Array): number {
    let most = 0;
    for (let g = 0; g < this.kept.length; g++) {
      const d = this.dropOf(g, x);
      if (d > most) most = d;
    }
    return most;
  }

  private dropOf(g: number, x: Float64Array): number {
    const { pairs, dimensions, kept, metallic } = this;
    const used = kept[g].side === "metallic" ? metallic : dimensions;
    const ga = 2 * g * dimensions;
    const gb = ga + dimensions;
    let a = 0;
    let b = 0;
    for (let k = 0; k < used; k++) {
      a += pairs[ga + k] * x[k];
      b += pairs[gb + k] * x[k];
    }
    return a * a + b * b;
  }
}

/** Orthonormal axes of r functions with these products (lower triangle), by Cholesky's scheme: a function that the axes so far hold to within
 *  `NEGLIGIBLE` brings none. Coordinates row-major [r, r], of which the first `reach` of each function count; `axes` names the function that brought each. */
function axesOf(gram: Float64Array, r: number): { coordinates: Float64Array; axes: number[]; reach: Int32Array } {
  const coordinates = new Float64Array(r * r);
  const reach = new Int32Array(r);
  const axes: number[] = [];
  for (let a = 0; a < r; a++) {
    const line = a * r;
    let left = gram[line + a];
    for (let j = 0; j < axes.length; j++) {
      const other = axes[j] * r;
      let s = gram[line + axes[j]];
      for (let i = 0; i < j; i++) s -= coordinates[line + i] * coordinates[other + i];
      const x = s / coordinates[other + j];
      coordinates[line + j] = x;
      left -= x * x;
    }
    if (left > NEGLIGIBLE * NEGLIGIBLE * gram[line + a]) {
      coordinates[line + axes.length] = Math.sqrt(left);
      axes.push(a);
    }
    reach[a] = axes.length;
  }
  return { coordinates, axes, reach };
}

/** Makes two rows of length r from `at` on orthonormal; false where there is nothing, or they are alike. */
function orthonormalise(x: Float64Array, at: number, r: number): boolean {
  const b = at + r;
  let aa = 0;
  let ab = 0;
  let bb = 0;
  for (let k = 0; k < r; k++) {
    aa += x[at + k] * x[at + k];
    ab += x[at + k] * x[b + k];
    bb += x[b + k] * x[b + k];
  }
  if (!(aa > 0 && bb > 0)) return false;
  const common = ab / aa;
  let rest = 0;
  for (let k = 0; k < r; k++) {
    x[b + k] -= common * x[at + k];
    rest += x[b + k] * x[b + k];
  }
  if (!(rest > LEAST_LEFT * LEAST_LEFT * bb)) return false;
  const fa = 1 / Math.sqrt(aa);
  const fb = 1 / Math.sqrt(rest);
  for (let k = 0; k < r; k++) {
    x[at + k] *= fa;
    x[b + k] *= fb;
  }
  return true;
}

/** Smaller ones say nothing about the world: the noise is not known so well. */
export const LEAST_P = 1e-6;
/** When so many draws have exceeded the statistic the simulation stops; with fewer at its end the tail takes over. */
const FEW = 10;
/** Draws after which a statistic far beyond all of them is left to the tail. */
const FIRST = 199;

/** Draws the statistic in noise alone until it has exceeded the one found `FEW` times, then p = FEW/draws (Besag & Clifford 1991,
 *  Biometrika 78, 301), or `draws` times, then p = (1 + exceeding)/(1 + draws). */
function pValueOf(statistic: number, space: CandidateSpace, dof: number, draws: number, random: Random): number {
  const drawn = new Float64Array(draws);
  const x = new Float64Array(space.dimensions);
  // The noise outside the candidates' space enters through its χ² only.
  const rest = dof + 2 - x.length;
  let exceeding = 0;
  for (let d = 0; d < draws; d++) {
    let total = chiSquared(rest, random);
    for (let k = 0; k < x.length; k++) {
      x[k] = random.normal();
      total += x[k] * x[k];
    }
    drawn[d] = studentised(space.mostOf(x), total, dof);
    if (drawn[d] >= statistic && ++exceeding === FEW) return exceeding / (d + 1);
    if (d + 1 === FIRST && exceeding === 0) {
      const tail = tailBeyond(drawn.slice(0, FIRST), statistic);
      if (tail < LEAST_P / 10) return LEAST_P;
    }
  }
  const counted = (1 + exceeding) / (1 + draws);
  return Math.max(LEAST_P, Math.min(counted, tailBeyond(drawn, statistic)));
}

/** P(sup > c) ∝ c e^{−c/2} from the level that a twentieth of the draws exceed. */
function tailBeyond(drawn: Float64Array, statistic: number): number {
  const anchor = Math.max(FEW, Math.round(drawn.length / 20));
  const level = drawn.sort()[drawn.length - anchor];
  return (anchor / drawn.length) * (statistic / level) * Math.exp(-(statistic - level) / 2);
}

/** χ² of `dof` degrees by Wilson & Hilferty's cube (1931, PNAS 17, 684); 0 for none. */
function chiSquared(dof: number, random: Random): number {
  if (dof <= 0) return 0;
  const a = 2 / (9 * dof);
  return dof * Math.max(0, 1 - a + Math.sqrt(a) * random.normal()) ** 3;
}
