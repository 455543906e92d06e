import { fitShape, solveLevels, baseTerms, type Base, type ShapeFit } from "./fit_shape.js";
import type { CutPixels } from "./pixels.js";
import { bar, dot, edge, SIGMA, TILT, type Shape } from "./shapes.js";

/** Pixels that starting values are looked for on; the fits see all of them. */
const SCAN_PIXELS = 120;
/** Starting widths (σ) in pixels. */
const SCAN_SIGMAS = [0.7, 1.4, 2.8, 5.6];
/** Variance of a uniform disc and of a bar along one axis: R²/4, a²/3. */
export const SIZE_VARIANCE = { dot: 1 / 4, bar: 1 / 3 } as const;

/** A line's extent and the pitch of its pixels, which set what is looked for. */
export interface Extent {
  readonly lengthNm: number;
  readonly widthNm: number;
  readonly pitchNm: number;
}

function thinned(data: CutPixels): CutPixels {
  const every = Math.max(1, Math.ceil(data.n / SCAN_PIXELS));
  if (every === 1) return data;
  // A stride through the row-major list alone could pick columns; this order is mixed but fixed.
  const keep: number[] = [];
  for (let k = 0; k < data.n; k++) if ((k * 7919) % data.n < data.n / every) keep.push(k);
  const pick = (a: Float64Array): Float64Array => Float64Array.from(keep, (k) => a[k]);
  return {
    n: keep.length,
    s: pick(data.s),
    t: pick(data.t),
    index: Int32Array.from(keep, (k) => data.index[k]),
    y: data.y.map(pick),
    inverseSd: data.inverseSd.map(pick),
  };
}

/** The best of a list of starting points. */
function scan(data: CutPixels, shape: Shape, base: Base, starts: Iterable<Float64Array>): Float64Array | null {
  const g = new Float64Array(data.n);
  let best: Float64Array | null = null;
  let least = Infinity;
  for (const theta of starts) {
    if (!shape.evaluate(theta, data.s, data.t, g, null)) continue;
    const chi2 = solveLevels(data, g, base, null);
    if (chi2 < least) {
      least = chi2;
      best = theta;
    }
  }
  return best;
}

function* places(e: Extent): Generator<number> {
  const n = Math.max(8, Math.min(40, Math.round(e.lengthNm / e.pitchNm)));
  for (let k = 1; k < n; k++) yield e.lengthNm * (k / n - 0.5);
}

function* edgeStarts(e: Extent): Generator<Float64Array> {
  for (const s0 of places(e)) for (const m of SCAN_SIGMAS) yield Float64Array.of(s0, 0, m * e.pitchNm, 0);
}

function* tilted(at: Float64Array, e: Extent): Generator<Float64Array> {
  for (const tilt of [0, -0.4, 0.4, -1, 1])
    for (const shift of [0, -1.5, 1.5]) yield Float64Array.of(at[0] + shift * e.pitchNm, tilt, at[SIGMA], at[3]);
}

/** The edge, its plateaus even or on a plane, straight or bent: the form that the evidence asks for. Null where none can be fitted. */
export function fitEdge(data: CutPixels, e: Extent): ShapeFit | null {
  const few = thinned(data);
  const first = scan(few, edge, "level", edgeStarts(e));
  const start = first === null ? null : scan(few, edge, "level", tilted(first, e));
  if (start === null) return null;
  const tiltHolds = e.widthNm > 1.5 * e.pitchNm;
  const free = tiltHolds ? [0, TILT, SIGMA] : [0, SIGMA];
  let best = fitShape(data, edge, "level", start, free);
  if (best === null) return null;
  best = better(best, fitShape(data, edge, "plane", best.theta, free), data);
  if (e.widthNm > 3.5 * e.pitchNm) best = better(best, fitShape(data, edge, best.base, best.theta, [...free, 3]), data);
  return inside(best, e) ? best : null;
}

/** The second where its extra parameters are worth it by a wide margin, else the first. */
function better(a: ShapeFit, b: ShapeFit | null, data: CutPixels): ShapeFit {
  if (b === null || !b.converged) return a;
  const scale = Math.max(1, b.chi2 / b.dof);
  return bic(a, data, scale) - bic(b, data, scale) > 6 ? b : a;
}

