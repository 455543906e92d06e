import { describe, expect, test } from "vitest";
import { makeRandom } from "../../../src/numerics/random.js";
import { ContourDistances, nearestSource } from "../../../src/stages/states/distance.js";
import { coverage, turning } from "../../../src/stages/states/fraction.js";
import { smoothShare } from "../../../src/stages/states/smooth_share.js";

const pixel = { xNm: 10, yNm: 14 };

test("the nearest source agrees with a search of all, for unequal pixels", () => {
  const random = makeRandom(4);
  const [rows, cols] = [23, 31];
  const source = Uint8Array.from({ length: rows * cols }, () => (random.uniform() < 0.02 ? 1 : 0));
  const distance = (p: number, q: number): number =>
    Math.hypot(((p % cols) - (q % cols)) * 10, (Math.floor(p / cols) - Math.floor(q / cols)) * 14);
  const found = nearestSource(source, rows, cols, pixel);
  for (let p = 0; p < found.length; p++) {
    let least = Infinity;
    for (let q = 0; q < found.length; q++) if (source[q] === 1) least = Math.min(least, distance(p, q));
    expect(source[found[p]]).toBe(1);
    expect(distance(p, found[p])).toBeCloseTo(least, 9);
  }
  expect([...nearestSource(new Uint8Array(6), 2, 3, pixel)]).toEqual([-1, -1, -1, -1, -1, -1]);
});

test("distances to the contours of a disc are true to a tenth of a pixel on average, on either side and in every direction", () => {
  const size = 81;
  const [cx, cy, radius] = [403, 561, 200];
  const levels: [number, number] = [0.5, 0.5];
  const u = new Float32Array(size * size);
  const states = new Uint8Array(size * size);
  const fromMiddle = new Float32Array(size * size);
  for (let p = 0; p < u.length; p++) {
    fromMiddle[p] = Math.hypot((p % size) * 10 - cx, Math.floor(p / size) * 14 - cy) - radius;
    u[p] = 0.5 * (1 - Math.tanh(fromMiddle[p] / 45));
    states[p] = u[p] <= levels[0] ? 0 : u[p] > levels[1] ? 1 : 2;
  }
  const found = new ContourDistances(size, size, pixel).of(u, states, levels);
  const sums = [0, 0];
  const n = [0, 0];
  let worst = 0;
  for (let p = 0; p < u.length; p++) {
    const k = states[p];
    if (k === 2) {
      expect(found[p]).toBe(Infinity);
      continue;
    }
    const contour = -45 * Math.atanh(2 * levels[k] - 1);
    const error = found[p] - Math.abs(fromMiddle[p] - contour);
    sums[k] += error;
    n[k]++;
    worst = Math.max(worst, Math.abs(error));
  }
  expect(Math.abs(sums[0] / n[0])).toBeLessThan(1.2);
  expect(Math.abs(sums[1] / n[1])).toBeLessThan(1.2); // a tenth of √(10 · 14)
  expect(worst).toBeLessThan(8);
});

test("beyond a gap the distance goes to the contour and not past it", () => {
  // one row: state 0, a gap, between, state 1 with its edge
  const u = Float32Array.from([0.1, 0, 0.5, 0.9]);
  const states = Uint8Array.from([0, 255, 2, 1]);
  const found = new ContourDistances(1, 4, { xNm: 10, yNm: 10 }).of(u, states, [0.2, 0.8]);
  expect(found[0]).toBeLessThan(30);
  expect(found[0]).toBeGreaterThan(20);
  expect(found[3]).toBeLessThan(10);
});

describe("areas", () => {
  test("the covered part of a pixel agrees with a fine grid", () => {
    const random = makeRandom(8);
    for (let k = 0; k < 40; k++) {
      const [v, gx, gy] = [random.normal() * 0.3, random.normal(), random.normal()];
      let inside = 0;
      const n = 200;
      for (let i = 0; i < n; i++) {
        for (let j = 0; j < n; j++) {
          if (v + gx * ((j + 0.5) / n - 0.5) + gy * ((i + 0.5) / n - 0.5) > 0) inside++;
        }
      }
      expect(Math.abs(coverage(v, gx, gy) - inside / (n * n))).toBeLessThan(0.01);
    }
  });
  test("turning counts components less holes, and the turn of open contours", () => {
    const map = (lines: string[]): Uint8Array =>
      Uint8Array.from(lines.join(""), (c) => (c === "#" ? 1 : c === "?" ? 255 : 0));
    expect(turning(map(["......", ".##.#.", ".##...", "......"]), 4, 6)).toBe(2);
    expect(turning(map([".......", ".#####.", ".#...#.", ".#...#.", ".#####.", "......."]), 6, 7)).toBe(0);
    // a straight wall turns nowhere, a corner of the frame cut off a quarter
    expect(turning(map(["###", "...", "..."]), 3, 3)).toBe(0);
    expect(turning(map(["##.", "##.", "..."]), 3, 3)).toBe(0.25);
    // nothing is counted next to unmeasured pixels
    expect(turning(map(["....", ".#?.", "...."]), 3, 4)).toBe(0.5);
  });
  test("smoothing near a border follows a slope instead of being pulled inwards", () => {
    const [rows, cols] = [20, 24];
    const ramp = Float32Array.from({ length: rows * cols }, (_, p) => 0.05 * (p % cols) - 0.03 * Math.floor(p / cols));
    const usable = new Uint8Array(rows * cols).fill(1);
    usable[7 * cols + 9] = 0;
    const smooth = smoothShare(ramp, usable, rows, cols, 1.3, 1);
    smooth.forEach((v, p) => {
      if (usable[p] === 0) expect(v).toBeNaN();
      else expect(Math.abs(v - ramp[p])).toBeLessThan(1e-3);
    });
  });
});
