import { expect, test } from "vitest";
import { partialDensity, pureDensity } from "../../src/stages/states/mixture.js";
import { fixture } from "./fixture.js";

// Source: mpmath; Santago & Gage 1995, IEEE Trans. Image Process. 4, 1531. Levels 1 and 2.
const { columns, rows } = fixture<{ columns: string[]; rows: number[][] }>("mixture");
const column = (row: number[], name: string): number => row[columns.indexOf(name)];

test("densities of two pure states and of the wall between them", () => {
  let compared = 0;
  for (const row of rows) {
    const s = column(row, "noise");
    const v = column(row, "value");
    for (const [name, value] of [
      ["density_insulating", pureDensity(v, 1, s)],
      ["density_metallic", pureDensity(v, 2, s)],
      ["density_wall_uniform", partialDensity(v, 1, 2, s)],
    ] as const) {
      // 1e-12 relative, but for differences of two values near 1
      expect(Math.abs(value - column(row, name))).toBeLessThan(1e-12 * column(row, name) + 1e-15);
      compared++;
    }
  }
  expect(compared).toBeGreaterThan(50);
});
