import { expect, test } from "vitest";
import { makeRandom } from "../../src/numerics/random.js";
import { endsOf } from "../../src/raster/ends.js";

/** The same the slow way. */
function sorted(values: readonly number[]) {
  const finite = values.filter((v) => Number.isFinite(v)).toSorted((a, b) => a - b);
  const distinct = [...new Set(finite)];
  const count = (v: number | undefined): number => finite.filter((w) => w === v).length;
  return {
    measured: values.filter((v) => !Number.isNaN(v)).length,
    infinite: values.filter((v) => Math.abs(v) === Infinity).length,
    low: { value: distinct[0] ?? Infinity, count: count(distinct[0]), nextCount: count(distinct[1]) },
    high: { value: distinct.at(-1) ?? -Infinity, count: count(distinct.at(-1)), nextCount: count(distinct.at(-2)) },
  };
}

test("extreme values, how often they come, and the next ones inwards; without NaN and infinities", () => {
  const random = makeRandom(9);
  for (let k = 0; k < 300; k++) {
    const levels = 1 + random.below(6);
    const values = Array.from({ length: random.below(30) }, () => {
      const odd = random.uniform();
      return odd < 0.1 ? Number.NaN : odd < 0.15 ? Infinity : odd < 0.2 ? -Infinity : random.below(levels) - 2;
    });
    expect(endsOf(values)).toEqual(sorted(values));
  }
});
