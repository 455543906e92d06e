import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import { gaussianBlur } from "../../raster/opencv.js";
import { sdAlong } from "./noise.js";
import type { Pixels } from "./pixels.js";

/** How the share of the metallic signal is read off the signal of one frame. */
export interface ShareCurve {
  /** Along the chord between the levels, or from the amplitude. */
  readonly reads: "chord" | "amplitude";
  /** Share at the value v: the component along the chord, or the amplitude. */
  shareOf(v: number): number;
  /** Unit vector of the chord. */
  readonly eRe: number;
  readonly eIm: number;
  /** Standard deviation of the pixel noise of the share at either state and halfway. */
  readonly sdInsulating: number;
  readonly sdMetallic: number;
  readonly sdHalf: number;
  /** Change of the share read at u = ½ for a change of the logarithm of the gain, and of the phase step in rad. */
  readonly perLogGain: number;
  readonly perStepRad: number;
}

/** The amplitude's curve must be this steep everywhere against its mean, and keep this much of the chord's separation. */
const LEAST_STEEPNESS = 0.35;
const ENOUGH_OF_CHORD = 0.6;
/** Beyond the levels by this much the curve goes on as a straight line. */
const BEYOND = 0.15;

/** How to read u from z = (1 − u) z_I + u z_M.
 *
 *  Along the chord, u = Re[(z − z_I)(z_M − z_I)*]/|z_M − z_I|² is affine, but a fringe that turns z beside the wall bends it. The amplitude
 *  |z| does not know the turn, and has one u to each value where it rises (or falls) all the way between the levels:
 *  |z|² = c + 2bu + au² with a = |z_M − z_I|², b = Re z_I*(z_M − z_I), c = |z_I|². It is read where it is steep enough and separates the states
 *  nearly as well as the chord; else (contrast mostly in the phase) the chord.
 *  @param assumedStepRad the phase step where no phase was recorded (levels real): the curve is bent by it; null with a phase */
export function shareCurve(
  insulating: ComplexValue,
  metallic: ComplexValue,
  noiseInsulating: NoiseCovariance,
  noiseMetallic: NoiseCovariance,
  assumedStepRad: number | null,
): ShareCurve {
  const amplitudeI = Math.hypot(insulating.re, insulating.im);
  const amplitudeM = Math.hypot(metallic.re, metallic.im);
  const seen = assumedStepRad === null ? insulating : { re: amplitudeI, im: 0 };
  const other =
    assumedStepRad === null
      ? metallic
      : { re: amplitudeM * Math.cos(assumedStepRad), im: amplitudeM * Math.sin(assumedStepRad) };
  const a = (other.re - seen.re) ** 2 + (other.im - seen.im) ** 2;
  const b = seen.re * (other.re - seen.re) + seen.im * (other.im - seen.im);
  const c = amplitudeI * amplitudeI;
  const amplitudeAt = (u: number): number => Math.sqrt(Math.max(0, c + 2 * b * u + a * u * u));
  const slopeAt = (u: number): number => (b + a * u) / Math.max(amplitudeAt(u), 1e-30);
  const sign = amplitudeM >= amplitudeI ? 1 : -1;
  const step = Math.abs(amplitudeM - amplitudeI);
  let least = Infinity;
  for (const u of [-BEYOND, 0, 0.25, 0.5, 0.75, 1, 1 + BEYOND]) least = Math.min(least, sign * slopeAt(u));
  const radialI = radial(insulating, noiseInsulating);
  const radialM = radial(metallic, noiseMetallic);

  const chordRe = metallic.re - insulating.re;
  const chordIm = metallic.im - insulating.im;
  const chord = Math.hypot(chordRe, chordIm) || 1;
  const eRe = chordRe / chord;
  const eIm = chordIm / chord;
  const alongI = sdAlong(noiseInsulating, eRe, eIm);
  const alongM = sdAlong(noiseMetallic, eRe, eIm);
  const chordSeparation = chord / Math.max(alongI, alongM, 1e-30);
  const separation = step / Math.max(radialI, radialM, 1e-30);
  const half = amplitudeAt(0.5);
  const usesAmplitude =
    least >= LEAST_STEEPNESS * step &&
    step > 0 &&
    (assumedStepRad !== null || separation >= ENOUGH_OF_CHORD * chordSeparation);
  if (!usesAmplitude) {
    const offset = insulating.re * eRe + insulating.im * eIm;
    return {
      reads: "chord",
      shareOf: (v) => (v - offset) / chord,
      eRe,
      eIm,
      sdInsulating: alongI / chord,
      sdMetallic: alongM / chord,
      sdHalf: Math.hypot(alongI, alongM) / Math.SQRT2 / chord,
      perLogGain: Math.abs(offset / chord + 0.5),
      perStepRad: 0,
    };
  }
  const ends = [-BEYOND, 1 + BEYOND].map((u) => ({ u, v: amplitudeAt(u), slope: slopeAt(u) }));
  const [low, high] = sign > 0 ? ends : [ends[1], ends[0]];
  return {
    reads: "amplitude",
    shareOf(v) {
      if (v <= low.v) return low.u + (v - low.v) / low.slope;
      if (v >= high.v) return high.u + (v - high.v) / high.slope;
      return (-b + sign * Math.sqrt(Math.max(0, b * b - a * (c - v * v)))) / a;
    },
    eRe,
    eIm,
    sdInsulating: radialI / Math.abs(slopeAt(0)),
    sdMetallic: radialM / Math.abs(slopeAt(1)),
    sdHalf: Math.hypot(radialI, radialM) / Math.SQRT2 / Math.abs(slopeAt(0.5)),
    perLogGain: Math.abs(half / slopeAt(0.5)),
    perStepRad:
      assumedStepRad === null
        ? 0
        : Math.abs((amplitudeI * amplitudeM * Math.sin(assumedStepRad)) / (4 * half * slopeAt(0.5))),
  };
}

