import { describe, expect, test } from "vitest";
import { distanceMap } from "../../src/demo/distance.js";
import { latticeField, type Field } from "../../src/demo/lattice_field.js";
import { findLevelSet, type FieldGrid } from "../../src/demo/level_set.js";

function gridFrom(field: Field, threshold: number, n: number, cell: number): FieldGrid {
  const values = new Float64Array(n * n);
  const sample = field.sampler(0, cell, n);
  for (let i = 0; i < n; i++) sample(i * cell, values.subarray(i * n, (i + 1) * n));
  for (let k = 0; k < values.length; k++) values[k] -= threshold;
  return { values, nx: n, ny: n, x0: 0, y0: 0, dx: cell, dy: cell };
}

const disc = (x: number, y: number, r: number): Field => ({
  sampler: (x0, dx, n) => (py, out) => {
    // A cone would have a corner in its middle: this one is smooth, and zero on the circle.
    for (let k = 0; k < n; k++) out[k] = r * r - (x0 + k * dx - x) ** 2 - (py - y) ** 2;
  },
});

function valueAt(field: Field, x: number, y: number): number {
  const out = new Float64Array(1);
  field.sampler(x, 1, 1)(y, out);
  return out[0];
}

describe("the random field", () => {
  test("has mean 0, variance 1, normal tails and the stated correlation", () => {
    const c = 10;
    const n = 500;
    let s1 = 0;
    let s2 = 0;
    let s4 = 0;
    let lag = 0;
    let count = 0;
    for (let seed = 1; seed <= 6; seed++) {
      const g = gridFrom(latticeField([{ seed, weight: 1 }], c), 0, n, 10).values;
      for (let i = 0; i < n; i++)
        for (let j = 0; j + 2 < n; j++) {
          const v = g[i * n + j];
          s1 += v;
          s2 += v * v;
          s4 += v ** 4;
          lag += v * g[i * n + j + 2];
          count++;
        }
    }
    // Integral range of the correlation is 4πc²: 1.5e6 points of pitch c hold 1.2e5 independent ones: sd of the mean 0.003.
    expect(Math.abs(s1 / count)).toBeLessThan(0.012);
    expect(s2 / count).toBeCloseTo(1, 1.7);
    expect(s4 / count / (s2 / count) ** 2).toBeCloseTo(3, 0.9);
    expect(lag / count).toBeCloseTo(Math.exp(-1), 1.7);
  });

  test("is one function of the plane: the same value whatever grid asks for it", () => {
    const field = latticeField(
      [
        { seed: 3, weight: 0.8 },
        { seed: 4, weight: 0.6 },
      ],
      170,
    );
    const out = new Float64Array(40);
    field.sampler(-5000.3, 3.7, 40)(812.9, out);
    for (const k of [0, 13, 39]) expect(out[k]).toBeCloseTo(valueAt(field, -5000.3 + 3.7 * k, 812.9), 12);
  });
});

