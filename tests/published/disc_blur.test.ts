import { expect, test } from "vitest";
import { defaultsOf } from "../../src/model/settings.js";
import { makeRaster } from "../../src/model/raster.js";
import type { FrameStates } from "../../src/model/signal.js";
import { FWHM_PER_SIGMA } from "../../src/model/units.js";
import { settings, traceWalls } from "../../src/stages/walls/index.js";
import { fixture } from "./fixture.js";

/** Source: radius of the 50 % contour of a disc of radius R under a Gaussian of standard deviation 1 by radial quadrature (mpmath, 22
 *  digits); for large R it is R − 1/(2R), the curvature motion of the heat equation, and below √(2 ln 2) there is none. */
const published = fixture<{ columns: string[]; rows: number[][]; vanishing_radius_over_sigma: number }>("disc_blur");
const column = (row: number[], name: string): number => row[published.columns.indexOf(name)];

/** Share at distance r from the middle of a disc of radius R: ∫₀ᴿ ρ e^{−(r²+ρ²)/2} I₀(rρ) dρ, Simpson's rule; e^{−x}I₀(x) as the mean of
 *  e^{x(cos θ − 1)} over θ (trapezoid, exponentially exact). */
function blurredDisc(r: number, R: number): number {
  const n = 160;
  let sum = 0;
  for (let k = 0; k <= n; k++) {
    const rho = (R * k) / n;
    let i0 = 0;
    const m = 96;
    for (let q = 0; q < m; q++) i0 += Math.exp(r * rho * (Math.cos((2 * Math.PI * q) / m) - 1));
    const f = rho * Math.exp(-((r - rho) ** 2) / 2) * (i0 / m);
    sum += f * (k === 0 || k === n ? 1 : k % 2 === 1 ? 4 : 2);
  }
  return (sum * R) / n / 3;
}

function frameOf(R: number): { states: FrameStates; step: number } {
  // σ = 4 pixels of 5 nm
  const step = 5;
  const perSigma = 4;
  const size = 2 * Math.ceil((R + 5) * perSigma) + 1;
  const centre = (size - 1) / 2 + 0.3;
  const share = new Float32Array(size * size);
  const map = new Uint8Array(size * size);
  // only the surroundings of the edge are traced: 0 and 1 stand for the rest
  const table = Float64Array.from({ length: Math.ceil(20 * (R + 8)) }, (_, k) =>
    k < 20 * (R - 2) ? 1 : k > 20 * (R + 2) ? 0 : blurredDisc(k / 20, R),
  );
  for (let i = 0; i < size; i++) {
    for (let j = 0; j < size; j++) {
      const r = Math.hypot(i - centre, j - centre) / perSigma;
      const k = Math.floor(r * 20);
      const t = r * 20 - k;
      share[i * size + j] = table[k] * (1 - t) + table[k + 1] * t;
      map[i * size + j] = share[i * size + j] >= 0.5 ? 1 : 0;
    }
  }
  const pixel = { xNm: step, yNm: step };
  const none = { rr: 0, ri: 0, ii: 0 };
  return {
    step: step * perSigma,
    states: {
      frame: 0,
      levels: {
        frame: 0,
        verdict: "mixed",
        insulating: { re: 1, im: 0 },
        metallic: { re: 2, im: 0 },
        noiseInsulating: none,
        noiseMetallic: none,
        noiseCorrelationX: 0,
        noiseCorrelationY: 0,
        gain: 1,
        thresholdSd: 0,
      },
      share: makeRaster(share, size, size, pixel),
      map: { rows: size, cols: size, pixel, states: map },
      fraction: null,
    },
  };
}

test("walls of blurred discs lie at the published radius, not at the disc's", () => {
  const tip = { resolutionNm: 20 * FWHM_PER_SIGMA, resolutionSdNm: 0 };
  let seen = 0;
  for (const row of published.rows) {
    const R = column(row, "R");
    const radius = column(row, "contour_radius");
    // smaller contours are a pixel or two across here
    if (R < 1.5 || R > 8) continue;
    const { states, step } = frameOf(R);
    const walls = traceWalls(states, tip, defaultsOf(settings));
    expect(walls).toHaveLength(1);
    // linear interpolation between pixels leaves 0.05 pixel; the smallest circles have few of them
    expect(Math.abs(walls[0].lengthNm / (2 * Math.PI * step) - radius)).toBeLessThan(0.02 + 0.005 * radius);
    seen++;
  }
  expect(seen).toBeGreaterThan(5);
});

test("a disc narrower than the tip leaves no 50 % line at all", () => {
  const { states } = frameOf(0.98 * published.vanishing_radius_over_sigma);
  expect(traceWalls(states, { resolutionNm: 47, resolutionSdNm: 0 }, defaultsOf(settings))).toHaveLength(0);
});
