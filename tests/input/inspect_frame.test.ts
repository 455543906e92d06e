import { describe, expect, test } from "vitest";
import { inspectFrame } from "../../src/input/index.js";
import type { ChannelName, ChannelSource, FrameInfo, RawFrame } from "../../src/model/cooldown.js";
import { InputError } from "../../src/model/errors.js";
import { makeRaster, type Raster } from "../../src/model/raster.js";
import { makeRandom } from "../../src/numerics/random.js";

const ROWS = 64;
const COLS = 64;
const PIXELS = ROWS * COLS;

const source = (channel: ChannelName): ChannelSource => ({
  file: `/data/${channel}.tif`,
  label: `${channel}.tif#7`,
  format: "tiff",
  page: 7,
  scale: 1,
});
const info: FrameInfo = {
  frame: 7,
  series: 0,
  branch: "cooling",
  cycle: 1,
  temperatureK: 160,
  startedAt: null,
  endedAt: null,
  stageXNm: null,
  stageYNm: null,
  rows: ROWS,
  cols: COLS,
  sources: { topography: source("topography"), amplitude: source("amplitude"), phase: source("phase") },
};

const raster = (value: (k: number) => number): Raster =>
  makeRaster(
    Float32Array.from({ length: PIXELS }, (_, k) => value(k)),
    ROWS,
    COLS,
    { xNm: 10, yNm: 10 },
  );

/** Sound channels: Gaussian noise on two levels; some pixels not measured. */
function sound(seed = 1): RawFrame {
  const random = makeRandom(seed);
  const noise = (mean: number, sd: number): Raster =>
    raster((k) => (k % 101 === 0 ? NaN : (k % COLS < 32 ? 1 : 1.5) * mean + sd * random.normal()));
  return { frame: 7, topography: noise(4, 1), amplitude: noise(1, 0.05), phase: noise(0.6, 0.03) };
}

const told = (change: Partial<RawFrame>): string[] =>
  inspectFrame({ ...sound(), ...change }, info).map((n) => `${n.frame} ${n.code} ${n.message}`);

function problem(change: Partial<RawFrame>): string[] {
  try {
    inspectFrame({ ...sound(), ...change }, info);
  } catch (e) {
    if (e instanceof InputError) return e.problems.map((p) => `${p.at}: ${p.problem} | ${p.fix}`);
    throw e;
  }
  throw new Error("expected an InputError");
}

test("sound frames: nothing to tell, for 20 of them and for whole numbers of 8 bits", () => {
  for (let seed = 1; seed <= 20; seed++) expect(inspectFrame(sound(seed), info)).toEqual([]);
  const random = makeRandom(3);
  const coarse = raster((k) => Math.round(100 + (k % COLS < 32 ? 30 : 0) + 6 * random.normal()));
  expect(told({ amplitude: coarse })).toEqual([]);
});

describe("an amplitude that cannot be used stops the frame", () => {
  test.each([
    ["nothing measured", raster(() => NaN), "amplitude without a single measured pixel"],
    ["one value", raster((k) => (k % 5 === 0 ? NaN : 2)), "amplitude with one value, 2, in all 3276 measured pixels"],
    [
      "infinite values",
      raster((k) => (k < 2 ? -Infinity : k)),
      "amplitude with 2 values of 4096 that are infinite in single precision, which ends at 3.4e38",
    ],
  ])("%s", (_, amplitude, message) => {
    const found = problem({ amplitude });
    expect(found).toHaveLength(1);
    expect(found[0]).toContain(`amplitude.tif#7: ${message} | `);
  });

  test("all channels are told at once", () => {
    const bad = raster((k) => (k === 9 ? Infinity : k));
    expect(problem({ amplitude: bad, phase: bad, topography: bad }).map((p) => p.split(":")[0])).toEqual([
      "topography.tif#7",
      "amplitude.tif#7",
      "phase.tif#7",
    ]);
  });
});

describe("oddities are told and do not stop it", () => {
  const clip = (r: Raster, low: number, high: number): Raster =>
    raster((k) => Math.min(high, Math.max(low, r.values.data[k])));

  test("an optional channel without an image", () => {
    expect(told({ phase: null })).toEqual([
      "7 empty-channel phase (phase.tif#7): no measured pixel, or one single value: counts as missing",
    ]);
    expect(inspectFrame({ ...sound(), phase: null }, { ...info, sources: { amplitude: source("amplitude") } })).toEqual(
      [],
    );
  });

  test("clipped at the top, at the bottom, and hardly", () => {
    const { amplitude } = sound();
    expect(told({ amplitude: clip(amplitude, 0, 1.5) })).toEqual([
      expect.stringMatching(
        /^7 clipped-channel amplitude \(amplitude\.tif#7\): 2\d\.\d % of the pixels have the highest value 1\.5: clipped\?$/,
      ),
    ]);
    expect(told({ amplitude: clip(amplitude, 0.95, 2) })).toEqual([
      expect.stringMatching(/the lowest value 0\.949\d*: clipped/),
    ]);
    const lone = raster((k) => (k === 5 || k === 6 ? 9 : amplitude.values.data[k]));
    expect(told({ amplitude: lone })).toEqual([]); // two hot pixels are no plateau
  });

  test("an amplitude below zero, now and then or as a rule", () => {
    const { amplitude } = sound();
    const few = raster((k) => (k === 5 ? -0.1 : amplitude.values.data[k]));
    expect(told({ amplitude: few })).toEqual([
      "7 negative-amplitude amplitude (amplitude.tif#7): less than 0.1 % of the pixels lie below zero",
    ]);
    const swapped = raster((k) => amplitude.values.data[k] - 1.2);
    expect(told({ amplitude: swapped })).toEqual([expect.stringMatching(/below zero; is it the amplitude\?$/)]);
    const signed = raster((k) => -amplitude.values.data[k]);
    expect(() => told({ amplitude: signed })).toThrow(/below zero in 100(\.0)? % of its pixels/);
  });

  test("a phase in degrees taken for radians; a wrapped or a drifting one is not", () => {
    const { phase } = sound();
    const data = phase?.values.data ?? new Float32Array(PIXELS);
    expect(told({ phase: raster((k) => data[k] * (180 / Math.PI)) })).toEqual([
      expect.stringMatching(/7 phase-unit .* in degrees\?/),
    ]);
    const wrap = (v: number): number => Math.atan2(Math.sin(v), Math.cos(v));
    expect(told({ phase: raster((k) => wrap(data[k] + 2.6)) })).toEqual([]);
    expect(told({ phase: raster((k) => data[k] + (k / PIXELS) * 6) })).toEqual([]);
  });

  test("a topography in a unit other than the stated one", () => {
    const { topography } = sound();
    const data = topography?.values.data ?? new Float32Array(PIXELS);
    for (const factor of [1e-9, 1e-3, 1e6]) {
      const found = told({ topography: raster((k) => data[k] * factor) });
      expect(found).toEqual([expect.stringMatching(/7 topography-unit .* nm: is its unit right\?/)]);
    }
  });
});
