import { expect, test } from "vitest";
import { BlurredDisc } from "../../../src/stages/tip/blurred_disc.js";
import { bar, dot, edge } from "../../../src/stages/tip/shapes.js";
import { discScene, middleOf } from "./scenes.js";

test.each([
  [edge, [3, 0.3, 12, 0.002]],
  [bar, [-4, -0.2, 12, 15]],
  [bar, [-4, -0.2, 12, 0]],
  [dot, [2, -3, 12, 20, 0, 0]],
  [dot, [2, -3, 12, 4, 0.1, -0.2]],
  [dot, [2, -3, 12, 60, 0.1, -0.2]],
])("slopes of the %o are those of its values", (shape, at) => {
  const s = Float64Array.from({ length: 60 }, (_, k) => (k % 12) * 9 - 50);
  const t = Float64Array.from({ length: 60 }, (_, k) => Math.floor(k / 12) * 11 - 25);
  const theta = Float64Array.from(at);
  const K = theta.length;
  const g = new Float64Array(60);
  const dg = new Float64Array(60 * K);
  expect(shape.evaluate(theta, s, t, g, dg)).toBe(true);
  const up = new Float64Array(60);
  const down = new Float64Array(60);
  for (let p = 0; p < K; p++) {
    // the size of a point has no slope of first order
    if (p === 3 && shape !== edge && at[3] === 0) continue;
    const h = p === 3 && shape === edge ? 1e-6 : 1e-4;
    shape.evaluate(theta.with(p, theta[p] + h), s, t, up, null);
    shape.evaluate(theta.with(p, theta[p] - h), s, t, down, null);
    // the disc's table is good to 5e-6 of the peak; its rounding along σ and R shows in the differences of values
    for (let k = 0; k < 60; k++) expect(dg[k * K + p]).toBeCloseTo((up[k] - down[k]) / (2 * h), 4);
  }
});

test("a blurred disc is the sum over its chords", () => {
  // an independent quadrature; see scenes.ts
  const scene = { rows: 41, cols: 41, pixel: { xNm: 5, yNm: 5 } };
  const m = middleOf(scene);
  for (const diameter of [10, 30, 80]) {
    const seen = discScene(scene, 30, diameter, m);
    const disc = new BlurredDisc(diameter / 2, 30 / 2.3548200450309493);
    for (let k = 0; k < seen.length; k++) {
      const r = Math.hypot((k % 41) * 5 - m.xNm, Math.floor(k / 41) * 5 - m.yNm);
      expect(Math.abs(disc.valueAt(r) - (seen[k] - 1))).toBeLessThan(5e-6);
    }
  }
});
