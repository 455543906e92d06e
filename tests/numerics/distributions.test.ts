import { describe, expect, it } from "vitest";
import {
  chi2Quantile,
  chi2UpperTail,
  fUpperTail,
  incompleteBeta,
  incompleteGamma,
  logGamma,
  studentQuantile,
  studentUpperTail,
  wilsonInterval,
} from "../../src/numerics/distributions.js";
import { normalCdf } from "../../src/numerics/erf.js";
import { benjaminiHochberg, benjaminiYekutieli } from "../../src/numerics/false_discovery.js";
import { makeRandom } from "../../src/numerics/random.js";

const ratio = (a: number, b: number): number => Math.abs(a / b - 1);

describe("distributions", () => {
  it("Γ of whole numbers and the reflection at ½", () => {
    let factorial = 0;
    for (let n = 1; n < 40; n++) {
      expect(Math.abs(logGamma(n) - factorial)).toBeLessThan(1e-14 * Math.max(1, factorial));
      factorial += Math.log(n);
    }
    for (const x of [0.01, 0.3, 0.77]) {
      expect(logGamma(x) + logGamma(1 - x)).toBeCloseTo(Math.log(Math.PI / Math.sin(Math.PI * x)), 12);
    }
    expect(logGamma(-1)).toBeNaN();
  });

  it("χ² and t meet the normal distribution, far tails included", () => {
    for (const x of [0.1, 1, 3, 8, 20, 35]) {
      expect(ratio(chi2UpperTail(x * x, 1), 2 * normalCdf(-x))).toBeLessThan(1e-12);
      expect(ratio(chi2UpperTail(x, 2), Math.exp(-x / 2))).toBeLessThan(1e-12);
      expect(ratio(fUpperTail(x * x, 1, 7), 2 * studentUpperTail(x, 7))).toBeLessThan(1e-12);
    }
    // Cornish & Fisher: t = z + (z³ + z)/(4 dof) + O(dof⁻²)
    expect(studentQuantile(0.975, 1e5) - (1.959963984540054 + 9.488 / 4e5)).toBeLessThan(1e-8);
  });

  it("tails and quantiles undo each other", () => {
    for (const dof of [0.5, 1, 2, 7, 60, 900]) {
      for (const p of [1e-9, 0.01, 0.3, 0.5, 0.8, 0.9999, 1 - 1e-9]) {
        expect(ratio(chi2UpperTail(chi2Quantile(p, dof), dof), 1 - p)).toBeLessThan(1e-10);
        expect(ratio(studentUpperTail(studentQuantile(p, dof), dof), 1 - p)).toBeLessThan(1e-10);
      }
    }
    expect([chi2Quantile(0, 3), chi2Quantile(1, 3), studentQuantile(0.5, 3)]).toEqual([0, Infinity, 0]);
    expect(chi2Quantile(1.1, 3)).toBeNaN();
  });

  it("incomplete functions: complements and symmetry", () => {
    for (const [a, x] of [
      [0.3, 0.2],
      [5, 4],
      [80, 90],
      [4000, 3990],
    ]) {
      const [p, q] = incompleteGamma(a, x);
      expect(p + q).toBeCloseTo(1, 14);
      // P(a + 1, x) = P(a, x) − xᵃe^{−x}/Γ(a + 1)
      const next = incompleteGamma(a + 1, x)[0];
      expect(next).toBeCloseTo(p - Math.exp(a * Math.log(x) - x - logGamma(a + 1)), 10);
    }
    for (const x of [0.01, 0.4, 0.93]) {
      expect(incompleteBeta(x, 3, 8)).toBeCloseTo(1 - incompleteBeta(1 - x, 8, 3), 14);
      expect(incompleteBeta(x, 1, 6)).toBeCloseTo(1 - (1 - x) ** 6, 14);
    }
    expect([incompleteBeta(0, 2, 3), incompleteBeta(1, 2, 3)]).toEqual([0, 1]);
  });

  it("Wilson's interval covers 95 % on the average over shares, summed exactly", () => {
    const n = 40;
    const choose = (k: number): number => logGamma(n + 1) - logGamma(k + 1) - logGamma(n - k + 1);
    let mean = 0;
    for (let step = 1; step < 200; step++) {
      const p = step / 200;
      for (let k = 0; k <= n; k++) {
        const [low, high] = wilsonInterval(k, n);
        if (low <= p && p <= high) mean += Math.exp(choose(k) + k * Math.log(p) + (n - k) * Math.log(1 - p)) / 199;
      }
    }
    expect(Math.abs(mean - 0.95)).toBeLessThan(0.004);
    expect(wilsonInterval(0, 0)).toEqual([0, 1]);
  });
});

describe("false discovery rate", () => {
  it("is held at q·m₀/m with 30 true and 10 false hypotheses", () => {
    const random = makeRandom(31);
    const runs = 3000;
    let rate = 0;
    let found = 0;
    for (let k = 0; k < runs; k++) {
      const p = Array.from({ length: 40 }, (_, i) => normalCdf(-(random.normal() + (i < 10 ? 3 : 0))));
      const rejected = Array.from(benjaminiHochberg(p), (v) => v <= 0.2);
      const wrong = rejected.filter((r, i) => r && i >= 10).length;
      const all = rejected.filter(Boolean).length;
      rate += all > 0 ? wrong / all : 0;
      found += all - wrong;
    }
    // Expected 0.15 exactly; Monte Carlo error 0.0022.
    expect(Math.abs(rate / runs - 0.15)).toBeLessThan(0.008);
    expect(found / runs).toBeGreaterThan(7);
  });

  it("nothing, one, and what is no p-value", () => {
    expect(benjaminiHochberg([])).toHaveLength(0);
    expect(Array.from(benjaminiHochberg([0.03]))).toEqual([0.03]);
    expect(Array.from(benjaminiYekutieli([0.03]))).toEqual([0.03]);
    expect(() => benjaminiHochberg([0.1, Number.NaN])).toThrow(RangeError);
    expect(() => benjaminiYekutieli([1.1])).toThrow(RangeError);
  });
});
