import { describe, expect, test } from "vitest";
import { makeRandom } from "../../../src/numerics/random.js";
import { fitRows, offsetVariance, type RowMeasurements } from "../../../src/stages/states/row_smoother.js";

const ROWS = 200;

/** Row means of two states: `share(i)` of the weight of row i is the second state's. */
function measurements(
  offset: (i: number) => number,
  contrast: number,
  share: (i: number) => number,
  sd: number,
  seed: number,
): RowMeasurements {
  const random = makeRandom(seed);
  const m: RowMeasurements = {
    value: [new Float64Array(ROWS), new Float64Array(ROWS)],
    weight: [new Float64Array(ROWS), new Float64Array(ROWS)],
  };
  for (let i = 0; i < ROWS; i++) {
    for (const k of [0, 1] as const) {
      const part = k === 1 ? share(i) : 1 - share(i);
      if (part === 0) continue;
      m.weight[k][i] = part / (sd * sd);
      m.value[k][i] = offset(i) + k * contrast + (sd / Math.sqrt(part)) * random.normal();
    }
  }
  return m;
}

const rms = (values: readonly number[]): number => {
  const mean = values.reduce((a, b) => a + b, 0) / values.length;
  return Math.sqrt(values.reduce((a, b) => a + (b - mean) ** 2, 0) / values.length);
};

describe("row offsets with the contrast of two states", () => {
  test("line noise above the measurement is found, row by row", () => {
    const random = makeRandom(2);
    const truth = Float64Array.from({ length: ROWS }, () => 0.02 * random.normal());
    const fit = fitRows(
      measurements(
        (i) => truth[i],
        0,
        () => 0,
        0.005,
        3,
      ),
    );
    // a row known to 0.005 among offsets of 0.02 is left with 0.005·0.02/√(0.005² + 0.02²)
    expect(rms([...fit.offset].map((v, i) => v - truth[i]))).toBeLessThan(0.0056);
  });
  test("line noise far below it is left alone: no noise is added", () => {
    const rest: number[] = [];
    for (let seed = 0; seed < 10; seed++)
      rest.push(
        rms([
          ...fitRows(
            measurements(
              () => 0,
              0,
              () => 0,
              0.01,
              seed,
            ),
          ).offset,
        ]),
      );
    expect(rest.reduce((a, b) => a + b, 0) / 10).toBeLessThan(0.003);
  });
  test("states in different rows: the contrast comes back within its standard deviation, offsets do not eat it", () => {
    const pulls: number[] = [];
    for (let seed = 0; seed < 60; seed++) {
      const random = makeRandom(100 + seed);
      const truth = Float64Array.from({ length: ROWS }, () => 0.01 * random.normal());
      // insulating above, metallic below, ten rows that hold both
      const share = (i: number): number => (i < 95 ? 0 : i < 105 ? 0.5 : 1);
      const fit = fitRows(measurements((i) => truth[i], 0.3, share, 0.005, seed));
      pulls.push((fit.contrast - 0.3) / fit.contrastSd);
    }
    const mean = pulls.reduce((a, b) => a + b, 0) / pulls.length;
    expect(Math.abs(mean)).toBeLessThan(0.4);
    expect(rms(pulls)).toBeGreaterThan(0.75);
    expect(rms(pulls)).toBeLessThan(1.3);
  });
  test("a row without pixels takes its neighbours' walk, and has no part of its own", () => {
    const m = measurements(
      (i) => 0.001 * i,
      0,
      () => 0,
      0.002,
      9,
    );
    for (let i = 90; i < 100; i++) m.weight[0][i] = 0;
    const fit = fitRows(m);
    for (let i = 90; i < 100; i++) {
      const between = fit.offset[89] + ((i - 89) / 11) * (fit.offset[100] - fit.offset[89]);
      expect(Math.abs(fit.offset[i] - between)).toBeLessThan(0.004);
    }
  });
  test("variance of a sum of offsets: independent rows without a walk", () => {
    const c = new Float64Array(ROWS).fill(1);
    const sd = new Float64Array(ROWS).fill(0.01);
    // posterior of one row: 0.01²·0.02²/(0.01² + 0.02²)
    expect(offsetVariance(c, sd, 0, 0.02)).toBeCloseTo((ROWS * (1e-4 * 4e-4)) / 5e-4, 12);
    expect(offsetVariance(c, sd, 0, 0)).toBe(0);
  });
});
