import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../src/model/settings.js";
import { findLoops, settings, type LoopRow } from "../../src/stages/loops/index.js";
import { fixture } from "./fixture.js";

const s = defaultsOf(settings);

interface PublishedLoop {
  name: string;
  cooling_T: number[];
  cooling_fraction: number[];
  warming_T: number[];
  warming_fraction: number[];
  cooling_half_K_by_linear_interpolation?: number;
  warming_half_K_by_linear_interpolation?: number;
  area_K_by_trapezoid?: number;
  area_K_by_trapezoid_on_the_common_interval_180_to_200?: number;
}
// Source: closed forms (tanh branches) and trapezoid sums; see the file.
const { loops } = fixture<{ loops: PublishedLoop[] }>("hysteresis");

function rowsOf(loop: PublishedLoop): LoopRow[] {
  const exact = (f: number): { value: number; low: number; high: number } => ({ value: f, low: f, high: f });
  return [
    ...loop.cooling_T.map((t, k): LoopRow => ({
      cycle: 1,
      branch: "cooling",
      temperatureK: t,
      fraction: exact(loop.cooling_fraction[k]),
    })),
    ...loop.warming_T.map((t, k): LoopRow => ({
      cycle: 1,
      branch: "warming",
      temperatureK: t,
      fraction: exact(loop.warming_fraction[k]),
    })),
  ];
}

describe("loops, against computed ones", () => {
  test("tanh branches: half points and area", () => {
    const [loop] = findLoops(rowsOf(loops[0]), s, 1);
    expect(loop.coolingHalfK.value).toBeCloseTo(loops[0].cooling_half_K_by_linear_interpolation ?? Number.NaN, 9);
    expect(loop.warmingHalfK.value).toBeCloseTo(loops[0].warming_half_K_by_linear_interpolation ?? Number.NaN, 9);
    expect(loop.widthK.value).toBeCloseTo(9, 9);
    expect(loop.areaK).toBeCloseTo(loops[0].area_K_by_trapezoid ?? Number.NaN, 9);
    expect(loop.complete).toBe(true);
  });
  test("incomplete: no half point is extrapolated, the area is of the common temperatures", () => {
    const [loop] = findLoops(rowsOf(loops[1]), s, 1);
    expect(loop.coolingHalfK.value).toBeNull();
    expect(loop.warmingHalfK.value).toBeNull();
    expect(loop.widthK).toEqual({ value: null, low: null, high: null });
    expect(loop.areaK).toBeCloseTo(loops[1].area_K_by_trapezoid_on_the_common_interval_180_to_200 ?? Number.NaN, 9);
    expect(loop.complete).toBe(false);
    expect(loop.lowestFraction).toBe(0.58);
    expect(loop.highestFraction).toBe(1);
  });
});
