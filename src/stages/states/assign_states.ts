import type { FrameInfo } from "../../model/cooldown.js";
import { gainScatter, predictLogLevel, type LogLevel } from "./gain_course.js";
import type { LevelFit } from "./level_fit.js";
import type { StatesSettings } from "./settings.js";
import type { Course } from "./smooth_course.js";
import type { Contrast, Pin } from "./track_contrast.js";

export type Shown = "both" | "upper" | "lower" | "unknown";

export interface Assignment {
  /** What each frame shows; `unknown` where nothing tells. */
  readonly shown: Shown[];
  /** Contrast used; from groups of single-state frames where no frame shows both. */
  readonly contrast: Contrast | null;
  /** For frames that amplitude could not tell: whether it allows either state. */
  readonly allows: readonly { readonly upper: boolean; readonly lower: boolean }[];
}

/** A state is allowed within this many standard deviations of what is predicted for it: the 3 of a normal law, for a scatter that is itself known from
 *  some eight frames (Student 1908, Biometrika 6, 1). */
const ALLOWED_SIGMAS = 4;
/** Odds that decide between the two states. */
const LEAST_LOG_ODDS = Math.log(100);
/** A single-state frame this near to a state, in units of the contrast, may be that state; in between it is neither. */
const NEAR = 0.3;

const logAmplitude = (fit: LevelFit | null | undefined): number =>
  fit?.main ? Math.log(Math.hypot(fit.main.level.re, fit.main.level.im)) : Number.NaN;

/** Tells which state each single-state frame shows: by the nearness of its amplitude to what the frames already known predict for
 *  either state, the nearest frames first. Frames that amplitude cannot tell stay `unknown`. */
export function assignStates(
  fits: readonly (LevelFit | null)[],
  frames: readonly FrameInfo[],
  pins: readonly Pin[],
  rejected: readonly number[],
  contrast: Contrast | null,
  rangeK: readonly [number, number],
  s: StatesSettings,
): Assignment {
  const shown: Shown[] = fits.map(() => "unknown");
  if (contrast === null) return groupBySingles(fits, frames, s, shown);
  for (const p of pins) shown[p.index] = "both";
  const known: LogLevel[] = pins.map((p) => {
    const { temperatureK } = frames[p.index];
    return lowerLevel(p, contrast.logRatio.at(temperatureK), frames[p.index]);
  });
  const gainSd = gainScatter(known, s.gainSd, s.levelSlope, rangeK);
  const skip = new Set(rejected.filter((k) => (fits[k]?.second?.share ?? 0) > NEAR));
  const allows = fits.map(() => ({ upper: false, lower: false }));
  const open = new Set(fits.flatMap((f, k) => (f?.main && shown[k] === "unknown" && !skip.has(k) ? [k] : [])));
  while (open.size > 0) {
    // the frame next to what is known: gains are nearest there
    let at = -1;
    let nearest = Infinity;
    for (const k of open) {
      const d = Math.min(...known.map((l) => Math.abs(l.frame - frames[k].frame)));
      if (d < nearest) [nearest, at] = [d, k];
    }
    open.delete(at);
    const { temperatureK, frame } = frames[at];
    const fit = fits[at];
    const ratio = contrast.logRatio.at(temperatureK);
    const predicted = predictLogLevel(known, frame, temperatureK, gainSd, s.levelSlope, rangeK);
    const decided = nearerState(logAmplitude(fit), fit?.main?.logSd ?? 0, predicted, ratio, s.contrastScatter);
    shown[at] = decided.state;
    allows[at] = { upper: decided.upper, lower: decided.lower };
    if (decided.state === "unknown") continue;
    const value = logAmplitude(fit) - (decided.state === "upper" ? ratio.mean : 0);
    const sd = Math.hypot(
      fit?.main?.logSd ?? 0,
      decided.state === "upper" ? Math.hypot(ratio.sd, s.contrastScatter) : 0,
    );
    known.push({ frame, temperatureK, value, sd: Math.max(sd, 1e-4) });
  }
  return { shown, contrast, allows };
}

/** Lower level of a frame that shows both, from both: precision-weighted. */
function lowerLevel(p: Pin, ratio: { mean: number; sd: number }, info: FrameInfo): LogLevel {
  const low = Math.log(Math.hypot(p.lower.level.re, p.lower.level.im));
  const high = Math.log(Math.hypot(p.upper.level.re, p.upper.level.im)) - ratio.mean;
  const wl = 1 / Math.max(p.lower.logSd, 1e-4) ** 2;
  const wh = 1 / (Math.max(p.upper.logSd, 1e-4) ** 2 + ratio.sd ** 2);
  return {
    frame: info.frame,
    temperatureK: info.temperatureK,
    value: (wl * low + wh * high) / (wl + wh),
    sd: 1 / Math.sqrt(wl + wh),
  };
}

