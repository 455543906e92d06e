import { isotonicRegression } from "../../numerics/isotonic.js";
import type { Random } from "../../numerics/random.js";
import type { BranchData } from "./branch.js";

/** Where a rising course of fractions stands at one half. */
export interface Crossing {
  readonly temperatureK: number;
  /** The last temperature below and the first above one half. */
  readonly belowK: number;
  readonly aboveK: number;
  readonly belowFraction: number;
  readonly aboveFraction: number;
}

/** Crossing of one half by linear interpolation of a rising course; flat at one half: its middle; null where it never crosses. */
export function crossingOf(temperatureK: Float64Array, fit: ArrayLike<number>): Crossing | null {
  const n = temperatureK.length;
  let below = -1;
  let above = n;
  for (let k = 0; k < n; k++) {
    if (fit[k] < 0.5) below = k;
    else if (fit[k] > 0.5) {
      above = k;
      break;
    }
  }
  const first = below + 1;
  if (first < above) {
    // on one half exactly, over one temperature or several
    return {
      temperatureK: 0.5 * (temperatureK[first] + temperatureK[above - 1]),
      belowK: temperatureK[first],
      aboveK: temperatureK[above - 1],
      belowFraction: 0.5,
      aboveFraction: 0.5,
    };
  }
  if (below < 0 || above >= n) return null;
  const part = (0.5 - fit[below]) / (fit[above] - fit[below]);
  return {
    temperatureK: temperatureK[below] + part * (temperatureK[above] - temperatureK[below]),
    belowK: temperatureK[below],
    aboveK: temperatureK[above],
    belowFraction: fit[below],
    aboveFraction: fit[above],
  };
}

const weightsOf = (b: BranchData): Float64Array => b.sd.map((s) => 1 / (s * s));

/** Half temperature of a branch from its isotonic regression on temperature.
 *  Sources: Barlow et al. 1972; Robertson, Wright & Dykstra 1988, Order Restricted Statistical Inference. */
export function halfPoint(b: BranchData): Crossing | null {
  return crossingOf(b.temperatureK, isotonicRegression(b.fraction, weightsOf(b)));
}

/** One simulated repetition of the half temperature: fractions drawn about the fitted course with their standard deviations, fitted
 *  again, and the crossing drawn inside its gap. NaN where the repetition does not cross.
 *
 *  Parametric draws because the bootstrap of an isotonic regression is inconsistent on flat parts. Inside a gap from f_1 to f_2 nothing
 *  was measured: the curve there is a random rising one (a Dirichlet process, Ferguson 1973, Ann. Stat. 1, 209), whose concentration
 *  goes to 0 as f_2 − f_1 → 1: after a jump from 0 to 1 the crossing is anywhere inside, with equal chances; after a small step it is
 *  near the straight line. */
export function drawHalf(b: BranchData, fit: Float64Array, smoothness: number, random: Random): number {
  const weights = weightsOf(b);
  const drawn = Float64Array.from(fit, (f, k) => Math.min(1, Math.max(0, f + b.sd[k] * random.normal())));
  const c = crossingOf(b.temperatureK, isotonicRegression(drawn, weights));
  if (c === null) return Number.NaN;
  const jump = c.aboveFraction - c.belowFraction;
  if (!(jump > 0)) return c.temperatureK;
  const level = (0.5 - c.belowFraction) / jump;
  const concentration = smoothness * (1 / jump - 1);
  return c.belowK + crossingInGap(level, concentration, random) * (c.aboveK - c.belowK);
}

const MOST_STICKS = 1200;
const weightAt = new Float64Array(MOST_STICKS);
const places = new Float64Array(MOST_STICKS);

/** Position in 0..1 at which a Dirichlet process on it, of given concentration, passes `level`: by stick breaking (Sethuraman 1994,
 *  Stat. Sin. 4, 639). */
function crossingInGap(level: number, concentration: number, random: Random): number {
  if (concentration < 1e-6) return random.uniform();
  // beyond this the process is normal to a few per cent of its own width
  if (concentration > 60) {
    const sd = Math.sqrt((level * (1 - level)) / (concentration + 1));
    return Math.min(1, Math.max(0, level + sd * random.normal()));
  }
  // sticks until next to nothing is left; what matters is the order of their places
  let count = 0;
  let left = 1;
  while (left > 1e-3 && count < MOST_STICKS) {
    const part = 1 - random.uniform() ** (1 / concentration);
    weightAt[count] = left * part;
    places[count] = random.uniform();
    left *= 1 - part;
    count++;
  }
  // the place where the weights before it first add to the level: bisection on places needs no sorting
  const goal = level * (1 - left);
  let at = 1;
  for (let k = 0; k < count; k++) {
    if (places[k] >= at) continue;
    let sum = 0;
    for (let n = 0; n < count; n++) if (places[n] <= places[k]) sum += weightAt[n];
    if (sum >= goal) at = places[k];
  }
  return at;
}
