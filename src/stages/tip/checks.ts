import { FWHM_PER_SIGMA, RISE_PER_SIGMA, RISE_PER_W } from "../../model/units.js";
import { erfc, normalQuantile } from "../../numerics/erf.js";
import { fitShape, sdOf, type Base, type ShapeFit } from "./fit_shape.js";
import type { CutPixels } from "./pixels.js";
import { SIGMA, TILT, withColumn } from "./shapes.js";

/** Distance of each pixel from the feature: signed along the normal (edge, bar), from the middle (dot); nm. */
export function distances(fit: ShapeFit, data: CutPixels): Float64Array {
  const p = fit.theta;
  if (fit.shape.model === "dot") return data.s.map((s, k) => Math.hypot(s - p[0], data.t[k] - p[1]));
  const c = 1 / Math.hypot(1, p[TILT]);
  const bend = fit.shape.model === "edge" ? p[3] : 0;
  return data.s.map((s, k) => (s - p[0] - p[TILT] * data.t[k] - 0.5 * bend * data.t[k] ** 2) * c);
}

/** A departure from the model, in units of the feature's height, fitted together with everything else. */
export interface Departure {
  readonly value: number;
  readonly sd: number;
  /** χ² won. */
  readonly gain: number;
  /** χ² that is left, and the parameters spent on it. */
  readonly chi2: number;
  readonly parameters: number;
  /** Levels that the fit stood on. */
  readonly base: Base;
}

function departure(fit: ShapeFit, data: CutPixels, column: Float64Array): Departure | null {
  const shape = withColumn(fit.shape, column);
  const k = shape.names.length - 1;
  const more = fitShape(data, shape, fit.base, Float64Array.of(...fit.theta, 0), [...fit.free, k]);
  if (more === null || !more.converged) return null;
  const sd = sdOf(more, k);
  if (!Number.isFinite(sd)) return null;
  const parameters = more.solved.parameters.length;
  return { value: more.theta[k], sd, gain: fit.chi2 - more.chi2, chi2: more.chi2, parameters, base: fit.base };
}

export interface ShapeTests {
  /** Relative difference of the width of the far side and the near side from their mean. */
  readonly sides: Departure | null;
  /** Share of a response with a Lorentzian line spread of the same width. */
  readonly lorentzian: Departure | null;
  /** Share of a tanh profile (a wall's own) of the same 10–90 width; edges only. */
  readonly tanh: Departure | null;
  /** A ridge along the edge, twice as wide as the tip; edges only. */
  readonly rim: Departure | null;
}

/** Fits of small departures from the chosen model, one at a time. */
export function testShape(fit: ShapeFit, data: CutPixels): ShapeTests {
  const z = distances(fit, data);
  const model = fit.shape.model;
  const k = fit.shape.names.length;
  const g = new Float64Array(data.n);
  const dg = new Float64Array(data.n * k);
  fit.shape.evaluate(fit.theta, data.s, data.t, g, dg);
  const sigma = fit.theta[SIGMA];
  const side = model === "dot" ? data.s.map((s) => s - fit.theta[0]) : z;
  const sides = side.map((v, i) => Math.sign(v) * sigma * dg[i * k + SIGMA]);
  const gamma = (FWHM_PER_SIGMA * sigma) / 2;
  const apparent = fit.shape.apparentNm(fit.theta);
  const half = fit.theta[3];
  const lorentzian = z.map((v, i) => {
    if (model === "edge") return 0.5 + Math.atan(v / gamma) / Math.PI - g[i];
    // the point response whose line spread is a Lorentzian is (1 + r²/γ²)^{−3/2}
    if (model === "dot") return (1 + (2 ** (2 / 3) - 1) * ((2 * v) / apparent) ** 2) ** -1.5 - g[i];
    if (half < 0.02 * sigma) return 1 / (1 + (v / gamma) ** 2) - g[i];
    return (Math.atan((v + half) / gamma) - Math.atan((v - half) / gamma)) / (2 * Math.atan(half / gamma)) - g[i];
  });
  if (model !== "edge") {
    return { sides: departure(fit, data, sides), lorentzian: departure(fit, data, lorentzian), tanh: null, rim: null };
  }
  const w = (RISE_PER_SIGMA * sigma) / RISE_PER_W;
  const tanh = z.map((v, i) => 0.5 * (1 + Math.tanh(v / w)) - g[i]);
  // A slope beside the edge can be the far end of tails: level plateaus with tails are tried against it.
  const level = fit.base === "plane" ? fitShape(data, fit.shape, "level", fit.theta, fit.free) : null;
  const tail = (column: Float64Array): Departure | null => {
    const own = departure(fit, data, column);
    const other = level === null || !level.converged ? null : departure(level, data, column);
    return own === null || (other !== null && cost(other, data) < cost(own, data)) ? other : own;
  };
  return {
    sides: departure(fit, data, sides),
    lorentzian: tail(lorentzian),
    tanh: tail(tanh),
    rim: departure(
      fit,
      data,
      z.map((v) => Math.exp(-0.125 * (v / sigma) ** 2)),
    ),
  };
}

