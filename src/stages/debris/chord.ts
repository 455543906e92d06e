import { median, wrapAngle } from "../../numerics/quantile.js";
import type { Ring } from "./ring.js";

/** The step from one state to the other: logarithm of the amplitudes' ratio and the phase between them. */
export interface Contrast {
  readonly logRatio: number;
  readonly turnRad: number;
}

/** The step between the two states of one frame, from surroundings of one state each.
 *  @param levels the two levels of the logarithm of the amplitude */
export function contrastOf(
  levels: readonly [number, number],
  amplitude: Ring,
  phase: Ring,
  flat: Uint8Array,
): Contrast | null {
  const phases: [number[], number[]] = [[], []];
  for (let b = 0; b < flat.length; b++) {
    if (flat[b] === 0 || Number.isNaN(phase.reference[b])) continue;
    const r = amplitude.reference[b];
    phases[Math.abs(r - levels[1]) < Math.abs(r - levels[0]) ? 1 : 0].push(phase.reference[b]);
  }
  if (phases[0].length < 5 || phases[1].length < 5) return null;
  return { logRatio: levels[1] - levels[0], turnRad: wrapAngle(median(phases[1]) - median(phases[0])) };
}

const STEPS = 48;

/** Distance of a departure (logarithm of amplitude, phase) from all that domains can do: a blurred mixture of two states lies on the
 *  chord 1 + u(ρ − 1) between them in the complex plane, 0 ≤ u ≤ 1, seen from either end, and a mean over frames on the line
 *  from there to 0. What lies far from it is no domain, however often it was seen. */
export function distanceFromChord(logDeparture: number, turnRad: number, contrast: Contrast): number {
  let least = Math.hypot(logDeparture, turnRad);
  for (const end of [1, -1]) {
    const size = Math.exp(end * contrast.logRatio);
    const re = size * Math.cos(end * contrast.turnRad) - 1;
    const im = size * Math.sin(end * contrast.turnRad);
    for (let k = 1; k <= STEPS; k++) {
      const u = (1.05 * k) / STEPS;
      const x = Math.log(Math.hypot(1 + u * re, u * im));
      const y = Math.atan2(u * im, 1 + u * re);
      // nearest point of the line from 0 to there
      const t = Math.min(1, Math.max(0, (logDeparture * x + turnRad * y) / (x * x + y * y || 1)));
      least = Math.min(least, Math.hypot(logDeparture - t * x, turnRad - t * y));
    }
  }
  return least;
}
