import { choleskyInPlace, choleskySolve } from "../../numerics/cholesky.js";

/** Logarithm of the lower level of one frame, in its own gain. */
export interface LogLevel {
  readonly frame: number;
  readonly temperatureK: number;
  readonly value: number;
  readonly sd: number;
}

/** Frames after which a change of gain is forgotten. */
const MEMORY_FRAMES = 3;
/** Prior variance of the common level: nothing known. */
const DIFFUSE = 100;

/** What the known frames say of the lower level in another frame: levels change slowly along temperature, the gain wanders from
 *  frame to frame.
 *  A Gaussian process with a linear course in temperature and an exponential covariance along the frames.
 *  Source: kriging, e.g. Rasmussen & Williams 2006, Gaussian Processes for Machine Learning, ch. 2. */
export function predictLogLevel(
  known: readonly LogLevel[],
  frame: number,
  temperatureK: number,
  gainSd: number,
  levelSlope: number,
  rangeK: readonly [number, number],
): { readonly mean: number; readonly sd: number } {
  const n = known.length;
  if (n === 0) return { mean: Number.NaN, sd: Infinity };
  const model = courseModel(gainSd, levelSlope, rangeK);
  const centre = known[0].value;
  const a = covarianceOf(known, model);
  const k = Float64Array.from(known, (p) => model.between(p.frame, p.temperatureK, frame, temperatureK));
  if (!choleskyInPlace(a, n)) return { mean: Number.NaN, sd: Infinity };
  const weights = k.slice();
  choleskySolve(a, n, weights);
  let mean = centre;
  let variance = model.between(frame, temperatureK, frame, temperatureK) + model.ownVariance;
  for (let i = 0; i < n; i++) {
    mean += weights[i] * (known[i].value - centre);
    variance -= weights[i] * k[i];
  }
  return { mean, sd: Math.sqrt(Math.max(variance, 1e-8)) };
}

/** Steps of the search for the gain's scatter, as factors of the one expected. */
const SCATTERS = Array.from({ length: 13 }, (_, k) => 2 ** (k / 3));
/** How far the scatter is believed to lie from the one expected: 1 sd of its logarithm. */
const SCATTER_SD = Math.log(3);

/** How much the gain changes from frame to frame as the known frames themselves show it: the scatter, not below `expected`, at which
 *  their levels are most probable under the process of `predictLogLevel`, with a log-normal prior about `expected`.
 *  Taken too small it lets a chance change of gain pass for the other state. Method: type-II maximum likelihood (same book, ch. 5). */
export function gainScatter(
  known: readonly LogLevel[],
  expected: number,
  levelSlope: number,
  rangeK: readonly [number, number],
): number {
  let best = expected;
  let most = -Infinity;
  for (const factor of SCATTERS) {
    const a = covarianceOf(known, courseModel(expected * factor, levelSlope, rangeK));
    const n = known.length;
    if (n === 0 || !choleskyInPlace(a, n)) continue;
    const y = Float64Array.from(known, (p) => p.value - known[0].value);
    const solved = y.slice();
    choleskySolve(a, n, solved);
    let logLikelihood = -0.5 * (Math.log(factor) / SCATTER_SD) ** 2;
    for (let i = 0; i < n; i++) logLikelihood -= 0.5 * y[i] * solved[i] + Math.log(a[i * n + i]);
    if (logLikelihood > most) [most, best] = [logLikelihood, expected * factor];
  }
  return best;
}

interface CourseModel {
  /** Covariance of the levels of two frames. */
  readonly between: (frameA: number, temperatureA: number, frameB: number, temperatureB: number) => number;
  /** What each frame has of its own beside it. */
  readonly ownVariance: number;
}

function courseModel(gainSd: number, levelSlope: number, rangeK: readonly [number, number]): CourseModel {
  const span = Math.max(rangeK[1] - rangeK[0], 1e-9);
  const t = (x: number): number => (x - 0.5 * (rangeK[0] + rangeK[1])) / span;
  const gain2 = (1.5 * gainSd) ** 2;
  return {
    between: (fa, ta, fb, tb) =>
      DIFFUSE + levelSlope ** 2 * t(ta) * t(tb) + gain2 * Math.exp(-Math.abs(fa - fb) / MEMORY_FRAMES),
    ownVariance: (0.25 * gainSd) ** 2,
  };
}

function covarianceOf(known: readonly LogLevel[], model: CourseModel): Float64Array {
  const n = known.length;
  const a = new Float64Array(n * n);
  known.forEach((p, i) => {
    known.forEach((q, j) => (a[i * n + j] = model.between(p.frame, p.temperatureK, q.frame, q.temperatureK)));
    a[i * n + i] += p.sd * p.sd + model.ownVariance;
  });
  return a;
}
