import type { FrameInfo } from "../../model/cooldown.js";
import type { Shown } from "./assign_states.js";
import type { StatesSettings } from "./settings.js";

/** A change of the upper state's share over a series that tells something. */
const LEAST_CHANGE = 0.04;

export interface Naming {
  readonly metallicIsUpper: boolean;
  /** Whether temperature told (else the setting, or the fall-back to the higher amplitude). */
  readonly byTemperature: boolean;
}

/** Which of the two states is metallic: its share rises with temperature on both branches. Where the shares do not change enough, or
 *  the series disagree, the higher amplitude is taken.
 *  @param upperShare share of the upper state a frame, 0 or 1 for single-state frames; NaN where unknown */
export function nameStates(frames: readonly FrameInfo[], upperShare: readonly number[], s: StatesSettings): Naming {
  if (s.metallicAmplitude === "higher") return { metallicIsUpper: true, byTemperature: false };
  if (s.metallicAmplitude === "lower") return { metallicIsUpper: false, byTemperature: false };
  const series = new Map<number, { t: number[]; u: number[] }>();
  frames.forEach((f, k) => {
    if (Number.isNaN(upperShare[k])) return;
    const own = series.get(f.series) ?? { t: [], u: [] };
    own.t.push(f.temperatureK);
    own.u.push(upperShare[k]);
    series.set(f.series, own);
  });
  let total = 0;
  let size = 0;
  for (const { t, u } of series.values()) {
    const change = Math.max(...u) - Math.min(...u);
    if (u.length < 2 || change < LEAST_CHANGE) continue;
    const mt = t.reduce((a, b) => a + b, 0) / t.length;
    const mu = u.reduce((a, b) => a + b, 0) / u.length;
    let [tt, uu, tu] = [0, 0, 0];
    t.forEach((x, k) => {
      tt += (x - mt) ** 2;
      uu += (u[k] - mu) ** 2;
      tu += (x - mt) * (u[k] - mu);
    });
    if (tt === 0 || uu === 0) continue;
    total += (tu / Math.sqrt(tt * uu)) * change;
    size += change;
  }
  if (size === 0 || Math.abs(total) < 0.3 * size) return { metallicIsUpper: true, byTemperature: false };
  return { metallicIsUpper: total > 0, byTemperature: true };
}

/** What the place of a frame in its series says: holds metal below it (so it is metallic, if it shows one state), insulator above it. */
interface Place {
  above: boolean;
  below: boolean;
}

/** Single-state frames by their place among the others of their series: the metallic share rises with temperature, so a single-state
 *  frame above one that holds metal is metallic, and one below a frame that holds insulator insulating. This tells frames that
 *  amplitude could not tell, and overrules amplitude where frames of both states contradict it: no film is of one state beyond the
 *  temperatures where it is still mixed, but a gain can jump. Frames with evidence both ways keep what they have, and those whose
 *  amplitude speaks against the state stay unknown.
 *  @param naming only where temperature has named the states does it overrule amplitude
 *  @param allows whether the amplitude of a frame allows either state */
export function tellByOrder(
  frames: readonly FrameInfo[],
  shown: readonly Shown[],
  { metallicIsUpper, byTemperature }: Naming,
  allows: readonly { readonly upper: boolean; readonly lower: boolean }[],
): Shown[] {
  const metallic: Shown = metallicIsUpper ? "upper" : "lower";
  const insulating: Shown = metallicIsUpper ? "lower" : "upper";
  const placeOf = (k: number, counts: (other: Shown) => boolean): Place => {
    const place = { above: false, below: false };
    frames.forEach((f, n) => {
      const other = shown[n];
      if (f.series !== frames[k].series || n === k || !counts(other)) return;
      if (f.temperatureK < frames[k].temperatureK && other !== insulating) place.above = true;
      if (f.temperatureK > frames[k].temperatureK && other !== metallic) place.below = true;
    });
    return place;
  };
  return shown.map((own, k) => {
    if (own === "both" || (own !== "unknown" && !byTemperature)) return own;
    const place = own === "unknown" ? placeOf(k, (o) => o !== "unknown") : placeOf(k, (o) => o === "both");
    if (place.above === place.below) return own;
    const state = place.above ? metallic : insulating;
    if (own === state) return own;
    return allows[k][state === "upper" ? "upper" : "lower"] ? state : "unknown";
  });
}
