import { FWHM_PER_SIGMA } from "../../model/units.js";
import { twoSided, testShape, heightStep } from "./checks.js";
import { chooseModel, type Choice, type ChooseOptions } from "./choose.js";
import { contrastToNoise, fitShape, sdOf, type ShapeFit } from "./fit_shape.js";
import { correlationFactor, profileEnd } from "./interval.js";
import { judge, scatterLimit } from "./judge.js";
import { apparentVariance, radiusOfVariance } from "./models.js";
import { lineFrame, pixelsAlong, placeOf } from "./pixels.js";
import { SIGMA, TILT } from "./shapes.js";
import type { TipSettings } from "./settings.js";
import type { CutLine, TipImage, TipMeasured, TipResult, Width } from "./types.js";

/** χ²₁ at 95 % two-sided, and at 95 % one-sided. */
const TWO_SIDED = 3.841458820694124;
const ONE_SIDED = 2.705543454095404;
const Z95 = 1.959963984540054;

/** Resolution of the tip (full width at half maximum, nm) from the raw pixels beside a line over a sharp edge or a small particle.
 *
 *  Edge: Φ(z/σ) along the edge's normal, place, tilt and plateaus free, bent or on a plane where the evidence asks for it. Particle:
 *  bar or disc ∗ Gaussian on a plane, its own size free; a dot is fitted to both lines at once. The interval is by profile likelihood
 *  with the noise measured in the frame, widened where that noise is correlated or the fit leaves more than it.
 *  Assumes a response that is Gaussian and linear in the channel, and a feature sharp against it: otherwise the result is an upper
 *  limit, which the warnings say as far as the pixels can tell. Sampling at points or over the pixel is not told apart: what a pixel
 *  averages over is part of the resolution.
 *  Source: edge-spread function after ISO 12233 (slanted edge, no resampling); profile likelihood, Venzon & Moolgavkar 1988,
 *  Appl. Stat. 37, 87. */
export function measureTip(
  image: TipImage,
  line: CutLine,
  s: TipSettings,
  options: ChooseOptions = { model: null, sizeNm: null },
): TipResult {
  return measureCut(image, line, s, options).result;
}

/** A result with the likelihood behind it. */
export interface MeasuredCut {
  readonly result: TipResult;
  /** By how much χ² rises when the tip's full width at half maximum is held at a value, in units in which 3.84 ends a 95 % interval;
   *  null where nothing was measured. */
  readonly rise: ((fwhmNm: number) => number) | null;
}

/** `measureTip` with its profile likelihood, for use with those of other features. */
export function measureCut(image: TipImage, line: CutLine, s: TipSettings, options: ChooseOptions): MeasuredCut {
  const frame = lineFrame(line);
  const pixelNm = Math.max(image.pixel.xNm, image.pixel.yNm);
  if (frame.lengthNm < 4 * pixelNm) {
    return unusable(
      "few-pixels",
      `the line is ${frame.lengthNm.toFixed(0)} nm long; it must pass over at least 4 pixels`,
    );
  }
  const inFrame = (p: { xNm: number; yNm: number }): boolean =>
    p.xNm >= -image.pixel.xNm / 2 &&
    p.yNm >= -image.pixel.yNm / 2 &&
    p.xNm <= (image.cols - 0.5) * image.pixel.xNm &&
    p.yNm <= (image.rows - 0.5) * image.pixel.yNm;
  if (!inFrame(line.from) || !inFrame(line.to)) {
    const w = ((image.cols - 1) * image.pixel.xNm).toFixed(0);
    const h = ((image.rows - 1) * image.pixel.yNm).toFixed(0);
    return unusable("outside", `the line leaves the frame, which reaches from 0,0 to ${w},${h} nm`);
  }
  const strip = pixelsAlong(image, frame, line.widthNm, false);
  if (strip.n < s.leastPixels) {
    return unusable("few-pixels", `${strip.n} measured pixels lie beside the line; ${s.leastPixels} are needed`);
  }
  const choice = chooseModel(image, frame, line, strip, options);
  if (choice === null) return unusable("not-converged", "no model could be fitted to these pixels");
  if ((choice.evidence.nothing ?? 0) < s.leastEvidence) {
    return unusable("no-feature", "nothing on this line stands out of the noise: no step and no particle");
  }
  return describe(image, line, s, choice, options);
}

