import { describe, expect, test } from "vitest";
import { makeRaster } from "../../../src/model/raster.js";
import type { CleanFrame } from "../../../src/model/signal.js";
import { makeRandom } from "../../../src/numerics/random.js";
import { connectedComponents } from "../../../src/raster/opencv.js";
import { correctPixels, readPixels } from "../../../src/stages/states/pixels.js";
import { clearIslands } from "../../../src/stages/states/islands.js";
import { regionsOf } from "../../../src/stages/states/regions.js";

describe("regions as runs", () => {
  test.each([
    [0.3, 4],
    [0.5, 4],
    [0.6, 4],
    [0.3, 8],
    [0.4, 8],
    [0.9, 8],
  ] as const)("of noise with a share of %f, joined over %i neighbours, are those of OpenCV", (share, connectivity) => {
    const random = makeRandom(Math.round(100 * share) + connectivity);
    const [rows, cols] = [41, 57];
    const map = Uint8Array.from({ length: rows * cols }, () =>
      random.uniform() < share ? 7 : random.uniform() < 0.5 ? 0 : 255,
    );
    const regions = regionsOf(map, 7, rows, cols, connectivity);
    const { count, labels } = connectedComponents(
      map.map((v) => (v === 7 ? 1 : 0)),
      rows,
      cols,
      connectivity,
    );
    expect(regions.sizes.length).toBe(count);
    const found = new Int32Array(rows * cols);
    regions.sizes.forEach((size, k) => {
      let n = 0;
      regions.forRuns(k, (from, to) => {
        found.fill(k + 1, from, to);
        n += to - from;
      });
      expect(n).toBe(size);
    });
    expect(found).toEqual(labels);
  });
  test("of nothing are none", () => {
    expect(regionsOf(new Uint8Array(12), 1, 3, 4, 8).sizes).toEqual([]);
  });
  test("islands below the least area go, those that are refused too, and the rest is counted", () => {
    const lines = ["1.......", "........", "..11..1.", "..11...1", "........"];
    const states = Uint8Array.from(lines.join(""), (c) => (c === "1" ? 1 : 0));
    const cleared = clearIslands(states, 5, 8, 2, (pixels, state) => state === 0 || pixels.length > 2);
    // the lone pixel is too small, the two that touch over a corner are refused
    expect(states.reduce((a, v) => a + v, 0)).toBe(4);
    expect(cleared.totalPx).toEqual([36, 4]);
    expect(cleared.largestPx).toEqual([36, 4]);
  });
});

test("a correction taken off while reading is that taken off afterwards", () => {
  const random = makeRandom(6);
  const [rows, cols] = [9, 11];
  const pixel = { xNm: 10, yNm: 10 };
  const channel = (value: () => number) =>
    makeRaster(
      Float32Array.from({ length: rows * cols }, () => (random.uniform() < 0.1 ? Number.NaN : value())),
      rows,
      cols,
      pixel,
    );
  const clean: CleanFrame = {
    frame: 0,
    pixel,
    topography: null,
    amplitude: channel(() => 1 + random.uniform()),
    phase: channel(() => 3 * random.normal()),
  };
  const correction = {
    logGain: Float32Array.from({ length: rows }, () => 0.1 * random.normal()),
    phaseRad: Float32Array.from({ length: rows }, () => 0.2 * random.normal()),
    columnLogGain: 0.07,
    columnPhaseRad: -0.3,
  };
  const debris = Uint8Array.from({ length: rows * cols }, () => Math.floor(3 * random.uniform()));
  for (const marginToo of [true, false]) {
    const at = readPixels(clean, debris, marginToo, correction);
    const raw = readPixels(clean, debris, marginToo);
    const after = correctPixels(raw, correction);
    expect(at.usable).toEqual(after.usable);
    expect(at.count).toBe(after.count);
    for (let p = 0; p < at.re.length; p++) {
      expect(at.re[p]).toBeCloseTo(after.re[p], 6);
      expect(at.im[p]).toBeCloseTo(after.im[p], 6);
    }
    raw.usable.forEach((v, p) => {
      if (debris[p] === 1 || (marginToo && debris[p] === 2)) expect(v).toBe(0);
    });
  }
});
