import type { NoiseCovariance } from "../../model/signal.js";

/** Standard deviation of Re(z e*) for a unit vector e. */
export function sdAlong(c: NoiseCovariance, eRe: number, eIm: number): number {
  return Math.sqrt(Math.max(0, c.rr * eRe * eRe + 2 * c.ri * eRe * eIm + c.ii * eIm * eIm));
}

/** Pixels per independent pixel for noise that falls off by ρ from neighbour to neighbour along each axis: (1 + ρ)/(1 − ρ), never
 *  below 1. */
export function pixelsPerIndependent(correlationX: number, correlationY: number): number {
  const one = (r: number): number => (1 + Math.max(0, r)) / (1 - Math.max(0, Math.min(0.95, r)));
  return one(correlationX) * one(correlationY);
}
