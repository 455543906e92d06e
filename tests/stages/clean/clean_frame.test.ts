import { describe, expect, test } from "vitest";
import type { RawFrame } from "../../../src/model/cooldown.js";
import { dataOf, makeRaster } from "../../../src/model/raster.js";
import { defaultsOf } from "../../../src/model/settings.js";
import { wrapAngle } from "../../../src/numerics/quantile.js";
import { cleanFrame, cleanSettings } from "../../../src/stages/clean/index.js";
import { type Synthetic, type SyntheticOptions, synthetic } from "./synthetic.js";

const settings = defaultsOf(cleanSettings);
const LINES = { rowGainSd: 0.01, rowPhaseSdRad: 0.008, topographyRowSdNm: 0.15 } as const;

/** Row means of `residual(p)`, NaN pixels left out, less their mean. */
function rowMeans(f: Synthetic, residual: (p: number) => number): Float64Array {
  const out = new Float64Array(f.rows);
  for (let i = 0; i < f.rows; i++) {
    let sum = 0;
    let n = 0;
    for (let j = 0; j < f.cols; j++) {
      const r = residual(i * f.cols + j);
      if (Number.isNaN(r)) continue;
      sum += r;
      n++;
    }
    out[i] = n > 0 ? sum / n : 0;
  }
  const mean = out.reduce((a, b) => a + b, 0) / f.rows;
  return out.map((v) => v - mean);
}

const rms = (a: Float64Array): number => Math.sqrt(a.reduce((s, v) => s + v * v, 0) / a.length);
/** Scatter from row to row alone: slow drift does not count. */
const lineSd = (a: Float64Array): number => {
  let s = 0;
  for (let i = 1; i + 1 < a.length; i++) s += (a[i - 1] - 2 * a[i] + a[i + 1]) ** 2 / 6;
  return Math.sqrt(s / (a.length - 2));
};

function residuals(o: SyntheticOptions) {
  const f = synthetic(o);
  const { clean, report } = cleanFrame(f.raw, settings);
  const amplitude = dataOf(clean.amplitude);
  const phase = dataOf(clean.phase!);
  const topography = dataOf(clean.topography!);
  const rawAmplitude = dataOf(f.raw.amplitude);
  let c = 0;
  let s = 0;
  phase.forEach((v, p) => {
    if (Number.isNaN(v)) return;
    c += Math.cos(v - f.phase[p]);
    s += Math.sin(v - f.phase[p]);
  });
  const turn = Math.atan2(s, c);
  return {
    f,
    clean,
    report,
    gainBefore: rowMeans(f, (p) => rawAmplitude[p] / f.amplitude[p] - 1),
    gain: rowMeans(f, (p) => amplitude[p] / f.amplitude[p] - 1),
    phase: rowMeans(f, (p) => wrapAngle(phase[p] - f.phase[p] - turn)),
    topography: rowMeans(f, (p) => topography[p] - f.topography[p]),
  };
}

