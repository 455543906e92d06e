import type { FrameInfo } from "../../model/cooldown.js";
import type { LevelFit, StateEstimate } from "./level_fit.js";
import { wrapAngle } from "../../numerics/quantile.js";
import type { StatesSettings } from "./settings.js";
import { fitCourse, type Course } from "./smooth_course.js";

/** Upper and lower state of a frame that shows both; "upper" is the same state in all frames, of higher amplitude in most. */
export interface Pin {
  readonly index: number;
  readonly upper: StateEstimate;
  readonly lower: StateEstimate;
  readonly logRatio: number;
  readonly logRatioSd: number;
  /** False where the frame has no optical phase: its step says nothing then. */
  readonly hasPhase: boolean;
  readonly stepRad: number;
  readonly stepSdRad: number;
  readonly tailSd: number;
}

/** The contrast of the two states along temperature: what does not depend on a frame's gain or phase reference. */
export interface Contrast {
  readonly logRatio: Course;
  /** Phase of the upper over the lower state; null without an optical phase, or where no frame shows both. */
  readonly stepRad: Course | null;
}

/** Pins further off the common course than this in both standard deviations and contrast are something else (debris, a levelling
 *  fault). */
const OFF_SIGMAS = 5;
const OFF_CONTRAST = 0.2;
/** Small spots that never change are not a state of the sample. */
const LEAST_CHANGE = 0.02;

function pinOf(index: number, fit: LevelFit, s: StatesSettings): Pin | null {
  const { main, second } = fit;
  if (main === null || second === null) return null;
  const amplitude = (e: StateEstimate): number => Math.hypot(e.level.re, e.level.im);
  const [upper, lower] = amplitude(main) >= amplitude(second) ? [main, second] : [second, main];
  return makePin(index, upper, lower, fit.hasPhase, s);
}

function makePin(index: number, upper: StateEstimate, lower: StateEstimate, hasPhase: boolean, s: StatesSettings): Pin {
  const scatter2 = s.contrastScatter ** 2;
  return {
    index,
    upper,
    lower,
    logRatio: Math.log(Math.hypot(upper.level.re, upper.level.im) / Math.hypot(lower.level.re, lower.level.im)),
    logRatioSd: Math.sqrt(upper.logSd ** 2 + lower.logSd ** 2 + scatter2),
    hasPhase,
    stepRad: wrapAngle(Math.atan2(upper.level.im, upper.level.re) - Math.atan2(lower.level.im, lower.level.re)),
    stepSdRad: Math.sqrt(upper.phaseSdRad ** 2 + lower.phaseSdRad ** 2 + scatter2),
    tailSd: Math.hypot(upper.tailSd, lower.tailSd),
  };
}

/** What a pin's step of the phase departs by from another; 0 where it has none. */
const stepOff = (p: Pin, fromRad: number, sign = 1): number => (p.hasPhase ? wrapAngle(sign * p.stepRad - fromRad) : 0);

/** Distance of two contrasts in the plane of (log ratio, phase step), and the same with the roles of the states exchanged. */
function flippedIsNearer(pin: Pin, to: { logRatio: number; stepRad: number }): boolean {
  const far = (sign: number): number => (sign * pin.logRatio - to.logRatio) ** 2 + stepOff(pin, to.stepRad, sign) ** 2;
  return far(-1) < far(1);
}

const weightOf = (p: Pin): number => Math.min(2000, p.upper.purePixels, p.lower.purePixels);

function weightedMedian(values: readonly number[], weights: readonly number[]): number {
  const order = values.map((_, k) => k).sort((a, b) => values[a] - values[b]);
  const half = weights.reduce((a, b) => a + b, 0) / 2;
  let sum = 0;
  for (const k of order) {
    sum += weights[k];
    if (sum >= half) return values[k];
  }
  return Number.NaN;
}

/** Frames that pin the contrast, those that must be left out, and the contrast along temperature; null where no frame shows two
 *  states that can be believed. */
