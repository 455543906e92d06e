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
  const span = Math.max(rangeK[1] - rangeK[0], 1e-9);
  const t = (x: number): number => (x - 0.5 * (rangeK[0] + rangeK[1])) / span;
  const gain2 = (1.5 * gainSd) ** 2;
  const covariance = (fa: number, ta: number, fb: number, tb: number): number =>
    DIFFUSE + levelSlope ** 2 * ta * tb + gain2 * Math.exp(-Math.abs(fa - fb) / MEMORY_FRAMES);
  const a = new Float64Array(n * n);
  const k = new Float64Array(n);
  const y = new Float64Array(n);
  const centre = known[0].value;
  for (let i = 0; i < n; i++) {
    const p = known[i];
    for (let j = 0; j < n; j++) {
      const q = known[j];
      a[i * n + j] = covariance(p.frame, t(p.temperatureK), q.frame, t(q.temperatureK));
    }
    a[i * n + i] += p.sd * p.sd + (0.25 * gainSd) ** 2;
    k[i] = covariance(p.frame, t(p.temperatureK), frame, t(temperatureK));
    y[i] = p.value - centre;
  }
  if (!choleskyInPlace(a, n)) return { mean: Number.NaN, sd: Infinity };
  const weights = k.slice();
  choleskySolve(a, n, weights);
  let mean = centre;
  let variance = covariance(frame, t(temperatureK), frame, t(temperatureK)) + (0.25 * gainSd) ** 2;
  for (let i = 0; i < n; i++) {
    mean += weights[i] * y[i];
    variance -= weights[i] * k[i];
  }
  return { mean, sd: Math.sqrt(Math.max(variance, 1e-8)) };
}
