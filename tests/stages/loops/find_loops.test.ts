import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import { makeRandom, type Random } from "../../../src/numerics/random.js";
import { findLoops, settings, type LoopRow } from "../../../src/stages/loops/index.js";

const s = { ...defaultsOf(settings), draws: 400 };

const row = (
  branch: "cooling" | "warming",
  temperatureK: number,
  value: number | null,
  sd = 0.001,
  cycle = 1,
): LoopRow => ({
  cycle,
  branch,
  temperatureK,
  fraction: value === null ? null : { value, low: value - 1.96 * sd, high: value + 1.96 * sd },
});

/** Measured fractions of a branch whose true course is `f`, at temperatures `stepK` apart from a random start. */
function measured(
  f: (t: number) => number,
  branch: "cooling" | "warming",
  stepK: number,
  sd: number,
  random: Random,
): LoopRow[] {
  const rows: LoopRow[] = [];
  for (let t = 130 + stepK * random.uniform(); t < 180; t += stepK * (0.7 + 0.6 * random.uniform())) {
    const seen = f(t) === 0 || f(t) === 1 ? f(t) : Math.min(1, Math.max(0, f(t) + sd * random.normal()));
    rows.push(row(branch, t, seen, sd));
  }
  return rows;
}

/** A rising staircase of domains that switch at temperatures scattered about `half`. */
function staircase(half: number, spreadK: number, domains: number, random: Random): (t: number) => number {
  const steps = Array.from({ length: domains }, () => ({
    at: half + spreadK * random.normal(),
    size: random.uniform() ** 2,
  }));
  const total = steps.reduce((a, b) => a + b.size, 0);
  return (t) => steps.reduce((a, b) => a + (t > b.at ? b.size : 0), 0) / total;
}

function crossing(f: (t: number) => number): number {
  let [low, high] = [100, 220];
  while (high - low > 1e-7) {
    const middle = 0.5 * (low + high);
    if (f(middle) > 0.5) high = middle;
    else low = middle;
  }
  return 0.5 * (low + high);
}

describe("half temperatures and widths over many loops", () => {
  const kinds: Record<string, (half: number, random: Random) => (t: number) => number> = {
    "smooth branches": (half) => (t) => 0.5 * (1 + Math.tanh((t - half) / 5)),
    "an abrupt jump": (half) => (t) => (t > half ? 1 : 0),
    "ten domains": (half, random) => staircase(half, 4, 10, random),
    "sixty domains": (half, random) => staircase(half, 4, 60, random),
  };
  test.each(Object.keys(kinds))("%s: intervals hold the truth, the estimate is not biased", (name) => {
    const random = makeRandom(11);
    const trials = 200;
    const stepK = 3.5;
    let covered = 0;
    let widthCovered = 0;
    let bias = 0;
    for (let k = 0; k < trials; k++) {
      const cooling = kinds[name](150 + 3 * random.uniform(), random);
      const warming = kinds[name](159 + 3 * random.uniform(), random);
      const rows = [
        ...measured(cooling, "cooling", stepK, 0.002, random),
        ...measured(warming, "warming", stepK, 0.002, random),
      ];
      const [loop] = findLoops(rows, s, k);
      const trueHalf = crossing(cooling);
      const { value, low, high } = loop.coolingHalfK;
      if (value === null || low === null || high === null) throw new Error("no half temperature");
      bias += (value - trueHalf) / trials;
      if (low <= trueHalf && trueHalf <= high) covered++;
      const width = crossing(warming) - trueHalf;
      if ((loop.widthK.low ?? Infinity) <= width && width <= (loop.widthK.high ?? -Infinity)) widthCovered++;
    }
    // 0.93 with two standard errors of 200 trials below
    expect(covered / trials).toBeGreaterThan(0.93 - 0.036);
    expect(widthCovered / trials).toBeGreaterThan(0.93 - 0.036);
    // a tenth of the temperature step, with the scatter of a jump inside its gap
    expect(Math.abs(bias)).toBeLessThan(0.1 * stepK + (2 * stepK) / Math.sqrt(12 * trials));
  });
});

describe("intervals know the temperatures", () => {
  test("a jump from 0 to 1 leaves the whole gap", () => {
    const rows = [row("cooling", 150, 0), row("cooling", 160, 1), row("cooling", 170, 1)];
    const { value, low, high } = findLoops(rows, s, 3)[0].coolingHalfK;
    expect(value).toBeCloseTo(155, 6);
    expect(low).toBeLessThan(150.6);
    expect(high).toBeGreaterThan(159.4);
    expect(low).toBeGreaterThanOrEqual(150);
    expect(high).toBeLessThanOrEqual(160);
  });
  test("a small step leaves little of it", () => {
    const rows = [0.02, 0.2, 0.35, 0.45, 0.55, 0.65, 0.8, 0.98].map((f, k) => row("cooling", 150 + k, f));
    const { low, high } = findLoops(rows, s, 3)[0].coolingHalfK;
    if (low === null || high === null) throw new Error("no interval");
    expect(high - low).toBeLessThan(1.5);
    expect(high - low).toBeGreaterThan(0.02);
  });
  test("the same seed gives the same interval, whatever the order of the rows", () => {
    const rows = [0, 0.1, 0.3, 0.8, 1].map((f, k) => row("warming", 150 + 3 * k, f));
    expect(findLoops(rows.toReversed(), s, 5)).toEqual(findLoops(rows, s, 5));
  });
});

describe("what cannot be had is null", () => {
  test("one branch only: no width, no area, not complete", () => {
    const [loop] = findLoops([row("warming", 150, 0), row("warming", 160, 1)], s, 1);
    expect(loop.coolingHalfK.value).toBeNull();
    expect(loop.warmingHalfK.value).toBeCloseTo(155, 6);
    expect(loop.widthK.value).toBeNull();
    expect(loop.areaK).toBeNull();
    expect(loop.complete).toBe(false);
  });
  test("undecided frames are left out; a cycle of them is all null", () => {
    const [first, second] = findLoops(
      [row("cooling", 150, 0.5), row("cooling", 160, null), row("cooling", 150, null, 0, 2)],
      s,
      1,
    );
    expect(first.highestFraction).toBe(0.5);
    expect(second).toMatchObject({ cycle: 2, lowestFraction: null, areaK: null, complete: false });
  });
  test("flat at one half: its middle", () => {
    const rows = [0.1, 0.5, 0.5, 0.9].map((f, k) => row("cooling", 150 + 10 * k, f));
    expect(findLoops(rows, s, 1)[0].coolingHalfK.value).toBe(165);
  });
  test("complete needs both branches at both ends", () => {
    const full = (branch: "cooling" | "warming"): LoopRow[] => [row(branch, 140, 0.01), row(branch, 180, 0.99)];
    const short = [row("warming", 140, 0.03), row("warming", 180, 0.99)];
    expect(findLoops([...full("cooling"), ...full("warming")], s, 1)[0].complete).toBe(true);
    expect(findLoops([...full("cooling"), ...short], s, 1)[0].complete).toBe(false);
  });
});
