import { choleskyInPlace, choleskyInvert, choleskySolve } from "./cholesky.js";

/** A sum of squares to be made least. Residuals are already divided by their standard deviations; a prior is one more residual. */
export interface LeastSquaresProblem {
  readonly parameters: number;
  readonly residuals: number;
  /** Fills `r` and, where it is not null, the row-major `jacobian` (residuals × parameters, ∂r_i/∂p_j). False: `p` is not allowed. */
  evaluate(p: Float64Array, r: Float64Array, jacobian: Float64Array | null): boolean;
}

export interface LeastSquaresOptions {
  /** Trial steps at most; 200 where not given. */
  readonly maxIterations?: number;
  /** Converged when the full step would move the solution by less than this many standard deviations (from the scatter of the
   *  residuals); 1e-5 where not given. The step itself is still taken. */
  readonly tolerance?: number;
  /** First damping relative to the diagonal of JᵀJ; 1e-3 where not given. Larger for poor starts. */
  readonly damping?: number;
  /** Bend each step along the curvature of the model, at the price of one more evaluation a step: for narrow, curved valleys and
   *  starts far away. Off where not given. */
  readonly acceleration?: boolean;
}

export interface LeastSquaresFit {
  /** "singular": a minimum along a direction that the residuals do not fix; `covariance` is NaN. */
  readonly status: "converged" | "not-converged" | "singular";
  readonly parameters: Float64Array;
  /** (JᵀJ)⁻¹ at the solution, row-major, not scaled by the residuals. */
  readonly covariance: Float64Array;
  /** Σ r² */
  readonly cost: number;
  readonly iterations: number;
}

/** The largest norms seen fade by this much a step: kept for ever, one wild Jacobian far away would hold its parameter fast. */
const FORGETTING = 0.9;

/** How far along a step its bend is probed. */
const PROBE = 0.1;

/** Levenberg–Marquardt after Marquardt 1963 (J. SIAM 11, 431), damped in units of the largest column norms seen (Moré 1978, Lecture
 *  Notes in Math. 630, 105), the damping steered by the gain ratio (Nielsen 1999, IMM-REP-1999-05); on request with geodesic
 *  acceleration (Transtrum, Machta & Sethna 2011, Phys. Rev. E 83, 036701). Throws RangeError where `start` is not allowed or has
 *  the wrong length. */
