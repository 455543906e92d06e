import type { Branch } from "../../model/cooldown.js";

/** One frame's part in a loop. */
export interface LoopRow {
  readonly cycle: number;
  readonly branch: Branch;
  readonly temperatureK: number;
  /** Metallic fraction with its 95 % interval; null where undecided. */
  readonly fraction: { readonly value: number; readonly low: number; readonly high: number } | null;
}

/** One branch of one cycle: rising temperatures, one entry a temperature. */
export interface BranchData {
  readonly temperatureK: Float64Array;
  readonly fraction: Float64Array;
  readonly sd: Float64Array;
}

/** Two-sided 95 % of a normal. */
const Z95 = 1.959963984540054;

/** One standard deviation of a fraction, from its 95 % interval; that of a one-sided one is its whole length. */
export function branchSdOf(f: NonNullable<LoopRow["fraction"]>, leastSd: number): number {
  return Math.max(leastSd, Math.max(f.value - f.low, f.high - f.value) / Z95);
}

/** Fractions of one branch by temperature; frames at one temperature are averaged by their variances. A one-sided interval (a frame of
 *  one state) gives its whole length as 95 %.
 *  @returns null where no frame has a fraction */
export function branchOf(rows: readonly LoopRow[], cycle: number, branch: Branch, leastSd: number): BranchData | null {
  const own = rows.filter((r) => r.cycle === cycle && r.branch === branch && r.fraction !== null);
  if (own.length === 0) return null;
  own.sort((a, b) => a.temperatureK - b.temperatureK);
  const t: number[] = [];
  const sum: number[] = [];
  const weight: number[] = [];
  for (const r of own) {
    if (r.fraction === null) continue;
    const { value } = r.fraction;
    const w = 1 / branchSdOf(r.fraction, leastSd) ** 2;
    const last = t.length - 1;
    if (last >= 0 && t[last] === r.temperatureK) {
      sum[last] += w * value;
      weight[last] += w;
    } else {
      t.push(r.temperatureK);
      sum.push(w * value);
      weight.push(w);
    }
  }
  return {
    temperatureK: Float64Array.from(t),
    fraction: Float64Array.from(sum, (v, k) => v / weight[k]),
    sd: Float64Array.from(weight, (w) => 1 / Math.sqrt(w)),
  };
}

/** ∫ f dT between two temperatures inside the branch, by trapezoids with interpolated ends. */
export function integrate(b: BranchData, fromK: number, toK: number): number {
  const { temperatureK: t, fraction: f } = b;
  let sum = 0;
  for (let k = 1; k < t.length; k++) {
    const a = Math.max(fromK, t[k - 1]);
    const z = Math.min(toK, t[k]);
    if (!(z > a)) continue;
    const at = (x: number): number => f[k - 1] + ((x - t[k - 1]) / (t[k] - t[k - 1])) * (f[k] - f[k - 1]);
    sum += 0.5 * (at(a) + at(z)) * (z - a);
  }
  return sum;
}
