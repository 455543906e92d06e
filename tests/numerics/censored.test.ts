import * as fc from "fast-check";
import { describe, expect, it } from "vitest";
import {
  kaplanMeier,
  leftCensoredDistribution,
  leftCensoredMedian,
  medianSurvival,
} from "../../src/numerics/censored.js";
import { median } from "../../src/numerics/quantile.js";
import { makeRandom } from "../../src/numerics/random.js";
import { turnbull } from "../../src/numerics/turnbull.js";

const none = (n: number): boolean[] => Array<boolean>(n).fill(false);

describe("left-censored median", () => {
  it("is the ordinary median, of odd and of even numbers, where nothing is a limit", () => {
    fc.assert(
      fc.property(fc.array(fc.integer({ min: 1, max: 50 }), { minLength: 1, maxLength: 30 }), (list) => {
        const m = leftCensoredMedian(list, none(list.length));
        expect(m.median).toBeCloseTo(median(list), 12);
        const s = medianSurvival(
          kaplanMeier(
            list,
            list.map(() => 1),
          ),
        );
        expect(s.median).toBeCloseTo(median(list), 12);
      }),
    );
  });

  it("does not depend on the unit or on the order", () => {
    const values = [18, 22.5, 25, 30, 31, 36, 40, 44, 52, 60];
    const limit = [0, 1, 1, 0, 1, 0, 0, 1, 0, 0];
    const m = leftCensoredMedian(values, limit);
    const order = [7, 2, 9, 0, 4, 1, 8, 3, 6, 5];
    const turned = leftCensoredMedian(
      order.map((i) => 10 * values[i]),
      order.map((i) => limit[i]),
    );
    expect(turned.median).toBe(10 * (m.median ?? Number.NaN));
    expect(turned.high).toBe(10 * (m.high ?? Number.NaN));
    expect(turned.low).toBe(m.low === null ? null : 10 * m.low);
  });

  it("is null where it lies among the limits, and says so rather than guess", () => {
    const m = leftCensoredMedian([10, 11, 12, 30, 40], [1, 1, 1, 0, 0]);
    expect(m.median).toBeNull();
    expect(m.low).toBeNull();
    expect(leftCensoredMedian([10, 20], [1, 1])).toEqual({ median: null, low: null, high: null });
    expect(leftCensoredMedian([], [])).toEqual({ median: null, low: null, high: null });
  });

  it("counts a limit equal to a measured value as below it", () => {
    const steps = leftCensoredDistribution([20, 20, 30], [1, 0, 0]);
    expect(steps.map((s) => s.value)).toEqual([20, 30]);
    expect(steps[0].below).toBeCloseTo(1 / 3, 12);
    expect(steps[1].below).toBeCloseTo(2 / 3, 12);
  });

  it.each([
    { share: "none", least: 0, most: 0 },
    { share: "a third", least: 4, most: 26 },
  ])("has a 95 % interval that covers 93 … 97.5 % with $share of limits, and no bias", ({ least, most }) => {
    const random = makeRandom(77);
    const runs = 1500;
    let covered = 0;
    let above = 0;
    for (let k = 0; k < runs; k++) {
      const values: number[] = [];
      const limits: boolean[] = [];
      for (let i = 0; i < 40; i++) {
        const width = 20 * Math.exp(0.5 * random.normal());
        const limit = least + (most - least) * random.uniform();
        limits.push(width < limit);
        values.push(Math.max(width, limit));
      }
      const m = leftCensoredMedian(values, limits);
      if ((m.low ?? 0) <= 20 && (m.high ?? Infinity) >= 20) covered++;
      if ((m.median ?? 0) > 20) above++;
    }
    // Monte Carlo error of the coverage 0.6 %, of the share above 1.3 %.
    expect(covered / runs).toBeGreaterThan(0.93);
    expect(covered / runs).toBeLessThan(0.975);
    expect(Math.abs(above / runs - 0.5)).toBeLessThan(0.045);
  });

  it("widens with the design effect", () => {
    const random = makeRandom(4);
    const values = Array.from({ length: 60 }, () => 20 * Math.exp(0.5 * random.normal()));
    const plain = leftCensoredMedian(values, none(60));
    const wide = leftCensoredMedian(values, none(60), 4);
    const span = (m: typeof plain): number => (m.high ?? Infinity) - (m.low ?? 0);
    expect(span(wide) / span(plain)).toBeGreaterThan(1.5);
    expect(wide.median).toBe(plain.median);
  });
});

describe("Turnbull", () => {
  it("is Kaplan–Meier where the values are exact or upper limits", () => {
    const random = makeRandom(12);
    for (let k = 0; k < 20; k++) {
      const values = Array.from({ length: 15 }, () => 100 * random.uniform());
      const limits = values.map(() => random.uniform() < 0.3);
      limits[values.indexOf(Math.min(...values))] = false;
      const fit = turnbull(
        values.map((v, i) => (limits[i] ? -Infinity : v)),
        values,
      );
      expect(fit.converged).toBe(true);
      const steps = leftCensoredDistribution(values, limits);
      let below = 0;
      for (const cell of fit.cells) {
        const step = steps.find((s) => s.value === cell.low);
        if (step) expect(below).toBeCloseTo(step.below, 5);
        below += cell.mass;
      }
      expect(below).toBeCloseTo(1, 9);
    }
  });

  it("keeps what lies below the least value in a cell of its own", () => {
    const fit = turnbull([0, 0, 20, 30], [10, 12, 20, 30]);
    expect(fit.cells[0]).toMatchObject({ low: 0, high: 10 });
    expect(fit.cells[0].mass).toBeCloseTo(0.5, 6);
  });

  it("refuses an interval turned round; of nothing it makes nothing", () => {
    expect(() => turnbull([3], [2])).toThrow(RangeError);
    expect(turnbull([], []).cells).toHaveLength(0);
  });
});
