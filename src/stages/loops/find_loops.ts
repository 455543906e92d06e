import type { Interval, Loop } from "../../model/loops.js";
import { isotonicRegression } from "../../numerics/isotonic.js";
import { quantileInPlace } from "../../numerics/quantile.js";
import { childSeed, makeRandom } from "../../numerics/random.js";
import { branchOf, integrate, type BranchData, type LoopRow } from "./branch.js";
import { drawHalf, halfPoint } from "./half_point.js";
import type { LoopsSettings } from "./settings.js";

const NONE: Interval = { value: null, low: null, high: null };
/** A half temperature is reported with an interval only if this share of the repetitions crosses one half at all. */
const LEAST_CROSSING = 0.5;

/** The hysteresis loop of every cycle.
 *
 *  Half temperatures: isotonic regression of the fraction on temperature, crossing of one half by linear interpolation, never
 *  extrapolated. Intervals (95 %): parametric draws of the fractions and of the crossing inside its gap of temperatures; the width's
 *  from paired draws. Area: ∫ (cooling − warming) dT over the temperatures both branches reach, positive for an ordinary loop.
 *  @param rows one a frame, in any order
 *  @param seed of the draws; each cycle has its own stream
 *  @returns one a cycle, in order; what cannot be had is null */
export function findLoops(rows: readonly LoopRow[], s: LoopsSettings, seed: number): Loop[] {
  const cycles = [...new Set(rows.map((r) => r.cycle))].sort((a, b) => a - b);
  return cycles.map((cycle) => {
    const cooling = branchOf(rows, cycle, "cooling", s.leastFractionSd);
    const warming = branchOf(rows, cycle, "warming", s.leastFractionSd);
    const coolingDraws = cooling === null ? null : drawsOf(cooling, s, childSeed(seed, cycle, 0));
    const warmingDraws = warming === null ? null : drawsOf(warming, s, childSeed(seed, cycle, 1));
    const coolingHalfK = intervalOf(cooling === null ? null : (halfPoint(cooling)?.temperatureK ?? null), coolingDraws);
    const warmingHalfK = intervalOf(warming === null ? null : (halfPoint(warming)?.temperatureK ?? null), warmingDraws);
    const both = [cooling, warming].filter((b) => b !== null);
    const all = both.flatMap((b) => [...b.fraction]);
    return {
      cycle,
      coolingHalfK,
      warmingHalfK,
      widthK: widthOf(coolingHalfK, warmingHalfK, coolingDraws, warmingDraws),
      areaK: cooling === null || warming === null ? null : areaOf(cooling, warming),
      lowestFraction: all.length === 0 ? null : Math.min(...all),
      highestFraction: all.length === 0 ? null : Math.max(...all),
      complete:
        both.length === 2 &&
        both.every((b) => Math.min(...b.fraction) <= s.completeLow && Math.max(...b.fraction) >= s.completeHigh),
    };
  });
}

function drawsOf(b: BranchData, s: LoopsSettings, seed: number): Float64Array {
  const random = makeRandom(seed);
  const fit = isotonicRegression(
    b.fraction,
    b.sd.map((sd) => 1 / (sd * sd)),
  );
  const draws = new Float64Array(s.draws);
  for (let k = 0; k < draws.length; k++) draws[k] = drawHalf(b, fit, s.gapSmoothness, random);
  return draws;
}

function intervalOf(value: number | null, draws: Float64Array | null): Interval {
  if (value === null || draws === null) return NONE;
  const kept = draws.filter((v) => !Number.isNaN(v));
  if (kept.length < LEAST_CROSSING * draws.length) return { value, low: null, high: null };
  return {
    value,
    low: Math.min(value, quantileInPlace(kept, 0.025)),
    high: Math.max(value, quantileInPlace(kept, 0.975)),
  };
}

function widthOf(
  cooling: Interval,
  warming: Interval,
  coolingDraws: Float64Array | null,
  warmingDraws: Float64Array | null,
): Interval {
  if (cooling.value === null || warming.value === null || coolingDraws === null || warmingDraws === null) return NONE;
  return intervalOf(
    warming.value - cooling.value,
    warmingDraws.map((w, k) => w - coolingDraws[k]),
  );
}

function areaOf(cooling: BranchData, warming: BranchData): number | null {
  const from = Math.max(cooling.temperatureK[0], warming.temperatureK[0]);
  const to = Math.min(
    cooling.temperatureK[cooling.temperatureK.length - 1],
    warming.temperatureK[warming.temperatureK.length - 1],
  );
  return to > from ? integrate(cooling, from, to) - integrate(warming, from, to) : null;
}
