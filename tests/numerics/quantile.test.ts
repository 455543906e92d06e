import * as fc from "fast-check";
import { describe, expect, it } from "vitest";
import {
  SD_PER_MAD,
  circularMean,
  dropNaNInPlace,
  mad,
  medianInPlace,
  median,
  quantile,
  selectInPlace,
  wrapAngle,
} from "../../src/numerics/quantile.js";
import { makeRandom } from "../../src/numerics/random.js";

const values = fc.array(fc.double({ noNaN: true, noDefaultInfinity: true }), { minLength: 1, maxLength: 60 });

describe("order statistics", () => {
  it("select what sorting selects, ties included, and part the array there", () => {
    fc.assert(
      fc.property(
        fc.oneof(values, fc.array(fc.integer({ min: 0, max: 4 }), { minLength: 1 })),
        fc.nat(),
        (list, seed) => {
          const k = seed % list.length;
          const a = Float64Array.from(list);
          const sorted = a.slice().sort();
          expect(selectInPlace(a, k)).toBe(a[k]);
          expect(a[k] - sorted[k]).toBe(0);
          for (let i = 0; i < k; i++) expect(a[i]).toBeLessThanOrEqual(a[k]);
          for (let i = k + 1; i < a.length; i++) expect(a[i]).toBeGreaterThanOrEqual(a[k]);
        },
      ),
    );
  });

  it("select in long arrays too, where the pivot is sampled", () => {
    const random = makeRandom(3);
    const a = Float32Array.from({ length: 20011 }, () => Math.round(300 * random.normal()) / 7);
    const sorted = a.slice().sort();
    for (const k of [0, 1, 600, 10005, 19000, 20010]) expect(selectInPlace(a.slice(), k)).toBe(sorted[k]);
  });

  it("look at the first n values only", () => {
    const a = Float64Array.from([5, 1, 3, -100, -100]);
    expect(medianInPlace(a, 3)).toBe(3);
    expect(() => selectInPlace(a, 5)).toThrow(RangeError);
  });

  it("quantiles interpolate as type 7, and skip NaN without touching the input", () => {
    const a = Float64Array.from([Number.NaN, 4, 1, 3, Number.NaN, 2]);
    const before = a.slice();
    // R: quantile(1:4, c(0, 0.25, 0.5, 0.9, 1))
    expect([0, 0.25, 0.5, 0.9, 1].map((p) => quantile(a, p))).toEqual([1, 1.75, 2.5, 3.7, 4]);
    expect(a).toEqual(before);
    expect(median([])).toBeNaN();
    expect(median([Number.NaN])).toBeNaN();
    expect(dropNaNInPlace(a)).toBe(4);
    expect(Array.from(a.subarray(0, 4))).toEqual([4, 1, 3, 2]);
  });

  it("the median absolute deviation of normal noise is its sd/1.4826", () => {
    const random = makeRandom(8);
    const a = Float64Array.from({ length: 40000 }, () => 10 + 2 * random.normal());
    // sd of the estimate: 1.17 · 2/√40000 = 0.012
    expect(Math.abs(SD_PER_MAD * mad(a) - 2)).toBeLessThan(0.036);
    expect(mad([1, 2, 4, 8, 100])).toBe(3);
    expect(mad([1, 2, 4], 0)).toBe(2);
  });
});

describe("angles", () => {
  it("a mean across the seam, weights, nothing to average", () => {
    expect(Math.abs(circularMean([3.1, -3.1]).meanRad)).toBeCloseTo(Math.PI, 12);
    expect(circularMean([0.2, 2, Number.NaN], [1, 0, 5]).meanRad).toBeCloseTo(0.2, 14);
    expect(circularMean([0.2, 2, Number.NaN], [1, 0, 5]).resultant).toBeCloseTo(1, 14);
    expect(circularMean([0, Math.PI]).resultant).toBeCloseTo(0, 15);
    expect(circularMean([]).meanRad).toBeNaN();
  });

  it("wraps into (−π, π]", () => {
    expect(wrapAngle(Math.PI)).toBe(Math.PI);
    expect(wrapAngle(-Math.PI)).toBe(Math.PI);
    expect(wrapAngle(0.5 + 6 * Math.PI)).toBeCloseTo(0.5, 12);
    fc.assert(
      fc.property(fc.double({ min: -1e3, max: 1e3, noNaN: true }), (a) => {
        const w = wrapAngle(a);
        expect(w).toBeGreaterThan(-Math.PI);
        expect(w).toBeLessThanOrEqual(Math.PI);
        expect(Math.abs(Math.sin(w) - Math.sin(a)) + Math.abs(Math.cos(w) - Math.cos(a))).toBeLessThan(1e-11);
      }),
    );
  });
});
