import { describe, expect, test } from "vitest";
import { makeRaster } from "../../../src/model/raster.js";
import { defaultsOf } from "../../../src/model/settings.js";
import type { WallProfile } from "../../../src/model/walls.js";
import { fitWalls, settings } from "../../../src/stages/walls/index.js";
import { disc, makeFrame, mean, sd, straight, type MadeFrame, type Recipe } from "./made_frame.js";

const s = defaultsOf(settings);
const tip = { resolutionNm: 30, resolutionSdNm: 0 };

/** Sound profiles of straight walls at angles spread evenly over the circle. */
function straightWalls(recipe: Omit<Recipe, "distance" | "seed">, frames: number, tipUsed = tip): WallProfile[] {
  const out: WallProfile[] = [];
  for (let k = 0; k < frames; k++) {
    const { rows = 96, cols = 96, pixel = { xNm: 10, yNm: 10 } } = recipe;
    const distance = straight((cols / 2) * pixel.xNm + 3 * k, (rows / 2) * pixel.yNm - 5 * k, 137.508 * k);
    const { signal, states } = makeFrame({ ...recipe, distance, seed: 100 + k });
    out.push(...fitWalls(signal, states, tipUsed, s).profiles);
  }
  return out.filter((p) => p.flag === "");
}
const widths = (v: readonly WallProfile[]): number[] => v.flatMap((p) => (p.widthNm === null ? [] : [p.widthNm]));
const pulls = (v: readonly WallProfile[], truth: number): number[] =>
  v.flatMap((p) => (p.widthNm === null || p.widthSdNm === null ? [] : [(p.widthNm - truth) / p.widthSdNm]));

describe("widths are right, and so are their standard deviations", () => {
  test.each([
    { widthNm: 30, noise: 0.05 },
    { widthNm: 60, noise: 0.1 },
    { widthNm: 120, noise: 0.1 },
    { widthNm: 240, noise: 0.05, rows: 160, cols: 160 },
    { widthNm: 45, noise: 0.05, pixel: { xNm: 18, yNm: 18 }, rows: 64, cols: 64 },
    { widthNm: 45, noise: 0.05, pixel: { xNm: 8, yNm: 14 }, rows: 70, cols: 110 },
    { widthNm: 60, noise: 0.05, phase: false },
  ])("$widthNm nm, noise $noise, pixels $pixel.xNm × $pixel.yNm", (c) => {
    const found = straightWalls(c, c.rows === 160 ? 12 : 24);
    const pull = pulls(found, c.widthNm);
    const n = pull.length;
    expect(n).toBeGreaterThan(150);
    const bias = mean(widths(found)) / c.widthNm - 1;
    const scatter = sd(widths(found)) / c.widthNm;
    expect(Math.abs(bias)).toBeLessThan(0.012 + (3 * scatter) / Math.sqrt(n));
    expect(Math.abs(mean(pull))).toBeLessThan(0.15 + 3 / Math.sqrt(n));
    expect(sd(pull)).toBeGreaterThan(0.85);
    expect(sd(pull)).toBeLessThan(1.15);
    const inside = pull.filter((x) => Math.abs(x) < 1.96).length / n;
    expect(inside).toBeGreaterThan(0.95 - 4 * Math.sqrt((0.95 * 0.05) / n));
    expect(mean(found.map((p) => p.reducedChi2 ?? Number.NaN))).toBeCloseTo(1, 1);
  });

  test("half the tip's width at low noise: within 5 %", () => {
    const found = straightWalls({ widthNm: 15, noise: 0.015 }, 16);
    expect(found.filter((p) => p.resolved).length / found.length).toBeGreaterThan(0.99);
    expect(Math.abs(mean(widths(found)) / 15 - 1)).toBeLessThan(0.05);
    expect(Math.abs(mean(pulls(found, 15)))).toBeLessThan(0.15 + 3 / Math.sqrt(found.length));
  });

  test("noise that is correlated along the fast axis is in the standard deviation", () => {
    const pull = pulls(straightWalls({ widthNm: 60, noise: 0.06, rhoX: 0.6 }, 30), 60);
    expect(sd(pull)).toBeGreaterThan(0.85);
    expect(sd(pull)).toBeLessThan(1.15);
    expect(Math.abs(mean(pull))).toBeLessThan(0.15 + 3 / Math.sqrt(pull.length));
  });
});

