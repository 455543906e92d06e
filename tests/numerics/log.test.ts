import { expect, test } from "vitest";
import { logsOf } from "../../src/numerics/log.js";
import { makeRandom } from "../../src/numerics/random.js";

test("logarithms of single-precision numbers are those of Math.log, rounded, over the whole range", () => {
  const random = makeRandom(5);
  const values = Float32Array.from({ length: 20_000 }, () => 2 ** (-126 + 253 * random.uniform()));
  values.set([1, 2, 0.5, Math.SQRT2, Math.SQRT1_2, 3.4028234663852886e38, 2 ** -126, 2 ** -140, 0.99999994, 1.0000001]);
  const logs = logsOf(values);
  values.forEach((v, p) => {
    const truth = Math.log(v);
    // half a unit in the last place of single precision is 6e-8
    expect(Math.abs(logs[p] - truth)).toBeLessThanOrEqual(7e-8 * Math.abs(truth));
  });
});

test("what has no logarithm gives NaN; infinity stays", () => {
  expect([...logsOf(Float32Array.from([0, -1, Number.NaN, -Infinity, Infinity]))]).toEqual([
    Number.NaN,
    Number.NaN,
    Number.NaN,
    Number.NaN,
    Infinity,
  ]);
});
