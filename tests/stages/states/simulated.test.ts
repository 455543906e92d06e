import { describe, expect, test } from "vitest";
import type { SeriesSpec } from "../../../src/demo/index.js";
import { analyse } from "./simulated.js";

const MIXED: SeriesSpec[] = [{ branch: "cooling", temperaturesK: [175, 160, 157, 154.5, 152, 149.5, 147, 130] }];
const SINGLE: SeriesSpec[] = [
  { branch: "cooling", temperaturesK: [205, 195, 185, 154, 150, 122, 114, 106] },
  { branch: "warming", temperaturesK: [104, 112, 120, 187, 197, 207] },
];
const small = { rows: 128, cols: 128, series: MIXED };

/** Errors of the fraction and of the levels over some cooldowns; frames of two states only. */
function errorsOf(
  conditions: Parameters<typeof analyse>[0],
  seeds: readonly number[],
): {
  bias: number;
  covered: number;
  pullSd: number;
  levelErrors: number[];
  n: number;
} {
  const errors: number[] = [];
  const pulls: number[] = [];
  const levelErrors: number[] = [];
  let covered = 0;
  for (const seed of seeds) {
    for (const f of analyse({ ...small, ...conditions, seed, sampleSeed: seed + 50 })) {
      if (f.trueFraction === 0 || f.trueFraction === 1 || f.states.fraction === null) continue;
      const { value, low, high } = f.states.fraction;
      errors.push(value - f.trueFraction);
      // the interval is that of the whole measured field, what lies under particles included
      const field = f.truth.metallicFraction;
      pulls.push((value - field) / ((high - low) / 3.92));
      if (low <= field && field <= high) covered++;
      if (f.trueFraction < 0.15 || f.trueFraction > 0.85) continue;
      const { metallic, insulating } = f.levels;
      const ratio = Math.hypot(metallic.re, metallic.im) / Math.hypot(insulating.re, insulating.im);
      levelErrors.push(ratio / (f.truth.levels.amplitudeMetallic / f.truth.levels.amplitudeInsulating) - 1);
    }
  }
  const n = errors.length;
  const mean = errors.reduce((a, b) => a + b, 0) / n;
  const pullSd = Math.sqrt(pulls.reduce((a, b) => a + b * b, 0) / n);
  return { bias: mean, covered: covered / n, pullSd, levelErrors, n };
}

describe("metallic fraction of simulated frames", () => {
  test.each([
    ["walls 100 nm wide", {}],
    ["walls 100 nm wide, no debris", { debris: { perUm2: 0 } }],
    [
      "sharp walls, correlated noise, no debris",
      { wall: { widthNm: 20 }, noise: { complex: 0.08, correlationXPx: 0.7 }, debris: { perUm2: 0 } },
    ],
    ["unequal pixels", { pixel: { xNm: 10, yNm: 13 } }],
  ])("%s: not biased, and its interval holds the truth", (_, conditions) => {
    const { bias, covered, pullSd, levelErrors, n } = errorsOf(conditions, [1, 2, 3]);
    expect(n).toBeGreaterThan(12);
    expect(Math.abs(bias)).toBeLessThan(0.001);
    expect(covered).toBeGreaterThan(0.85);
    // neither too narrow nor ten times too wide
    expect(pullSd).toBeGreaterThan(0.35);
    expect(pullSd).toBeLessThan(1.4);
    for (const e of levelErrors) expect(Math.abs(e)).toBeLessThan(0.02);
  });
  test("a strong fringe beside the walls does not move them", () => {
    const { bias, covered } = errorsOf({ fringe: { amplitudeRad: 0.3 } }, [1, 2]);
    expect(Math.abs(bias)).toBeLessThan(0.002);
    expect(covered).toBeGreaterThan(0.75);
  });
  test("without an optical phase the interval covers what the step may be", () => {
    const frames = analyse({ ...small, seed: 2, sampleSeed: 9 }, false).filter((f) => f.levels.verdict === "mixed");
    expect(frames.length).toBeGreaterThan(3);
    for (const f of frames) {
      expect(f.signal.im).toBeNull();
      const { low, high } = f.states.fraction ?? { low: Infinity, high: -Infinity };
      expect(low).toBeLessThanOrEqual(f.trueFraction);
      expect(high).toBeGreaterThanOrEqual(f.trueFraction);
    }
  });
});

test("frames of one state have fraction 0 or 1 exactly and no domain of the other, with noise, scars, line noise and debris", () => {
  let seen = 0;
  for (const seed of [11, 12, 13]) {
    const conditions = { seed, sampleSeed: seed, series: SINGLE, scars: { perFrame: 4 }, gain: { rowSd: 0.015 } };
    for (const f of analyse({ ...small, ...conditions })) {
      if (f.truth.singleState === null) continue;
      seen++;
      expect(f.states.levels.verdict).toBe(f.truth.singleState);
      const { value, low, high } = f.states.fraction ?? { value: Number.NaN, low: 0, high: 0 };
      expect(value).toBe(f.truth.singleState === "metallic" ? 1 : 0);
      expect(high - low).toBeGreaterThan(0);
      expect(high - low).toBeLessThan(0.01);
      expect(new Set(f.states.map.states).has(f.truth.singleState === "metallic" ? 0 : 1)).toBe(false);
    }
  }
  expect(seen).toBeGreaterThan(30);
});

test("a cooldown that never leaves one state is undecided, its maps empty", () => {
  const series: SeriesSpec[] = [{ branch: "cooling", temperaturesK: [205, 200, 195, 190] }];
  for (const f of analyse({ ...small, seed: 4, series })) {
    expect(f.states.levels.verdict).toBe("undecided");
    expect(f.states.fraction).toBeNull();
    expect(f.states.map.states.every((v) => v === 255)).toBe(true);
  }
});
