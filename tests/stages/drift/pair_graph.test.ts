import { describe, expect, test } from "vitest";
import { choleskyInPlace, choleskyInvert, choleskySolve } from "../../../src/numerics/cholesky.js";
import { makeRandom } from "../../../src/numerics/random.js";
import { solvePairGraph } from "../../../src/stages/drift/pair_graph.js";
import { placeCovariance, type NoisyPair, type Window } from "../../../src/stages/drift/place_covariance.js";

/** A random connected graph, one pair in ten off by thirty standard deviations. */
function randomPairs(nodes: number, extra: number, seed: number): NoisyPair[] {
  const r = makeRandom(seed);
  const at = Array.from({ length: nodes }, () => [60 * r.normal(), 60 * r.normal()]);
  const window = (x: number, y: number): Window => [
    Math.max(0, x),
    Math.min(900, 900 + x),
    Math.max(0, y),
    Math.min(700, 700 + y),
  ];
  const pair = (a: number, b: number): NoisyPair => {
    const [xx, yy] = [0.05 + r.uniform(), 0.05 + r.uniform()];
    const wrong = r.uniform() < 0.1 ? 30 : 1;
    const x = at[b][0] - at[a][0] + wrong * r.normal();
    const y = at[b][1] - at[a][1] + wrong * r.normal();
    return {
      a,
      b,
      x,
      y,
      covariance: { xx, xy: (1.6 * r.uniform() - 0.8) * Math.sqrt(xx * yy), yy },
      alone: 0.1 * r.uniform(),
      framed: r.uniform(),
      windowA: window(x, y),
      windowB: window(-x, -y),
    };
  };
  const tree = Array.from({ length: nodes - 1 }, (_, k) => pair(r.below(k + 1), k + 1));
  const more = Array.from({ length: extra }, () => [r.below(nodes), r.below(nodes)]).filter(([a, b]) => a !== b);
  return [...tree, ...more.map(([a, b]) => pair(a, b))];
}

/** Rows of J, one a pair and axis, over the axes of the nodes from 1 on; inverse covariances times weights, a block a pair. */
function dense(nodes: number, pairs: readonly NoisyPair[], weights: Float64Array) {
  const n = 2 * (nodes - 1);
  const information = pairs.map(({ covariance: c }, k) => {
    const scale = weights[k] / (c.xx * c.yy - c.xy * c.xy);
    return [
      [scale * c.yy, -scale * c.xy],
      [-scale * c.xy, scale * c.xx],
    ];
  });
  /** Jᵀ W C⁻¹, n × 2 a pair. */
  const gain = pairs.map((p, k) => {
    const g = Array.from({ length: n }, () => [0, 0]);
    for (const [node, sign] of [
      [p.a, -1],
      [p.b, 1],
    ]) {
      if (node === 0) continue;
      for (let i = 0; i < 2; i++) for (let j = 0; j < 2; j++) g[2 * node - 2 + i][j] += sign * information[k][i][j];
    }
    return g;
  });
  const normal = new Float64Array(n * n);
  const right = new Float64Array(n);
  pairs.forEach((p, k) => {
    gain[k].forEach((g, i) => {
      right[i] += g[0] * p.x + g[1] * p.y;
      for (let axis = 0; axis < 2; axis++) {
        if (p.a > 0) normal[i * n + 2 * p.a - 2 + axis] -= g[axis];
        if (p.b > 0) normal[i * n + 2 * p.b - 2 + axis] += g[axis];
      }
    });
  });
  const inverse = new Float64Array(n * n);
  expect(choleskyInPlace(normal, n)).toBe(true);
  choleskySolve(normal, n, right);
  choleskyInvert(normal, n, inverse);
  return { n, gain, inverse, places: [0, 0, ...right] };
}

const area = ([x0, x1, y0, y1]: Window): number => Math.max(0, x1 - x0) * Math.max(0, y1 - y0);