/** Bayesian information criterion (Schwarz 1978, Ann. Stat. 6, 461): χ² + parameters · ln(data). */
export function bic(fit: ShapeFit, data: CutPixels, scale: number): number {
  const parameters = fit.free.length + data.y.length * (baseTerms(fit.base) + 1);
  return fit.chi2 / scale + parameters * Math.log(data.n * data.y.length);
}

function inside(fit: ShapeFit, e: Extent): boolean {
  return Math.abs(fit.theta[0]) < e.lengthNm / 2 && fit.theta[SIGMA] < e.lengthNm;
}

/** A particle without a size of its own, and with one; null where it cannot be fitted. */
export interface ParticleFit {
  readonly point: ShapeFit | null;
  readonly sized: ShapeFit | null;
  readonly best: ShapeFit;
}

export function fitParticle(
  data: CutPixels,
  e: Extent,
  model: "bar" | "dot",
  sizeNm: number | null,
  from: Float64Array | null = null,
): ParticleFit | null {
  const shape = model === "bar" ? bar : dot;
  const few = thinned(data);
  let start = from;
  if (start === null) {
    const ridge = scan(few, bar, "plane", ridgeStarts(e));
    if (ridge === null) return null;
    start = scan(few, shape, "plane", model === "bar" ? tilted(ridge, e) : dotStarts(ridge, e));
  }
  if (start === null) return null;
  const tiltHolds = e.widthNm > 1.5 * e.pitchNm;
  const free = tiltHolds ? [0, TILT, SIGMA] : [0, SIGMA];
  if (sizeNm !== null) {
    const theta = start.slice();
    theta[3] = sizeNm / 2;
    theta[SIGMA] = Math.sqrt(
      Math.max(theta[SIGMA] ** 2 - SIZE_VARIANCE[model] * theta[3] ** 2, (0.3 * e.pitchNm) ** 2),
    );
    const fit = fitShape(data, shape, "plane", theta, free);
    return fit === null || !ends(fit, e) ? null : { point: null, sized: fit, best: fit };
  }
  const flat = start.slice();
  flat[3] = 0;
  const point = fitShape(data, shape, "plane", flat, free);
  if (point === null || !point.converged) return null;
  const variance = point.theta[SIGMA] ** 2;
  let sized: ShapeFit | null = null;
  for (const share of [0.4, 0.8]) {
    const fit = fitShape(data, shape, "plane", split(point.theta, variance, share, model), [...free, 3]);
    if (fit === null || !fit.converged || !ends(fit, e)) continue;
    if (sized === null || fit.chi2 < sized.chi2) sized = fit;
  }
  const best = sized !== null && sized.chi2 < point.chi2 ? sized : point;
  return ends(best, e) ? { point, sized, best } : null;
}

/** θ with a share of the apparent variance given to the feature's own size. */
export function split(theta: Float64Array, variance: number, share: number, model: "bar" | "dot"): Float64Array {
  const out = theta.slice();
  out[SIGMA] = Math.sqrt((1 - share) * variance);
  out[3] = Math.sqrt((share * variance) / SIZE_VARIANCE[model]);
  return out;
}

/** Apparent variance along one axis: the tip's and the particle's. */
export const apparentVariance = (theta: Float64Array, model: "bar" | "dot"): number =>
  theta[SIGMA] ** 2 + SIZE_VARIANCE[model] * theta[3] ** 2;

export const radiusOfVariance = (variance: number, model: "bar" | "dot"): number =>
  Math.sqrt(Math.max(0, variance) / SIZE_VARIANCE[model]);

/** A particle must lie on the line with both of its ends. */
function ends(fit: ShapeFit, e: Extent): boolean {
  const width = fit.shape.apparentNm(fit.theta);
  const across = fit.shape.model === "dot" ? Math.abs(fit.theta[TILT]) : 0;
  return Math.abs(fit.theta[0]) + width / 2 < e.lengthNm / 2 && across < e.widthNm / 2 + width / 2;
}

function* ridgeStarts(e: Extent): Generator<Float64Array> {
  for (const s0 of places(e)) for (const m of SCAN_SIGMAS) yield Float64Array.of(s0, 0, m * e.pitchNm, 0);
}

function* dotStarts(ridge: Float64Array, e: Extent): Generator<Float64Array> {
  for (const t of [0, -0.25, 0.25, -0.5, 0.5])
    for (const m of SCAN_SIGMAS) yield Float64Array.of(ridge[0], t * e.widthNm, m * e.pitchNm, 0, 0, 0);
}