describe("walls too sharp to tell", () => {
  test("a width of 0 is called resolved in 5 %, and has an upper limit above 0 and no width", () => {
    const found = straightWalls({ widthNm: 0, noise: 0.06 }, 40);
    const n = found.length;
    expect(n).toBeGreaterThan(600);
    const resolved = found.filter((p) => p.resolved).length / n;
    expect(resolved).toBeLessThan(0.05 + 3 * Math.sqrt((0.05 * 0.95) / n));
    expect(resolved).toBeGreaterThan(0.01);
    for (const p of found) {
      expect(p.resolved).toBe(p.widthNm !== null);
      expect(p.widthUpper95Nm).toBeGreaterThan(0);
    }
    // 30 nm × 2·Φ⁻¹(0.9)/(2√(2 ln 2)) = 32.653 nm: seen as it is, not cut off at the tip
    expect(Math.abs(mean(found.map((p) => p.apparentWidthNm ?? Number.NaN)) - 32.653)).toBeLessThan(0.35);
  });

  test.each([7, 14, 21])("the upper limit holds a true width of %i nm in 95 % of the cases", (widthNm) => {
    const found = straightWalls({ widthNm, noise: 0.06 }, 24);
    const holds = found.filter((p) => (p.widthUpper95Nm ?? 0) >= widthNm).length / found.length;
    expect(holds).toBeGreaterThan(0.95 - 3.5 * Math.sqrt((0.95 * 0.05) / found.length));
  });

  test("doubling the tip's uncertainty widens limits, makes fewer walls resolved and leaves the widths alone", () => {
    const at = (resolutionSdNm: number): WallProfile[] =>
      straightWalls({ widthNm: 30, noise: 0.04 }, 4, { resolutionNm: 30, resolutionSdNm });
    const [none, some, more] = [at(0), at(2), at(4)];
    const upper = (v: readonly WallProfile[]): number => mean(v.map((p) => p.widthUpper95Nm ?? Number.NaN));
    expect(upper(some)).toBeGreaterThan(upper(none) + 0.5);
    expect(upper(more)).toBeGreaterThan(upper(some) + 1);
    none.forEach((p, k) => {
      if (more[k].widthNm !== null) expect(more[k].widthNm).toBe(p.widthNm);
      if (some[k].widthSdTipNm !== null && more[k].widthSdTipNm !== null) {
        expect(more[k].widthSdTipNm / some[k].widthSdTipNm).toBeCloseTo(2, 9);
      }
    });
  });
});

describe("fringes beside the wall", () => {
  test.each(["metallic", "insulating"] as const)("a phase fringe on the %s side does not bend the width", (side) => {
    const profile = fringedProfile(60, 0.15, side);
    const found = straightWalls({ widthNm: 60, noise: 0.05, profile }, 20);
    // the chord alone is off by 5 to 10 % here
    expect(Math.abs(mean(widths(found)) / 60 - 1)).toBeLessThan(0.02);
    expect(sd(pulls(found, 60))).toBeLessThan(1.15);
  });
  test("a strong fringe that reaches far beyond the wall's own width does not, either", () => {
    const profile = fringedProfile(100, 0.35, "metallic", { periodNm: 160, decayNm: 250 });
    const found = straightWalls({ widthNm: 100, noise: 0.05, profile, rows: 128, cols: 128 }, 12);
    // with its turn unknown beyond twice the width seen first, walls read 3 % and more too narrow
    expect(Math.abs(mean(widths(found)) / 100 - 1)).toBeLessThan(0.015);
    expect(Math.abs(mean(pulls(found, 100)))).toBeLessThan(0.3);
  });
});

