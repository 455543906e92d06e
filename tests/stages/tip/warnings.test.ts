import { expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import { makeRaster } from "../../../src/model/raster.js";
import { FWHM_PER_SIGMA } from "../../../src/model/units.js";
import { normalCdf } from "../../../src/numerics/erf.js";
import { makeRandom } from "../../../src/numerics/random.js";
import { measureTip, prepareTipImage, tipSettings } from "../../../src/stages/tip/index.js";
import {
  alongNormal,
  codes,
  discScene,
  draw,
  edgeScene,
  lineThrough,
  measured,
  middleOf,
  noisy,
  type Scene,
} from "./scenes.js";

const s = defaultsOf(tipSettings);
const scene: Scene = { rows: 44, cols: 44, pixel: { xNm: 8, yNm: 8 } };
const d = alongNormal(scene, 15, 3);
const line = lineThrough(scene, 140, 15, 60);
const sigma = 30 / FWHM_PER_SIGMA;

test("a Lorentzian response is told by its tails", () => {
  const clean = draw(scene, (x, y) => 1.5 + Math.atan(d(x, y) / 15) / Math.PI);
  expect(codes(measured(measureTip(noisy(scene, clean, 0.02, makeRandom(1)), line, s)))).toContain("tails");
  // of a particle: the point response whose line spread is a Lorentzian of 30 nm
  const m = middleOf(scene);
  const dot = draw(scene, (x, y) => 1 + (1 + ((x - m.xNm) ** 2 + (y - m.yNm) ** 2) / 225) ** -1.5);
  expect(codes(measured(measureTip(noisy(scene, dot, 0.02, makeRandom(2)), line, s)))).toContain("tails");
});

test("an edge with a width of its own is told from a sharp one where the noise allows", () => {
  const clean = draw(scene, (x, y) => 1 + 0.5 * (1 + Math.tanh(d(x, y) / 20)));
  const r = measured(measureTip(noisy(scene, clean, 0.006, makeRandom(3)), line, s));
  expect(codes(r)).toContain("soft-edge");
});

test("a bright rim along the edge", () => {
  const clean = draw(
    scene,
    (x, y) => 1 + normalCdf(d(x, y) / sigma) + 0.35 * Math.exp(-0.5 * ((d(x, y) - 20) / 16) ** 2),
  );
  const said = codes(
    measured(measureTip(noisy(scene, clean, 0.02, makeRandom(4)), line, s, { model: "edge", sizeNm: null })),
  );
  expect(said.some((c) => c === "rim" || c === "asymmetric")).toBe(true);
});

test("two sides that differ", () => {
  const clean = draw(scene, (x, y) => 1 + normalCdf(d(x, y) / (d(x, y) < 0 ? sigma : 1.8 * sigma)));
  const r = measured(measureTip(noisy(scene, clean, 0.015, makeRandom(5)), line, s));
  expect(codes(r).some((c) => c === "asymmetric" || c === "rim")).toBe(true);
  expect(r.sides.far.nm).toBeGreaterThan(r.sides.near.nm);
  expect(r.sides.pValue).toBeLessThan(0.001);
});

test("a step in height under the edge", () => {
  const amplitude = edgeScene(scene, 30, 15, 3);
  const random = makeRandom(6);
  const raster = (clean: Float64Array, sd: number) =>
    makeRaster(
      Float32Array.from(clean, (v) => v + sd * random.normal()),
      44,
      44,
      scene.pixel,
    );
  const flat = prepareTipImage(
    {
      amplitude: raster(amplitude, 0.03),
      phase: null,
      topography: raster(
        draw(scene, () => 0),
        0.3,
      ),
    },
    "amplitude",
  );
  const stepped = prepareTipImage(
    {
      amplitude: raster(amplitude, 0.03),
      phase: null,
      topography: raster(
        draw(scene, (x, y) => (d(x, y) > 0 ? 9 : 0)),
        0.3,
      ),
    },
    "amplitude",
  );
  if (flat === null || stepped === null) throw new Error("no image");
  expect(codes(measured(measureTip(flat, line, s)))).toEqual([]);
  const r = measured(measureTip(stepped, line, s));
  expect(codes(r)).toEqual(["relief"]);
  expect(r.height?.nm).toBeCloseTo(9, 0);
});

test("pixels coarser than half of the width", () => {
  const coarse: Scene = { rows: 40, cols: 40, pixel: { xNm: 18, yNm: 18 } };
  const image = noisy(coarse, edgeScene(coarse, 30, 20, 3), 0.02, makeRandom(7));
  const r = measured(measureTip(image, lineThrough(coarse, 200, 20, 120), s));
  expect(codes(r)).toContain("coarse-sampling");
  expect(Math.abs(r.fwhmNm - 30)).toBeLessThan(3 * r.sdNm);
});

test("a line that ends before the plateau", () => {
  const image = noisy(scene, edgeScene(scene, 30, 15, 3), 0.02, makeRandom(8));
  const m = middleOf(scene);
  const r = measured(
    measureTip(image, { from: { xNm: m.xNm - 120, yNm: m.yNm }, to: { xNm: m.xNm + 25, yNm: m.yNm }, widthNm: 60 }, s),
  );
  expect(codes(r)).toContain("short-line");
});

test("other structure beside the line: the interval is widened and that is said", () => {
  const clean = edgeScene(scene, 30, 15, 3);
  const messy = clean.map((v, k) => v + 0.25 * Math.sin((k % 44) * 0.55) * Math.cos(Math.floor(k / 44) * 0.6));
  const alone = measured(measureTip(noisy(scene, clean, 0.02, makeRandom(9)), line, s));
  const image = { ...noisy(scene, messy, 0.02, makeRandom(9)), noise: noisy(scene, clean, 0.02, makeRandom(9)).noise };
  const r = measured(measureTip(image, line, s, { model: "edge", sizeNm: null }));
  expect(codes(r)).toContain("poor-fit");
  expect(r.highNm - r.lowNm).toBeGreaterThan(2 * (alone.highNm - alone.lowNm));
});

test("amplitude alone where the optical phase turns: how far off it is, and the complex signal is right", () => {
  // amplitude 1 to 2.5 with a turn of 0.6 rad: the 10–90 width of |z| is 3.3 % below that of a pure step
  const random = makeRandom(10);
  const amplitude = new Float32Array(44 * 44);
  const phase = new Float32Array(44 * 44);
  const u = draw(scene, (x, y) => normalCdf(d(x, y) / sigma));
  for (let k = 0; k < u.length; k++) {
    const re = 1 - u[k] + u[k] * 2.5 * Math.cos(0.6) + 0.01 * random.normal();
    const im = u[k] * 2.5 * Math.sin(0.6) + 0.01 * random.normal();
    amplitude[k] = Math.hypot(re, im);
    phase[k] = Math.atan2(im, re);
  }
  const frame = {
    topography: null,
    amplitude: makeRaster(amplitude, 44, 44, scene.pixel),
    phase: makeRaster(phase, 44, 44, scene.pixel),
  };
  const alone = prepareTipImage(frame, "amplitude");
  const whole = prepareTipImage(frame, "complex");
  if (alone === null || whole === null) throw new Error("no image");
  const a = measured(measureTip(alone, line, s));
  const turns = a.warnings.find((w) => w.code === "phase-turns");
  expect(turns?.message).toMatch(/0\.(59|60|61) rad/);
  expect(turns?.message).toContain("-3 %");
  expect(a.fwhmNm / 30 - 1).toBeCloseTo(-0.033, 1);
  const c = measured(measureTip(whole, line, s));
  expect(Math.abs(c.fwhmNm - 30)).toBeLessThan(3 * c.sdNm);
  expect(c.sdNm).toBeLessThan(0.3);
  expect(codes(c)).toEqual([]);
});

test("noise that neighbours share: errors are as large as stated, and larger than for white noise", () => {
  const clean = edgeScene(scene, 30, 15, 3);
  let pull2 = 0;
  let stated = 0;
  const n = 60;
  for (let k = 0; k < n; k++) {
    const random = makeRandom(100 + k);
    const white = Float64Array.from({ length: 46 * 46 }, () => random.normal());
    // 3 × 3 mean, its variance kept
    const shared = clean.map((v, p) => {
      let sum = 0;
      for (let i = 0; i < 3; i++)
        for (let j = 0; j < 3; j++) sum += white[(Math.floor(p / 44) + i) * 46 + (p % 44) + j];
      return v + (0.05 * sum) / 3;
    });
    const r = measured(measureTip(noisy(scene, shared, 0, random), line, s, { model: "edge", sizeNm: null }));
    expect(codes(r)).toContain("correlated-noise");
    pull2 += ((r.fwhmNm - 30) / r.sdNm) ** 2 / n;
    stated += r.sdNm / n;
  }
  expect(Math.sqrt(pull2)).toBeGreaterThan(0.8);
  expect(Math.sqrt(pull2)).toBeLessThan(1.25);
  const alike = measured(measureTip(noisy(scene, clean, 0.05, makeRandom(99)), line, s));
  expect(stated).toBeGreaterThan(1.5 * alike.sdNm);
});

test("where nothing can be measured, it is said why", () => {
  const random = makeRandom(11);
  const flat = noisy(
    scene,
    draw(scene, () => 1),
    0.05,
    random,
  );
  expect(measureTip(flat, line, s)).toMatchObject({ status: "unusable", reason: "no-feature" });
  const image = noisy(scene, edgeScene(scene, 30, 15, 3), 0.02, random);
  expect(measureTip(image, { ...line, widthNm: 2 }, s)).toMatchObject({ status: "unusable", reason: "few-pixels" });
  expect(measureTip(image, { ...line, to: { xNm: 400, yNm: 100 } }, s)).toMatchObject({ reason: "outside" });
  const gone = {
    ...image,
    components: [image.components[0].map((v, k) => (Math.abs((k % 44) - 22) < 19 ? Number.NaN : v))],
  };
  expect(measureTip(gone, line, s)).toMatchObject({ status: "unusable", reason: "few-pixels" });
});

test("unmeasured pixels are left out, not filled in", () => {
  const clean = edgeScene(scene, 30, 15, 3);
  const image = noisy(scene, clean, 0.03, makeRandom(12));
  const holes = { ...image, components: [image.components[0].map((v, k) => (k % 3 === 0 ? Number.NaN : v))] };
  const all = measured(measureTip(image, line, s));
  const some = measured(measureTip(holes, line, s));
  expect(some.pixels).toBeLessThan(0.72 * all.pixels);
  expect(Math.abs(some.fwhmNm - 30)).toBeLessThan(3 * some.sdNm);
  expect(some.sdNm).toBeGreaterThan(1.1 * all.sdNm);
});

test("a disc on a wavy ground is still a disc", () => {
  const m = middleOf(scene);
  const disc = discScene(scene, 30, 70, m, -0.8);
  const image = noisy(
    scene,
    disc.map((v, k) => v + 0.004 * (k % 44)),
    0.03,
    makeRandom(13),
  );
  const r = measured(measureTip(image, line, s));
  expect(r.model).toBe("dot");
  expect(Math.abs(r.fwhmNm - 30)).toBeLessThan(3 * r.sdNm);
});
