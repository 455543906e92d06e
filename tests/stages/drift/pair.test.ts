import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import { makeRandom } from "../../../src/numerics/random.js";
import { measurePair, prepareForDrift, type MeasuredShift } from "../../../src/stages/drift/index.js";
import { settings } from "../../../src/stages/drift/settings.js";
import { blemish, bound, makeScene, topographyFrame, type Blemishes, type Scene } from "./scene.js";

const s = defaultsOf(settings);
const square = { xNm: 10, yNm: 10 };

interface Shot {
  readonly scene: Scene;
  readonly rows: number;
  readonly cols: number;
  readonly pixel: { readonly xNm: number; readonly yNm: number };
  readonly blemishes: Blemishes;
}

function pairOf(shot: Shot, shiftNm: { x: number; y: number }, seed: number, other: Scene = shot.scene) {
  const { scene, rows, cols, pixel, blemishes } = shot;
  const image = (from: Scene, k: number, x: number, y: number) =>
    prepareForDrift(
      topographyFrame(
        k,
        blemish(from.render(rows, cols, pixel, x, y), rows, cols, seed + k, blemishes),
        rows,
        cols,
        pixel,
      ),
      s,
    );
  return measurePair(image(scene, 0, 0, 0), image(other, 1, shiftNm.x, shiftNm.y), null, s);
}

function measured(shot: Shot, shiftNm: { x: number; y: number }, seed = 1): MeasuredShift {
  const pair = pairOf(shot, shiftNm, seed);
  if (pair.status === "failed") throw new Error(pair.reason);
  return pair;
}

describe("one pair", () => {
  const scene = makeScene({ seed: 4 });
  const shot = { scene, rows: 96, cols: 110, pixel: square, blemishes: {} };

  test("without noise: the place of the moving window in the sample, to 1e-4 px, at any fraction and over large jumps", () => {
    for (const [x, y] of [
      [0, 0],
      [2.5, -5],
      [33.3, 71.9],
      [-380, 290],
    ] as const) {
      const p = measured(shot, { x, y });
      expect(p.status).toBe("ok");
      expect(Math.abs(p.xNm - x)).toBeLessThan(1e-3);
      expect(Math.abs(p.yNm - y)).toBeLessThan(1e-3);
    }
  });

  test("pixels of unequal sides: lengths come in nm", () => {
    const p = measured({ ...shot, pixel: { xNm: 8, yNm: 14 } }, { x: 101.3, y: -77.7 });
    expect(p.xNm).toBeCloseTo(101.3, 2);
    expect(p.yNm).toBeCloseTo(-77.7, 2);
  });

  test("line offsets, tilt and bow of either frame move nothing", () => {
    const rows = 96;
    const cols = 110;
    const a = scene.render(rows, cols, square, 0, 0);
    const b = scene.render(rows, cols, square, 43, -27);
    const random = makeRandom(8);
    for (let i = 0; i < rows; i++) {
      const offset = 3 * random.normal();
      for (let j = 0; j < cols; j++) {
        b[i * cols + j] += offset + 0.01 * j - 0.02 * i + 1e-4 * j * j + 5e-5 * i * j;
      }
    }
    const p = measurePair(
      prepareForDrift(topographyFrame(0, a, rows, cols, square), s),
      prepareForDrift(topographyFrame(1, b, rows, cols, square), s),
      null,
      s,
    );
    if (p.status === "failed") throw new Error(p.reason);
    expect(Math.abs(p.xNm - 43)).toBeLessThan(0.02);
    expect(Math.abs(p.yNm + 27)).toBeLessThan(0.02);
  });

  test("a prediction that is wrong changes nothing", () => {
    const image = (k: number, x: number) =>
      prepareForDrift(topographyFrame(k, scene.render(96, 110, square, x, 0), 96, 110, square), s);
    const [a, b] = [image(0, 0), image(1, 60)];
    expect(measurePair(a, b, { xNm: -300, yNm: 200 }, s)).toEqual(measurePair(a, b, null, s));
  });

  test("a frame of nothing fails with a reason, without numbers", () => {
    const flat = prepareForDrift(topographyFrame(1, new Float32Array(96 * 110).fill(2), 96, 110, square), s);
    const good = prepareForDrift(topographyFrame(0, scene.render(96, 110, square, 0, 0), 96, 110, square), s);
    expect(measurePair(good, flat, null, s)).toEqual({ reference: 0, moving: 1, status: "failed", reason: "no-peak" });
  });

  test("strictly periodic structure is called ambiguous", () => {
    const wave = (x0: number): Float32Array =>
      Float32Array.from({ length: 96 * 110 }, (_, p) => {
        const x = (p % 110) + x0;
        const y = Math.floor(p / 110);
        return Math.cos((2 * Math.PI * x) / 11) + Math.cos((2 * Math.PI * y) / 13);
      });
    const [a, b] = [0, 2.3].map((x, k) => prepareForDrift(topographyFrame(k, wave(x), 96, 110, square), s));
    expect(measurePair(a, b, null, s).status).not.toBe("ok");
  });
});

