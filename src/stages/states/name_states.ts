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

/** Single-state frames that amplitude could not tell, by their place among the others of their series: the metallic share rises with
 *  temperature, so a single-state frame above one that holds metal is metallic, and one below a frame that holds insulator insulating.
 *  Frames with evidence both ways stay unknown, and those whose amplitude speaks against the state.
 *  @param allows whether the amplitude of an unknown frame allows either state */
export function tellByOrder(
  frames: readonly FrameInfo[],
  shown: readonly Shown[],
  metallicIsUpper: boolean,
  allows: readonly { readonly upper: boolean; readonly lower: boolean }[],
): Shown[] {
  const metallic: Shown = metallicIsUpper ? "upper" : "lower";
  const insulating: Shown = metallicIsUpper ? "lower" : "upper";
  return shown.map((own, k) => {
    if (own !== "unknown") return own;
    let [above, below] = [false, false];
    frames.forEach((f, n) => {
      const other = shown[n];
      if (f.series !== frames[k].series || other === "unknown" || n === k) return;
      if (f.temperatureK < frames[k].temperatureK && (other === metallic || other === "both")) above = true;
      if (f.temperatureK > frames[k].temperatureK && (other === insulating || other === "both")) below = true;
    });
    if (above === below) return "unknown";
    const state = above ? metallic : insulating;
    return allows[k][state === "upper" ? "upper" : "lower"] ? state : "unknown";
  });
}