/** Bayesian information criterion of a fit with a departure. */
export const cost = (d: Departure, data: CutPixels): number => d.chi2 + d.parameters * Math.log(data.n * data.y.length);

/** Two-sided p-value of a normal deviate. */
export const twoSided = (z: number): number => erfc(Math.abs(z) / Math.SQRT2);

/** Step in height under the feature: heights against 1, s, t and the fitted shape. sd from the scatter that is left. */
export function heightStep(
  fit: ShapeFit,
  data: CutPixels,
  heightNm: Float32Array,
): { readonly nm: number; readonly sdNm: number } | null {
  const measured: number[] = [];
  for (let k = 0; k < data.n; k++) if (Number.isFinite(heightNm[data.index[k]])) measured.push(k);
  if (measured.length < 12) return null;
  const pick = (a: Float64Array): Float64Array => Float64Array.from(measured, (k) => a[k]);
  const cut: CutPixels = {
    n: measured.length,
    s: pick(data.s),
    t: pick(data.t),
    index: Int32Array.from(measured, (k) => data.index[k]),
    y: [Float64Array.from(measured, (k) => heightNm[data.index[k]])],
    inverseSd: [new Float64Array(measured.length).fill(1)],
  };
  // Only the height is free: what the tip sees of the height need not have the same width, its place is the same.
  const height = fitShape(cut, fit.shape, fit.base, fit.theta, []);
  if (height === null) return null;
  const { covariance, parameters, problem } = height.solved;
  const last = problem.parameters - 1;
  const scatter = height.chi2 / Math.max(1, height.dof);
  return { nm: parameters[last], sdNm: Math.sqrt(covariance[last * problem.parameters + last] * scatter) };
}

/** By how much the 10–90 width of |z| along z = a + u (b − a), u = Φ(x/σ), differs from that of u itself: a share; and the width of
 *  an amplitude that dips in between has no meaning (null). */
export function amplitudeDistortion(low: number, high: number, turnRad: number): number | null {
  const at = (u: number): number =>
    Math.hypot(low * (1 - u) + u * high * Math.cos(turnRad), u * high * Math.sin(turnRad));
  const step = high - low;
  const find = (level: number): number | null => {
    const target = low + level * step;
    let from = 0;
    let to = 1;
    if ((at(0) - target) * (at(1) - target) > 0) return null;
    for (let k = 0; k < 60; k++) {
      const middle = (from + to) / 2;
      if ((at(middle) - target) * (at(0) - target) > 0) from = middle;
      else to = middle;
    }
    return from;
  };
  const mid = at(0.02);
  if (Math.sign(mid - low) !== Math.sign(step) || Math.sign(high - at(0.98)) !== Math.sign(step)) return null;
  const u10 = find(0.1);
  const u90 = find(0.9);
  if (u10 === null || u90 === null) return null;
  return (normalQuantile(u90) - normalQuantile(u10)) / RISE_PER_SIGMA - 1;
}
