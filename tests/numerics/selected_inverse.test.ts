import { describe, expect, test } from "vitest";
import { addBlock, blockPattern, factorBlocks, solveBlocks, zeroBlocks } from "../../src/numerics/block_factor.js";
import { choleskyInPlace, choleskyInvert } from "../../src/numerics/cholesky.js";
import { eliminationOrder } from "../../src/numerics/elimination_order.js";
import { makeRandom } from "../../src/numerics/random.js";
import { selectedInverse } from "../../src/numerics/selected_inverse.js";

type Block = [number, number, number, number];

/** Random cliques, a sparse positive definite A and a symmetric M with entries in them only, dense and in blocks. */
function problem(nodes: number, count: number, seed: number) {
  const random = makeRandom(seed);
  const cliques = Array.from({ length: count }, () => [
    ...new Set(Array.from({ length: 2 + random.below(3) }, () => random.below(nodes))),
  ]);
  const pattern = blockPattern(eliminationOrder(nodes, cliques));
  const n = 2 * nodes;
  const dense = { a: new Float64Array(n * n), m: new Float64Array(n * n) };
  const sparse = { a: zeroBlocks(pattern), m: zeroBlocks(pattern) };
  const add = (which: "a" | "m", u: number, v: number, x: Block): void => {
    addBlock(sparse[which], pattern, u, v, 1, x);
    for (let i = 0; i < 2; i++) {
      for (let j = 0; j < 2; j++) {
        dense[which][(2 * u + i) * n + 2 * v + j] += x[2 * i + j];
        dense[which][(2 * v + j) * n + 2 * u + i] += x[2 * i + j];
      }
    }
  };
  for (let u = 0; u < nodes; u++) add("a", u, u, [0.1, 0, 0, 0.1]);
  for (const clique of cliques) {
    // g gᵀ of a random g over the clique's axes
    const g = clique.map(() => [random.normal(), random.normal()] as const);
    clique.forEach((u, i) => {
      clique.forEach((v, j) => {
        if (i < j) add("a", u, v, [g[i][0] * g[j][0], g[i][0] * g[j][1], g[i][1] * g[j][0], g[i][1] * g[j][1]]);
        if (i === j) add("a", u, u, [g[i][0] ** 2 / 2, g[i][0] * g[i][1], 0, g[i][1] ** 2 / 2]);
        if (i <= j) add("m", u, v, [random.normal(), random.normal(), random.normal(), random.normal()]);
      });
    });
  }
  return { n, pattern, dense, sparse };
}

describe("sparse factors of 2 × 2 blocks", () => {
  // few cliques: several parts that nothing ties; many: nearly dense
  test.each([
    [1, 0],
    [2, 1],
    [12, 5],
    [30, 40],
    [40, 150],
  ])("%i nodes, %i cliques: solution, inverse and product as of the dense matrix", (nodes, count) => {
    for (let seed = 1; seed <= 5; seed++) {
      const { n, pattern, dense, sparse } = problem(nodes, count, seed);
      const x = Float64Array.from({ length: n }, (_, i) => Math.sin(i + 1));
      const b = new Float64Array(n);
      for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) b[i] += dense.a[i * n + j] * x[j];
      const l = dense.a.slice();
      expect(choleskyInPlace(l, n)).toBe(true);
      const k = new Float64Array(n * n);
      choleskyInvert(l, n, k);
      const factor = factorBlocks(sparse.a, pattern);
      if (factor === null) throw new Error("not positive definite");
      solveBlocks(factor, b);
      for (let i = 0; i < n; i++) expect(b[i]).toBeCloseTo(x[i], 9);
      const { inverse, product } = selectedInverse(factor, sparse.m);
      for (let u = 0; u < nodes; u++) {
        for (let q = 0; q < 4; q++) {
          const row = (2 * u + (q >> 1)) * n;
          const column = (2 * u + (q & 1)) * n;
          expect(inverse[4 * u + q]).toBeCloseTo(k[row + 2 * u + (q & 1)], 9);
          let sum = 0;
          let size = 1;
          for (let i = 0; i < n; i++) {
            for (let j = 0; j < n; j++) {
              const term = k[row + i] * dense.m[i * n + j] * k[column + j];
              sum += term;
              size += Math.abs(term);
            }
          }
          expect(Math.abs(product[4 * u + q] - sum) / size).toBeLessThan(1e-11);
        }
      }
    }
  });

  test("a matrix that is not positive definite has no factor", () => {
    const pattern = blockPattern(eliminationOrder(2, [[0, 1]]));
    const a = zeroBlocks(pattern);
    addBlock(a, pattern, 0, 0, 1, [0.5, 0, 0, 0.5]);
    addBlock(a, pattern, 1, 1, 1, [0.5, 0, 0, 0.5]);
    addBlock(a, pattern, 0, 1, 1, [1, 0, 0, 0]);
    expect(factorBlocks(a, pattern)).toBeNull();
  });

  test("an entry outside the cliques is refused", () => {
    const pattern = blockPattern(
      eliminationOrder(4, [
        [0, 1],
        [1, 2],
        [2, 3],
      ]),
    );
    expect(() => addBlock(zeroBlocks(pattern), pattern, 0, 3, 1, [1, 0, 0, 1])).toThrow(RangeError);
  });
});

describe("order of elimination", () => {
  test("a chain fills nothing, a star neither, in whatever order their nodes are numbered", () => {
    const n = 200;
    const number = (i: number): number => (i * 77) % n;
    const chain = Array.from({ length: n - 1 }, (_, i) => [number(i), number(i + 1)]);
    expect(eliminationOrder(n, chain).rows).toHaveLength(n - 1);
    const star = Array.from({ length: n - 1 }, (_, i) => [number(0), number(i + 1)]);
    expect(eliminationOrder(n, star).rows).toHaveLength(n - 1);
  });

  test("every node has one place, and the columns hold what elimination fills in", () => {
    const random = makeRandom(5);
    const n = 25;
    const cliques = Array.from({ length: 40 }, () => [random.below(n), random.below(n)]).filter(([a, b]) => a !== b);
    const { place, node, start, rows } = eliminationOrder(n, cliques);
    expect([...place].sort((a, b) => a - b)).toEqual(Array.from({ length: n }, (_, i) => i));
    const full = Array.from({ length: n }, () => new Set<number>());
    for (const [a, b] of cliques) full[Math.min(place[a], place[b])].add(Math.max(place[a], place[b]));
    for (let p = 0; p < n; p++) {
      expect(place[node[p]]).toBe(p);
      const column = [...full[p]].sort((a, b) => a - b);
      expect([...rows.subarray(start[p], start[p + 1])]).toEqual(column);
      for (const r of column) for (const q of column) if (q > r) full[r].add(q);
    }
  });
});
