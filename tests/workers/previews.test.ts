import sharp from "sharp";
import { describe, expect, test } from "vitest";
import { makeRaster } from "../../src/model/raster.js";
import type { FrameLevels } from "../../src/model/signal.js";
import { makeRandom } from "../../src/numerics/random.js";
import { boxAverage, codeRange, makePreviews } from "../../src/workers/previews.js";

describe("averaging over boxes", () => {
  test("means of what was measured, none where less than half was, the last box smaller", () => {
    const data = Float32Array.from([1, 3, 5, 7, 9, Number.NaN, 5, Number.NaN, Number.NaN, 2].flatMap((v) => v));
    // 2 rows of 5 at most 2 across: boxes of 1 × 3 and 1 × 2
    const a = boxAverage(data, 2, 5, 2);
    expect([a.rows, a.cols, a.stepX, a.stepY]).toEqual([2, 2, 3, 1]);
    expect(Array.from(a.values)).toEqual([3, 8, Number.NaN, 2]);
  });

  test("an image that is small enough stays as it is", () => {
    const data = Float32Array.from({ length: 12 }, (_, k) => k);
    expect(boxAverage(data, 3, 4, 4)).toEqual({ rows: 3, cols: 4, stepX: 1, stepY: 1, values: data });
  });

  test("codes go from the smallest to the largest value, but not for an outlier's sake", () => {
    const even = Float32Array.from({ length: 1001 }, (_, k) => k);
    expect(codeRange(even)).toEqual({ low: 0, high: 1000 });
    const spiked = Float32Array.from(even, (v, k) => (k === 500 ? 1e6 : v));
    expect(codeRange(spiked).high).toBeLessThan(2000);
    expect(codeRange(Float32Array.of(Number.NaN))).toEqual({ low: 0, high: 1 });
    expect(codeRange(Float32Array.of(4, 4)).high).toBeGreaterThan(4);
  });
});

const white = { rr: 0.01, ri: 0, ii: 0.01 };
const levels = (phase: number): FrameLevels => ({
  frame: 0,
  verdict: "mixed",
  insulating: { re: Math.cos(phase), im: Math.sin(phase) },
  metallic: { re: 2 * Math.cos(phase + 0.6), im: 2 * Math.sin(phase + 0.6) },
  noiseInsulating: white,
  noiseMetallic: white,
  noiseCorrelationX: 0,
  noiseCorrelationY: 0,
  gain: 1.25,
  thresholdSd: 0.01,
});

test("amplitude over gain, phase from the insulating state, across the turn from π to −π; values come back to half a code", async () => {
  const [rows, cols] = [300, 520];
  const random = makeRandom(3);
  const pixel = { xNm: 10, yNm: 10 };
  const half = (p: number): boolean => p % cols < cols / 2;
  const amplitude = Float32Array.from(
    { length: rows * cols },
    (_, p) => 1.25 * (half(p) ? 1 : 2) * (1 + 0.02 * random.normal()),
  );
  const phase = Float32Array.from({ length: rows * cols }, (_, p) => {
    const v = 3.1 + (half(p) ? 0 : 0.6) + 0.05 * random.normal();
    return Math.atan2(Math.sin(v), Math.cos(v));
  });
  const topography = Float32Array.from({ length: rows * cols }, () => random.normal());
  for (let p = 0; p < 8 * cols; p++) amplitude[p] = Number.NaN;
  const correction = {
    logGain: new Float32Array(rows),
    phaseRad: new Float32Array(rows),
    columnLogGain: 0,
    columnPhaseRad: 0,
  };
  const raster = (data: Float32Array) => makeRaster(data, rows, cols, pixel);
  const clean = { frame: 0, pixel, amplitude: raster(amplitude), phase: raster(phase), topography: raster(topography) };
  const made = await makePreviews(clean, { correction }, levels(3.1));
  expect(made.map((p) => p.channel)).toEqual(["amplitude", "phase", "topography"]);
  for (const p of made) {
    expect([p.cols, p.stepX, p.rows, p.stepY]).toEqual([174, 3, 150, 2]);
    const { data, info } = await sharp(p.image).ensureAlpha().raw().toBuffer({ resolveWithObject: true });
    // alpha is not even stored where all was measured
    expect(info.channels).toBe(4);
    const at = (row: number, col: number): number | null => {
      const q = 4 * (row * p.cols + col);
      return data[q + 3] === 0 ? null : p.low + (data[q] / 255) * (p.high - p.low);
    };
    const wanted = { amplitude: [1, 2], phase: [0, 0.6], topography: [0, 0] }[p.channel];
    const sd = { amplitude: 0.04, phase: 0.05, topography: 1 }[p.channel] / Math.sqrt(6);
    const halfCode = (p.high - p.low) / 510;
    for (const row of [0, 3]) expect(at(row, 10) === null).toBe(p.channel !== "topography");
    for (let k = 0; k < 200; k++) {
      const row = 4 + random.below(140);
      const col = random.below(170);
      if (Math.abs(col - 86) < 2) continue;
      expect(Math.abs((at(row, col) ?? Number.NaN) - wanted[col < 86 ? 0 : 1])).toBeLessThan(5 * sd + halfCode);
    }
  }
});

test("without phase and topography there is the amplitude alone", async () => {
  const clean = {
    frame: 0,
    pixel: { xNm: 10, yNm: 10 },
    amplitude: makeRaster(Float32Array.of(1, 2, 3, 4), 2, 2, { xNm: 10, yNm: 10 }),
    phase: null,
    topography: null,
  };
  const correction = {
    logGain: new Float32Array(2),
    phaseRad: new Float32Array(2),
    columnLogGain: 0,
    columnPhaseRad: 0,
  };
  const made = await makePreviews(clean, { correction }, { ...levels(0), insulating: { re: 1, im: 0 }, gain: 2 });
  expect(made.map((p) => [p.channel, p.low, p.high])).toEqual([["amplitude", 0.5, 2]]);
});
