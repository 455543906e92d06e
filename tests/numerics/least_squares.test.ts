import { describe, expect, it } from "vitest";
import { normalCdf, normalPdf } from "../../src/numerics/erf.js";
import { leastSquares, type LeastSquaresProblem } from "../../src/numerics/least_squares.js";
import { makeRandom } from "../../src/numerics/random.js";

const NOISE = 0.05;

/** Four parameters of a blurred step: low, high, centre, width; 61 points, noise of sd 0.05. */
function step(y: Float64Array): LeastSquaresProblem {
  return {
    parameters: 4,
    residuals: y.length,
    evaluate(p, r, jacobian) {
      if (!(p[3] > 0)) return false;
      for (let i = 0; i < y.length; i++) {
        const z = ((i - 30) / 6 - p[2]) / p[3];
        const u = normalCdf(z);
        r[i] = (p[0] + (p[1] - p[0]) * u - y[i]) / NOISE;
        if (!jacobian) continue;
        const slope = ((p[1] - p[0]) * normalPdf(z)) / p[3] / NOISE;
        jacobian[i * 4] = (1 - u) / NOISE;
        jacobian[i * 4 + 1] = u / NOISE;
        jacobian[i * 4 + 2] = -slope;
        jacobian[i * 4 + 3] = -slope * z;
      }
      return true;
    },
  };
}
const truth = [0.3, 1.2, 0.4, 1.1];
const clean = Float64Array.from({ length: 61 }, (_, i) => 0.3 + 0.9 * normalCdf(((i - 30) / 6 - 0.4) / 1.1));

describe("leastSquares", () => {
  it("finds noise-free parameters to ten digits", () => {
    const fit = leastSquares(step(clean), [0, 1, 0, 2]);
    expect(fit.status).toBe("converged");
    truth.forEach((v, j) => expect(fit.parameters[j]).toBeCloseTo(v, 10));
    expect(fit.cost).toBeLessThan(1e-18);
  });

  it("states true standard deviations: pulls of 600 noisy fits have mean 0 and sd 1", () => {
    const random = makeRandom(20240611);
    const runs = 600;
    const sum = new Float64Array(4);
    const squares = new Float64Array(4);
    let cost = 0;
    for (let k = 0; k < runs; k++) {
      const fit = leastSquares(step(clean.map((v) => v + NOISE * random.normal())), [0.2, 1.3, 0, 1.5]);
      expect(fit.status).toBe("converged");
      cost += fit.cost / 57;
      for (let j = 0; j < 4; j++) {
        const pull = (fit.parameters[j] - truth[j]) / Math.sqrt(fit.covariance[j * 5]);
        sum[j] += pull;
        squares[j] += pull * pull;
      }
    }
    // Three standard errors: 0.12 for the mean, 0.09 for the sd, 0.023 for reduced χ².
    for (let j = 0; j < 4; j++) {
      expect(Math.abs(sum[j] / runs)).toBeLessThan(0.12);
      expect(Math.abs(Math.sqrt(squares[j] / runs) - 1)).toBeLessThan(0.09);
    }
    expect(Math.abs(cost / runs - 1)).toBeLessThan(0.025);
  });

  it("counts a prior as one more residual: the combined sd is that of the weighted mean", () => {
    const values = [1.2, 0.9, 1.1, 1.4];
    const prior: LeastSquaresProblem = {
      parameters: 1,
      residuals: 5,
      evaluate(p, r, jacobian) {
        values.forEach((v, i) => (r[i] = (p[0] - v) / 0.2));
        r[4] = (p[0] - 2) / 0.1;
        jacobian?.set([5, 5, 5, 5, 10]);
        return true;
      },
    };
    const fit = leastSquares(prior, [0]);
    expect(fit.parameters[0]).toBeCloseTo((1.15 * 100 + 2 * 100) / 200, 10);
    expect(fit.covariance[0]).toBeCloseTo(1 / 200, 12);
    expect(fit.iterations).toBeLessThan(12);
  });

  it("keeps out of what the problem does not allow, and its neighbourhood does not stop it", () => {
    const fit = leastSquares(step(clean), [0.3, 1.2, 3, 0.05]);
    expect(fit.parameters[3]).toBeGreaterThan(0);
    expect(fit.status).toBe("converged");
  });

  it("says singular, with a covariance of NaN, where the data leave a direction open", () => {
    const twice: LeastSquaresProblem = {
      parameters: 2,
      residuals: 3,
      evaluate(p, r, jacobian) {
        for (let i = 0; i < 3; i++) r[i] = (p[0] + p[1]) * (i + 1) - 3 * (i + 1) + (i === 0 ? 0.1 : 0);
        jacobian?.set([1, 1, 2, 2, 3, 3]);
        return true;
      },
    };
    const fit = leastSquares(twice, [0, 0]);
    expect(fit.status).toBe("singular");
    expect(fit.covariance.every(Number.isNaN)).toBe(true);
    expect(fit.parameters[0] + fit.parameters[1]).toBeCloseTo(3 - 0.1 / 14, 6);
    const unused: LeastSquaresProblem = {
      parameters: 2,
      residuals: 2,
      evaluate(p, r, jacobian) {
        r[0] = p[0] - 1;
        r[1] = p[0] - 2;
        jacobian?.set([1, 0, 1, 0]);
        return true;
      },
    };
    const other = leastSquares(unused, [0, 7]);
    expect(other.status).toBe("singular");
    expect(other.parameters[0]).toBeCloseTo(1.5, 9);
    expect(other.parameters[1]).toBe(7);
  });

  it("says not-converged when the steps run out", () => {
    const fit = leastSquares(step(clean), [0, 1, 0, 2], { maxIterations: 2 });
    expect(fit.status).toBe("not-converged");
    expect(fit.iterations).toBe(2);
  });

  it("walks a curved valley (Rosenbrock 1960) from the usual start, straight and with bent steps", () => {
    const valley: LeastSquaresProblem = {
      parameters: 2,
      residuals: 2,
      evaluate(p, r, jacobian) {
        r[0] = 10 * (p[1] - p[0] * p[0]);
        r[1] = 1 - p[0];
        jacobian?.set([-20 * p[0], 10, -1, 0]);
        return true;
      },
    };
    for (const acceleration of [false, true]) {
      const fit = leastSquares(valley, [-1.2, 1], { acceleration });
      expect(fit.status).toBe("converged");
      expect(fit.parameters[0]).toBeCloseTo(1, 9);
      expect(fit.parameters[1]).toBeCloseTo(1, 9);
    }
  });

  it("refuses a start that has the wrong length or is not allowed", () => {
    expect(() => leastSquares(step(clean), [0, 1, 0])).toThrow(RangeError);
    expect(() => leastSquares(step(clean), [0, 1, 0, -1])).toThrow(RangeError);
    expect(() => leastSquares(step(clean), [0, Number.NaN, 0, 1])).toThrow(RangeError);
  });
});