export function trackContrast(
  fits: readonly (LevelFit | null)[],
  frames: readonly FrameInfo[],
  rangeK: readonly [number, number],
  s: StatesSettings,
): { readonly pins: readonly Pin[]; readonly rejected: readonly number[]; readonly contrast: Contrast | null } {
  let pins: Pin[] = [];
  fits.forEach((fit, k) => {
    const pin = fit === null ? null : pinOf(k, fit, s);
    if (pin !== null) pins.push(pin);
  });
  if (pins.length === 0) return { pins: [], rejected: [], contrast: null };
  // one orientation for all: where the amplitudes nearly agree, the phase step tells which is which
  const heaviest = pins.reduce((a, b) =>
    (a.hasPhase === b.hasPhase ? weightOf(b) > weightOf(a) : b.hasPhase) ? b : a,
  );
  pins = pins.map((p) => (flippedIsNearer(p, heaviest) ? makePin(p.index, p.lower, p.upper, p.hasPhase, s) : p));
  const weights = pins.map(weightOf);
  const phased = pins.some((p) => p.hasPhase) ? pins.filter((p) => p.hasPhase) : pins;
  const centre = {
    logRatio: weightedMedian(
      pins.map((p) => p.logRatio),
      weights,
    ),
    stepRad:
      heaviest.stepRad +
      weightedMedian(
        phased.map((p) => wrapAngle(p.stepRad - heaviest.stepRad)),
        phased.map(weightOf),
      ),
  };
  const size = Math.max(Math.hypot(centre.logRatio, centre.stepRad), 0.05);
  const hasPhase = pins.some((p) => p.hasPhase);
  let kept = pins.filter(
    (p) =>
      Math.hypot(p.logRatio - centre.logRatio, stepOff(p, centre.stepRad)) <
      Math.max(2 * OFF_CONTRAST * size, OFF_SIGMAS * Math.hypot(p.logRatioSd, p.hasPhase ? p.stepSdRad : 0)),
  );
  let contrast: Contrast | null = null;
  for (let round = 0; round < 3; round++) {
    if (kept.length === 0) break;
    contrast = courses(kept, frames, centre.stepRad, rangeK, hasPhase, s);
    if (contrast === null) break;
    const { logRatio, stepRad } = contrast;
    const next = pins.filter((p) => {
      const t = frames[p.index].temperatureK;
      const r = p.logRatio - logRatio.at(t).mean;
      const f = stepRad === null ? 0 : stepOff(p, stepRad.at(t).mean);
      const sigmas = Math.max(Math.abs(r) / p.logRatioSd, Math.abs(f) / p.stepSdRad);
      return sigmas < OFF_SIGMAS || Math.hypot(r, f) < OFF_CONTRAST * size;
    });
    if (next.length === kept.length && next.every((p, k) => p === kept[k])) break;
    kept = next;
  }
  if (contrast !== null && !changes(kept, fits)) {
    return { pins: [], rejected: pins.map((p) => p.index), contrast: null };
  }
  const good = new Set(kept.map((p) => p.index));
  return { pins: kept, rejected: pins.filter((p) => !good.has(p.index)).map((p) => p.index), contrast };
}

function courses(
  pins: readonly Pin[],
  frames: readonly FrameInfo[],
  centreStep: number,
  rangeK: readonly [number, number],
  hasPhase: boolean,
  s: StatesSettings,
): Contrast | null {
  const at = pins.map((p) => frames[p.index].temperatureK);
  const tails = pins.map((p) => p.tailSd);
  const logRatio = fitCourse(
    at,
    pins.map((p) => p.logRatio),
    pins.map((p) => p.logRatioSd),
    rangeK,
    s.levelSlope,
    tails,
  );
  if (logRatio === null) return null;
  const phased = pins.filter((p) => p.hasPhase);
  const stepRad = hasPhase
    ? fitCourse(
        phased.map((p) => frames[p.index].temperatureK),
        phased.map((p) => centreStep + wrapAngle(p.stepRad - centreStep)),
        phased.map((p) => p.stepSdRad),
        rangeK,
        s.levelSlope,
        phased.map((p) => p.tailSd),
      )
    : null;
  return { logRatio, stepRad };
}

/** Whether the minority changes from frame to frame as a state of the sample does. Particles that were not recognised keep their
 *  share: they are no state. */
function changes(pins: readonly Pin[], fits: readonly (LevelFit | null)[]): boolean {
  const shares: number[] = [];
  const shareOf = new Map(pins.map((p) => [p.index, p.upper.share]));
  // frames of one state count as having none of the rarer one
  const rarer = pins.reduce((a, p) => a + p.upper.share, 0) < 0.5 * pins.length ? 1 : -1;
  fits.forEach((fit, k) => {
    if (fit === null || fit.main === null) return;
    const upper = shareOf.get(k);
    shares.push(upper === undefined ? 0 : rarer === 1 ? upper : 1 - upper);
  });
  const sorted = [...shares].sort((a, b) => a - b);
  const middle = sorted[sorted.length >> 1];
  const largest = sorted[sorted.length - 1];
  // a single frame, or frames alike, with large domains are believed; small spots only where they come and go
  return largest >= 0.1 || largest - middle >= LEAST_CHANGE;
}