describe("symmetries and conventions", () => {
  const distance = (x: number, y: number): number => straight(500, 430, 35)(x, y) + 15 * Math.sin(y / 120);
  const recipe: Recipe = { distance, widthNm: 50, noise: 0.04, seed: 9 };
  const frame = makeFrame(recipe);
  const plain = fitWalls(frame.signal, frame.states, tip, s);

  test.each(["transposed", "mirrored", "turned"] as const)("the same when the frame is %s", (how) => {
    const moved = rearranged(frame, how);
    const other = fitWalls(moved.signal, moved.states, tip, s);
    expect(other.wallLengthNm / plain.wallLengthNm).toBeCloseTo(1, 3);
    expect(other.profiles.length).toBe(plain.profiles.length);
    const sorted = (v: readonly WallProfile[]): number[] => widths(v).sort((a, b) => a - b);
    const a = sorted(plain.profiles);
    const b = sorted(other.profiles);
    // the line is resampled from its other end, which moves stretches by a fraction of a pixel
    expect(Math.abs(mean(a) / mean(b) - 1)).toBeLessThan(0.01);
  });

  test("y grows with the row index in nm, yet normal_deg turns anticlockwise with y up", () => {
    for (const angle of [0, 40, 90, 170, -60]) {
      const { signal, states } = makeFrame({ distance: straight(480, 480, angle), widthNm: 40, noise: 0.01, seed: 1 });
      for (const p of fitWalls(signal, states, tip, s).profiles.filter((q) => q.flag === "")) {
        const off = ((p.normalDeg - angle + 540) % 360) - 180;
        expect(Math.abs(off)).toBeLessThan(3);
        expect(Math.abs(straight(480, 480, angle)(p.xNm, p.yNm))).toBeLessThan(1);
      }
    }
  });

  test("levels come back as amplitudes of the two states", () => {
    const sound = plain.profiles.filter((p) => p.flag === "");
    expect(mean(sound.map((p) => p.amplitudeInsulating ?? 0))).toBeCloseTo(1, 1);
    expect(mean(sound.map((p) => p.amplitudeMetallic ?? 0))).toBeCloseTo(2.2, 1);
  });
});

describe("flagged or right", () => {
  test("two walls closer than two apparent widths are flagged; farther ones are not, and unbiased", () => {
    const at = (halfNm: number): WallProfile[] => {
      const out: WallProfile[] = [];
      for (let k = 0; k < 6; k++) {
        const middle = straight(480 + 3 * k, 480, 20 * k);
        const distance = (x: number, y: number): number => halfNm - Math.abs(middle(x, y));
        const { signal, states } = makeFrame({ distance, widthNm: 40, noise: 0.04, seed: k });
        out.push(...fitWalls(signal, states, tip, s).profiles);
      }
      return out;
    };
    const near = at(40);
    expect(near.filter((p) => p.flag === "").length / near.length).toBeLessThan(0.02);
    const far = at(85).filter((p) => p.flag === "");
    expect(far.length).toBeGreaterThan(100);
    expect(Math.abs(mean(widths(far)) / 40 - 1)).toBeLessThan(0.02);
  });

  test.each([60, 100, 160])("discs of radius %i nm: what is not flagged is unbiased", (radius) => {
    const found: WallProfile[] = [];
    for (let k = 0; k < 10; k++) {
      const { signal, states } = makeFrame({
        distance: disc(480 + k, 470 - 2 * k, radius),
        widthNm: 30,
        noise: 0.04,
        seed: k,
      });
      found.push(...fitWalls(signal, states, tip, s).profiles);
    }
    const sound = found.filter((p) => p.flag === "");
    if (radius > 80) expect(sound.length / found.length).toBeGreaterThan(0.8);
    if (sound.length > 20) expect(Math.abs(mean(pulls(sound, 30)))).toBeLessThan(0.25 + 3 / Math.sqrt(sound.length));
  });

  test("without a tip there is an apparent width and a limit, and no intrinsic one", () => {
    const { signal, states } = makeFrame({ distance: straight(480, 480, 10), widthNm: 60, noise: 0.04, seed: 4 });
    const found = fitWalls(signal, states, null, s).profiles.filter((p) => p.flag === "");
    expect(found.length).toBeGreaterThan(8);
    for (const p of found) {
      expect(p.widthNm).toBeNull();
      expect(p.resolved).toBe(false);
      expect(p.widthUpper95Nm).toBeGreaterThan(p.apparentWidthNm ?? Number.NaN);
    }
    // 60 nm through 30 nm is seen as 68.9 nm
    expect(Math.abs(mean(found.map((p) => p.apparentWidthNm ?? 0)) / 68.9 - 1)).toBeLessThan(0.02);
  });
});