export function leastSquares(
  problem: LeastSquaresProblem,
  start: ArrayLike<number>,
  options: LeastSquaresOptions = {},
): LeastSquaresFit {
  const n = problem.parameters;
  const m = problem.residuals;
  if (start.length !== n) throw new RangeError(`${start.length} starting values for ${n} parameters`);
  const maxIterations = options.maxIterations ?? 200;
  const tolerance2 = (options.tolerance ?? 1e-5) ** 2;

  let p = Float64Array.from(start);
  let trial = new Float64Array(n);
  let r = new Float64Array(m);
  let rTrial = new Float64Array(m);
  const jacobian = new Float64Array(m * n);
  const normal = new Float64Array(n * n);
  const factor = new Float64Array(n * n);
  const gradient = new Float64Array(n);
  const step = new Float64Array(n);
  /** Column norms of this Jacobian, and the largest seen of late, which scale the damping. */
  const norms = new Float64Array(n);
  const damped = new Float64Array(n);
  const bend = options.acceleration === true ? new Float64Array(n) : null;

  if (!problem.evaluate(p, r, jacobian)) throw new RangeError("the starting point is not allowed");
  let cost = sumOfSquares(r);
  if (!Number.isFinite(cost)) throw new RangeError("the residuals at the starting point are not finite");

  let lambda = options.damping ?? 1e-3;
  let growth = 2;
  /** The least damping with which JᵀJ could still be factored. */
  let leastLambda = 0;
  let iterations = 0;
  let converged = false;
  const dof = Math.max(1, m - n);
  formNormal(jacobian, r, m, n, normal, gradient, norms, damped);

  while (iterations < maxIterations && !converged) {
    iterations++;
    // Scaled to a unit diagonal, so that parameters of unlike size do not spoil the factor.
    for (let i = 0; i < n; i++) {
      for (let j = 0; j < i; j++) factor[i * n + j] = normal[i * n + j];
      const relative = damped[i] / norms[i];
      factor[i * n + i] = normal[i * n + i] + lambda * relative * relative;
      step[i] = -gradient[i];
    }
    if (!choleskyInPlace(factor, n)) {
      lambda = Math.max(lambda * growth, 1e-14);
      leastLambda = lambda;
      growth *= 2;
      if (lambda > 1e20) break;
      continue;
    }
    choleskySolve(factor, n, step);
    let predicted = 0;
    let moved = false;
    for (let i = 0; i < n; i++) {
      const relative = damped[i] / norms[i];
      predicted += step[i] * (lambda * relative * relative * step[i] - gradient[i]);
      trial[i] = p[i] + step[i] / norms[i];
      if (trial[i] !== p[i]) moved = true;
    }
    // The step in standard deviations is small: take it and stop; but a step kept small by the damping proves nothing.
    const small = predicted <= (tolerance2 * cost) / dof;
    if (small && lambda > Math.max(1e-6, leastLambda * 100)) {
      lambda *= 0.01;
      if (moved) continue;
    }
    if (!moved) {
      converged = true;
      break;
    }
    if (bend && !small) {
      // Second derivative of the residuals along the step, from one more evaluation a tenth of the way.
      for (let i = 0; i < n; i++) trial[i] = p[i] + (PROBE * step[i]) / norms[i];
      const known = problem.evaluate(trial, rTrial, null);
      bend.fill(0);
      for (let k = 0; k < m; k++) {
        let slope = 0;
        for (let i = 0; i < n; i++) slope += (jacobian[k * n + i] * step[i]) / norms[i];
        const curvature = ((rTrial[k] - r[k]) / PROBE - slope) * (2 / PROBE);
        for (let i = 0; i < n; i++) bend[i] -= (jacobian[k * n + i] * curvature) / norms[i];
      }
      choleskySolve(factor, n, bend);
      let straight = 0;
      let bent = 0;
      for (let i = 0; i < n; i++) {
        const relative = damped[i] / norms[i];
        straight += (relative * step[i]) ** 2;
        bent += (relative * bend[i]) ** 2;
      }
      // Beyond this the parabola says nothing about where the valley goes: a shorter step is wanted.
      if (!known || !(4 * bent <= 0.75 ** 2 * straight)) {
        lambda *= growth;
        growth *= 2;
        if (lambda > 1e20) break;
        continue;
      }
      for (let i = 0; i < n; i++) trial[i] = p[i] + (step[i] + 0.5 * bend[i]) / norms[i];
    }
    const allowed = problem.evaluate(trial, rTrial, null);
    const costTrial = allowed ? sumOfSquares(rTrial) : Infinity;
    const gain = (cost - costTrial) / predicted;
    if (costTrial <= cost) {
      [p, trial] = [trial, p];
      [r, rTrial] = [rTrial, r];
      cost = costTrial;
      lambda *= Math.max(0.1, 1 - (2 * gain - 1) ** 3);
      growth = 2;
      problem.evaluate(p, r, jacobian);
      formNormal(jacobian, r, m, n, normal, gradient, norms, damped);
      if (small || cost === 0) converged = true;
    } else if (small) {
      // Uphill within the rounding of the sum: this is the bottom.
      converged = costTrial - cost <= 1e-9 * cost;
      lambda = Math.max(lambda, 1e-6) * growth;
      growth *= 2;
    } else {
      lambda *= growth;
      growth *= 2;
      if (lambda > 1e20) break;
    }
  }

  const covariance = new Float64Array(n * n).fill(Number.NaN);
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < i; j++) factor[i * n + j] = normal[i * n + j];
    factor[i * n + i] = normal[i * n + i];
  }
  const regular = choleskyInPlace(factor, n);
  if (regular) {
    choleskyInvert(factor, n, covariance);
    for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) covariance[i * n + j] /= norms[i] * norms[j];
  }
  const status = regular ? (converged ? "converged" : "not-converged") : "singular";
  return { status, parameters: p, covariance, cost, iterations };
}

function sumOfSquares(r: Float64Array): number {
  let s = 0;
  for (let i = 0; i < r.length; i++) s += r[i] * r[i];
  return s;
}

/** JᵀJ (lower triangle) and Jᵀr for columns scaled to unit norm; updates the norms. A column of zeros keeps a zero row and norm 1. */
function formNormal(
  jacobian: Float64Array,
  r: Float64Array,
  m: number,
  n: number,
  normal: Float64Array,
  gradient: Float64Array,
  norms: Float64Array,
  damped: Float64Array,
): void {
  normal.fill(0);
  gradient.fill(0);
  for (let i = 0; i < m; i++) {
    const row = i * n;
    const ri = r[i];
    for (let a = 0; a < n; a++) {
      const ja = jacobian[row + a];
      if (ja === 0) continue;
      gradient[a] += ja * ri;
      const an = a * n;
      for (let b = 0; b <= a; b++) normal[an + b] += ja * jacobian[row + b];
    }
  }
  for (let a = 0; a < n; a++) {
    norms[a] = Math.sqrt(normal[a * n + a]) || 1;
    damped[a] = Math.max(FORGETTING * damped[a], norms[a]);
  }
  for (let a = 0; a < n; a++) {
    gradient[a] /= norms[a];
    for (let b = 0; b <= a; b++) normal[a * n + b] /= norms[a] * norms[b];
  }
}
