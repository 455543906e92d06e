import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import { sdAlong } from "./noise.js";

/** A direction in the complex plane along which the share of the metallic signal is read: u = (Re(z e*) − offset) · scale. */
export interface Projection {
  readonly eRe: number;
  readonly eIm: number;
  readonly offset: number;
  readonly scale: number;
  /** Standard deviation of the noise of u at either state. */
  readonly sdInsulating: number;
  readonly sdMetallic: number;
}

/** How much of the chord's separation may be given up to be blind to fringes. */
const ENOUGH_OF_CHORD = 0.7;

/** Where between the states the direction is taken. */
const DIRECTION_AT = 0.7;

/** Direction for the share. z = (1 − u) z_I + u z_M is affine in u along any direction; along z itself a small turn of the phase (a
 *  fringe beside the wall) changes nothing to first order, while along the chord z_M − z_I it bends the profile. A fringe that turns
 *  all of the signal asks for the direction of z at the wall, u = ½; one that turns its metallic part for that of z_M: the direction
 *  between them leaves little of either. It is taken where it separates the states nearly as well as the chord does, else the chord
 *  (contrast mostly in the phase). */
export function projectionOf(
  insulating: ComplexValue,
  metallic: ComplexValue,
  noiseInsulating: NoiseCovariance,
  noiseMetallic: NoiseCovariance,
): Projection {
  const dRe = metallic.re - insulating.re;
  const dIm = metallic.im - insulating.im;
  const along = (re: number, im: number): { projection: Projection; separation: number } => {
    const length = Math.hypot(re, im) || 1;
    const eRe = re / length;
    const eIm = im / length;
    const step = dRe * eRe + dIm * eIm;
    const sdI = sdAlong(noiseInsulating, eRe, eIm);
    const sdM = sdAlong(noiseMetallic, eRe, eIm);
    return {
      projection: {
        eRe,
        eIm,
        offset: insulating.re * eRe + insulating.im * eIm,
        scale: 1 / step,
        sdInsulating: sdI / Math.abs(step),
        sdMetallic: sdM / Math.abs(step),
      },
      separation: step / Math.max(sdI, sdM, 1e-30),
    };
  };
  const chord = along(dRe, dIm);
  const radial = along(insulating.re + DIRECTION_AT * dRe, insulating.im + DIRECTION_AT * dIm);
  // the sign counts: a metallic state of lower amplitude has a falling projection, which serves as well
  return Math.abs(radial.separation) >= ENOUGH_OF_CHORD * chord.separation ? radial.projection : chord.projection;
}
