import { describe, expect, test } from "vitest";
import { joinRetrace } from "../../../src/input/retrace.js";
import type { ChannelName, RawFrame } from "../../../src/model/cooldown.js";
import { dataOf, makeRaster, type Raster } from "../../../src/model/raster.js";
import { defaultsOf } from "../../../src/model/settings.js";
import { makeRandom, type Random } from "../../../src/numerics/random.js";
import { cleanFrame, cleanSettings } from "../../../src/stages/clean/index.js";
import { synthetic, type Synthetic } from "./synthetic.js";

const settings = defaultsOf(cleanSettings);
const SD = { amplitude: 0.06, phase: 0.05, topography: 0.2 };
/** Of whole rows, different on the way back. */
const ROW_SD = { amplitude: 0.02, phase: 0.02, topography: 0.3 };

/** Adds noise of standard deviation 1 × `sd` whose neighbours along the row are correlated by 2/3, and an offset a row. */
function addNoise(values: Float32Array, cols: number, sd: number, rowSd: number, random: Random): Float32Array {
  const out = values.slice();
  for (let from = 0; from < out.length; from += cols) {
    const white = Float64Array.from({ length: cols + 2 }, () => random.normal());
    const offset = rowSd * random.normal();
    for (let j = 0; j < cols; j++)
      out[from + j] += offset + (sd * (white[j] + 2 * white[j + 1] + white[j + 2])) / Math.sqrt(6);
  }
  return out;
}

function traceAndRetrace(f: Synthetic, channels: readonly ChannelName[], seed: number): RawFrame {
  const random = makeRandom(seed);
  const retraceNoise: Partial<Record<ChannelName, number>> = {};
  const scan = (channel: ChannelName, rowSd: number): Raster => {
    const trace = addNoise(f[channel], f.cols, SD[channel], rowSd, random);
    if (channels.includes(channel)) {
      const retrace = addNoise(f[channel], f.cols, SD[channel], rowSd, random);
      const joined = joinRetrace(trace, retrace, f.cols, channel === "phase");
      expect(joined.disagreement).toBeNull();
      retraceNoise[channel] = joined.noiseSd ?? Number.NaN;
    }
    return makeRaster(trace, f.rows, f.cols, { xNm: 10, yNm: 10 });
  };
  return {
    frame: 0,
    topography: scan("topography", ROW_SD.topography),
    amplitude: scan("amplitude", ROW_SD.amplitude),
    phase: scan("phase", ROW_SD.phase),
    retraceNoise,
  };
}

describe("noise that is correlated along the row, offsets of whole rows beside it", () => {
  const all: readonly ChannelName[] = ["topography", "amplitude", "phase"];

  test.each(["metallic", "mixed"] as const)("%s: trace and retrace tell it to a few per cent", (scene) => {
    for (const seed of [1, 2, 3]) {
      const f = synthetic({ seed, scene, rows: 160, cols: 160 });
      const raw = traceAndRetrace(f, all, 10 + seed);
      const { noise } = cleanFrame(raw, settings).report;
      expect(noise.byRetrace).toEqual(all);
      for (const channel of all) {
        const told = (raw.retraceNoise?.[channel] ?? 0) / (SD[channel] / Math.SQRT2);
        expect(Math.abs(told - 1)).toBeLessThan(0.03);
      }
      expect(Math.abs((noise.topographyNm ?? 0) / (SD.topography / Math.SQRT2) - 1)).toBeLessThan(0.03);
      expect(Math.abs((noise.phaseRad ?? 0) / (SD.phase / Math.SQRT2) - 1)).toBeLessThan(0.03);
      // relative: of one level where there is one, of neither of the two where there are two
      const [low, high] = scene === "metallic" ? [2.2, 2.2] : [1, 2.2];
      expect(noise.amplitudeRelative).toBeGreaterThan((0.95 * SD.amplitude) / Math.SQRT2 / high);
      expect(noise.amplitudeRelative).toBeLessThan((1.05 * SD.amplitude) / Math.SQRT2 / low);
    }
  });

  test("without a retrace differences of neighbours find 0.41 of it; a channel with one is not moved by the others", () => {
    const f = synthetic({ seed: 4, scene: "metallic", rows: 160, cols: 160 });
    const { noise } = cleanFrame(traceAndRetrace(f, ["phase"], 14), settings).report;
    expect(noise.byRetrace).toEqual(["phase"]);
    expect(Math.abs((noise.phaseRad ?? 0) / (SD.phase / Math.SQRT2) - 1)).toBeLessThan(0.03);
    expect((noise.topographyNm ?? 0) / SD.topography).toBeCloseTo(1 / Math.sqrt(6), 1);
  });

  test("the scars found are those that are there, not the noise's own streaks", () => {
    const f = synthetic({ seed: 5, scene: "metallic", rows: 160, cols: 160 });
    const raw = traceAndRetrace(f, all, 15);
    // a scar of six standard deviations of the average
    const topography = dataOf(raw.topography as Raster);
    for (let j = 40; j < 60; j++) topography[80 * f.cols + j] += (10 * SD.topography) / Math.SQRT2;
    const { clean, report } = cleanFrame(raw, settings);
    const cleaned = dataOf(clean.topography as Raster);
    let found = 0;
    for (let j = 40; j < 60; j++) if (Number.isNaN(cleaned[80 * f.cols + j])) found++;
    expect(found).toBeGreaterThan(16);
    const blind = cleanFrame({ ...raw, retraceNoise: {} }, settings).report;
    expect(blind.scarPixels - found).toBeGreaterThan(10 * Math.max(1, report.scarPixels - found));
  });
});

test("a retrace that is a copy of its trace tells nothing of the noise", () => {
  const f = synthetic({ seed: 6, scene: "mixed" });
  const trace = dataOf(f.raw.amplitude).slice();
  const joined = joinRetrace(trace, trace.slice(), f.cols, false);
  expect(joined).toEqual({ noiseSd: null, disagreement: expect.stringMatching(/copy of the trace/) });
});
