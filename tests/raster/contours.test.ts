import { expect, test } from "vitest";
import { enclosedArea, lineLength, traceContours } from "../../src/raster/contours.js";

const square = { xNm: 1, yNm: 1 };
const raster = (rows: readonly (readonly number[])[]): Float32Array => Float32Array.from(rows.flat());

test("pixel centres: a step between columns 1 and 2 puts the line at x = 1.5 pixels, open at both borders", () => {
  const data = raster([
    [0, 0, 1, 1],
    [0, 0, 1, 1],
    [0, 0, 1, 1],
  ]);
  const lines = traceContours(data, 3, 4, { xNm: 10, yNm: 20 }, 0.5, "high");
  expect(lines).toHaveLength(1);
  expect(lines[0].closed).toBe(false);
  const p = [...lines[0].points];
  expect(p.filter((_, k) => k % 2 === 0)).toEqual([15, 15, 15]);
  expect(p.filter((_, k) => k % 2 === 1).sort((a, b) => a - b)).toEqual([0, 20, 40]);
});

test("walked with the high side on the left: (ty, −tx) points to it, whatever the shape", () => {
  const rows = 40;
  const data = new Float32Array(rows * rows);
  const value = (x: number, y: number): number => Math.sin(x / 3.1) + Math.cos(y / 2.7 + 0.3 * x);
  for (let i = 0; i < rows; i++) for (let j = 0; j < rows; j++) data[i * rows + j] = value(j, i);
  let steps = 0;
  for (const { points, closed } of traceContours(data, rows, rows, square, 0.2, "high")) {
    const n = points.length / 2;
    for (let k = closed ? 0 : 1; k < n; k++) {
      const a = k === 0 ? n - 1 : k - 1;
      const tx = points[2 * k] - points[2 * a];
      const ty = points[2 * k + 1] - points[2 * a + 1];
      if (Math.hypot(tx, ty) < 0.3) continue;
      const x = (points[2 * k] + points[2 * a]) / 2;
      const y = (points[2 * k + 1] + points[2 * a + 1]) / 2;
      const s = 0.4 / Math.hypot(tx, ty);
      expect(value(x + s * ty, y - s * tx)).toBeGreaterThan(value(x - s * ty, y + s * tx));
      steps++;
    }
  }
  expect(steps).toBeGreaterThan(200);
});

test("a saddle joins the high diagonal or the low one, as asked", () => {
  const data = raster([
    [0, 0, 0, 0],
    [0, 1, 0, 0],
    [0, 0, 1, 0],
    [0, 0, 0, 0],
  ]);
  expect(traceContours(data, 4, 4, square, 0.5, "high")).toHaveLength(1);
  expect(traceContours(data, 4, 4, square, 0.5, "low")).toHaveLength(2);
});

test("an unmeasured pixel interrupts a line and never gets one of its own; the image's edge is no line", () => {
  const full = new Float32Array(49).fill(1);
  full[24] = Number.NaN;
  expect(traceContours(full, 7, 7, square, 0.5, "high")).toHaveLength(0);
  const step = Float32Array.from({ length: 49 }, (_, p) => (p % 7 > 3 ? 1 : 0));
  expect(traceContours(step, 7, 7, square, 0.5, "high")).toHaveLength(1);
  step[3 * 7 + 4] = Number.NaN;
  const lines = traceContours(step, 7, 7, square, 0.5, "high");
  expect(lines.map((l) => lineLength(l.points, l.closed))).toEqual([2, 2]);
});

test("lengths and areas scale with unequal pixels", () => {
  const rows = 60;
  const data = new Float32Array(rows * rows);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < rows; j++) data[i * rows + j] = 200 - Math.hypot(8 * j - 236, 12 * i - 354);
  }
  const [line] = traceContours(data, rows, rows, { xNm: 8, yNm: 12 }, 0, "high");
  expect(lineLength(line.points, true) / (2 * Math.PI * 200)).toBeCloseTo(1, 3);
  // a polygon inside the circle misses c²/(6R²) of the area for chords of length c, here at most a pixel's diagonal
  const missing = 1 - enclosedArea(line.points) / (Math.PI * 200 ** 2);
  expect(missing).toBeGreaterThan(0);
  expect(missing).toBeLessThan((8 ** 2 + 12 ** 2) / (6 * 200 ** 2));
});
