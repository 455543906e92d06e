import { describe, expect, test } from "vitest";
import { shareCurve } from "../../../src/stages/states/share_curve.js";

const quiet = { rr: 1e-4, ri: 0, ii: 1e-4 };
const polar = (m: number, f: number): { re: number; im: number } => ({ re: m * Math.cos(f), im: m * Math.sin(f) });
const insulating = polar(1, 0.3);

function mixture(u: number, metallic: { re: number; im: number }): { re: number; im: number } {
  return {
    re: (1 - u) * insulating.re + u * metallic.re,
    im: (1 - u) * insulating.im + u * metallic.im,
  };
}

describe("the share read from the signal", () => {
  test.each([
    ["higher metallic amplitude", polar(2.2, 0.9)],
    ["lower metallic amplitude", polar(0.4, 0.5)],
  ])("%s: from the amplitude, exactly, whatever turns the phase", (_, metallic) => {
    const curve = shareCurve(insulating, metallic, quiet, quiet, null);
    expect(curve.reads).toBe("amplitude");
    for (let u = 0; u <= 1; u += 0.05) {
      const z = mixture(u, metallic);
      expect(curve.shareOf(Math.hypot(z.re, z.im))).toBeCloseTo(u, 9);
    }
  });
  test("contrast in the phase alone: along the chord", () => {
    const metallic = polar(1.05, 1.4);
    const curve = shareCurve(insulating, metallic, quiet, quiet, null);
    expect(curve.reads).toBe("chord");
    const z = mixture(0.3, metallic);
    expect(curve.shareOf(z.re * curve.eRe + z.im * curve.eIm)).toBeCloseTo(0.3, 9);
  });
  test("beyond the levels it goes on steadily: noise stays noise", () => {
    const curve = shareCurve(insulating, polar(2.2, 0.9), quiet, quiet, null);
    let last = -Infinity;
    for (let v = 0.2; v < 3.4; v += 0.01) {
      const u = curve.shareOf(v);
      expect(u).toBeGreaterThan(last);
      last = u;
    }
  });
  test("without a phase the assumed step bends the curve, and its uncertainty is told", () => {
    const flat = shareCurve({ re: 1, im: 0 }, { re: 2.2, im: 0 }, quiet, quiet, 0);
    expect(flat.shareOf(1.6)).toBeCloseTo(0.5, 9);
    const bent = shareCurve({ re: 1, im: 0 }, { re: 2.2, im: 0 }, quiet, quiet, 0.6);
    const z = mixture(0.5, polar(2.2, 0.9));
    expect(bent.shareOf(Math.hypot(z.re, z.im))).toBeCloseTo(0.5, 9);
    // by differences: the same amplitude read with another step
    const amplitude = Math.hypot(z.re, z.im);
    const other = shareCurve({ re: 1, im: 0 }, { re: 2.2, im: 0 }, quiet, quiet, 0.601);
    expect(Math.abs(other.shareOf(amplitude) - 0.5) / 0.001).toBeCloseTo(bent.perStepRad, 2);
  });
});
