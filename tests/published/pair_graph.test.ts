import { expect, test } from "vitest";
import { closuresOf } from "../../src/stages/drift/closures.js";
import { solvePairGraph, type GraphPair } from "../../src/stages/drift/pair_graph.js";
import { placeCovariance } from "../../src/stages/drift/place_covariance.js";
import { fixture } from "./fixture.js";

interface PairGraph {
  readonly pairs: readonly (readonly [number, number, number, number, number])[];
  readonly weighted_least_squares_y_x: readonly (readonly [number, number])[];
  readonly weighted_least_squares_sd: readonly number[];
  readonly without_the_bad_pair_y_x: readonly (readonly [number, number])[];
  readonly without_the_bad_pair_sd: readonly number[];
  readonly huber_y_x: readonly (readonly [number, number])[];
  readonly huber_weights: readonly number[];
  readonly loop_closures: readonly {
    readonly frames: readonly number[];
    readonly closure_y_x: readonly [number, number];
  }[];
}

// Places from pairwise shifts, one of them a gross error. Source: normal equations (NumPy, confirmed by R's lm); Huber 1964, Ann. Math.
// Stat. 35, 73, by reweighting, confirmed by direct minimisation.
const graph = fixture<PairGraph>("pair_graph");
const pairs = graph.pairs.map(([a, b, y, x, sd]): GraphPair => ({
  a,
  b,
  x,
  y,
  covariance: { xx: sd * sd, xy: 0, yy: sd * sd },
}));

function solved(from: readonly GraphPair[], huber: number) {
  const solution = solvePairGraph(6, from, huber);
  if (solution === null) throw new Error("not connected");
  return solution;
}

test.each([
  ["least squares", pairs, graph.weighted_least_squares_y_x, graph.weighted_least_squares_sd],
  [
    "without the bad pair",
    pairs.filter((p) => p.a !== 2 || p.b !== 4),
    graph.without_the_bad_pair_y_x,
    graph.without_the_bad_pair_sd,
  ],
] as const)("%s: places and standard deviations to 1e-9", (_, from, places, sds) => {
  const { places: found, weights } = solved(from, Number.POSITIVE_INFINITY);
  const nowhere = [0, 0, 0, 0] as const;
  const independent = from.map((p) => ({ ...p, alone: 0, framed: 0, windowA: nowhere, windowB: nowhere }));
  const covariance = placeCovariance(6, independent, weights);
  places.forEach(([y, x], k) => {
    expect(found[2 * k]).toBeCloseTo(x, 9);
    expect(found[2 * k + 1]).toBeCloseTo(y, 9);
    if (k > 0) expect(Math.sqrt(covariance?.[3 * k] ?? Number.NaN)).toBeCloseTo(sds[k], 9);
  });
});

test("Huber's loss on the length of the residual: places and weights to 1e-6", () => {
  const { places, weights } = solved(pairs, 1.345);
  graph.huber_y_x.forEach(([y, x], k) => {
    expect(places[2 * k]).toBeCloseTo(x, 6);
    expect(places[2 * k + 1]).toBeCloseTo(y, 6);
  });
  graph.huber_weights.forEach((w, k) => expect(weights[k]).toBeCloseTo(w, 6));
});

test("loop closures", () => {
  const found = closuresOf(pairs);
  for (const c of graph.loop_closures) {
    const [i, j, k] = c.frames;
    const match = found.find((f) => pairs[f.ij].a === i && pairs[f.ij].b === j && pairs[f.jk].b === k);
    expect(match?.x).toBeCloseTo(c.closure_y_x[1], 12);
    expect(match?.y).toBeCloseTo(c.closure_y_x[0], 12);
  }
});

test("frames that do not hang together have no solution", () => {
  expect(
    solvePairGraph(
      6,
      pairs.filter((p) => p.b !== 5),
      1.345,
    ),
  ).toBeNull();
});