describe("line noise", () => {
  test.each(["metallic", "mixed", "along-rows"] as const)(
    "%s: rows are aligned to what their pixels can tell",
    (scene) => {
      const r = residuals({ seed: 11, scene, ...LINES });
      // a row's mean over half the pixels (those of one flat state) has a noise of 0.006 at most; the line noise was 0.01
      expect(lineSd(r.gainBefore)).toBeGreaterThan(0.009);
      expect(lineSd(r.gain)).toBeLessThan(0.006);
      expect(lineSd(r.phase)).toBeLessThan(0.006);
      expect(lineSd(r.topography)).toBeLessThan(0.03);
      expect(r.report.topographyRowSdNm).toBeGreaterThan(0.11);
      expect(r.report.topographyRowSdNm).toBeLessThan(0.19);
    },
  );

  // wider rows are compared by groups of two and three columns
  test.each([
    [300, "mixed"],
    [401, "mixed"],
    [401, "along-rows"],
  ] as const)("%i columns, %s: rows are aligned to what their pixels can tell", (cols, scene) => {
    const r = residuals({ seed: 12, scene, cols, ...LINES });
    // a row's mean over half the pixels has a noise of 0.05/√(cols/2) at most; rows full of walls have fewer of one state
    const most = (1.25 * 0.05) / Math.sqrt(cols / 2);
    expect(lineSd(r.gainBefore)).toBeGreaterThan(0.0085);
    expect(lineSd(r.gain)).toBeLessThan(most);
    expect(lineSd(r.phase)).toBeLessThan(most);
    expect(lineSd(r.topography)).toBeLessThan(0.02);
    expect(Math.abs((r.report.topographyRowSdNm ?? 0) / 0.15 - 1)).toBeLessThan(0.25);
    expect(r.report.scarPixels).toBe(0);
  });

  test("the line noise of a single-state frame comes out as put in", () => {
    for (const seed of [1, 2, 3]) {
      const { report } = residuals({ seed, scene: "metallic", rows: 200, ...LINES });
      // ± 4 standard errors of a standard deviation from 200 rows
      expect(Math.abs(report.rowGainSd / 0.01 - 1)).toBeLessThan(0.25);
      expect(Math.abs((report.rowPhaseSdRad ?? 0) / 0.008 - 1)).toBeLessThan(0.4);
      expect(Math.abs(report.noise.amplitudeRelative / (0.05 / 2.2) - 1)).toBeLessThan(0.05);
      expect(Math.abs((report.noise.phaseRad ?? 0) / 0.035 - 1)).toBeLessThan(0.05);
      expect(Math.abs((report.noise.topographyNm ?? 0) / 0.12 - 1)).toBeLessThan(0.05);
    }
  });

  test("without line noise next to nothing is corrected", () => {
    for (const scene of ["metallic", "mixed", "along-rows"] as const) {
      const r = residuals({ seed: 5, scene });
      expect(lineSd(r.gain)).toBeLessThan(1.05 * lineSd(r.gainBefore));
      expect(rms(r.gain)).toBeLessThan(0.004);
      expect(r.report.rowGainSd).toBeLessThan(0.003);
    }
  });

  test("a wall along the rows keeps its whole contrast in amplitude and phase", () => {
    for (const rowPhaseStepRad of [0, 0.01]) {
      const r = residuals({ seed: 8, scene: "along-rows", ...LINES, rowPhaseStepRad });
      const amplitude = dataOf(r.clean.amplitude);
      const phase = dataOf(r.clean.phase!);
      const mean = (data: Float32Array, from: number, to: number): number => {
        let s = 0;
        for (let p = from * 128; p < to * 128; p++) s += data[p] / ((to - from) * 128);
        return s;
      };
      expect(mean(amplitude, 100, 128) / mean(amplitude, 0, 28)).toBeCloseTo(2.2, 1);
      // the walk over the rows of the wall itself is not known: √20 steps of 0.01 rad, 3 sigma
      expect(Math.abs(mean(phase, 78, 90) - mean(phase, 38, 50) - 0.6)).toBeLessThan(
        rowPhaseStepRad === 0 ? 0.05 : 0.14,
      );
    }
  });

  test("a phase that walks from row to row is brought back: 0.02 and 0.05 rad a row", () => {
    for (const [rowPhaseStepRad, most] of [
      [0.02, 0.03],
      [0.05, 0.05],
    ]) {
      for (const scene of ["metallic", "mixed"] as const) {
        const r = residuals({ seed: 21, scene, rowPhaseStepRad, rowPhaseSdRad: 0.01 });
        expect(rms(r.phase)).toBeLessThan(most);
        expect(Math.abs((r.report.rowPhaseStepSdRad ?? 0) / rowPhaseStepRad - 1)).toBeLessThan(0.3);
      }
    }
  });
});

describe("scars", () => {
  test("are taken out of amplitude and phase together and counted; clean frames lose nothing", () => {
    for (const scene of ["metallic", "mixed"] as const) {
      const f = synthetic({ seed: 31, scene, scars: 8, ...LINES });
      const { clean, report } = cleanFrame(f.raw, settings);
      const amplitude = dataOf(clean.amplitude);
      let hit = 0;
      let total = 0;
      let wrong = 0;
      f.scarMask.forEach((m, p) => {
        expect(Number.isNaN(amplitude[p])).toBe(Number.isNaN(dataOf(clean.phase!)[p]));
        total += m;
        if (Number.isNaN(amplitude[p])) {
          if (m === 1) hit++;
          else wrong++;
        }
      });
      expect(hit / total).toBeGreaterThan(0.85);
      expect(wrong).toBeLessThan(12);
      expect(report.scarPixels).toBeGreaterThan(total);
      expect(report.scarRuns).toBeGreaterThanOrEqual(8);
    }
    for (let seed = 0; seed < 12; seed++) {
      for (const scene of ["metallic", "mixed"] as const) {
        expect(cleanFrame(synthetic({ seed, scene, ...LINES }).raw, settings).report.scarPixels).toBe(0);
      }
    }
  });

  test("a particle seen through the tip is no scar, even one that lies along a row", () => {
    const f = synthetic({ seed: 3, scene: "metallic" });
    const amplitude = dataOf(f.raw.amplitude);
    const topography = dataOf(f.raw.topography!);
    for (let i = 55; i < 70; i++) {
      for (let j = 40; j < 60; j++) {
        const bump = Math.exp(-((i - 62) ** 2) / (2 * 1.27 ** 2)) * (j > 42 && j < 57 ? 1 : 0.3);
        amplitude[i * 128 + j] *= 1 - 0.6 * bump;
        topography[i * 128 + j] += 20 * bump;
      }
    }
    expect(cleanFrame(f.raw, settings).report.scarPixels).toBe(0);
  });
});

