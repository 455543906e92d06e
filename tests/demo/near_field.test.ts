import { describe, expect, test } from "vitest";
import { fringeSeen } from "../../src/demo/fringe_seen.js";
import { nearField } from "../../src/demo/near_field.js";
import { defaultSpec, type SpecOverrides } from "../../src/demo/spec.js";
import { FWHM_PER_SIGMA } from "../../src/model/units.js";

const SIGMA = 30 / FWHM_PER_SIGMA;

/** Φ by direct summation: shares nothing with the code under test. */
function normalCdf(x: number): number {
  const h = 1e-3;
  let sum = 0;
  for (let t = -9 + h / 2; t < x; t += h) sum += Math.exp(-0.5 * t * t);
  return (sum * h) / Math.sqrt(2 * Math.PI);
}

const real = { amplitudeInsulating: 1, amplitudeMetallic: 2, phaseInsulatingRad: 0, phaseMetallicRad: 0 };
const spec = (o: SpecOverrides) =>
  defaultSpec({
    rows: 40,
    cols: 44,
    debris: { perUm2: 0 },
    levels: { ...real, insulatingSlopePerK: 0, metallicSlopePerK: 0 },
    ...o,
  });
const HALF_K = 153; // the line lies at its own place at the half temperature of the cooling branch

describe("a straight wall", () => {
  test.each([0, 90, 37, 180, 213.4])(
    "sharp, metallic towards %d°, under the tip is the error function to 1e-3",
    (normalDeg) => {
      const s = spec({
        wall: { widthNm: 0 },
        domains: { shape: "line", xNm: 213.3, yNm: 197.9, normalDeg, scaleNm: 100 },
      });
      const seen = nearField(s, "cooling", 1, HALF_K, { xNm: 3.7, yNm: -2.2 }, []);
      const nx = Math.cos((normalDeg * Math.PI) / 180);
      const ny = -Math.sin((normalDeg * Math.PI) / 180);
      let worst = 0;
      for (let i = 0; i < 40; i += 3)
        for (let j = 0; j < 44; j += 3) {
          const k = i * 44 + j;
          const d = (3.7 + 10 * j - 213.3) * nx + (-2.2 + 10 * i - 197.9) * ny;
          worst = Math.max(worst, Math.abs(seen.re[k] - 1 - normalCdf(d / SIGMA)));
          expect(seen.signedDistanceNm[k]).toBeCloseTo(d, 3);
          expect(seen.states[k]).toBe(d > 0 ? 1 : 0);
        }
      expect(worst).toBeLessThan(5e-4);
    },
  );

  test("sharp, on pixels of 18 × 9 nm, is the error function too", () => {
    const s = spec({
      wall: { widthNm: 0 },
      pixel: { xNm: 18, yNm: 9 },
      domains: { shape: "line", xNm: 390, yNm: 180, normalDeg: 60, scaleNm: 100 },
    });
    const seen = nearField(s, "cooling", 1, HALF_K, { xNm: 0, yNm: 0 }, []);
    for (let k = 0; k < 40 * 44; k += 13)
      expect(Math.abs(seen.re[k] - 1 - normalCdf(seen.signedDistanceNm[k] / SIGMA))).toBeLessThan(5e-4);
  });

  test.each([4, 30, 110])("%d nm wide with a fringe is the profile's convolution, real and imaginary", (widthNm) => {
    const fringe = { side: "metallic", amplitudeRad: 0.3, periodNm: 90, decayNm: 60, phaseRad: 0.4 } as const;
    const s = spec({
      wall: { widthNm },
      fringe,
      levels: { phaseMetallicRad: 0.6 },
      domains: { shape: "line", xNm: 200, yNm: 0, normalDeg: 0, scaleNm: 100 },
    });
    const seen = nearField(s, "cooling", 1, HALF_K, { xNm: 0.9, yNm: 0 }, []);
    const w = widthNm / Math.log(9);
    const zm = [2.2 * Math.cos(0.6), 2.2 * Math.sin(0.6)];
    for (let j = 0; j < 44; j += 3) {
      const x = 0.9 + 10 * j - 200;
      let re = 0;
      let im = 0;
      const h = 0.02;
      // Midpoints, so that no sample falls on the fringe's jump at the wall.
      for (let t = -6 * SIGMA; t < 6 * SIGMA; t += h) {
        const d = Math.round((x - t) / h) * h + h / 2;
        const g = (Math.exp(-0.5 * ((x - d) / SIGMA) ** 2) * h) / (SIGMA * Math.sqrt(2 * Math.PI));
        const u = 0.5 * (1 + Math.tanh(d / w));
        const a =
          d > 0
            ? fringe.amplitudeRad *
              Math.cos((2 * Math.PI * d) / fringe.periodNm + fringe.phaseRad) *
              Math.exp(-d / fringe.decayNm)
            : 0;
        const zr = 1 - u + u * zm[0];
        const zi = u * zm[1];
        re += g * (zr * Math.cos(a) - zi * Math.sin(a));
        im += g * (zr * Math.sin(a) + zi * Math.cos(a));
      }
      const k = 20 * 44 + j;
      // A fringe is followed to six decays, where it is 0.3·e^{−6} of 2.2.
      expect(Math.abs(seen.re[k] - re)).toBeLessThan(2e-3);
      expect(Math.abs(seen.im[k] - im)).toBeLessThan(2e-3);
    }
  });
});

