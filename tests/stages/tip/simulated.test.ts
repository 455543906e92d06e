import { describe, expect, test } from "vitest";
import { defaultSpec, simulateCooldown, type SpecOverrides } from "../../../src/demo/index.js";
import { defaultsOf } from "../../../src/model/settings.js";
import {
  findTipFeatures,
  measureTip,
  prepareTipImage,
  type TipImage,
  tipSettings,
} from "../../../src/stages/tip/index.js";
import { codes, measured } from "./scenes.js";

const s = { ...defaultsOf(tipSettings), expectedNm: 30 };

/** The first frame of a simulated cooldown: one state, a 30 nm tip, 10 nm pixels, noise and line noise as in the demo. */
function firstFrame(overrides: SpecOverrides, channel: "complex" | "amplitude"): TipImage {
  const spec = defaultSpec({ rows: 112, cols: 112, unmeasured: { chance: 0 }, ...overrides });
  const image = prepareTipImage(simulateCooldown(spec).frame(0), channel);
  if (image === null) throw new Error("no image");
  return image;
}

const dot = (xNm: number, yNm: number, radiusNm: number, amplitudeFactor: number) => ({
  xNm,
  yNm,
  radiusNm,
  lengthNm: 0,
  angleDeg: 0,
  heightNm: 12,
  amplitudeFactor,
  phaseShiftRad: 0.2,
});

describe("common practice: a near-field tip resolves about 30 nm, judged on line cuts over small debris", () => {
  const list = [dot(300, 300, 14, 0.3), dot(800, 290, 35, 0.4), dot(320, 790, 26, 1.8), dot(810, 830, 40, 0.5)];
  const image = firstFrame({ seed: 8, debris: { list } }, "complex");

  test("a small particle looks about as wide as the tip", () => {
    const r = measured(measureTip(image, { from: { xNm: 185, yNm: 300 }, to: { xNm: 415, yNm: 300 }, widthNm: 60 }, s));
    expect(r.model).toBe("dot");
    expect(r.apparent.nm).toBeGreaterThan(28);
    expect(r.apparent.nm).toBeLessThan(40);
    expect(r.highNm).toBeGreaterThan(30);
    expect(codes(r)).toContain("relief");
  });

  test("larger ones give the tip by their flanks", () => {
    for (const [x, y] of [
      [800, 290],
      [810, 830],
    ]) {
      const line = { from: { xNm: x - 115, yNm: y }, to: { xNm: x + 115, yNm: y }, widthNm: 60 };
      const r = measured(measureTip(image, line, s));
      expect(r.status).toBe("measured");
      expect(Math.abs(r.fwhmNm - 30)).toBeLessThan(3 * r.sdNm);
      expect(r.sdNm).toBeLessThan(3);
      expect(r.directions?.pValue).toBeGreaterThan(0.001);
    }
  });

  test("the search finds the particles, and one tip under all of them", () => {
    const search = findTipFeatures(image, s, 10);
    for (const p of list) {
      const near = search.candidates.some(
        (c) => Math.hypot(c.result.at.xNm - p.xNm, c.result.at.yNm - p.yNm) < p.radiusNm,
      );
      expect(near).toBe(true);
    }
    expect(search.together?.features).toBeGreaterThanOrEqual(3);
    expect(search.together?.lowNm).toBeLessThan(30);
    expect(search.together?.highNm).toBeGreaterThan(30);
    expect(search.together?.sdNm).toBeLessThan(1.5);
  });
});

test("a wall of its own width is not taken for the tip: the search ranks particles first", () => {
  const list = [dot(300, 300, 38, 0.35), dot(300, 800, 35, 0.4)];
  const image = firstFrame(
    {
      seed: 9,
      debris: { list },
      domains: { shape: "line", xNm: 650, yNm: 550, normalDeg: 10, scaleNm: 100 },
      transition: { coolingHalfK: 190 },
    },
    "complex",
  );
  const search = findTipFeatures(image, s, 20);
  const walls = search.candidates.filter((c) => c.result.model === "edge");
  expect(walls.length).toBeGreaterThan(3);
  // 100 nm from 10 to 90 %, seen through the tip: an erf of about 92 nm
  for (const w of walls.filter((c) => c.sound)) expect(w.result.fwhmNm).toBeGreaterThan(60);
  expect(search.candidates[0]?.result.model).toBe("dot");
  expect(search.together === null || Math.abs(search.together.nm - 30) < 3 * search.together.sdNm).toBe(true);
});

test("a frame without particles has nothing to offer", () => {
  expect(
    findTipFeatures(
      firstFrame({ seed: 10, debris: { perUm2: 0, list: null }, scars: { perFrame: 0 } }, "amplitude"),
      s,
      10,
    ).candidates,
  ).toEqual([]);
});
