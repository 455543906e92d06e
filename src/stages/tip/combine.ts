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

/** Features taken together at most: those with the most contrast over noise. Chosen by their sharpness they would be the luckiest. */
const MOST = 16;
/** A feature whose own likelihood rejects the common width by this much (p < 0.005) does not belong. */
const REJECTED = 8;
/** Widths at which likelihoods are tabled: from this part of the sharpest feature's width to this multiple, and how many. */
const FROM = 0.5;
const TO = 1.7;
const POINTS = 26;
const TWO_SIDED = 3.841458820694124;

/** One tip under all features: the sum of their profile likelihoods, each with its own size, place and levels free, so that a faint
 *  particle counts for what it says and no more. Taking the sharpest single value instead would pick the luckiest. Features that are
 *  wider than the common width are not sharp: the widest is left out until the rest agree, which leaves the lower envelope.
 *  @param features sound ones, sharpest first. Null where fewer than two agree */
export function combine(features: readonly Likelihood[]): TipTogether | null {
  const sharpest = features[0];
  if (sharpest === undefined) return null;
  const reach = sharpest.result.upper95Nm;
  const widths = Float64Array.from({ length: POINTS }, (_, k) => reach * FROM * (TO / FROM) ** (k / (POINTS - 1)));
  let set = features
    .filter((f) => f.result.lowNm < TO * reach)
    .sort((a, b) => b.result.contrastToNoise - a.result.contrastToNoise)
    .slice(0, MOST)
    .map((f) => ({ nm: f.result.fwhmNm, rise: widths.map((w) => f.rise(w)) }));
  while (set.length >= 2) {
    const sum = widths.map((_, k) => set.reduce((a, f) => a + f.rise[k], 0));
    const common = lowest(widths, sum);
    if (common === null) return null;
    const odd = set.filter((f) => between(widths, f.rise, common.nm) > REJECTED);
    if (odd.length === 0) return { ...common, features: set.length };
    const wider = odd.filter((f) => f.nm > common.nm);
    // One feature sharper than several that agree is two particles side by side, or a scar; more than a few, and the others are not sharp.
    const freak = wider.length === 0 && odd.length <= set.length / 4;
    const out = freak
      ? odd.reduce((a, b) => (b.nm < a.nm ? b : a))
      : (wider.length > 0 ? wider : set).reduce((a, b) => (b.nm > a.nm ? b : a));
    set = set.filter((f) => f !== out);
  }
  return null;
}

/** The least of a tabled sum of likelihoods (by a parabola through the three lowest points) and where it has risen by χ²₁ at 95 %. Null where
 *  the table does not hold both ends. */
function lowest(widths: Float64Array, sum: Float64Array): Omit<TipTogether, "features"> | null {
  let k = 0;
  for (let i = 0; i < sum.length; i++) if (sum[i] < sum[k]) k = i;
  if (k === 0 || k === sum.length - 1) return null;
  // the widths are spaced evenly in their logarithm
  const [a, b, c] = [sum[k - 1], sum[k], sum[k + 1]];
  const shift = (0.5 * (a - c)) / (a - 2 * b + c);
  const step = Math.log(widths[1] / widths[0]);
  const nm = widths[k] * Math.exp(shift * step);
  const bottom = b - 0.25 * (a - c) * shift;
  const end = (direction: 1 | -1): number | null => {
    let [x0, y0] = [nm, 0];
    for (
      let i = direction > 0 ? (widths[k] > nm ? k : k + 1) : widths[k] < nm ? k : k - 1;
      i >= 0 && i < sum.length;
      i += direction
    ) {
      // √Δ is nearly straight
      const y = Math.sqrt(Math.max(0, sum[i] - bottom));
      const target = Math.sqrt(TWO_SIDED);
      if (y >= target) return x0 + ((widths[i] - x0) * (target - y0)) / (y - y0);
      [x0, y0] = [widths[i], y];
    }
    return null;
  };
  const lowNm = end(-1);
  const highNm = end(1);
  if (lowNm === null || highNm === null) return null;
  return { nm, sdNm: (highNm - lowNm) / (2 * 1.959963984540054), lowNm, highNm };
}

function between(widths: Float64Array, values: Float64Array, nm: number): number {
  let i = 0;
  while (i < widths.length - 2 && widths[i + 1] < nm) i++;
  const t = (nm - widths[i]) / (widths[i + 1] - widths[i]);
  return values[i] + t * (values[i + 1] - values[i]);
}
