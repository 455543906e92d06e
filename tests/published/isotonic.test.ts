import { describe, expect, it } from "vitest";
import { crossing, isotonicRegression } from "../../src/numerics/isotonic.js";
import { fixture } from "./fixture.js";

// Source: the exact min–max formula in rational arithmetic; R's isoreg and scikit-learn agree.
const { cases } = fixture<{
  cases: {
    name: string;
    y: number[];
    weights: number[];
    rising: number[];
    falling: number[];
    temperature?: number[];
    crossing_of_half_by_linear_interpolation?: number;
  }[];
}>("isotonic");

describe("isotonic regression, against the exact min–max formula", () => {
  it.each(cases)("$name", (c) => {
    const rising = isotonicRegression(c.y, c.weights);
    const falling = isotonicRegression(c.y, c.weights, false);
    c.rising.forEach((v, i) => expect(Math.abs(rising[i] - v)).toBeLessThan(1e-12));
    c.falling.forEach((v, i) => expect(Math.abs(falling[i] - v)).toBeLessThan(1e-12));
    if (c.temperature && c.crossing_of_half_by_linear_interpolation !== undefined) {
      expect(crossing(c.temperature, rising, 0.5)).toBeCloseTo(c.crossing_of_half_by_linear_interpolation, 11);
    }
  });
  it("holds the case with a crossing", () => {
    expect(cases.some((c) => c.crossing_of_half_by_linear_interpolation !== undefined)).toBe(true);
  });
});