test("a sharp disc as small as the tip keeps 1 − exp(−R²/2σ²) of its contrast in its middle", () => {
  for (const radius of [20, 35, 60]) {
    const s = spec({
      wall: { widthNm: 0 },
      domains: { shape: "disc", xNm: 200, yNm: 200, halfWidthNm: radius, scaleNm: 100 },
    });
    const seen = nearField(s, "cooling", 1, HALF_K, { xNm: 0, yNm: 0 }, []);
    const expected = 1 - Math.exp(-(radius ** 2) / (2 * SIGMA ** 2));
    // The narrow part of the tip's Gaussian is taken along the normal: a curvature term of second order, 0.3 nm at R = 20 nm.
    expect(Math.abs(seen.re[20 * 44 + 20] - 1 - expected)).toBeLessThan(radius === 20 ? 0.009 : 0.004);
  }
});

test("without a tip's blur the signal is the profile at the pixel's own distance", () => {
  const s = spec({ tip: { resolutionNm: 0 }, wall: { widthNm: 50 } });
  const seen = nearField(s, "cooling", 1, HALF_K, { xNm: 0, yNm: 0 }, []);
  for (let k = 0; k < seen.re.length; k += 11) {
    const u = 0.5 * (1 + Math.tanh((seen.signedDistanceNm[k] * Math.log(9)) / 50));
    expect(Math.abs(seen.re[k] - 1 - u)).toBeLessThan(1e-5);
  }
});

test("the fringe as seen is the largest turn of the optical phase in a rendered frame, at its distance", () => {
  const o: SpecOverrides = {
    wall: { widthNm: 40 },
    levels: { phaseMetallicRad: 0.6 },
    domains: { shape: "line", xNm: 200.3, yNm: 0, normalDeg: 0, scaleNm: 100 },
    pixel: { xNm: 3, yNm: 10 },
    cols: 160,
  };
  for (const side of ["metallic", "insulating"] as const) {
    const withFringe = spec({ ...o, fringe: { side, amplitudeRad: 0.3, periodNm: 200, decayNm: 120, phaseRad: -1.3 } });
    const a = nearField(withFringe, "cooling", 1, HALF_K, { xNm: 0, yNm: 0 }, []);
    const b = nearField(spec(o), "cooling", 1, HALF_K, { xNm: 0, yNm: 0 }, []);
    const turn = (k: number): number => Math.atan2(a.im[k], a.re[k]) - Math.atan2(b.im[k], b.re[k]);
    let best = 0;
    for (let k = 0; k < 160; k++) if (Math.abs(turn(k)) > Math.abs(turn(best))) best = k;
    const seen = fringeSeen(withFringe, HALF_K);
    expect(seen?.contrastRad).toBeCloseTo(turn(best), 3);
    expect(Math.abs((seen?.offsetNm ?? 0) - a.signedDistanceNm[best])).toBeLessThan(3);
  }
  expect(fringeSeen(spec(o), HALF_K)).toBeNull();
});
