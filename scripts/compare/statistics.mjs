// Isotonic regression, assignment, quantiles and circular means.
import { largestAssignment } from "../../dist/numerics/assignment.js";
import { isotonicRegression } from "../../dist/numerics/isotonic.js";
import { circularMean, quantile } from "../../dist/numerics/quantile.js";
import { wilsonInterval } from "../../dist/numerics/distributions.js";
import { largestDifference, row } from "./rows.mjs";

const BRANCHES = 8;
const FRAMES = 40;
const ASSIGNMENTS = 6;

export function makeStatistics(random, put) {
  const rising = [];
  const falling = [];
  for (let k = 0; k < BRANCHES; k++) {
    const y = Float64Array.from(
      { length: FRAMES },
      (_, i) => 1 / (1 + Math.exp(-(i - 20) / 4)) + 0.2 * random.normal(),
    );
    const weights = Float64Array.from(y, () => 0.2 + 5 * random.uniform() ** 2);
    put(`y${k}`, y, [FRAMES]);
    put(`weights${k}`, weights, [FRAMES]);
    rising.push(...isotonicRegression(y, weights));
    falling.push(...isotonicRegression(y, weights, false));
  }
  const totals = [];
  for (let k = 0; k < ASSIGNMENTS; k++) {
    const rows = 4 + random.below(20);
    const cols = 4 + random.below(20);
    const weight = Float64Array.from({ length: rows * cols }, () => random.uniform());
    put(`weight${k}`, weight, [rows, cols]);
    const of = largestAssignment(weight, rows, cols);
    totals.push(of.reduce((sum, j, i) => (j < 0 ? sum : sum + weight[i * cols + j]), 0));
  }
  const values = Float64Array.from({ length: 501 }, () => random.normal() ** 3);
  const angles = Float64Array.from({ length: 501 }, () => 3 + 0.9 * random.normal());
  put("values", values, [501]);
  put("angles", angles, [501]);
  const shares = [0, 0.025, 0.25, 0.5, 0.9, 0.975, 1];
  const counts = Array.from({ length: 20 }, () => [random.below(30), 30 + random.below(100)]);
  return {
    input: { branches: BRANCHES, assignments: ASSIGNMENTS, shares, counts },
    compare(theirs) {
      const mean = circularMean(angles);
      return [
        row(
          "isotonic regression, rising and falling (nnls on the increments)",
          rising.length + falling.length,
          Math.max(largestDifference(rising, theirs.rising), largestDifference(falling, theirs.falling)),
          1e-9,
          "an active-set solver of dense equations",
        ),
        ...(theirs.isotonic_regression === null
          ? []
          : [
              row(
                "isotonic regression (scipy.optimize.isotonic_regression)",
                rising.length,
                largestDifference(rising, theirs.isotonic_regression),
                1e-12,
                "the same method",
              ),
            ]),
        row(
          "assignment: total weight (linear_sum_assignment)",
          ASSIGNMENTS,
          largestDifference(totals, theirs.assignment),
          1e-12,
          "the optimum is unique in its sum",
        ),
        row(
          "quantiles (numpy.quantile)",
          shares.length,
          largestDifference(
            shares.map((p) => quantile(values, p)),
            theirs.quantiles,
          ),
          1e-13,
          "rounding",
        ),
        row(
          "circular mean, rad, and resultant length (circmean, circvar)",
          2,
          largestDifference([Math.cos(mean.meanRad), Math.sin(mean.meanRad), mean.resultant], theirs.circular),
          1e-13,
          "rounding",
        ),
        row(
          "Wilson's interval (binomtest)",
          2 * counts.length,
          largestDifference(
            counts.flatMap(([k, n]) => [...wilsonInterval(k, n)]),
            theirs.wilson,
          ),
          1e-12,
          "rounding",
        ),
      ];
    },
  };
}