describe("the level set", () => {
  test("lies on the field's true zero line, a random field's too", () => {
    const field = latticeField([{ seed: 11, weight: 1 }], 160);
    const set = findLevelSet(gridFrom(field, 0.2, 200, 10));
    expect(set.count).toBeGreaterThan(500);
    let worstEnd = 0;
    let worstMiddle = 0;
    for (let p = 0; p < set.count; p += 7) {
      // In the outermost cells there is no cubic.
      const row = Math.floor(set.cells[p] / 200);
      const col = set.cells[p] % 200;
      if (Math.min(row, col) < 2 || Math.max(row, col) > 196) continue;
      const [x1, y1, x2, y2] = set.pieces.subarray(4 * p, 4 * p + 4);
      const off = (x: number, y: number): number => {
        const e = 0.01;
        const gx = (valueAt(field, x + e, y) - valueAt(field, x - e, y)) / (2 * e);
        const gy = (valueAt(field, x, y + e) - valueAt(field, x, y - e)) / (2 * e);
        return Math.abs(valueAt(field, x, y) - 0.2) / Math.hypot(gx, gy);
      };
      worstEnd = Math.max(worstEnd, off(x1, y1), off(x2, y2));
      worstMiddle = Math.max(worstMiddle, off((x1 + x2) / 2, (y1 + y2) / 2));
    }
    // Nanometres, of cells of 10.
    expect(worstEnd).toBeLessThan(0.02);
    expect(worstMiddle).toBeLessThan(0.15);
  });

  test("of a disc is one closed line of the right length", () => {
    const set = findLevelSet(gridFrom(disc(503.1, 497.7, 200), 0, 100, 10));
    let length = 0;
    for (let p = 0; p < set.count; p++) {
      const [x1, y1, x2, y2] = set.pieces.subarray(4 * p, 4 * p + 4);
      length += Math.hypot(x2 - x1, y2 - y1);
      expect(Math.min(set.links[2 * p], set.links[2 * p + 1])).toBeGreaterThanOrEqual(0);
    }
    expect(length).toBeCloseTo(2 * Math.PI * 200, 1);
    let at = 0;
    let from = -1;
    let steps = 0;
    do {
      const next = set.links[2 * at] === from ? set.links[2 * at + 1] : set.links[2 * at];
      from = at;
      at = next;
      steps++;
    } while (at !== 0);
    expect(steps).toBe(set.count);
  });
});

describe("distances", () => {
  test("of a disc are exact everywhere", () => {
    const grid = gridFrom(disc(503.1, 497.7, 200), 0, 100, 10);
    const map = distanceMap(grid, findLevelSet(grid));
    const out = new Float64Array(140);
    for (const y of [12.3, 301.7, 497.7, 711]) {
      map.row(y, 8.1, 7, 140, Number.POSITIVE_INFINITY, out);
      for (let k = 0; k < 140; k++) {
        const true_ = Math.abs(Math.hypot(8.1 + 7 * k - 503.1, y - 497.7) - 200);
        // A chord of half a cell's diagonal stands 0.03 nm off its circle.
        expect(Math.abs(out[k] - true_)).toBeLessThan(0.035);
      }
    }
  });

  test("of a random field are those to the nearest of all pieces, tried one by one", () => {
    const grid = gridFrom(latticeField([{ seed: 5, weight: 1 }], 160), -0.4, 180, 10);
    const set = findLevelSet(grid);
    const map = distanceMap(grid, set);
    const n = 90;
    const out = new Float64Array(n);
    let worstNear = 0;
    let worst = 0;
    for (let y = 31; y < 1760; y += 107.3) {
      map.row(y, 5.5, 19.7, n, Number.POSITIVE_INFINITY, out);
      for (let k = 0; k < n; k++) {
        const x = 5.5 + 19.7 * k;
        let best = Number.POSITIVE_INFINITY;
        for (let p = 0; p < set.count; p++) {
          const x1 = set.pieces[4 * p];
          const y1 = set.pieces[4 * p + 1];
          const x2 = set.pieces[4 * p + 2];
          const y2 = set.pieces[4 * p + 3];
          const l2 = (x2 - x1) ** 2 + (y2 - y1) ** 2;
          const t = Math.max(0, Math.min(1, ((x - x1) * (x2 - x1) + (y - y1) * (y2 - y1)) / l2));
          best = Math.min(best, Math.hypot(x - x1 - t * (x2 - x1), y - y1 - t * (y2 - y1)));
        }
        worst = Math.max(worst, out[k] - best);
        worst = Math.max(worst, best - out[k]);
        if (best < 150) worstNear = Math.max(worstNear, out[k] - best);
      }
    }
    expect(worstNear).toBeLessThan(0.02);
    expect(worst).toBeLessThan(0.1);
  });

  test("are infinite where the level set is empty", () => {
    const grid = gridFrom(disc(500, 500, 200), 1e9, 100, 10);
    const out = new Float64Array(3);
    distanceMap(grid, findLevelSet(grid)).row(500, 400, 10, 3, 1e6, out);
    expect([...out]).toEqual([Infinity, Infinity, Infinity]);
  });
});
