import { choleskyInPlace, choleskySolve } from "../../numerics/cholesky.js";
import { leastSquares, type LeastSquaresProblem } from "../../numerics/least_squares.js";
import type { CutPixels } from "./pixels.js";
import type { Shape } from "./shapes.js";

/** Levels that the shape stands on: constant, or a plane. */
export type Base = "level" | "plane";
export const baseTerms = (base: Base): number => (base === "level" ? 1 : 3);

/** A fit of one shape. Per component: base terms (1, s, t), then the shape's height. */
export interface ShapeFit {
  readonly shape: Shape;
  readonly base: Base;
  /** All shape parameters, the fixed ones too. */
  readonly theta: Float64Array;
  /** Which of them were free. */
  readonly free: readonly number[];
  /** Components × (base terms + 1). */
  readonly levels: Float64Array;
  /** Of the free shape parameters, row-major; not scaled by χ². */
  readonly covariance: Float64Array;
  readonly chi2: number;
  readonly dof: number;
  readonly converged: boolean;
  /** The problem solved, its solution and covariance over shape and levels. */
  readonly solved: {
    readonly problem: LeastSquaresProblem;
    readonly parameters: Float64Array;
    readonly covariance: Float64Array;
  };
}

/** χ² of the data about shape and levels with everything in `theta` fixed: the levels solved for. Levels go to `levels` where given. */
export function solveLevels(data: CutPixels, g: Float64Array, base: Base, levels: Float64Array | null): number {
  const b = baseTerms(base);
  const m = b + 1;
  const a = new Float64Array(m * m);
  const rhs = new Float64Array(m);
  const x = new Float64Array(m);
  let chi2 = 0;
  data.y.forEach((y, c) => {
    const w = data.inverseSd[c];
    a.fill(0);
    rhs.fill(0);
    let yy = 0;
    for (let k = 0; k < data.n; k++) {
      x[0] = 1;
      if (b === 3) {
        x[1] = data.s[k];
        x[2] = data.t[k];
      }
      x[b] = g[k];
      const w2 = w[k] * w[k];
      for (let p = 0; p < m; p++) {
        for (let q = 0; q <= p; q++) a[p * m + q] += w2 * x[p] * x[q];
        rhs[p] += w2 * x[p] * y[k];
      }
      yy += w2 * y[k] * y[k];
    }
    // a shape that is 0 everywhere has no height
    for (let p = 0; p < m; p++) a[p * m + p] = a[p * m + p] === 0 ? 1 : a[p * m + p] * (1 + 1e-12);
    const right = rhs.slice();
    if (!choleskyInPlace(a, m)) {
      chi2 += Infinity;
      return;
    }
    choleskySolve(a, m, rhs);
    let explained = 0;
    for (let p = 0; p < m; p++) explained += rhs[p] * right[p];
    chi2 += Math.max(0, yy - explained);
    levels?.set(rhs, c * m);
  });
  return chi2;
}

/** χ² of the base alone. */
export function chi2OfNothing(data: CutPixels, base: Base): number {
  return solveLevels(data, new Float64Array(data.n), base, null);
}

/** Least squares over the free shape parameters and all levels, from `start` (all shape parameters). Null where the start is not allowed. */
export function fitShape(
  data: CutPixels,
  shape: Shape,
  base: Base,
  start: Float64Array,
  free: readonly number[],
): ShapeFit | null {
  const n = data.n;
  const K = shape.names.length;
  const F = free.length;
  const b = baseTerms(base);
  const m = b + 1;
  const C = data.y.length;
  const P = F + C * m;
  const theta = Float64Array.from(start);
  const g = new Float64Array(n);
  const dg = new Float64Array(n * K);
  if (!shape.evaluate(theta, data.s, data.t, g, null)) return null;
  const levels = new Float64Array(C * m);
  if (!Number.isFinite(solveLevels(data, g, base, levels))) return null;
  const p0 = new Float64Array(P);
  free.forEach((f, k) => (p0[k] = start[f]));
  p0.set(levels, F);

  const problem: LeastSquaresProblem = {
    parameters: P,
    residuals: C * n,
    evaluate(p, r, jacobian) {
      free.forEach((f, k) => (theta[f] = p[k]));
      if (!shape.evaluate(theta, data.s, data.t, g, jacobian === null ? null : dg)) return false;
      jacobian?.fill(0);
      for (let c = 0; c < C; c++) {
        const y = data.y[c];
        const w = data.inverseSd[c];
        const l = F + c * m;
        const height = p[l + b];
        for (let k = 0; k < n; k++) {
          const plane = b === 3 ? p[l + 1] * data.s[k] + p[l + 2] * data.t[k] : 0;
          r[c * n + k] = (p[l] + plane + height * g[k] - y[k]) * w[k];
          if (jacobian === null) continue;
          const row = (c * n + k) * P;
          for (let q = 0; q < F; q++) jacobian[row + q] = height * dg[k * K + free[q]] * w[k];
          jacobian[row + l] = w[k];
          if (b === 3) {
            jacobian[row + l + 1] = data.s[k] * w[k];
            jacobian[row + l + 2] = data.t[k] * w[k];
          }
          jacobian[row + l + b] = g[k] * w[k];
        }
      }
      return true;
    },
  };
  const fit = leastSquares(problem, p0, { maxIterations: 60, tolerance: 1e-3 });
  free.forEach((f, k) => (theta[f] = fit.parameters[k]));
  const covariance = new Float64Array(F * F);
  for (let i = 0; i < F; i++) for (let j = 0; j < F; j++) covariance[i * F + j] = fit.covariance[i * P + j];
  return {
    shape,
    base,
    theta: theta.slice(),
    free,
    levels: fit.parameters.slice(F),
    covariance,
    chi2: fit.cost,
    dof: C * n - P,
    converged: fit.status === "converged",
    solved: { problem, parameters: fit.parameters, covariance: fit.covariance },
  };
}

/** Height of the shape over the noise, all components together. */
export function contrastToNoise(fit: ShapeFit, data: CutPixels): number {
  const m = baseTerms(fit.base) + 1;
  let sum = 0;
  data.inverseSd.forEach((w, c) => {
    const mean = w.reduce((a, v) => a + v, 0) / w.length;
    sum += (fit.levels[c * m + m - 1] * mean) ** 2;
  });
  return Math.sqrt(sum);
}

/** Standard deviation of shape parameter `index`, NaN where it was fixed or the data do not hold it. */
export function sdOf(fit: ShapeFit, index: number): number {
  const k = fit.free.indexOf(index);
  return k < 0 ? Number.NaN : Math.sqrt(fit.covariance[k * fit.free.length + k]);
}