const LEAST_WALL_PIXELS = 30;

/** Noise of the amplitude at a level. */
function radial(level: ComplexValue, noise: NoiseCovariance): number {
  const m = Math.hypot(level.re, level.im) || 1;
  return sdAlong(noise, level.re / m, level.im / m);
}

/** Share of every usable pixel, NaN elsewhere. The amplitude is taken as the component along the smoothed signal's own direction: to
 *  first order the same as |z|, but linear in the noise, so that averages of it are not biased.
 *  @param sigmaXPx, sigmaYPx smoothing that gives the direction */
export function readShare(z: Pixels, curve: ShareCurve, sigmaXPx: number, sigmaYPx: number): Float32Array {
  const share = new Float32Array(z.re.length).fill(Number.NaN);
  if (curve.reads === "chord" || !z.hasPhase) {
    const [eRe, eIm] = z.hasPhase ? [curve.eRe, curve.eIm] : curve.reads === "chord" ? [curve.eRe, 0] : [1, 0];
    for (let p = 0; p < share.length; p++) {
      if (z.usable[p] === 1) share[p] = curve.shareOf(z.re[p] * eRe + z.im[p] * eIm);
    }
    return share;
  }
  // unusable pixels hold 0 and shorten the sum, but do not turn it
  const re = gaussianBlur(z.re, z.rows, z.cols, sigmaXPx, sigmaYPx, "zero");
  const im = gaussianBlur(z.im, z.rows, z.cols, sigmaXPx, sigmaYPx, "zero");
  for (let p = 0; p < share.length; p++) {
    if (z.usable[p] === 0) continue;
    const m = Math.sqrt(re[p] * re[p] + im[p] * im[p]);
    share[p] = curve.shareOf(m > 0 ? (z.re[p] * re[p] + z.im[p] * im[p]) / m : Math.hypot(z.re[p], z.im[p]));
  }
  return share;
}

/** Turn of the phase at the walls over and above that of the two-state mixture: mean over pixels with a smoothed share near ½, rad.
 *  null where too few pixels lie there, or without phase.
 *  @param free 1 = usable, and not disturbed by debris
 *  @param u smoothed share */
export function turnAtWalls(
  z: Pixels,
  free: Uint8Array,
  u: Float32Array,
  insulating: ComplexValue,
  metallic: ComplexValue,
): { readonly meanRad: number; readonly sdRad: number } | null {
  if (!z.hasPhase) return null;
  let [n, re, im, along2, across2] = [0, 0, 0, 0, 0];
  for (let p = 0; p < u.length; p++) {
    if (!(u[p] > 0.4 && u[p] < 0.6) || free[p] === 0) continue;
    const er = (1 - u[p]) * insulating.re + u[p] * metallic.re;
    const ei = (1 - u[p]) * insulating.im + u[p] * metallic.im;
    const m2 = er * er + ei * ei;
    const a = (z.re[p] * er + z.im[p] * ei) / m2;
    const b = (z.im[p] * er - z.re[p] * ei) / m2;
    n++;
    re += a;
    im += b;
    along2 += a * a;
    across2 += b * b;
  }
  if (n < LEAST_WALL_PIXELS || !(re > 0)) return null;
  return {
    meanRad: Math.atan2(im, re),
    sdRad: Math.sqrt(Math.max(0, across2 / n - (im / n) ** 2) / n / Math.max(along2 / n, 1e-30)),
  };
}
