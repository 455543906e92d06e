import { describe, expect, it } from "vitest";
import { normalCdf, normalPdf } from "../../src/numerics/erf.js";
import { dampedOscillation, dampedOscillationWithSlopes } from "../../src/numerics/fringe_profile.js";
import { KINK_VARIANCE, apparentWidth, fastKink, kink, kinkWidthFromApparent } from "../../src/numerics/kink.js";
import { makeRandom } from "../../src/numerics/random.js";

const exact = new Float64Array(4);
const fast = new Float64Array(4);

describe("kink", () => {
  it("is the blurred step at w = 0, its slope in w² finite: π²/24 u_xx", () => {
    for (const x of [-3, -0.4, 0, 1, 2.5]) {
      kink(2 * x, 0, 2, exact);
      expect(exact[0]).toBeCloseTo(normalCdf(x), 14);
      expect(exact[1]).toBeCloseTo(normalPdf(x) / 2, 14);
      expect(exact[2]).toBeCloseTo(((-KINK_VARIANCE / 2) * x * normalPdf(x)) / 4, 14);
      fastKink(2 * x, 0, 2, fast);
      expect(Math.abs(fast[2] - exact[2])).toBeLessThan(1e-6);
    }
  });

  it("is the bare tanh at σ = 0", () => {
    for (const x of [-7, -0.4, 0, 1, 2.5]) {
      for (const f of [kink, fastKink]) {
        f(3 * x, 3, 0, exact);
        expect(exact[0]).toBeCloseTo(0.5 + 0.5 * Math.tanh(x), f === kink ? 14 : 6);
        expect(exact[3]).toBeCloseTo(0, 15);
      }
    }
  });

  it("has the derivatives of its differences, and scales: x u_x + 2v u_v + σ u_σ = 0", () => {
    const random = makeRandom(5);
    const low = new Float64Array(4);
    const high = new Float64Array(4);
    for (let k = 0; k < 200; k++) {
      const x = 4 * random.normal();
      const w = 3 * random.uniform();
      const sigma = 3 * random.uniform();
      for (const f of [kink, fastKink]) {
        f(x, w, sigma, exact);
        expect(Math.abs(x * exact[1] + 2 * w * w * exact[2] + sigma * exact[3])).toBeLessThan(1e-12);
        const h = 1e-4;
        f(x - h, w, sigma, low);
        f(x + h, w, sigma, high);
        expect(Math.abs((high[0] - low[0]) / (2 * h) - exact[1])).toBeLessThan(1e-6);
        f(x, w, sigma, low);
        f(x, w, sigma + h, high);
        expect(Math.abs((high[0] - low[0]) / h - exact[3])).toBeLessThan(2e-4);
        f(x, Math.sqrt(w * w + h), sigma, high);
        expect(Math.abs((high[0] - low[0]) / h - exact[2])).toBeLessThan(2e-3);
      }
    }
  });

  it("the tabulated form follows the exact one everywhere", () => {
    const random = makeRandom(11);
    const worst = [0, 0, 0, 0];
    for (let k = 0; k < 8000; k++) {
      const rho = k % 10 === 0 ? random.uniform() ** 6 : random.uniform();
      const scale = 10 ** (2 * random.normal());
      const w = scale * Math.sqrt(rho / KINK_VARIANCE);
      const sigma = scale * Math.sqrt(1 - rho);
      const x = scale * 14 * (random.uniform() - 0.5) ** (k % 2 === 0 ? 1 : 3);
      kink(x, w, sigma, exact);
      fastKink(x, w, sigma, fast);
      const unit = [1, scale, scale * scale, scale];
      for (let j = 0; j < 4; j++) worst[j] = Math.max(worst[j], Math.abs(fast[j] - exact[j]) * unit[j]);
    }
    expect(worst[0]).toBeLessThan(1e-7);
    expect(worst[1]).toBeLessThan(3e-6);
    expect(worst[2]).toBeLessThan(1e-6);
    expect(worst[3]).toBeLessThan(1.5e-6);
  });

  it("is 0 and 1 far out, with no slopes, and NaN stays NaN", () => {
    fastKink(1e6, 1, 1, fast);
    expect(Array.from(fast)).toEqual([1, 0, 0, 0]);
    fastKink(-1e6, 1, 1, fast);
    expect(Array.from(fast)).toEqual([0, 0, 0, 0]);
    fastKink(Number.NaN, 1, 1, fast);
    expect(fast[0]).toBeNaN();
  });

  it.each([
    [0, 0],
    [-1, 1],
    [1, -1],
    [Number.NaN, 1],
  ])("refuses w = %d, σ = %d", (w, sigma) => {
    expect(() => kink(0, w, sigma, exact)).toThrow(RangeError);
    expect(() => fastKink(0, w, sigma, exact)).toThrow(RangeError);
  });
});

describe("apparent width", () => {
  it("and its inverse return to the start, down to the unresolved", () => {
    for (const w of [0.05, 0.3, 1, 2.5, 10, 300]) {
      expect(kinkWidthFromApparent(apparentWidth(w, 1.7), 1.7) / w).toBeCloseTo(1, 9);
    }
    expect(kinkWidthFromApparent(apparentWidth(0, 1.7) * (1 - 1e-12), 1.7)).toBeNaN();
    expect(kinkWidthFromApparent(apparentWidth(4, 0), 0)).toBeCloseTo(4, 12);
  });
});

describe("damped oscillation", () => {
  const out = new Float64Array(10);

  it("is what the integral says", () => {
    const [x, period, decay, sigma] = [14, 80, 60, 12];
    let c = 0;
    let s = 0;
    const h = 0.01;
    for (let k = 0; k <= 40000; k++) {
      const t = k * h;
      const weight = (k === 0 ? 0.5 : 1) * h * Math.exp(-t / decay) * (normalPdf((x - t) / sigma) / sigma);
      c += weight * Math.cos((2 * Math.PI * t) / period);
      s += weight * Math.sin((2 * Math.PI * t) / period);
    }
    dampedOscillation(x, period, decay, sigma, out);
    expect(out[0]).toBeCloseTo(c, 7);
    expect(out[1]).toBeCloseTo(s, 7);
  });

  it("slopes agree with central differences on both sides of the wall and without decay", () => {
    const low = new Float64Array(2);
    const high = new Float64Array(2);
    for (const at of [
      [-25, 90, 40, 12],
      [5, 90, 40, 12],
      [150, 90, 140, 22],
      [60, 200, 30, 12],
    ]) {
      dampedOscillationWithSlopes(at[0], at[1], at[2], at[3], out);
      at.forEach((value, j) => {
        const h = 1e-4 * Math.abs(value);
        const evaluate = (v: number, to: Float64Array): void => {
          const p = at.with(j, v);
          dampedOscillation(p[0], p[1], p[2], p[3], to);
        };
        evaluate(value - h, low);
        evaluate(value + h, high);
        for (const part of [0, 1]) {
          expect(Math.abs(out[2 + 2 * j + part] - (high[part] - low[part]) / (2 * h))).toBeLessThan(1e-7);
        }
      });
    }
    dampedOscillationWithSlopes(30, 90, Infinity, 12, out);
    // Without decay: the attenuation e^{−2π²σ²/Λ²} of a pure wave, well inside.
    dampedOscillation(200, 90, Infinity, 12, low);
    expect(Math.hypot(low[0], low[1])).toBeCloseTo(Math.exp(-2 * (Math.PI * (12 / 90)) ** 2), 12);
    expect(out.every(Number.isFinite)).toBe(true);
  });
});
