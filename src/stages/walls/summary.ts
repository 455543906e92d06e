import type { Tip } from "../../model/cooldown.js";
import type { WallProfile, WidthSummary } from "../../model/walls.js";
import { childSeed, makeRandom } from "../../numerics/random.js";
import type { WallsSettings } from "./settings.js";

/** Neighbouring profiles of one wall that are drawn together: they share the wall's own history, and its noise where that is
 *  correlated. */
const BLOCK = 2;
const Z = 1.959963984540054;

/** Statistics of one frame's unflagged profiles, limits treated as limits.
 *
 *  The median is that of the left-censored Kaplan–Meier estimate (axis reflected; Kaplan & Meier 1958, J. Am. Stat. Assoc. 53, 457;
 *  Helsel 2005, Nondetects and Data Analysis, ch. 6): an unresolved profile counts as "its fitted width is below its own
 *  detection limit". Where more than half are limits there is no median. The interval is that of a bootstrap over blocks of
 *  neighbouring profiles (percentiles; Künsch 1989, Ann. Stat. 17, 1217), widened in quadrature by 1.96 times what the tip's
 *  uncertainty does to the median: that part is common to all profiles and does not average down.
 *
 *  @param tip null: no intrinsic widths, only counts
 *  @param seed of the bootstrap */
export function summariseWidths(
  profiles: readonly WallProfile[],
  tip: Tip | null,
  s: WallsSettings,
  seed: number,
): WidthSummary {
  const sound = profiles.filter((p) => p.flag === "" && p.resolved !== null && (p.widthNm ?? limitOf(p)) !== null);
  const count = sound.length;
  const none = { profiles: count, medianNm: null, medianLowNm: null, medianHighNm: null };
  if (count === 0) return { ...none, unresolvedShare: null };
  const limits = sound.filter((p) => p.widthNm === null).length;
  const unresolvedShare = limits / count;
  if (tip === null || limits > count / 2) return { ...none, unresolvedShare };

  const order = Array.from({ length: count }, (_, k) => k).sort((a, b) => sortKey(sound[a]) - sortKey(sound[b]));
  const value = Float64Array.from(order, (k) => valueOf(sound[k]));
  const measured = Uint8Array.from(order, (k) => (sound[k].widthNm === null ? 0 : 1));
  const median = weightedMedian(value, measured, new Float64Array(count).fill(1));
  if (median === null) return { ...none, unresolvedShare };

  const blocks = blocksOf(sound);
  const place = new Int32Array(count);
  order.forEach((k, at) => (place[k] = at));
  const random = makeRandom(childSeed(seed, 0x77a11));
  const draws: number[] = [];
  const weight = new Float64Array(count);
  for (let d = 0; d < s.draws; d++) {
    weight.fill(0);
    for (let b = 0; b < blocks.length; b++) {
      for (const k of blocks[random.below(blocks.length)]) weight[place[k]] += 1;
    }
    // more than half limits in a draw: all that it says is "narrower than measured", which zero bounds
    draws.push(weightedMedian(value, measured, weight) ?? 0);
  }
  draws.sort((a, b) => a - b);
  const low = draws[Math.floor(0.025 * (draws.length - 1))];
  const high = draws[Math.ceil(0.975 * (draws.length - 1))];
  // few blocks: a percentile interval of n blocks is short by about √((n − 1)/n) times t/z
  const stretch = blocks.length > 1 ? smallSample(blocks.length) : 1;
  const own = blocks.length > 1 ? null : (nearestSd(sound, median) ?? 0) * Z;
  const common = Z * (medianOf(sound.map((p) => p.widthSdTipNm)) ?? 0);
  return {
    profiles: count,
    medianNm: median,
    medianLowNm: Math.max(0, median - Math.hypot(own ?? (median - low) * stretch, common)),
    medianHighNm: median + Math.hypot(own ?? (high - median) * stretch, common),
    unresolvedShare,
  };
}

function limitOf(p: WallProfile): number | null {
  return p.detectionLimitNm ?? p.widthUpper95Nm;
}

/** The width, or the limit that stands for it. */
function valueOf(p: WallProfile): number {
  return p.widthNm ?? limitOf(p) ?? Number.NaN;
}

/** Limits go just above a measured value of the same size: "below 20" comes after "20". */
function sortKey(p: WallProfile): number {
  return p.widthNm ?? valueOf(p) * (1 + 1e-12);
}

/** Median of the left-censored product-limit estimate; values rising, weights ≥ 0. Null where the half lies among the limits below
 *  every measured value. */
export function weightedMedian(value: Float64Array, measured: Uint8Array, weight: Float64Array): number | null {
  const n = value.length;
  let atOrBelow = 0;
  for (let k = 0; k < n; k++) atOrBelow += weight[k];
  // from the top: P(V < v) falls by the factor 1 − d/m at each measured value, m = weight of everything not above it
  let below = 1;
  let last: number | null = null;
  for (let k = n - 1; k >= 0; k--) {
    const w = weight[k];
    if (w > 0 && measured[k] === 1) {
      below *= 1 - w / atOrBelow;
      if (Math.abs(below - 0.5) < 1e-9) {
        // any value down to the next measured one is a median
        const next = previousMeasured(value, measured, weight, k);
        return next === null ? value[k] : (value[k] + next) / 2;
      }
      if (below < 0.5) return value[k];
      last = value[k];
    }
    atOrBelow -= w;
  }
  return below <= 0.5 ? last : null;
}

function previousMeasured(
  value: Float64Array,
  measured: Uint8Array,
  weight: Float64Array,
  from: number,
): number | null {
  for (let k = from - 1; k >= 0; k--) if (measured[k] === 1 && weight[k] > 0) return value[k];
  return null;
}

function blocksOf(sound: readonly WallProfile[]): number[][] {
  const blocks = new Map<string, number[]>();
  sound.forEach((p, k) => {
    const key = `${p.wall} ${Math.floor(p.profile / BLOCK)}`;
    const block = blocks.get(key);
    if (block === undefined) blocks.set(key, [k]);
    else block.push(k);
  });
  return [...blocks.values()];
}

/** Student's 97.5 % point over the normal one, times √(n/(n − 1)). */
function smallSample(n: number): number {
  const v = n - 1;
  // Cornish–Fisher to second order, good to 1 % from v = 3
  const t = Z + (Z ** 3 + Z) / (4 * v) + (5 * Z ** 5 + 16 * Z ** 3 + 3 * Z) / (96 * v * v);
  return (t / Z) * Math.sqrt(n / v);
}

function nearestSd(sound: readonly WallProfile[], median: number): number | null {
  let best: WallProfile | null = null;
  for (const p of sound) {
    if (p.widthNm === null) continue;
    if (best === null || Math.abs(p.widthNm - median) < Math.abs(valueOf(best) - median)) best = p;
  }
  return best?.widthSdNm ?? null;
}

function medianOf(values: readonly (number | null)[]): number | null {
  const v = values.filter((x): x is number => x !== null).sort((a, b) => a - b);
  return v.length === 0 ? null : v[v.length >> 1];
}
