import type { FrameInfo, Notice } from "../../model/cooldown.js";
import type { ComplexValue, FrameLevels, FrameVerdict, NoiseCovariance } from "../../model/signal.js";
import { assignStates, type Shown } from "./assign_states.js";
import { combineLevels, type PolarLevels } from "./combine_levels.js";
import { fitGains } from "./gains.js";
import type { LevelFit, StateEstimate } from "./level_fit.js";
import { nameStates, tellByOrder } from "./name_states.js";
import { fromPolarNoise, medianNoise, toPolarNoise, type PolarNoise } from "./polar_noise.js";
import type { StatesSettings } from "./settings.js";
import { trackContrast, type Pin } from "./track_contrast.js";

const NOTHING: ComplexValue = { re: Number.NaN, im: Number.NaN };
const NO_NOISE: NoiseCovariance = { rr: Number.NaN, ri: Number.NaN, ii: Number.NaN };

/** Levels of both states in every frame of a cooldown.
 *
 *  Frames that show both states pin the contrast (ratio of the amplitudes, step of the phase), which changes smoothly with
 *  temperature and knows neither gain nor phase reference; frames whose contrast does not belong to that course are not believed.
 *  Single-state frames are told by the nearness of their amplitude to what their neighbours predict for either state, with the
 *  prediction's standard deviation; then by their place in the series. What neither tells is `undecided`.
 *  The gain of a frame is what its levels depart by, together, from a smooth course along temperature common to all series; the
 *  first frame told has gain 1. A drift of the gain that runs with temperature in every series cannot be told from a change of the
 *  levels and counts as that.
 *  @param fits one a frame, in the order of `frames`; null where a frame could not be read
 *  @returns one `FrameLevels` a frame; levels are NaN where undecided */
export function trackLevels(
  fits: readonly (LevelFit | null)[],
  frames: readonly FrameInfo[],
  s: StatesSettings,
): { readonly levels: readonly FrameLevels[]; readonly notices: readonly Notice[] } {
  if (fits.length !== frames.length) throw new RangeError(`${fits.length} level fits for ${frames.length} frames`);
  const temperatures = frames.map((f) => f.temperatureK);
  const rangeK: [number, number] = [Math.min(...temperatures), Math.max(...temperatures)];
  const { pins, rejected, contrast: pinned } = trackContrast(fits, frames, rangeK, s);
  const { shown, contrast, allows } = assignStates(fits, frames, pins, rejected, pinned, rangeK, s);
  const upperShare = shown.map((what, k) => shareOf(what, pins, k));
  const naming = nameStates(frames, upperShare, s);
  const told = tellByOrder(frames, shown, naming, allows);

  const pinOf = new Map(pins.map((p) => [p.index, p]));
  const polar = told.map((what, k): PolarLevels | null => {
    const fit = fits[k];
    if (contrast === null || what === "unknown" || fit == null || fit.main === null) return null;
    // a frame without optical phase takes the ratio alone: its signal is the amplitude, on the real axis
    const own = fit.hasPhase ? contrast : { ...contrast, stepRad: null };
    return combineLevels(what, pinOf.get(k) ?? null, fit.main, own, frames[k].temperatureK, s.contrastScatter);
  });
  const gains = fitGains(polar, frames, rangeK, s);
  const noises = { phase: stateNoises(told, pins, fits, true), amplitude: stateNoises(told, pins, fits, false) };
  const levels = frames.map((info, k): FrameLevels => {
    const fit = fits[k] ?? null;
    const p = polar[k];
    if (fit === null || p === null || fit.main === null) return undecided(info.frame, fit);
    const { main } = fit;
    const noiseAt = (state: "upper" | "lower", level: ComplexValue, own: StateEstimate | null): NoiseCovariance =>
      own !== null
        ? own.noise
        : fromPolarNoise(noises[fit.hasPhase ? "phase" : "amplitude"][state] ?? toPolarNoise(main), level);
    const pin = pinOf.get(k) ?? null;
    const what = told[k];
    const upperLevel = p.upper;
    const lowerLevel = p.lower;
    const upperNoise = noiseAt("upper", upperLevel, pin?.upper ?? (what === "upper" ? main : null));
    const lowerNoise = noiseAt("lower", lowerLevel, pin?.lower ?? (what === "lower" ? main : null));
    const up = naming.metallicIsUpper;
    const verdict: FrameVerdict = what === "both" ? "mixed" : (what === "upper") === up ? "metallic" : "insulating";
    return {
      frame: info.frame,
      verdict,
      insulating: up ? lowerLevel : upperLevel,
      metallic: up ? upperLevel : lowerLevel,
      noiseInsulating: up ? lowerNoise : upperNoise,
      noiseMetallic: up ? upperNoise : lowerNoise,
      noiseCorrelationX: fit.noiseCorrelationX,
      noiseCorrelationY: fit.noiseCorrelationY,
      gain: gains[k],
      thresholdSd: p.thresholdSd,
    };
  });
  return { levels, notices: noticesOf(levels, rejected, contrast !== null, naming.byTemperature, s) };
}