describe("edge cases", () => {
  const pixel = { xNm: 10, yNm: 12 };
  const flatFrame = (rows: number, cols: number, value: number): RawFrame => ({
    frame: 3,
    topography: makeRaster(new Float32Array(rows * cols).fill(value), rows, cols, pixel),
    amplitude: makeRaster(new Float32Array(rows * cols).fill(value), rows, cols, pixel),
    phase: makeRaster(new Float32Array(rows * cols).fill(value), rows, cols, pixel),
  });

  test("nothing measured: all stays unmeasured, and it is said", () => {
    const { clean, report } = cleanFrame(flatFrame(20, 30, Number.NaN), settings);
    expect(dataOf(clean.amplitude).every(Number.isNaN)).toBe(true);
    expect(report.unmeasuredShare).toBe(1);
    expect(report.unmeasuredRows).toBe(20);
    expect(report.notices.map((n) => n.code)).toContain("empty-frame");
    expect(report.notices.every((n) => n.frame === 3)).toBe(true);
  });

  test.each([
    [1, 40],
    [40, 1],
    [1, 1],
    [3, 5],
    [64, 64],
  ])("a constant image of %i × %i is left as it is", (rows, cols) => {
    const { clean, report } = cleanFrame(flatFrame(rows, cols, 2.5), settings);
    expect(dataOf(clean.amplitude).every((v) => v === 2.5)).toBe(true);
    expect(dataOf(clean.topography!).every((v) => Math.abs(v) < 1e-4)).toBe(true);
    expect(dataOf(clean.phase!).every((v) => Math.abs(v) < 1e-6)).toBe(true);
    expect(report.scarPixels).toBe(0);
  });

  test("amplitude alone; infinities count as not measured; no pixel goes below zero by correction", () => {
    const f = synthetic({ seed: 6, scene: "mixed", amplitudeNoise: 0.3, rowGainSd: 0.05 });
    const data = dataOf(f.raw.amplitude);
    for (let p = 0; p < data.length; p++) data[p] = Math.abs(data[p]);
    data[77] = Infinity;
    data[78] = -Infinity;
    const before = data.slice();
    const { clean, report } = cleanFrame({ ...f.raw, topography: null, phase: null }, settings);
    expect(clean.topography).toBeNull();
    expect(clean.phase).toBeNull();
    expect(report.rowPhaseSdRad).toBeNull();
    expect(report.unmeasuredShare).toBeCloseTo(2 / data.length, 12);
    expect(dataOf(clean.amplitude).every((v) => Number.isNaN(v) || v >= 0)).toBe(true);
    expect(data).toEqual(before);
  });

  test("unmeasured rows stay unmeasured and do not break the chain of the phase", () => {
    const f = synthetic({
      seed: 9,
      scene: "metallic",
      rowPhaseStepRad: 0.03,
      unmeasuredRows: [40, 41, 42, 43, 44, 45, 46, 90],
    });
    const { clean, report } = cleanFrame(f.raw, settings);
    expect(report.unmeasuredRows).toBe(8);
    const phase = dataOf(clean.phase!);
    expect(phase.subarray(42 * 128, 43 * 128).every(Number.isNaN)).toBe(true);
    const mean = (i: number): number => phase.subarray(i * 128, (i + 1) * 128).reduce((a, b) => a + b, 0) / 128;
    expect(Math.abs(mean(47) - mean(39))).toBeLessThan(0.02);
    expect(Math.abs(mean(120) - mean(5))).toBeLessThan(0.03);
  });

  test("the phase is turned to circular mean 0 and lies in (−π, π], whatever it started from", () => {
    for (const turn of [0, 2.9, -3.1, 40]) {
      const f = synthetic({ seed: 12, scene: "mixed" });
      const phase = dataOf(f.raw.phase!);
      for (let p = 0; p < phase.length; p++) phase[p] += turn;
      const out = dataOf(cleanFrame(f.raw, settings).clean.phase!);
      let s = 0;
      for (const v of out) {
        s += Math.sin(v);
        expect(v > -Math.PI && v <= Math.PI).toBe(true);
      }
      expect(Math.abs(s / out.length)).toBeLessThan(1e-5);
    }
  });

  test("a clipped detector is reported with its share; eight-bit values are not taken for it", () => {
    const f = synthetic({ seed: 13, scene: "mixed" });
    const data = dataOf(f.raw.amplitude);
    const eightBit = data.map((v) => Math.round(60 * v));
    const whole = cleanFrame({ ...f.raw, amplitude: makeRaster(eightBit, 128, 128, f.raw.amplitude.pixel) }, settings);
    expect(whole.report.clippedShare).toBe(0);
    const clipped = data.map((v) => Math.min(v, 2.2));
    const share = clipped.filter((v) => v === Math.fround(2.2)).length / data.length;
    const { report } = cleanFrame(
      { ...f.raw, amplitude: makeRaster(clipped, 128, 128, f.raw.amplitude.pixel) },
      settings,
    );
    expect(share).toBeGreaterThan(0.1);
    expect(report.clippedShare).toBeCloseTo(share, 10);
    expect(report.notices.map((n) => n.code)).toContain("clipped-channel");
  });
});
