import { FWHM_PER_SIGMA } from "../../model/units.js";
import { twoSided, testShape, heightStep } from "./checks.js";
import { chooseModel, type Choice, type ChooseOptions } from "./choose.js";
import { contrastToNoise, sdOf, type ShapeFit } from "./fit_shape.js";
import { correlationFactor, profileEnd } from "./interval.js";
import { judge, scatterLimit } from "./judge.js";
import { averageOver, sizeRoom, varianceSdOf } from "./marginal.js";
import { apparentVariance } from "./models.js";
import { lineFrame, pixelsAlong, placeOf } from "./pixels.js";
import { firstStep, profileOfSigma } from "./profile.js";
import { SIGMA, TILT } from "./shapes.js";
import type { TipSettings } from "./settings.js";
import { apparentWidth, directionsOf } from "./widths.js";
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
  const profiled = (nm: number): number => Math.max(0, profile(nm / FWHM_PER_SIGMA).chi2 - fit.chi2) / inflation;
  const averaged =
    model === "edge" || options.sizeNm !== null
      ? null
      : averageSize(model, fit.theta, apparent, profiled, lowNm, highNm);
  const fwhm = averaged?.nm ?? FWHM_PER_SIGMA * sigma;
  const sdNm = averaged?.sdNm ?? halfNm / Z95;
  const measured = averaged === null || halfNm <= s.separableShare * fwhm;
  const tests = testShape(fit, data);
  const sideShare = tests.sides?.value ?? 0;
  const sideSd = (tests.sides?.sd ?? 0) * Math.sqrt(inflation);
  const side = (share: number): Width => ({
    nm: fwhm * (1 + share),
    sdNm: fwhm * Math.hypot(sideSd, sdNm / fwhm),
  });
  const height = image.heightNm === null ? null : heightStep(fit, data, image.heightNm);
  const result: TipMeasured = {
    status: measured ? "measured" : "upper-limit",
    model,
    fwhmNm: measured ? fwhm : apparent.nm,
    sdNm: measured ? sdNm : apparent.sdNm,
    lowNm,
    highNm,
    // A limit claims no more than what stands without taking the particle's size off: the width as seen.
    upper95Nm: measured ? upper95Nm : apparent.nm + Math.sqrt(ONE_SIDED) * apparent.sdNm,
    apparent,
    size:
      model === "edge" || options.sizeNm !== null
        ? null
        : sizeOf(fit, profile(high).half, profile(low).half, inflation),
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
  const rise = averaged?.rise ?? profiled;
  return { rise, result: { ...result, warnings: judge(image, frame, s, choice, result, tests, inflation) } };
}

/** The width with the particle's own size averaged over, and the likelihood that goes with it. */
function averageSize(
  model: "bar" | "dot",
  theta: Float64Array,
  apparent: Width,
  profiled: (nm: number) => number,
  lowNm: number,
  highNm: number,
): { nm: number; sdNm: number; rise: (nm: number) => number } {
  const variance = apparentVariance(theta, model);
  const room = sizeRoom(model, variance, varianceSdOf(variance, apparent));
  const rise = (nm: number): number => profiled(nm) + room(nm / FWHM_PER_SIGMA);
  const { nm, sdNm, least } = averageOver(rise, lowNm, highNm);
  return { nm, sdNm, rise: (v) => Math.max(0, rise(v) - least) };
}

/** The particle's own size. What it trades with the tip's width shows at the ends of that one's interval; a large one, which trades nothing,
 *  has the uncertainty of its place in the fit. */
function sizeOf(fit: ShapeFit, least: number, most: number, inflation: number): NonNullable<TipMeasured["size"]> {
  const half = fit.theta[3];
  const sd = sdOf(fit, 3) * Math.sqrt(inflation);
  const own = sd < 0.3 * half ? Z95 * sd : 0;
  return { nm: 2 * half, lowNm: 2 * Math.min(least, half - own), highNm: 2 * Math.max(most, half + own) };
}