function shareOf(what: Shown, pins: readonly Pin[], index: number): number {
  if (what === "upper") return 1;
  if (what === "lower") return 0;
  return what === "both" ? (pins.find((p) => p.index === index)?.upper.share ?? Number.NaN) : Number.NaN;
}

/** Noise of each state along and across its level, relative to it: the median over the frames that show it, of those with an optical phase
 *  or those without. */
function stateNoises(
  shown: readonly Shown[],
  pins: readonly Pin[],
  fits: readonly (LevelFit | null)[],
  hasPhase: boolean,
): { readonly upper: PolarNoise | null; readonly lower: PolarNoise | null } {
  const collect = (which: "upper" | "lower"): PolarNoise[] => {
    const all = pins.filter((p) => p.hasPhase === hasPhase).map((p) => toPolarNoise(p[which]));
    shown.forEach((what, k) => {
      const main = fits[k]?.main;
      if (what === which && main != null && fits[k]?.hasPhase === hasPhase) all.push(toPolarNoise(main));
    });
    return all;
  };
  return { upper: medianNoise(collect("upper")), lower: medianNoise(collect("lower")) };
}

function undecided(frame: number, fit: LevelFit | null): FrameLevels {
  const noise = fit?.main?.noise ?? NO_NOISE;
  return {
    frame,
    verdict: "undecided",
    insulating: NOTHING,
    metallic: NOTHING,
    noiseInsulating: noise,
    noiseMetallic: noise,
    noiseCorrelationX: fit?.noiseCorrelationX ?? 0,
    noiseCorrelationY: fit?.noiseCorrelationY ?? 0,
    gain: 1,
    thresholdSd: Number.NaN,
  };
}

function noticesOf(
  levels: readonly FrameLevels[],
  rejected: readonly number[],
  contrastKnown: boolean,
  byTemperature: boolean,
  s: StatesSettings,
): Notice[] {
  const notices: Notice[] = [];
  if (!contrastKnown && levels.length > 0) {
    notices.push({
      frame: null,
      code: "one-state-only",
      message:
        "no frame shows two states and no jump of the amplitude divides the frames: nothing tells which state they show",
    });
  }
  for (const k of rejected) {
    notices.push({
      frame: levels[k].frame,
      code: "contrast-inconsistent",
      message:
        "shows two levels whose contrast does not belong to the states of the other frames: those that the other frames predict were taken instead, where they fit",
    });
  }
  if (contrastKnown) {
    for (const l of levels) {
      if (l.verdict !== "undecided") continue;
      notices.push({
        frame: l.frame,
        code: "state-undecided",
        message: "shows one level that fits neither state well enough to tell which it is",
      });
    }
    if (!byTemperature && s.metallicAmplitude === "auto") {
      notices.push({
        frame: null,
        code: "states-named-by-amplitude",
        message:
          "the shares of the states do not change with temperature enough to name them: the higher amplitude was taken as metallic",
      });
    }
  }
  return notices;
}
