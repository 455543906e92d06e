import { chi2UpperTail } from "../../numerics/distributions.js";
import { kink } from "../../numerics/kink.js";
import type { CorrelatedNoise } from "./correlation.js";
import type { Projector } from "./direction.js";
import type { NearestWall } from "../../raster/nearest_wall.js";
import type { Stretches } from "./stretches.js";

export interface AlarmOptions {
  /** Within this distance a fringe is looked for … */
  readonly reachNm: number;
  /** … and as far as this its turn is measured, where one is found: any pixel that a fit may take must know its own. */
  readonly farthestNm: number;
  readonly marginNm: number;
  readonly binNm: number;
  readonly w: number;
  readonly sigma: number;
  readonly level: number;
  readonly walls: number;
}

/** Least share of the information that the radial direction must keep to be of use. */
const LEAST_INFORMATION = 0.3;

/** How far a fringe turns the complex signal of a wall against the two-state mixture, at bins of the signed distance. */
export class PhaseTurn {
  constructor(
    private readonly angle: Float64Array,
    private readonly binNm: number,
  ) {}

  /** Turn at a distance, rad; linear between the bins' middles. */
  at(distanceNm: number): number {
    const n = this.angle.length;
    const x = Math.min(n - 1, Math.max(0, distanceNm / this.binNm + n / 2 - 0.5));
    const k = Math.min(n - 2, Math.floor(x));
    return this.angle[k] + (x - k) * (this.angle[k + 1] - this.angle[k]);
  }

  /** Its slope, rad/nm, over one bin. */
  slope(distanceNm: number): number {
    return (this.at(distanceNm + this.binNm / 2) - this.at(distanceNm - this.binNm / 2)) / this.binNm;
  }
}

/** For which walls the signal leaves the chord between the two levels as it does at a fringe: bins of the component across
 *  the chord against distance, an offset on either side taken out, by χ² with the measured noise. Also all walls together, which
 *  finds what is too weak in any one of them. Only the choice of direction hangs on it: an alarm without a fringe costs
 *  precision, not truth.
 *  @returns per wall null, or how its signal is turned */
export function fringeAlarms(
  projector: Projector,
  stretches: Stretches,
  near: NearestWall,
  noise: CorrelatedNoise,
  o: AlarmOptions,
): (PhaseTurn | null)[] {
  const none: (PhaseTurn | null)[] = Array.from({ length: o.walls }, () => null);
  if (projector.radialInformation < LEAST_INFORMATION) return none;
  const bins = 2 * Math.ceil(Math.max(o.reachNm, o.farthestNm) / o.binNm);
  const tested = 2 * Math.ceil(o.reachNm / o.binNm);
  const sums = Array.from({ length: o.walls }, () => new Bins(bins, tested));
  const all = new Bins(bins, tested);
  const u = new Float64Array(4);
  const off = new Float64Array(4);
  const shareAt = new Float64Array(bins);
  for (let b = 0; b < bins; b++) {
    kink((b + 0.5 - bins / 2) * o.binNm, o.w, o.sigma, u);
    shareAt[b] = u[0];
  }
  for (const t of stretches.list) {
    for (let m = t.from; m < t.to; m++) {
      const pixel = stretches.pixels[m];
      const d = near.distanceNm[pixel];
      if (Math.abs(d) >= (bins / 2) * o.binNm || Math.abs(d) > stretches.freeNm[m] - o.marginNm) continue;
      const b = Math.min(bins - 1, Math.max(0, Math.floor(d / o.binNm + bins / 2)));
      projector.offChord(pixel, shareAt[b], off);
      sums[t.wall].add(b, off);
      all.add(b, off);
    }
  }
  const everywhere = all.tail(shareAt, noise.areaFactor) < o.level;
  return sums.map((s) => {
    if (!everywhere && !(s.tail(shareAt, noise.areaFactor) < o.level)) return null;
    return new PhaseTurn(s.turn(everywhere ? all : null), o.binNm);
  });
}

/** Pixels in a bin at which its own mean counts half. */
const ENOUGH = 10;

class Bins {
  private readonly weight: Float64Array;
  private readonly sum: Float64Array;

  private readonly pixels: Float64Array;
  private readonly re: Float64Array;
  private readonly im: Float64Array;

  /** @param tested so many bins in the middle enter the test */
  constructor(
    readonly count: number,
    private readonly tested: number,
  ) {
    this.weight = new Float64Array(count);
    this.sum = new Float64Array(count);
    this.pixels = new Float64Array(count);
    this.re = new Float64Array(count);
    this.im = new Float64Array(count);
  }

  /** `off` as from `Projector.offChord`. */
  add(b: number, off: Float64Array): void {
    this.weight[b] += 1 / off[1];
    this.sum[b] += off[0] / off[1];
    this.pixels[b]++;
    this.re[b] += off[2];
    this.im[b] += off[3];
  }

  /** Mean argument in each bin. Bins of few pixels lean on `support` (all walls together), or on no turn at all. */
  turn(support: Bins | null): Float64Array {
    const out = new Float64Array(this.count);
    for (let k = 0; k < this.count; k++) {
      const own = this.pixels[k] > 0 ? Math.atan2(this.im[k], this.re[k]) : 0;
      const other = support === null || support.pixels[k] === 0 ? 0 : Math.atan2(support.im[k], support.re[k]);
      const trust = this.pixels[k] / (this.pixels[k] + ENOUGH);
      out[k] = trust * own + (1 - trust) * other;
    }
    return out;
  }

  /** p-value of a mean that is not a·(1 − u) + b·u over the bins. */
  tail(share: Float64Array, inflation: number): number {
    let aa = 0;
    let ab = 0;
    let bb = 0;
    let ay = 0;
    let by = 0;
    let used = 0;
    const from = (this.count - this.tested) / 2;
    const to = from + this.tested;
    for (let k = from; k < to; k++) {
      const w = this.weight[k];
      if (w === 0) continue;
      used++;
      const lo = 1 - share[k];
      const hi = share[k];
      aa += w * lo * lo;
      ab += w * lo * hi;
      bb += w * hi * hi;
      ay += lo * this.sum[k];
      by += hi * this.sum[k];
    }
    const det = aa * bb - ab * ab;
    if (used < 4 || !(det > 1e-9 * aa * bb)) return 1;
    const a = (ay * bb - by * ab) / det;
    const b = (by * aa - ay * ab) / det;
    let chi2 = 0;
    for (let k = from; k < to; k++) {
      const w = this.weight[k];
      if (w === 0) continue;
      const r = this.sum[k] / w - a * (1 - share[k]) - b * share[k];
      chi2 += w * r * r;
    }
    return chi2UpperTail(chi2 / inflation, used - 2);
  }
}
