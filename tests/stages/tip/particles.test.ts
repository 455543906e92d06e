import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import { childSeed, makeRandom } from "../../../src/numerics/random.js";
import { measureTip, tipSettings } from "../../../src/stages/tip/index.js";
import { barScene, codes, discScene, lineThrough, measured, middleOf, noisy, type Scene } from "./scenes.js";

const s = defaultsOf(tipSettings);
const square = (px: number, n = 36): Scene => ({ rows: n, cols: n, pixel: { xNm: px, yNm: px } });

test.each([40, 60, 90])("a disc of %i nm without noise: the tip's width and the disc's come apart", (diameter) => {
  const scene = square(8, 64);
  const m = middleOf(scene);
  const image = noisy(scene, discScene(scene, 30, diameter, { xNm: m.xNm + 5, yNm: m.yNm - 3 }), 0.004, makeRandom(1));
  const r = measured(measureTip(image, lineThrough(scene, 125, 20, 60), s));
  expect(r.model).toBe("dot");
  expect(r.status).toBe("measured");
  expect(Math.abs(r.fwhmNm - 30)).toBeLessThan(3 * r.sdNm);
  expect(r.sdNm).toBeLessThan(0.9);
  expect(Math.abs((r.size?.nm ?? 0) - diameter)).toBeLessThan(1.5);
  // ± 0.05 nm: noise 0.4 % of the contrast
  expect(r.at.xNm).toBeCloseTo(m.xNm + 5, 1);
  expect(r.at.yNm).toBeCloseTo(m.yNm - 3, 1);
  expect(codes(r)).toEqual([]);
});

test("a bar without noise, across the line at an angle", () => {
  const scene = square(8, 70);
  const image = noisy(scene, barScene(scene, 30, 45, 30, 4), 0.004, makeRandom(2));
  const r = measured(measureTip(image, lineThrough(scene, 125, 12, 60), s));
  expect(r.model).toBe("bar");
  expect(r.fwhmNm).toBeCloseTo(30, 0);
  expect(r.size?.nm).toBeCloseTo(45, 0);
  expect(Math.abs(r.tiltDeg)).toBeCloseTo(18, 0);
  expect(codes(r)).toEqual(["one-direction"]);
});

test("a particle much smaller than the tip: its size cannot be told, the width as seen is a limit that holds", () => {
  const scene = square(10);
  const m = middleOf(scene);
  // seen variance 12.74² + 12²/16: 30.4 nm
  const clean = discScene(scene, 30, 12, m, 6);
  let held = 0;
  for (let k = 0; k < 30; k++) {
    const r = measured(
      measureTip(noisy(scene, clean, 0.06, makeRandom(childSeed(3, k))), lineThrough(scene, 115, 0, 60), s),
    );
    if (r.status === "upper-limit") expect(codes(r)).toContain("size-not-separable");
    expect(Math.abs(r.apparent.nm - 30.4)).toBeLessThan(4.5 * r.apparent.sdNm);
    if (r.upper95Nm >= 30) held++;
  }
  expect(held).toBeGreaterThanOrEqual(25);
});

test("a particle of known size gives the tip's width itself", () => {
  const scene = square(10);
  const m = middleOf(scene);
  const image = noisy(scene, discScene(scene, 30, 24, m, 4), 0.06, makeRandom(5));
  const line = lineThrough(scene, 115, 0, 60);
  const free = measured(measureTip(image, line, s));
  const known = measured(measureTip(image, line, s, { model: "particle", sizeNm: 24 }));
  expect(known.status).toBe("measured");
  expect(Math.abs(known.fwhmNm - 30)).toBeLessThan(3 * known.sdNm);
  expect(known.highNm - known.lowNm).toBeLessThan((free.highNm - free.lowNm) / 2);
});

test("both directions: equal on a disc under a round tip, unequal under an oval one", () => {
  const scene = square(8);
  const m = middleOf(scene);
  const round = noisy(scene, discScene(scene, 30, 60, m), 0.03, makeRandom(6));
  const line = lineThrough(scene, 125, 0, 60);
  const r = measured(measureTip(round, line, s));
  expect(r.directions?.pValue).toBeGreaterThan(0.01);
  // the same image, its columns set 25 % farther apart
  const oval = { ...round, pixel: { xNm: 10, yNm: 8 } };
  const d = measured(measureTip(oval, lineThrough({ ...scene, pixel: oval.pixel }, 125, 0, 60), s));
  expect(codes(d)).toContain("directions-differ");
  expect((d.directions?.along.nm ?? 0) / (d.directions?.across.nm ?? 1)).toBeCloseTo(1.25, 1);
});

describe("many noisy particles", () => {
  const results = Array.from({ length: 150 }, (_, k) => {
    const random = makeRandom(childSeed(77, k));
    const scene = square([8, 10][k % 2]);
    const m = middleOf(scene);
    const at = { xNm: m.xNm + 6 * random.normal(), yNm: m.yNm + 6 * random.normal() };
    const size = [60, 75, 90][k % 3];
    const line = lineThrough(scene, 125, [0, 30, 75][Math.floor(k / 3) % 3], 60);
    return measured(
      measureTip(noisy(scene, discScene(scene, 30, size, at), 0.04, random), line, s, {
        model: "particle",
        sizeNm: null,
      }),
    );
  });

  test("particles of two tip widths and more: unbiased", () => {
    const weight = results.map((r) => 1 / r.sdNm ** 2);
    const mean = results.reduce((a, r, k) => a + weight[k] * r.fwhmNm, 0) / weight.reduce((a, v) => a + v, 0);
    expect(results.every((r) => r.model === "dot" && r.status === "measured")).toBe(true);
    expect(Math.abs(mean / 30 - 1)).toBeLessThan(0.02);
  });

  test("95 % intervals hold the truth in 92 to 98 %; errors are as large as stated", () => {
    const held = results.filter((r) => r.lowNm <= 30 && r.highNm >= 30).length / results.length;
    expect(held).toBeGreaterThanOrEqual(0.92);
    expect(held).toBeLessThanOrEqual(0.98);
    // and so do those of the particles' own sizes
    const sizes = results.filter(
      (r, k) => (r.size?.lowNm ?? 0) <= [60, 75, 90][k % 3] && (r.size?.highNm ?? 0) >= [60, 75, 90][k % 3],
    );
    expect(sizes.length / results.length).toBeGreaterThanOrEqual(0.92);
    const pull = Math.sqrt(results.reduce((a, r) => a + ((r.fwhmNm - 30) / r.sdNm) ** 2, 0) / results.length);
    expect(pull).toBeGreaterThan(0.85);
    expect(pull).toBeLessThan(1.15);
  });
});
