import { profileEnd } from "./interval.js";
import type { TipMeasured } from "./types.js";

/** One width of the tip from several features. */
export interface TipTogether {
  readonly nm: number;
  readonly sdNm: number;
  readonly lowNm: number;
  readonly highNm: number;
  /** Features that went in: the sharpest, and those that agree with them. */
  readonly features: number;
}

/** A feature and its likelihood as a function of the tip's width. */
export interface Likelihood {
  readonly result: TipMeasured;
  readonly rise: (fwhmNm: number) => number;
}

/** Features taken together at most: the sharpest ones. */
const MOST = 8;
/** A feature whose own likelihood rejects the common width by this much (p < 0.005) does not belong. */
const REJECTED = 8;

/** One tip under all features: the sum of their profile likelihoods, each with its own size, place and levels free, so that a faint
 *  particle counts for what it says and no more. Taking the sharpest single value instead would pick the luckiest. Features that are
 *  wider than the common width are not sharp: the widest is left out until the rest agree, which leaves the lower envelope.
 *  @param features sound ones, sharpest first */
export function combine(features: readonly Likelihood[]): TipTogether | null {
  let set = features.slice(0, MOST);
  while (set.length >= 2) {
    const common = fit(set);
    if (common === null) return null;
    const odd = set.filter((f) => f.rise(common.nm) > REJECTED);
    if (odd.length === 0) return common;
    const wider = odd.filter((f) => f.result.fwhmNm > common.nm);
    const out = widest(wider.length > 0 ? wider : set);
    set = set.filter((f) => f !== out);
  }
  return null;
}

const widest = (set: readonly Likelihood[]): Likelihood =>
  set.reduce((a, b) => (b.result.fwhmNm > a.result.fwhmNm ? b : a));

/** The least sum and where it has risen by χ²₁ at 95 %. */
function fit(set: readonly Likelihood[]): TipTogether | null {
  const known = new Map<number, number>();
  const sum = (nm: number): number => {
    let v = known.get(nm);
    if (v === undefined) {
      v = 0;
      for (const f of set) v += f.rise(nm);
      known.set(nm, v);
    }
    return v;
  };
  const widths = set.map((f) => f.result.fwhmNm);
  const least = 0.4 * Math.min(...widths);
  // A scan first: the sum of several such curves can have more than one hollow.
  const steps = 14;
  const ratio = (1.3 * Math.max(...widths)) / least;
  let best = least;
  for (let k = 0; k <= steps; k++) {
    const nm = least * ratio ** (k / steps);
    if (sum(nm) < sum(best)) best = nm;
  }
  if (!Number.isFinite(sum(best))) return null;
  const step = ratio ** (1 / steps);
  const nm = goldenSection(sum, best / step, best * step);
  const bottom = sum(nm);
  const lowNm = profileEnd(sum, nm, bottom, 3.841458820694124, -0.05 * nm, 0.1 * nm);
  const highNm = profileEnd(sum, nm, bottom, 3.841458820694124, 0.05 * nm, 0);
  return { nm, sdNm: (highNm - lowNm) / (2 * 1.959963984540054), lowNm, highNm, features: set.length };
}

function goldenSection(f: (x: number) => number, from: number, to: number): number {
  const part = (Math.sqrt(5) - 1) / 2;
  let [a, b] = [from, to];
  let c = b - part * (b - a);
  let d = a + part * (b - a);
  while (b - a > 2e-3 * from) {
    if (f(c) < f(d)) {
      b = d;
      d = c;
      c = b - part * (b - a);
    } else {
      a = c;
      c = d;
      d = a + part * (b - a);
    }
  }
  return (a + b) / 2;
}
