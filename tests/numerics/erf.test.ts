import { describe, expect, it } from "vitest";
import { erf, erfc, erfcx, normalCdf, normalPdf, normalQuantile } from "../../src/numerics/erf.js";
import { faddeeva } from "../../src/numerics/faddeeva.js";
import { fixture } from "../published/fixture.js";

const d = fixture<Record<"erf" | "normal" | "normal_quantile" | "faddeeva", { rows: number[][] }>>("special_functions");
const relative = (value: number, expected: number): number =>
  expected === 0 ? Math.abs(value) : Math.abs((value - expected) / expected);

describe("error functions and the normal distribution", () => {
  it("agree with 40-digit values to 4e-16 relative, tails included", () => {
    for (const [x, e, c, cx] of d.erf.rows) {
      expect(relative(erf(x), e)).toBeLessThanOrEqual(4e-16);
      expect(relative(erfc(x), c)).toBeLessThanOrEqual(4e-16);
      expect(relative(erfcx(x), cx)).toBeLessThanOrEqual(4e-16);
    }
    for (const [x, cdf, pdf] of d.normal.rows) {
      expect(relative(normalCdf(x), cdf)).toBeLessThanOrEqual(4e-16);
      expect(relative(normalPdf(x), pdf)).toBeLessThanOrEqual(4e-16);
    }
    for (const [p, x] of d.normal_quantile.rows) expect(relative(normalQuantile(p), x)).toBeLessThanOrEqual(4.5e-16);
  });

  it("join without a step where the approximations change", () => {
    for (const x of [0.46875, 4, 6, 27.3]) {
      expect(Math.abs(erf(x) - erf(x + 1e-15))).toBeLessThan(2e-15);
      expect(Math.abs(erfc(x) - erfc(x + 1e-15))).toBeLessThan(2e-15);
    }
    for (const x of [-1, -38.6]) expect(Math.abs(normalCdf(x) - normalCdf(x + 1e-15))).toBeLessThan(1e-15);
    for (const p of [0.075, 0.925, Math.exp(-25)]) {
      expect(relative(normalQuantile(p * (1 + 1e-14)), normalQuantile(p))).toBeLessThan(1e-13);
    }
  });

  it("end where the numbers end", () => {
    expect([erf(Infinity), erf(-Infinity), erfc(Infinity), erfc(-Infinity)]).toEqual([1, -1, 0, 2]);
    expect([normalCdf(-Infinity), normalCdf(Infinity)]).toEqual([0, 1]);
    expect([normalQuantile(0), normalQuantile(1)]).toEqual([-Infinity, Infinity]);
    expect([erf(Number.NaN), erfc(Number.NaN), normalCdf(Number.NaN), normalQuantile(-0.1)]).toEqual(
      Array(4).fill(Number.NaN),
    );
  });
});

describe("Faddeeva's function", () => {
  it("agrees with 40-digit values to 1e-14 relative in all quadrants", () => {
    const out = new Float64Array(2);
    for (const [x, y, re, im] of d.faddeeva.rows) {
      faddeeva(x, y, out);
      expect(Math.hypot(out[0] - re, out[1] - im) / Math.hypot(re, im)).toBeLessThan(1e-14);
    }
  });

  it("has the symmetries w(−z*) = w(z)* and w(z) + w(−z) = 2e^{−z²}", () => {
    const a = new Float64Array(2);
    const b = new Float64Array(2);
    for (const [x, y] of d.faddeeva.rows) {
      faddeeva(x, y, a);
      faddeeva(-x, y, b);
      expect(b[0]).toBe(a[0]);
      expect(b[1] + a[1]).toBe(0);
      faddeeva(-x, -y, b);
      const size = 2 * Math.exp((y - x) * (y + x));
      if (!Number.isFinite(size)) continue;
      const scale = Math.max(size, Math.hypot(a[0], a[1]));
      expect(Math.abs(a[0] + b[0] - size * Math.cos(2 * x * y)) / scale).toBeLessThan(1e-14);
      expect(Math.abs(a[1] + b[1] + size * Math.sin(2 * x * y)) / scale).toBeLessThan(1e-14);
    }
  });
});
