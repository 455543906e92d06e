import type { Branch } from "../model/cooldown.js";

/** A series as far as the count of cycles needs it. */
export interface SeriesSpan {
  readonly branch: Branch;
  readonly firstK: number;
  readonly lastK: number;
}

/**
 * Number of the cycle of each series, from 1. A cycle begins with every cooling series; the warming series after it belongs to it. A
 * second warming series in a row goes on with the same cycle where it starts at or above the temperature at which the one before
 * ended (one run kept in two files); where it starts lower, the sample was cooled without images, and it is a cycle of its
 * own, as is every warming series with no cooling series before it.
 */
export function cycleNumbers(series: readonly SeriesSpan[]): number[] {
  let cycle = 0;
  let cooled = false;
  let warmedToK: number | null = null;
  return series.map((s) => {
    const continues = cooled && (warmedToK === null || s.firstK >= warmedToK);
    if (s.branch === "cooling" || !continues) {
      cycle++;
      cooled = s.branch === "cooling";
      warmedToK = null;
    }
    if (s.branch === "warming") warmedToK = s.lastK;
    return cycle;
  });
}