const unusable = (reason: Extract<TipResult, { status: "unusable" }>["reason"], message: string): MeasuredCut => ({
  result: { status: "unusable", reason, message },
  rise: null,
});

function describe(image: TipImage, line: CutLine, s: TipSettings, choice: Choice, options: ChooseOptions): MeasuredCut {
  const { fit, data, model } = choice;
  const frame = lineFrame(line);
  const reducedChi2 = fit.chi2 / fit.dof;
  const poor = reducedChi2 > scatterLimit(fit, image.noise);
  const scatter = poor ? reducedChi2 : 1;
  const inflation = scatter * correlationFactor(fit, data, SIGMA, image.cols, image.noise);
  const sigma = fit.theta[SIGMA];
  const floor = 0.02 * choice.extent.pitchNm;

  const profile = profileOfSigma(choice, options.sizeNm);
  const guess = firstStep(fit, sigma);
  const end = (rise: number, direction: 1 | -1): number =>
    profileEnd((v) => profile(v).chi2, sigma, fit.chi2, rise * inflation, direction * guess, floor);
  const low = end(TWO_SIDED, -1);
  const high = end(TWO_SIDED, 1);
  const lowNm = low <= floor * 1.001 ? 0 : FWHM_PER_SIGMA * low;
  const highNm = FWHM_PER_SIGMA * high;
  const upper95Nm = FWHM_PER_SIGMA * end(ONE_SIDED, 1);
  const apparent = apparentWidth(fit, inflation);
  if (!Number.isFinite(highNm) || !Number.isFinite(apparent.nm) || !(highNm < 3 * choice.extent.lengthNm)) {
    return unusable("not-converged", "the pixels beside this line do not bound the width");
  }
  const halfNm = (highNm - lowNm) / 2;
  const fwhm = FWHM_PER_SIGMA * sigma;
  const measured = model === "edge" || options.sizeNm !== null || halfNm <= s.separableShare * fwhm;
  const tests = testShape(fit, data);
  const sideShare = tests.sides?.value ?? 0;
  const sideSd = (tests.sides?.sd ?? 0) * Math.sqrt(inflation);
  const side = (share: number): Width => ({
    nm: fwhm * (1 + share),
    sdNm: fwhm * Math.hypot(sideSd, halfNm / Z95 / fwhm),
  });
  const height = image.heightNm === null ? null : heightStep(fit, data, image.heightNm);
  const result: TipMeasured = {
    status: measured ? "measured" : "upper-limit",
    model,
    fwhmNm: measured ? fwhm : apparent.nm,
    sdNm: measured ? halfNm / Z95 : apparent.sdNm,
    lowNm,
    highNm,
    // A limit claims no more than what stands without taking the particle's size off: the width as seen.
    upper95Nm: measured ? upper95Nm : apparent.nm + Math.sqrt(ONE_SIDED) * apparent.sdNm,
    apparent,
    size:
      model === "edge" || options.sizeNm !== null
        ? null
        : { nm: 2 * fit.theta[3], lowNm: 2 * profile(high).half, highNm: 2 * profile(low).half },
    directions: model === "dot" ? directionsOf(fit, choice, inflation) : null,
    sides: { near: side(-sideShare), far: side(sideShare), pValue: sideSd > 0 ? twoSided(sideShare / sideSd) : 1 },
    at: placeOf(frame, fit.theta[0], model === "dot" ? fit.theta[TILT] : 0),
    tiltDeg: model === "dot" ? 0 : (Math.atan(fit.theta[TILT]) * 180) / Math.PI,
    contrastToNoise: contrastToNoise(fit, data),
    pixels: data.n,
    reducedChi2,
    evidence: choice.evidence,
    height: height === null ? null : { nm: height.nm, sdNm: height.sdNm },
    warnings: [],
  };
  const rise = (nm: number): number => Math.max(0, profile(nm / FWHM_PER_SIGMA).chi2 - fit.chi2) / inflation;
  return { rise, result: { ...result, warnings: judge(image, frame, s, choice, result, tests, inflation) } };
}

