import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import { childSeed, makeRandom } from "../../../src/numerics/random.js";
import { measureTip, tipSettings } from "../../../src/stages/tip/index.js";
import { discScene, edgeScene, lineThrough, measured, noisy, type Scene } from "./scenes.js";

const s = defaultsOf(tipSettings);
const square = (px: number, n = 40): Scene => ({ rows: n, cols: n, pixel: { xNm: px, yNm: px } });

test.each([
  [10, 30, 0, 0],
  [10, 30, 37, 20],
  [5, 30, 90, 90],
  [15, 30, 50, 63],
  [8, 60, 200, 200],
])(
  "a sharp edge without noise: pixels of %i nm, a tip of %i nm, edge at %i°, line at %i°",
  (px, fwhm, edgeDeg, lineDeg) => {
    const scene = square(px, 64);
    const image = noisy(scene, edgeScene(scene, fwhm, edgeDeg, 2.3), 1e-4, makeRandom(1));
    const r = measured(measureTip(image, lineThrough(scene, 3.5 * fwhm, lineDeg, 2 * fwhm), s));
    expect(r.model).toBe("edge");
    expect(r.fwhmNm / fwhm).toBeCloseTo(1, 3);
    expect(Math.abs(r.tiltDeg)).toBeCloseTo(Math.abs(edgeDeg - lineDeg), 0);
  },
);

test("unequal pixel sides: the width is in nm whichever way the edge runs", () => {
  const scene = { rows: 30, cols: 60, pixel: { xNm: 6, yNm: 12 } };
  for (const deg of [0, 35, 90]) {
    const image = noisy(scene, edgeScene(scene, 30, deg, 1), 1e-4, makeRandom(2));
    expect(measured(measureTip(image, lineThrough(scene, 110, deg, 60), s)).fwhmNm).toBeCloseTo(30, 1);
  }
});

test("the same pixels mirrored, transposed or upside down in value give the same width", () => {
  const scene = square(10);
  const image = noisy(scene, edgeScene(scene, 30, 25, 4), 0.05, makeRandom(3));
  const line = lineThrough(scene, 120, 20, 60);
  const first = measured(measureTip(image, line, s));
  const data = image.components[0];
  const turned = { ...image, components: [data.map((_, p) => data[(p % 40) * 40 + Math.floor(p / 40)])] };
  const swap = (p: { xNm: number; yNm: number }) => ({ xNm: p.yNm, yNm: p.xNm });
  const over = measured(measureTip(turned, { from: swap(line.from), to: swap(line.to), widthNm: 60 }, s));
  const backwards = measured(measureTip(image, { from: line.to, to: line.from, widthNm: 60 }, s));
  const negative = measured(measureTip({ ...image, components: [data.map((v) => 3 - v)] }, line, s));
  for (const other of [over, backwards, negative]) {
    expect(other.fwhmNm).toBeCloseTo(first.fwhmNm, 2);
    expect(other.lowNm).toBeCloseTo(first.lowNm, 1);
    expect(other.highNm).toBeCloseTo(first.highNm, 1);
  }
});

test("a bent edge is not blurred by its bend", () => {
  const scene = square(5, 60);
  // the rim of a disc whose middle lies outside the line: straight, it would be smeared by 7 nm over the line's width
  const image = noisy(scene, discScene(scene, 30, 220, { xNm: 40, yNm: 147.5 }), 0.02, makeRandom(5));
  const r = measured(measureTip(image, { from: { xNm: 60, yNm: 147 }, to: { xNm: 270, yNm: 147 }, widthNm: 80 }, s));
  expect(r.model).toBe("edge");
  expect(Math.abs(r.fwhmNm - 30)).toBeLessThan(3 * r.sdNm);
  expect(r.sdNm).toBeLessThan(0.8);
});

describe("many noisy edges", () => {
  const angles = [0, 12, 31, 45, 58, 90];
  const results = Array.from({ length: 240 }, (_, k) => {
    const px = [5, 10, 12][k % 3];
    const noise = [0.04, 0.08][Math.floor(k / 3) % 2];
    const deg = angles[k % angles.length];
    const scene = square(px);
    const random = makeRandom(childSeed(31, k));
    const clean = edgeScene(scene, 30, deg + 9 * random.normal(), 6 * random.normal(), 0.8);
    const image = noisy(scene, clean, noise * 0.8, random);
    return measured(measureTip(image, lineThrough(scene, 95, deg, 60), s, { model: "edge", sizeNm: null }));
  });

  test("the width is unbiased", () => {
    const weight = results.map((r) => 1 / r.sdNm ** 2);
    const mean = results.reduce((a, r, k) => a + weight[k] * r.fwhmNm, 0) / weight.reduce((a, v) => a + v, 0);
    expect(Math.abs(mean / 30 - 1)).toBeLessThan(0.02);
  });

  test("95 % intervals hold the truth in 92 to 98 %, as often above as below", () => {
    const low = results.filter((r) => r.lowNm > 30).length;
    const high = results.filter((r) => r.highNm < 30).length;
    const share = 1 - (low + high) / results.length;
    expect(share).toBeGreaterThanOrEqual(0.92);
    expect(share).toBeLessThanOrEqual(0.98);
    expect(Math.min(low, high)).toBeGreaterThan(0);
  });

  test("errors are as large as stated", () => {
    const pull = Math.sqrt(results.reduce((a, r) => a + ((r.fwhmNm - 30) / r.sdNm) ** 2, 0) / results.length);
    expect(pull).toBeGreaterThan(0.87);
    expect(pull).toBeLessThan(1.13);
  });

  test("good edges are not spoken against", () => {
    const said = results.filter((r) => r.warnings.some((w) => w.code !== "coarse-sampling")).length;
    expect(said / results.length).toBeLessThan(0.03);
  });
});
