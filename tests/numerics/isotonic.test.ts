import * as fc from "fast-check";
import { describe, expect, it } from "vitest";
import { crossing, isotonicRegression } from "../../src/numerics/isotonic.js";

const points = fc.array(fc.tuple(fc.integer({ min: -20, max: 20 }), fc.integer({ min: 1, max: 9 })), {
  minLength: 1,
  maxLength: 25,
});

describe("isotonic regression", () => {
  it("rises, keeps the weighted mean, and each level is the mean of its block: the conditions of the optimum", () => {
    fc.assert(
      fc.property(points, (list) => {
        const y = list.map((p) => p[0]);
        const w = list.map((p) => p[1]);
        const fit = isotonicRegression(y, w);
        // Σ w (y − fit) over any head is ≥ 0 (else lowering the head would pay), and 0 where a block ends.
        let partial = 0;
        for (let i = 0; i < y.length; i++) {
          if (i > 0) expect(fit[i]).toBeGreaterThanOrEqual(fit[i - 1]);
          partial += w[i] * (y[i] - fit[i]);
          expect(partial).toBeGreaterThan(-1e-9);
          if (i === y.length - 1 || fit[i + 1] > fit[i]) expect(Math.abs(partial)).toBeLessThan(1e-9);
        }
      }),
    );
  });

  it("falling is the mirror of rising", () => {
    fc.assert(
      fc.property(points, (list) => {
        const y = list.map((p) => p[0]);
        const w = list.map((p) => p[1]);
        const mirrored = isotonicRegression(y.toReversed(), w.toReversed()).toReversed();
        isotonicRegression(y, w, false).forEach((v, i) => expect(v).toBeCloseTo(mirrored[i], 10));
      }),
    );
  });

  it("refuses what cannot be fitted", () => {
    expect(() => isotonicRegression([1, Number.NaN])).toThrow(RangeError);
    expect(() => isotonicRegression([1, 2], [1, 0])).toThrow(RangeError);
    expect(() => isotonicRegression([1, 2], [1])).toThrow(RangeError);
    expect(isotonicRegression([])).toHaveLength(0);
  });
});

describe("crossing", () => {
  it("interpolates, takes the middle of a flat, and is NaN where the level is not reached", () => {
    expect(crossing([140, 150, 160], [0.1, 0.3, 0.7], 0.5)).toBeCloseTo(155, 12);
    expect(crossing([140, 150, 160, 170], [0.1, 0.5, 0.5, 0.9], 0.5)).toBe(155);
    expect(crossing([140, 150], [0.5, 0.9], 0.5)).toBe(140);
    expect(crossing([140, 150], [0.1, 0.5], 0.5)).toBe(150);
    expect(crossing([140, 150], [0.6, 0.9], 0.5)).toBeNaN();
    expect(crossing([140, 150], [0.1, 0.4], 0.5)).toBeNaN();
    expect(crossing([], [], 0.5)).toBeNaN();
  });
});
