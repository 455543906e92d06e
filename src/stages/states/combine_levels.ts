import type { ComplexValue } from "../../model/signal.js";
import { wrapAngle } from "../../numerics/quantile.js";
import type { Shown } from "./assign_states.js";
import type { StateEstimate } from "./level_fit.js";
import type { Contrast, Pin } from "./track_contrast.js";

/** Both levels of one frame. */
export interface PolarLevels {
  readonly upper: ComplexValue;
  readonly lower: ComplexValue;
  /** Logarithm of the lower amplitude, and its standard deviation. */
  readonly logLower: number;
  readonly logLowerSd: number;
  /** Standard deviation of the threshold halfway between them, in units of their distance. */
  readonly thresholdSd: number;
}

interface Pair {
  readonly upper: number;
  readonly lower: number;
  readonly upperVariance: number;
  readonly lowerVariance: number;
  readonly covariance: number;
}

/** Least squares for two numbers known each (sd s1, s2; Infinity = not known) and by their difference (sd s3). */
function reconcile(lower: number, s1: number, upper: number, s2: number, difference: number, s3: number): Pair {
  const [a, b, c] = [s1 * s1, s2 * s2, s3 * s3];
  if (!Number.isFinite(b)) {
    return { lower, upper: lower + difference, lowerVariance: a, upperVariance: a + c, covariance: a };
  }
  if (!Number.isFinite(a)) {
    return { upper, lower: upper - difference, upperVariance: b, lowerVariance: b + c, covariance: b };
  }
  const total = a + b + c;
  const misfit = upper - lower - difference;
  return {
    lower: lower + (a * misfit) / total,
    upper: upper - (b * misfit) / total,
    lowerVariance: a - (a * a) / total,
    upperVariance: b - (b * b) / total,
    covariance: (a * b) / total,
  };
}

/** Levels of one frame from its own fit and from the contrast that the whole cooldown gives for its temperature. A state with few
 *  pixels of its own takes its level mostly from the other one and the contrast; an absent one altogether. */
export function combineLevels(
  shown: Shown,
  pin: Pin | null,
  main: StateEstimate,
  contrast: Contrast,
  temperatureK: number,
  scatter: number,
): PolarLevels {
  const upperOwn = pin?.upper ?? (shown === "upper" ? main : null);
  const lowerOwn = pin?.lower ?? (shown === "lower" ? main : null);
  const ratio = contrast.logRatio.at(temperatureK);
  const step = contrast.stepRad?.at(temperatureK) ?? { mean: 0, sd: 0 };
  const log = (e: StateEstimate | null): number => (e === null ? 0 : Math.log(Math.hypot(e.level.re, e.level.im)));
  const arg = (e: StateEstimate | null): number => (e === null ? 0 : Math.atan2(e.level.im, e.level.re));
  const least = 1e-6;
  const gain = reconcile(
    log(lowerOwn),
    Math.max(least, lowerOwn?.logSd ?? Infinity),
    log(upperOwn),
    Math.max(least, upperOwn?.logSd ?? Infinity),
    ratio.mean,
    Math.hypot(ratio.sd, scatter),
  );
  const lowerArg = arg(lowerOwn);
  const upperArg =
    lowerOwn === null || upperOwn === null
      ? arg(upperOwn)
      : lowerArg + step.mean + wrapAngle(arg(upperOwn) - lowerArg - step.mean);
  const phase = reconcile(
    lowerArg,
    Math.max(least, lowerOwn?.phaseSdRad ?? Infinity),
    upperArg,
    Math.max(least, upperOwn?.phaseSdRad ?? Infinity),
    step.mean,
    Math.hypot(step.sd, scatter),
  );
  const hasPhase = contrast.stepRad !== null;
  const value = (l: number, f: number): ComplexValue => ({
    re: Math.exp(l) * Math.cos(f),
    im: Math.exp(l) * Math.sin(f),
  });
  const lower = value(gain.lower, phase.lower);
  const upper = value(gain.upper, phase.upper);
  return {
    upper,
    lower,
    logLower: gain.lower,
    logLowerSd: Math.sqrt(gain.lowerVariance),
    thresholdSd: Math.sqrt(thresholdVariance(upper, lower, gain, hasPhase ? phase : null)),
  };
}

/** Variance of the halfway threshold along the chord: δu = −½ (δv_lower + δv_upper)/|chord|, v the signal along it. */
function thresholdVariance(upper: ComplexValue, lower: ComplexValue, gain: Pair, phase: Pair | null): number {
  const dr = upper.re - lower.re;
  const di = upper.im - lower.im;
  const d2 = Math.max(dr * dr + di * di, 1e-30);
  const along = (z: ComplexValue): number => (z.re * dr + z.im * di) / d2;
  const turned = (z: ComplexValue): number => (-z.im * dr + z.re * di) / d2;
  const form = (u: number, l: number, p: Pair): number =>
    0.25 * (u * u * p.upperVariance + l * l * p.lowerVariance + 2 * u * l * p.covariance);
  return form(along(upper), along(lower), gain) + (phase === null ? 0 : form(turned(upper), turned(lower), phase));
}
