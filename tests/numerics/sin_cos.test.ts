import { expect, test } from "vitest";
import { makeRandom } from "../../src/numerics/random.js";
import { sinCos } from "../../src/numerics/sin_cos.js";

test("sine and cosine together agree with Math's, in every quadrant and far out", () => {
  const random = makeRandom(5);
  const out = new Float64Array(2);
  const angles = [0, -0, Math.PI / 4, -Math.PI / 4, Math.PI / 2, Math.PI, -Math.PI, 3 * Math.PI];
  for (let k = 0; k < 20_000; k++) angles.push(20 * random.normal(), 1e5 * (2 * random.uniform() - 1));
  let worst = 0;
  for (const x of angles) {
    sinCos(x, out);
    worst = Math.max(worst, Math.abs(out[0] - Math.sin(x)), Math.abs(out[1] - Math.cos(x)));
  }
  expect(worst).toBeLessThan(2e-10);
  for (const x of [Number.NaN, Infinity]) {
    sinCos(x, out);
    expect(out[0]).toBeNaN();
    expect(out[1]).toBeNaN();
  }
});
