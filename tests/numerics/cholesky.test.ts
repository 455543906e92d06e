import { describe, expect, it } from "vitest";
import { choleskyInPlace, choleskyInvert, choleskySolve } from "../../src/numerics/cholesky.js";
import { makeRandom } from "../../src/numerics/random.js";

/** GᵀG of a random G with n + 2 rows. */
function positive(n: number, seed: number): Float64Array {
  const random = makeRandom(seed);
  const a = new Float64Array(n * n);
  for (let k = 0; k < n + 2; k++) {
    const g = Array.from({ length: n }, () => random.normal());
    for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) a[i * n + j] += g[i] * g[j];
  }
  return a;
}

describe("Cholesky", () => {
  it.each([1, 2, 5, 9])("solves and inverts at order %i", (n) => {
    const a = positive(n, n);
    const x = Float64Array.from({ length: n }, (_, i) => i - 1.5);
    const b = new Float64Array(n);
    for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) b[i] += a[i * n + j] * x[j];
    const l = a.slice();
    expect(choleskyInPlace(l, n)).toBe(true);
    choleskySolve(l, n, b);
    for (let i = 0; i < n; i++) expect(b[i]).toBeCloseTo(x[i], 9);
    const inverse = new Float64Array(n * n);
    choleskyInvert(l, n, inverse);
    for (let i = 0; i < n; i++) {
      for (let j = 0; j < n; j++) {
        let s = 0;
        for (let k = 0; k < n; k++) s += a[i * n + k] * inverse[k * n + j];
        expect(s).toBeCloseTo(i === j ? 1 : 0, 9);
        expect(inverse[i * n + j]).toBe(inverse[j * n + i]);
      }
    }
  });

  it.each([64, 130])("passes over the zeros of a graph of %i nodes, and finds a node without links", (n) => {
    // Neighbours in order, and each of the second half linked to its mirror image in the first: as scans down and up in temperature.
    const random = makeRandom(n);
    const a = new Float64Array(n * n);
    const link = (i: number, j: number, w: number): void => {
      a[i * n + i] += w;
      a[j * n + j] += w;
      a[Math.max(i, j) * n + Math.min(i, j)] -= w;
      // What is above the diagonal is not to be read.
      a[Math.min(i, j) * n + Math.max(i, j)] = Number.NaN;
    };
    for (let i = 1; i < n; i++) {
      link(i - 1, i, 1 + random.uniform());
      if (2 * i > n + 1) link(n - i, i, 1 + random.uniform());
    }
    a[0] += 1;
    const loose = a.slice();
    loose.fill(0, (n - 1) * n);
    expect(choleskyInPlace(loose, n)).toBe(false);
    const l = a.slice();
    expect(choleskyInPlace(l, n)).toBe(true);
    const inverse = new Float64Array(n * n);
    choleskyInvert(l, n, inverse);
    const at = (i: number, j: number): number => a[Math.max(i, j) * n + Math.min(i, j)];
    let worst = 0;
    for (let i = 0; i < n; i++) {
      for (let j = 0; j < n; j++) {
        let product = 0;
        let back = 0;
        for (let k = 0; k < n; k++) {
          product += at(i, k) * inverse[k * n + j];
          if (k <= Math.min(i, j)) back += l[i * n + k] * l[j * n + k];
        }
        worst = Math.max(worst, Math.abs(product - (i === j ? 1 : 0)), Math.abs(back - at(i, j)));
      }
    }
    expect(worst).toBeLessThan(1e-11);
  });

  it("reads the lower triangle only", () => {
    const a = Float64Array.from([4, Number.NaN, 2, 3]);
    expect(choleskyInPlace(a, 2)).toBe(true);
    const b = Float64Array.from([8, 7]);
    choleskySolve(a, 2, b);
    expect(b[0]).toBeCloseTo(1.25, 14);
    expect(b[1]).toBeCloseTo(1.5, 14);
  });

  it.each([
    ["indefinite", [1, 0, 2, 1]],
    ["singular", [1, 0, 1, 1]],
    ["singular but for rounding", [0.01, 0, 0.03, 0.09 + 1e-17]],
    ["zero", [0, 0, 0, 0]],
    ["not a number", [Number.NaN, 0, 0, 1]],
    ["infinite", [Infinity, 0, 0, 1]],
  ])("refuses a matrix that is %s", (_, values) => {
    expect(choleskyInPlace(Float64Array.from(values), 2)).toBe(false);
  });
});