describe("errors are small and known", () => {
  test.each([
    ["moderate noise", { noise: 0.3 }, 40, 0.25],
    ["noise as high as the structure", { noise: 1 }, 40, 0.25],
    ["line noise, gaps and scars", { noise: 0.3, rowNoise: 0.5, missingRows: 3, scars: 4 }, 40, 0.25],
    ["small overlaps", { noise: 0.3, rowNoise: 0.2 }, 30, 0.4],
  ] as const)(
    "%s: within 1.5 of the Cramér–Rao bound, error over standard deviation near 1",
    (_, blemishes, lengthNm, jump) => {
      const scene = makeScene({ seed: 6, lengthNm, waves: 90 });
      const random = makeRandom(21);
      const shot = { scene, rows: 96, cols: 96, pixel: square, blemishes };
      const trials = 36;
      let error = 0;
      let limit = 0;
      let pull = 0;
      for (let k = 0; k < trials; k++) {
        const d = { x: 960 * jump * (2 * random.uniform() - 1), y: 960 * jump * (2 * random.uniform() - 1) };
        const p = measured(shot, d, 10 + 2 * k);
        const [ex, ey] = [p.xNm - d.x, p.yNm - d.y];
        error += ex * ex + ey * ey;
        pull += ((ex * ex) / p.xxNm2 + (ey * ey) / p.yyNm2) / (2 * trials);
        const b = bound(scene, 96, 96, square, blemishes.noise, { x: 0, y: 0 }, d);
        // of pixels that both frames measured
        const both = (1 - (blemishes.missingRows ?? 0) / 96) ** 2;
        limit += (b.x * b.x + b.y * b.y) / both;
      }
      expect(Math.sqrt(error / limit)).toBeLessThan(1.5);
      expect(Math.sqrt(pull)).toBeGreaterThan(0.75);
      expect(Math.sqrt(pull)).toBeLessThan(1.25);
    },
  );
});

describe("no wrong peak goes unnoticed", () => {
  test("500 frames with jumps up to 40 % of the window along both axes, noise, line noise, gaps, scars and particles", () => {
    const random = makeRandom(31);
    let answered = 0;
    for (let k = 0; k < 500; k++) {
      // a new place of the sample every ten pairs
      const scene = makeScene({
        seed: Math.floor(k / 10),
        waves: 50,
        lengthNm: 25 + 3 * (k % 7),
        particles: 30,
        fieldNm: 900,
      });
      const shot = {
        scene,
        rows: 64,
        cols: 64,
        pixel: square,
        blemishes: { noise: 0.2 + 0.2 * (k % 4), rowNoise: 0.3, missingRows: k % 3, scars: k % 4 },
      };
      const d = { x: 256 * (2 * random.uniform() - 1), y: 256 * (2 * random.uniform() - 1) };
      const p = pairOf(shot, d, 3 * k);
      if (p.status !== "ok") continue;
      answered++;
      expect(Math.hypot(p.xNm - d.x, p.yNm - d.y)).toBeLessThan(10);
    }
    expect(answered).toBeGreaterThan(400);
  });

  test("two places of the sample that share nothing are never called a match", () => {
    for (let k = 0; k < 60; k++) {
      const [a, b] = [0, 1].map((q) => makeScene({ seed: 500 + 2 * k + q, waves: 50, particles: 30, fieldNm: 900 }));
      const shot = { scene: a, rows: 64, cols: 64, pixel: square, blemishes: { noise: 0.3, rowNoise: 0.3 } };
      expect(pairOf(shot, { x: 0, y: 0 }, 7 * k, b).status).not.toBe("ok");
    }
  });
});
