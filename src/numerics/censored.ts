import { normalQuantile } from "./erf.js";

/** One step of a product-limit estimate: the function beyond `time`. */
export interface SurvivalStep {
  readonly time: number;
  readonly atRisk: number;
  readonly events: number;
  /** P(T > time). */
  readonly survival: number;
  /** Greenwood's standard error; NaN once the survival is 0. */
  readonly se: number;
}

/** Product-limit estimate for right-censored times (Kaplan & Meier 1958, J. Am. Stat. Assoc. 53, 457) with Greenwood's error, one step
 *  an event time, rising. `event[i]` falsy: only known that T_i > time[i]; at equal times events come first. */
export function kaplanMeier(time: ArrayLike<number>, event: ArrayLike<number | boolean>): SurvivalStep[] {
  const n = time.length;
  for (let i = 0; i < n; i++) if (!Number.isFinite(time[i])) throw new RangeError(`time ${time[i]} at index ${i}`);
  const order = Array.from({ length: n }, (_, i) => i).sort((a, b) => time[a] - time[b]);
  const steps: SurvivalStep[] = [];
  let survival = 1;
  let greenwood = 0;
  for (let k = 0; k < n;) {
    const t = time[order[k]];
    const atRisk = n - k;
    let events = 0;
    for (; k < n && time[order[k]] === t; k++) if (event[order[k]]) events++;
    if (events === 0) continue;
    survival = events === atRisk ? 0 : survival * (1 - events / atRisk);
    greenwood += events / (atRisk * (atRisk - events));
    steps.push({ time: t, atRisk, events, survival, se: survival > 0 ? survival * Math.sqrt(greenwood) : Number.NaN });
  }
  return steps;
}

/** A median with its interval; null where the data do not reach so far. */
export interface CensoredMedian {
  readonly median: number | null;
  readonly low: number | null;
  readonly high: number | null;
}

/** Median of a survival curve: where it passes ½, the middle of the step where it stays on ½. The interval (Brookmeyer & Crowley 1982,
 *  Biometrics 38, 29) from pointwise limits of ln(−ln S), `designEffect` ≥ 1 times wider in variance for values that are not
 *  independent. */
export function medianSurvival(steps: readonly SurvivalStep[], designEffect = 1, level = 0.95): CensoredMedian {
  const z = normalQuantile(0.5 + 0.5 * level) * Math.sqrt(designEffect);
  let low: number | null = null;
  let high: number | null = null;
  for (const { time, survival, se } of steps) {
    let lower = 0;
    let upper = 0;
    if (survival > 0) {
      const half = (z * se) / (survival * -Math.log(survival));
      lower = survival ** Math.exp(half);
      upper = survival ** Math.exp(-half);
    }
    if (low === null && lower <= HALF) low = time;
    if (high === null && upper <= HALF) high = time;
  }
  const at = steps.findIndex((s) => s.survival <= HALF);
  if (at < 0) return { median: null, low, high };
  // On ½ exactly any value up to the next event is a median.
  const flat = Math.abs(steps[at].survival - 0.5) < 1e-9 && at + 1 < steps.length;
  return { median: flat ? 0.5 * (steps[at].time + steps[at + 1].time) : steps[at].time, low, high };
}

/** ½ and the rounding of a product of a thousand factors. */
const HALF = 0.5 + 1e-9;

/** One step of the distribution of values some of which are only upper limits. */
export interface LowerStep {
  readonly value: number;
  /** P(V < value). */
  readonly below: number;
  readonly se: number;
}

/** Kaplan–Meier for left-censored values: the axis is reflected (Helsel 2005, Nondetects and Data Analysis, ch. 6). Steps at the
 *  measured values, rising; what the limits leave below the smallest of them stays there. A limit equal to a value counts as below. */
export function leftCensoredDistribution(values: ArrayLike<number>, isLimit: ArrayLike<number | boolean>): LowerStep[] {
  const steps = kaplanMeier(
    Array.from(values, (v) => -v),
    Array.from(values, (_, i) => !isLimit[i]),
  );
  return steps.map((s) => ({ value: -s.time, below: s.survival, se: s.se })).toReversed();
}

/** Median of values some of which are only upper limits, with a two-sided interval of `level`. `median` is null where it lies below
 *  the smallest measured value: then it is itself only a limit. `low` null: no lower bound but the scale's own. Assumes that what
 *  makes a value a limit does not depend on the value itself. */
export function leftCensoredMedian(
  values: ArrayLike<number>,
  isLimit: ArrayLike<number | boolean>,
  designEffect = 1,
  level = 0.95,
): CensoredMedian {
  const steps = kaplanMeier(
    Array.from(values, (v) => -v),
    Array.from(values, (_, i) => !isLimit[i]),
  );
  const reflected = medianSurvival(steps, designEffect, level);
  const turned = (v: number | null): number | null => (v === null ? null : 0 - v);
  return { median: turned(reflected.median), low: turned(reflected.high), high: turned(reflected.low) };
}
