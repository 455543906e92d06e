import { expect, test } from "vitest";
import { makeRandom } from "../../../src/numerics/random.js";
import { chordOf } from "../../../src/stages/fringes/chord.js";
import { Local } from "../../../src/stages/fringes/local.js";
import { referenceRows } from "../../../src/stages/fringes/reference_rows.js";
import { straightWall } from "./straight_wall.js";

const ROWS = 160;
const COLS = 160;
const PIXEL_NM = 10;
const FAR_NM = 125;

/** A frame whose rows have taken the mean of what stands in them far from the wall for their own offset; slope of what is left in the rows against
 *  that mean, before and after, and what is left in them, rms. */
function rowsLeft(fringeRad: number, rowSdRad: number, seed: number): { before: number; after: number; left: number } {
  const chord = chordOf(straightWall({}).states.levels);
  if (chord === null) throw new Error("no chord");
  const local = new Local(chord, { wNm: 40, sigmaNm: 13 }, 600);
  const random = makeRandom(seed);
  const angle = (35 * Math.PI) / 180;
  const n = ROWS * COLS;
  const across = new Float32Array(n);
  const distanceNm = new Float32Array(n);
  const truth = new Float64Array(n);
  const offsets = new Float64Array(ROWS);
  for (let i = 0; i < ROWS; i++) {
    let [sum, many] = [0, 0];
    for (let j = 0; j < COLS; j++) {
      const p = i * COLS + j;
      const d = ((j - COLS / 2) * Math.cos(angle) + (i - ROWS / 2) * Math.sin(angle)) * PIXEL_NM;
      distanceNm[p] = d;
      const phi = d > 0 ? fringeRad * Math.cos((2 * Math.PI * d) / 160 - 1.3) * Math.exp(-d / 250) : 0;
      truth[p] = phi * local.along(d);
      if (Math.abs(d) <= FAR_NM) continue;
      sum += phi;
      many++;
    }
    offsets[i] = rowSdRad * random.normal() - sum / many;
    for (let j = 0; j < COLS; j++) {
      const p = i * COLS + j;
      const d = distanceNm[p];
      across[p] = truth[p] + offsets[i] * local.along(d) + local.sd(d) * random.normal();
    }
  }
  const grid = { across, distanceNm, trusted: new Uint8Array(n).fill(1), rows: ROWS, cols: COLS };
  const found = referenceRows(grid, local, 10, 600);
  const rowMeans = (v: Float32Array): number[] =>
    Array.from(offsets, (_, i) => {
      let [sum, weight] = [0, 0];
      for (let p = i * COLS; p < (i + 1) * COLS; p++) {
        const a = local.along(distanceNm[p]);
        sum += (v[p] - truth[p]) * a;
        weight += a * a;
      }
      return sum / weight;
    });
  const slope = (v: readonly number[]): number =>
    v.reduce((s, x, i) => s + x * offsets[i], 0) / offsets.reduce((s, x) => s + x * x, 0);
  const after = rowMeans(found.across);
  return {
    before: slope(rowMeans(across)),
    after: slope(after),
    left: Math.sqrt(after.reduce((s, x) => s + x * x, 0) / ROWS),
  };
}

test("rows that took a fringe's mean for their own offset get it back, and with it their own errors go", () => {
  for (let seed = 1; seed <= 4; seed++) {
    const { before, after } = rowsLeft(0.35, 0.01, seed);
    expect(before).toBeGreaterThan(0.9);
    expect(Math.abs(after)).toBeLessThan(0.2);
  }
});

test("without a fringe rows are left with less than they had", () => {
  for (let seed = 1; seed <= 4; seed++) expect(rowsLeft(0, 0.02, seed).left).toBeLessThan(0.006);
});
