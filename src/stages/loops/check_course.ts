import type { Branch, Notice } from "../../model/cooldown.js";
import { branchSdOf, type LoopRow } from "./branch.js";
import type { LoopsSettings } from "./settings.js";

interface Fall {
  readonly lowerK: number;
  readonly upperK: number;
  readonly before: number;
  readonly after: number;
}

/** A metallic fraction that does not rise with temperature along one branch, as files of both branches in one series look: a notice a
 *  branch and cycle where, at one temperature or from one to the next, it falls by more than `fallSd` standard deviations of the
 *  difference and by more than `leastFall`. Frames without a fraction are passed over. */
export function checkCourse(rows: readonly LoopRow[], s: LoopsSettings): Notice[] {
  const cycles = [...new Set(rows.map((r) => r.cycle))].sort((a, b) => a - b);
  return cycles.flatMap((cycle) =>
    (["cooling", "warming"] as const).flatMap((branch) => {
      const falls = fallsOf(rows, cycle, branch, s);
      if (falls.length === 0) return [];
      const worst = falls.reduce((a, b) => (b.before - b.after > a.before - a.after ? b : a));
      const { lowerK, upperK, before, after } = worst;
      const where =
        lowerK === upperK
          ? `${before.toFixed(2)} and ${after.toFixed(2)}, both at ${kelvin(lowerK)} K`
          : `${before.toFixed(2)} at ${kelvin(lowerK)} K, ${after.toFixed(2)} at ${kelvin(upperK)} K`;
      const more = falls.length > 1 ? `, and ${falls.length - 1} more such ${falls.length > 2 ? "pairs" : "pair"}` : "";
      const of = cycles.length > 1 ? ` of cycle ${cycle}` : "";
      const message = `the fraction does not rise with temperature along ${branch}${of}: ${where}${more}: are both branches in one series?`;
      return [{ frame: null, code: "fraction-not-rising", message }];
    }),
  );
}

const kelvin = (t: number): number => Number(t.toFixed(3));

function fallsOf(rows: readonly LoopRow[], cycle: number, branch: Branch, s: LoopsSettings): Fall[] {
  const points = rows
    .flatMap(({ cycle: c, branch: b, temperatureK, fraction }) =>
      c === cycle && b === branch && fraction !== null
        ? [{ temperatureK, value: fraction.value, sd: branchSdOf(fraction, s.leastFractionSd) }]
        : [],
    )
    // At one temperature the highest first: whatever falls there is then seen between neighbours.
    .sort((a, b) => a.temperatureK - b.temperatureK || b.value - a.value);
  const falls: Fall[] = [];
  for (let k = 1; k < points.length; k++) {
    const [low, high] = [points[k - 1], points[k]];
    const fall = low.value - high.value;
    if (fall > s.leastFall && fall > s.fallSd * Math.hypot(low.sd, high.sd))
      falls.push({ lowerK: low.temperatureK, upperK: high.temperatureK, before: low.value, after: high.value });
  }
  return falls;
}