/** z against distance with a fringe on one side, blurred by the tip: trapezoid sum, tabulated every 0.5 nm. */
function fringedProfile(
  widthNm: number,
  amplitudeRad: number,
  side: "metallic" | "insulating",
  { periodNm, decayNm } = { periodNm: 240, decayNm: 150 },
): (d: number) => readonly [number, number] {
  const w = widthNm / Math.log(9);
  const sigma = 30 / (2 * Math.sqrt(2 * Math.LN2));
  const sharp = (d: number): [number, number] => {
    const u = 0.5 * (1 + Math.tanh(d / w));
    const re = 1 - u + u * 2.2 * Math.cos(0.6);
    const im = u * 2.2 * Math.sin(0.6);
    const x = side === "metallic" ? d : -d;
    const f = x < 0 ? 0 : amplitudeRad * Math.cos((2 * Math.PI * x) / periodNm - 1.3) * Math.exp(-x / decayNm);
    return [re * Math.cos(f) - im * Math.sin(f), re * Math.sin(f) + im * Math.cos(f)];
  };
  const step = 0.5;
  const half = 1400;
  const n = Math.round((2 * half) / step) + 1;
  const re = new Float64Array(n);
  const im = new Float64Array(n);
  const kernel = Array.from({ length: 141 }, (_, k) => Math.exp(-(((k - 70) / 10) ** 2) / 2));
  const total = kernel.reduce((a, b) => a + b, 0);
  for (let k = 0; k < n; k++) {
    for (let q = 0; q < kernel.length; q++) {
      const [a, b] = sharp(-half + k * step + ((q - 70) / 10) * sigma);
      re[k] += (kernel[q] * a) / total;
      im[k] += (kernel[q] * b) / total;
    }
  }
  return (d: number): readonly [number, number] => {
    const x = Math.min(n - 1.001, Math.max(0, (d + half) / step));
    const k = Math.floor(x);
    const t = x - k;
    return [re[k] * (1 - t) + re[k + 1] * t, im[k] * (1 - t) + im[k + 1] * t];
  };
}

function rearranged(f: MadeFrame, how: "transposed" | "mirrored" | "turned"): MadeFrame {
  const { rows, cols } = f.signal;
  const outRows = how === "mirrored" ? rows : cols;
  const outCols = how === "mirrored" ? cols : rows;
  const from = (i: number, j: number): number => {
    if (how === "mirrored") return i * cols + (cols - 1 - j);
    if (how === "transposed") return j * cols + i;
    return j * cols + (cols - 1 - i);
  };
  const fill = <T extends Float32Array | Uint8Array>(v: T, out: T): T => {
    for (let i = 0; i < outRows; i++) for (let j = 0; j < outCols; j++) out[i * outCols + j] = v[from(i, j)];
    return out;
  };
  const moveReal = (v: Float32Array): Float32Array => fill(v, v.slice());
  const moveBytes = (v: Uint8Array): Uint8Array => fill(v, v.slice());
  const share = f.states.share;
  return {
    signal: {
      ...f.signal,
      rows: outRows,
      cols: outCols,
      re: moveReal(f.signal.re),
      im: f.signal.im === null ? null : moveReal(f.signal.im),
      usable: moveBytes(f.signal.usable),
    },
    states: {
      ...f.states,
      share: makeRaster(moveReal(share.values.data), outRows, outCols, share.pixel),
      map: { ...f.states.map, rows: outRows, cols: outCols, states: moveBytes(f.states.map.states) },
    },
  };
}
