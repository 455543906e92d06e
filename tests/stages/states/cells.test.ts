import { describe, expect, test } from "vitest";
import { makeRandom } from "../../../src/numerics/random.js";
import { levelsOfCells } from "../../../src/stages/states/cell_levels.js";
import { cellsOf, seeSignal, SIDE } from "../../../src/stages/states/cells.js";
import { discreteGaussian } from "../../../src/stages/states/discrete_gaussian.js";
import type { Pixels } from "../../../src/stages/states/pixels.js";
import type { PureCells } from "../../../src/stages/states/pure.js";
import { firstLimits, residualsOf } from "../../../src/stages/states/residuals.js";

function made(rows: number, cols: number, value: (i: number, j: number) => [number, number], hidden = 0.05): Pixels {
  const random = makeRandom(3);
  const re = new Float32Array(rows * cols);
  const im = new Float32Array(rows * cols);
  const usable = new Uint8Array(rows * cols);
  let count = 0;
  for (let p = 0; p < re.length; p++) {
    if (random.uniform() < hidden) continue;
    usable[p] = 1;
    count++;
    [re[p], im[p]] = value(Math.floor(p / cols), p % cols);
  }
  return { rows, cols, pixel: { xNm: 10, yNm: 12 }, re, im, hasPhase: true, usable, count };
}

test.each([0, 0.05, 0.34, 0.94])("a discrete Gaussian of variance %f has that variance and sum 1", (variance) => {
  const k = discreteGaussian(variance, 12);
  const sum = k.reduce((a, v, n) => a + (n === 0 ? v : 2 * v), 0);
  const second = k.reduce((a, v, n) => a + 2 * n * n * v, 0);
  expect(sum).toBeCloseTo(1, 12);
  expect(second).toBeCloseTo(variance, 9);
});

describe("cells", () => {
  test("hold the sums of their pixels, at odd borders too", () => {
    const z = made(7, 9, (i, j) => [i + 0.1 * j, 2 - 0.3 * j]);
    const cells = cellsOf(z);
    expect([cells.rows, cells.cols]).toEqual([4, 5]);
    expect(cells.count.reduce((a, v) => a + v, 0)).toBe(z.count);
    const sum = (of: Float32Array): number => of.reduce((a, v) => a + v, 0);
    expect(sum(cells.re)).toBeCloseTo(sum(z.re), 3);
    expect(sum(cells.im)).toBeCloseTo(sum(z.im), 3);
  });
  test("smoothed, they have the whole blur asked for and go round gaps", () => {
    const by = { xPx: 1.3, yPx: 1.7 };
    const step = seeSignal(
      made(80, 80, (_, j) => [j < 40 ? 1 : 3, 0.5]),
      by,
    );
    // the slope of a blurred step, as a density of the place of the step: its variance is that of the blur
    let [sum, first, second] = [0, 0, 0];
    for (let j = 1; j < 40; j++) {
      const density = step.smoothRe[20 * 40 + j] - step.smoothRe[20 * 40 + j - 1];
      const x = SIDE * (j - 20);
      sum += density;
      first += density * x;
      second += density * x * x;
    }
    expect(sum).toBeCloseTo(2, 3);
    // with the box of the step's own sampling in cells, and what the gaps do
    expect(Math.sqrt(second / sum - (first / sum) ** 2)).toBeGreaterThan(1.2);
    expect(Math.sqrt(second / sum - (first / sum) ** 2)).toBeLessThan(1.5);
    for (const v of step.smoothIm) expect(v).toBeCloseTo(0.5, 5);
  });
});

test("levels, noise and its correlation come back from pure cells with a known tail, outliers left out", () => {
  const random = makeRandom(9);
  const [rows, cols] = [200, 200];
  const levels = [
    { re: 1, im: -0.2 },
    { re: 2, im: 0.7 },
  ] as const;
  const share = (j: number): number => (j < 100 ? 0.04 : 0.97);
  let lastRe = 0;
  const z = made(rows, cols, (i, j) => {
    const u = share(j);
    // along a row each pixel keeps 0.4 of the noise of the one before, along the real axis
    lastRe = 0.4 * lastRe + 0.05 * Math.sqrt(1 - 0.16) * random.normal();
    const off = i % 20 === 3 && j % 40 === 5 ? 3 : 0;
    return [
      (1 - u) * levels[0].re + u * levels[1].re + lastRe + off,
      (1 - u) * levels[0].im + u * levels[1].im + 0.02 * random.normal(),
    ];
  });
  const cells = cellsOf(z);
  const pure: PureCells = {
    cols: cells.cols,
    state: Uint8Array.from(cells.count, (_, c) => (SIDE * (c % cells.cols) < 100 ? 0 : 1)),
    share: Float32Array.from(cells.count, (_, c) => share(SIDE * (c % cells.cols))),
    count: [19_000, 19_000],
    tail: [0.04, 0.03],
    apparentWidthNm: 100,
  };
  const found = levelsOfCells(cells, pure);
  const { levels: fitted, noise, correlation } = residualsOf(z, pure, found.levels, firstLimits(0.004, found.variance));
  for (const k of [0, 1] as const) {
    expect(Math.abs(fitted[k].re - levels[k].re)).toBeLessThan(0.003);
    expect(Math.abs(fitted[k].im - levels[k].im)).toBeLessThan(0.001);
    expect(Math.sqrt(noise[k].rr) / 0.05).toBeCloseTo(1, 1);
    expect(Math.sqrt(noise[k].ii) / 0.02).toBeCloseTo(1, 1);
  }
  // 0.4 of the variance along the real axis, none of the one along the imaginary axis
  expect(correlation.x).toBeCloseTo((0.4 * 0.0025) / (0.0025 + 0.0004), 1);
  expect(Math.abs(correlation.y)).toBeLessThan(0.03);
});