/** Covariance of the errors of two pairs, from its definition. */
function shared(p: NoisyPair, q: NoisyPair): number[][] {
  const roots = [p, q].map(({ covariance: c }) => {
    const l = Math.sqrt(c.xx);
    return [
      [l, 0],
      [c.xy / l, Math.sqrt(c.yy - c.xy ** 2 / c.xx)],
    ];
  });
  let share = 0;
  for (const [f, v, s] of [
    [p.a, p.windowA, 1],
    [p.b, p.windowB, -1],
  ] as const) {
    for (const [g, w, t] of [
      [q.a, q.windowA, 1],
      [q.b, q.windowB, -1],
    ] as const) {
      if (f !== g) continue;
      const both = area([Math.max(v[0], w[0]), Math.min(v[1], w[1]), Math.max(v[2], w[2]), Math.min(v[3], w[3])]);
      if (both > 0) share += (0.5 * s * t * Math.sqrt(p.framed * q.framed) * both) / Math.sqrt(area(v) * area(w));
    }
  }
  return [0, 1].map((i) =>
    [0, 1].map((j) => share * (roots[0][i][0] * roots[1][j][0] + roots[0][i][1] * roots[1][j][1])),
  );
}

describe("a graph of pairs, against dense matrices", () => {
  test.each([
    [2, 0, Number.POSITIVE_INFINITY],
    [9, 0, 1.345],
    [12, 20, Number.POSITIVE_INFINITY],
    [12, 60, 1.345],
    [24, 40, 1.345],
  ])("%i places, %i pairs beyond a tree, threshold %f", (nodes, extra, huber) => {
    for (let seed = 1; seed <= 3; seed++) {
      const pairs = randomPairs(nodes, extra, seed);
      const solution = solvePairGraph(nodes, pairs, huber);
      if (solution === null) throw new Error("not connected");
      const { n, gain, inverse, places } = dense(nodes, pairs, solution.weights);
      places.forEach((x, k) => expect(solution.places[k]).toBeCloseTo(x, 7));
      pairs.forEach((p, k) => {
        const { xx, xy, yy } = p.covariance;
        const x = places[2 * p.b] - places[2 * p.a] - p.x;
        const y = places[2 * p.b + 1] - places[2 * p.a + 1] - p.y;
        const size = Math.sqrt(Math.max(0, (yy * x * x - 2 * xy * x * y + xx * y * y) / (xx * yy - xy * xy)));
        expect(solution.weights[k]).toBeCloseTo(Math.min(1, huber / size), 7);
      });
      // B Σ Bᵀ, pair by pair
      const influence = gain.map((g) =>
        Array.from({ length: n }, (_, i) =>
          [0, 1].map((j) => g.reduce((sum, row, q) => sum + inverse[i * n + q] * row[j], 0)),
        ),
      );
      const found = placeCovariance(nodes, pairs, solution.weights);
      if (found === null) throw new Error("not positive definite");
      const sums = new Float64Array(3 * nodes);
      pairs.forEach((p, k) => {
        pairs.forEach((q, l) => {
          const { xx, xy, yy } = p.covariance;
          const s =
            k === l
              ? [
                  [xx + p.alone, xy],
                  [xy, yy + p.alone],
                ]
              : shared(p, q);
          for (let node = 1; node < nodes; node++) {
            [
              [0, 0],
              [0, 1],
              [1, 1],
            ].forEach(([r, c], at) => {
              const u = influence[k][2 * node - 2 + r];
              const v = influence[l][2 * node - 2 + c];
              sums[3 * node + at] +=
                u[0] * (s[0][0] * v[0] + s[0][1] * v[1]) + u[1] * (s[1][0] * v[0] + s[1][1] * v[1]);
            });
          }
        });
      });
      sums.forEach((sum, k) => expect(found[k]).toBeCloseTo(sum, 8));
    }
  });

  test("places that do not hang together have none", () => {
    const pairs = randomPairs(10, 0, 4);
    const apart = pairs.slice(0, -1);
    expect(solvePairGraph(10, apart, 1.345)).toBeNull();
    // tied among themselves, but not to the first
    const last = { ...pairs[8], a: 9, b: 10 };
    expect(solvePairGraph(11, [...apart, last], 1.345)).toBeNull();
  });
});
