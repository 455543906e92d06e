import { describe, expect, it } from "vitest";
import { normalQuantile } from "../../src/numerics/erf.js";
import { dampedOscillation } from "../../src/numerics/fringe_profile.js";
import { kink } from "../../src/numerics/kink.js";
import { fixture } from "./fixture.js";

interface Chord {
  amplitude_ratio_metallic_over_insulating: number;
  phase_step_rad: number;
  mixing_at_phase_midpoint: number;
  phase_midpoint_over_sigma: number;
  phase_10_90_over_sigma: number;
  amplitude_dips: boolean;
  least_amplitude: number | null;
  amplitude_midpoint_over_sigma: number | null;
  amplitude_10_90_over_sigma: number | null;
}
// Source: erfc of a complex argument in 25 digits (mpmath), confirmed by direct quadrature; the chord by root finding.
const { rows, chord } = fixture<{ rows: number[][]; chord: Chord[] }>("fringe_profile");

/** A step blurred by a Gaussian of sigma 1: the complex signal between 1 and r e^{iδ}. */
function blurredStep(x: number, c: Chord): { phase: number; amplitude: number } {
  const out = new Float64Array(4);
  kink(x, 0, 1, out);
  const r = c.amplitude_ratio_metallic_over_insulating;
  const re = 1 - out[0] + out[0] * r * Math.cos(c.phase_step_rad);
  const im = out[0] * r * Math.sin(c.phase_step_rad);
  return { phase: Math.atan2(im, re), amplitude: Math.hypot(re, im) };
}

function root(f: (x: number) => number): number {
  let low = -8;
  let high = 8;
  for (let i = 0; i < 60; i++) {
    const x = 0.5 * (low + high);
    if (f(x) < 0) low = x;
    else high = x;
  }
  return 0.5 * (low + high);
}

describe("profiles beside a wall, against 25-digit closed forms", () => {
  it("damped oscillation through a Gaussian to 1e-12", () => {
    const out = new Float64Array(2);
    expect(rows.length).toBeGreaterThan(40);
    for (const [sigma, decay, period, x, c, s] of rows) {
      dampedOscillation(x, period, decay, sigma, out);
      expect(Math.abs(out[0] - c)).toBeLessThan(1e-12);
      expect(Math.abs(out[1] - s)).toBeLessThan(1e-12);
    }
  });

  it.each(chord)("phase and amplitude of a blurred step, ratio $amplitude_ratio_metallic_over_insulating", (c) => {
    const phaseAt = (share: number): number => root((x) => blurredStep(x, c).phase - share * c.phase_step_rad);
    expect(phaseAt(0.5)).toBeCloseTo(c.phase_midpoint_over_sigma, 9);
    expect(normalQuantile(c.mixing_at_phase_midpoint)).toBeCloseTo(c.phase_midpoint_over_sigma, 12);
    expect(phaseAt(0.9) - phaseAt(0.1)).toBeCloseTo(c.phase_10_90_over_sigma, 9);
    const r = c.amplitude_ratio_metallic_over_insulating;
    let least = Infinity;
    for (let x = -6; x <= 6; x += 0.01) least = Math.min(least, blurredStep(x, c).amplitude);
    expect(least < Math.min(1, r) - 1e-6).toBe(c.amplitude_dips);
    if (c.least_amplitude !== null) expect(least).toBeCloseTo(c.least_amplitude, 4);
    if (c.amplitude_midpoint_over_sigma !== null && c.amplitude_10_90_over_sigma !== null) {
      const at = (share: number): number => root((x) => blurredStep(x, c).amplitude - 1 - share * (r - 1));
      expect(at(0.5)).toBeCloseTo(c.amplitude_midpoint_over_sigma, 9);
      expect(at(0.9) - at(0.1)).toBeCloseTo(c.amplitude_10_90_over_sigma, 9);
    }
  });
});
