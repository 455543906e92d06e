import { choleskyInPlace, choleskyInvert } from "../../numerics/cholesky.js";

/** A quantity that changes slowly along temperature, known from scattered measurements. */
export interface Course {
  /** Value and standard deviation of the curve at a temperature (no scatter of single frames in it). */
  at(temperatureK: number): { readonly mean: number; readonly sd: number };
}

const HUBER = 1.345;
const ROUNDS = 8;
/** A prior standard deviation that stands for "nothing known". */
const DIFFUSE = 100;

/** Quadratic in temperature with priors that keep slope and bend small, fitted with Huber's weights: where there are few frames it
 *  is a constant or a line, with a standard deviation that grows away from them.
 *  @param slopeSd prior standard deviation of the change over the whole range of temperature; a third of it for the bend
 *  @param commonSds the part of each measurement's standard deviation that is common to all of them: it is not averaged
 *  Sources: Huber 1964, Ann. Math. Stat. 35, 73; the prior is that of a penalised polynomial. */
export function fitCourse(
  temperaturesK: readonly number[],
  values: readonly number[],
  sds: readonly number[],
  rangeK: readonly [number, number],
  slopeSd: number,
  commonSds: readonly number[] = [],
): Course | null {
  if (values.length === 0) return null;
  const middle = 0.5 * (rangeK[0] + rangeK[1]);
  const span = Math.max(rangeK[1] - rangeK[0], 1e-9);
  const basis = (temperatureK: number): [number, number, number] => {
    const t = (temperatureK - middle) / span;
    return [1, t, 4 * t * t - 1 / 3];
  };
  const priors = [1 / DIFFUSE ** 2, 1 / slopeSd ** 2, 9 / slopeSd ** 2];
  const weights = values.map(() => 1);
  const coefficients = new Float64Array(3);
  const covariance = new Float64Array(9);
  for (let round = 0; round < ROUNDS; round++) {
    const a = new Float64Array(9);
    const b = new Float64Array(3);
    for (let k = 0; k < 3; k++) a[4 * k] = priors[k];
    values.forEach((y, n) => {
      const x = basis(temperaturesK[n]);
      const w = weights[n] / (sds[n] * sds[n]);
      for (let k = 0; k < 3; k++) {
        b[k] += w * x[k] * y;
        for (let l = 0; l < 3; l++) a[3 * k + l] += w * x[k] * x[l];
      }
    });
    if (!choleskyInPlace(a, 3)) return null;
    choleskyInvert(a, 3, covariance);
    for (let k = 0; k < 3; k++) {
      coefficients[k] = covariance[3 * k] * b[0] + covariance[3 * k + 1] * b[1] + covariance[3 * k + 2] * b[2];
    }
    values.forEach((y, n) => {
      const x = basis(temperaturesK[n]);
      const r = Math.abs(y - x[0] * coefficients[0] - x[1] * coefficients[1] - x[2] * coefficients[2]) / sds[n];
      weights[n] = r <= HUBER ? 1 : HUBER / r;
    });
  }
  const precision = sds.map((sd, n) => weights[n] / (sd * sd));
  const all = precision.reduce((a, b) => a + b, 0);
  const common2 = commonSds.reduce((a, sd, n) => a + (precision[n] * sd * sd) / all, 0);
  return {
    at(temperatureK) {
      const x = basis(temperatureK);
      let mean = 0;
      let variance = common2;
      for (let k = 0; k < 3; k++) {
        mean += x[k] * coefficients[k];
        for (let l = 0; l < 3; l++) variance += x[k] * x[l] * covariance[3 * k + l];
      }
      return { mean, sd: Math.sqrt(Math.max(0, variance)) };
    },
  };
}