function nearerState(
  value: number,
  valueSd: number,
  predicted: { mean: number; sd: number },
  ratio: { mean: number; sd: number },
  scatter: number,
): { readonly state: Shown; readonly upper: boolean; readonly lower: boolean } {
  if (!Number.isFinite(predicted.mean)) return { state: "unknown", upper: true, lower: true };
  const d = value - predicted.mean;
  const lowSd = Math.hypot(predicted.sd, valueSd);
  const highSd = Math.hypot(lowSd, ratio.sd, scatter);
  const logOdds = 0.5 * ((d / lowSd) ** 2 - ((d - ratio.mean) / highSd) ** 2) + Math.log(lowSd / highSd);
  const place = d / ratio.mean;
  const between = place > NEAR && place < 1 - NEAR;
  const unknown = between || Math.abs(logOdds) < LEAST_LOG_ODDS;
  return {
    state: unknown ? "unknown" : logOdds > 0 ? "upper" : "lower",
    upper: Math.abs(d - ratio.mean) < ALLOWED_SIGMAS * highSd,
    lower: Math.abs(d) < ALLOWED_SIGMAS * lowSd,
  };
}

/** Two groups need this gap in the logarithm of the amplitude, and this many times the scatter inside them. */
const LEAST_GAP = 0.2;
const LEAST_GAP_ONE_SERIES = 0.47;
const GAP_OVER_SCATTER = 5;

/** No frame shows both states: two groups of amplitude that divide every series at one temperature, far apart against their own
 *  scatter, are the two states all the same (an abrupt transition between two frames). The phase step stays unknown. */
function groupBySingles(
  fits: readonly (LevelFit | null)[],
  frames: readonly FrameInfo[],
  s: StatesSettings,
  shown: Shown[],
): Assignment {
  const used = fits.flatMap((f, k) => (f?.main ? [k] : []));
  const value = new Map(used.map((k) => [k, logAmplitude(fits[k])]));
  const v = (k: number): number => value.get(k) ?? Number.NaN;
  const order = [...used].sort((a, b) => v(a) - v(b));
  let cut = -1;
  let gap = 0;
  for (let k = 1; k < order.length; k++) {
    const d = v(order[k]) - v(order[k - 1]);
    if (d > gap) [gap, cut] = [d, k];
  }
  const allows = fits.map(() => ({ upper: false, lower: false }));
  const none: Assignment = { shown, contrast: null, allows };
  const lower = order.slice(0, Math.max(0, cut));
  const upper = order.slice(Math.max(0, cut));
  if (lower.length < 2 || upper.length < 2) return none;
  const mean = (a: readonly number[]): number => a.reduce((x, k) => x + v(k), 0) / a.length;
  const scatter = (a: readonly number[]): number =>
    Math.sqrt(a.reduce((x, k) => x + (v(k) - mean(a)) ** 2, 0) / Math.max(1, a.length - 1));
  const inside = Math.max(scatter(lower), scatter(upper));
  const upperSet = new Set(upper);
  const sense = seriesSense(used, frames, upperSet);
  const least = sense.crossed > 1 ? LEAST_GAP : LEAST_GAP_ONE_SERIES;
  if (!sense.consistent || gap < least || gap < GAP_OVER_SCATTER * inside) return none;
  const ratio = { mean: mean(upper) - mean(lower), sd: Math.hypot(inside, s.gainSd) };
  for (const k of used) shown[k] = upperSet.has(k) ? "upper" : "lower";
  return { shown, contrast: { logRatio: { at: () => ratio } satisfies Course, stepRad: null }, allows };
}

/** Whether the groups divide every series at one temperature, the same way round in all. */
function seriesSense(
  used: readonly number[],
  frames: readonly FrameInfo[],
  upper: ReadonlySet<number>,
): { readonly consistent: boolean; readonly crossed: number } {
  const series = new Map<number, number[]>();
  for (const k of used) {
    const list = series.get(frames[k].series);
    if (list === undefined) series.set(frames[k].series, [k]);
    else list.push(k);
  }
  let sign = 0;
  let crossed = 0;
  for (const list of series.values()) {
    list.sort((a, b) => frames[a].temperatureK - frames[b].temperatureK);
    let changes = 0;
    for (let i = 1; i < list.length; i++) {
      const step = Number(upper.has(list[i])) - Number(upper.has(list[i - 1]));
      if (step === 0) continue;
      changes++;
      if (sign !== 0 && step !== sign) return { consistent: false, crossed };
      sign = step;
    }
    if (changes > 1) return { consistent: false, crossed };
    crossed += changes;
  }
  return { consistent: true, crossed };
}