/** A first step along σ: its standard deviation, within reason. */
function firstStep(fit: ShapeFit, sigma: number): number {
  const sd = sdOf(fit, SIGMA);
  return Number.isFinite(sd) ? Math.min(Math.max(1.9 * sd, 1e-3 * sigma), 0.5 * sigma) : 0.1 * sigma;
}

/** A fit with σ held: χ², and the half-size that goes with it. */
interface Held {
  readonly chi2: number;
  readonly half: number;
}

/** Least χ² with σ held. A particle's size follows: it starts where the width as seen stays the same. */
function profileOfSigma(choice: Choice, sizeNm: number | null): (sigma: number) => Held {
  const { fit, data, model, particle } = choice;
  if (model === "edge" || sizeNm !== null || particle === null) {
    const free = fit.free.filter((f) => f !== SIGMA);
    let last = fit.theta;
    return (sigma) => {
      const theta = last.slice();
      theta[SIGMA] = sigma;
      const held = fitShape(data, fit.shape, fit.base, theta, free);
      if (held === null) return { chi2: Infinity, half: 0 };
      last = held.theta;
      return { chi2: held.chi2, half: 0 };
    };
  }
  const variance = apparentVariance(particle.best.theta, model);
  const basic = fit.free.filter((f) => f !== SIGMA && f !== 3);
  return (sigma) => {
    const theta = fit.theta.slice();
    theta[SIGMA] = sigma;
    theta[3] = Math.max(radiusOfVariance(variance - sigma * sigma, model), 0.3 * sigma);
    const sized = fitShape(data, fit.shape, fit.base, theta, [...basic, 3]);
    if (sized !== null && sized.converged && sized.theta[3] > 0.5 * sigma)
      return { chi2: sized.chi2, half: sized.theta[3] };
    theta[3] = 0;
    const point = fitShape(data, fit.shape, fit.base, theta, basic);
    if (point === null || (sized !== null && sized.chi2 < point.chi2)) {
      return sized === null ? { chi2: Infinity, half: 0 } : { chi2: sized.chi2, half: sized.theta[3] };
    }
    return { chi2: point.chi2, half: 0 };
  };
}

/** Width as seen, its standard deviation by the slopes of the shape's own parameters. */
function apparentWidth(fit: ShapeFit, inflation: number): Width {
  const nm = fit.shape.apparentNm(fit.theta);
  const slopes = fit.free.map((f) => {
    if (f !== SIGMA && (f !== 3 || fit.shape.model === "edge")) return 0;
    const step = 1e-3 * fit.theta[SIGMA];
    const theta = fit.theta.slice();
    theta[f] += step;
    return (fit.shape.apparentNm(theta) - nm) / step;
  });
  let variance = 0;
  slopes.forEach((a, i) => slopes.forEach((b, j) => (variance += a * b * fit.covariance[i * slopes.length + j])));
  return { nm, sdNm: Math.sqrt(variance * inflation) };
}

/** Widths along the two lines of a dot, from a fit whose outline may be an ellipse of any direction. */
function directionsOf(fit: ShapeFit, choice: Choice, inflation: number): TipMeasured["directions"] {
  const { data } = choice;
  const oval = fitShape(data, fit.shape, fit.base, fit.theta, [...fit.free, 4, 5]);
  if (oval === null || !oval.converged) return null;
  const [e1, e2] = [oval.theta[4], oval.theta[5]];
  const n = oval.free.length;
  const a = oval.free.indexOf(4);
  const b = oval.free.indexOf(5);
  const v11 = oval.covariance[a * n + a] * inflation;
  const v12 = oval.covariance[a * n + b] * inflation;
  const v22 = oval.covariance[b * n + b] * inflation;
  const det = v11 * v22 - v12 * v12;
  const distance2 = (v22 * e1 * e1 - 2 * v12 * e1 * e2 + v11 * e2 * e2) / det;
  const w = Math.sqrt(1 - e1 * e1 - e2 * e2);
  const whole = apparentWidth(oval, inflation);
  const one = (sign: 1 | -1): Width => {
    const nm = whole.nm / Math.sqrt((1 + sign * e1) / w);
    return { nm, sdNm: nm * Math.hypot(whole.sdNm / whole.nm, Math.sqrt(v11) / 2) };
  };
  return { along: one(1), across: one(-1), pValue: Math.exp(-0.5 * Math.max(0, distance2)) };
}
