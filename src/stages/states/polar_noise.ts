import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import type { StateEstimate } from "./level_fit.js";

/** Noise along a level (of the amplitude) and across it (of the phase), relative to the level's amplitude: independent of gain and of
 *  the phase reference. */
export interface PolarNoise {
  readonly along: number;
  readonly across: number;
  readonly cross: number;
}

export function toPolarNoise(state: Pick<StateEstimate, "level" | "noise">): PolarNoise {
  const { re, im } = state.level;
  const { rr, ri, ii } = state.noise;
  const m2 = Math.max(re * re + im * im, 1e-30);
  const c2 = (re * re) / m2;
  const s2 = (im * im) / m2;
  const cs = (re * im) / m2;
  return {
    along: (rr * c2 + 2 * ri * cs + ii * s2) / m2,
    across: (rr * s2 - 2 * ri * cs + ii * c2) / m2,
    cross: ((ii - rr) * cs + ri * (c2 - s2)) / m2,
  };
}

export function fromPolarNoise(noise: PolarNoise, level: ComplexValue): NoiseCovariance {
  const { re, im } = level;
  const { along, across, cross } = noise;
  return {
    rr: along * re * re - 2 * cross * re * im + across * im * im,
    ri: (along - across) * re * im + cross * (re * re - im * im),
    ii: along * im * im + 2 * cross * re * im + across * re * re,
  };
}

export function medianNoise(all: readonly PolarNoise[]): PolarNoise | null {
  if (all.length === 0) return null;
  const middle = (of: (n: PolarNoise) => number): number => {
    const sorted = all.map(of).sort((a, b) => a - b);
    return sorted[sorted.length >> 1];
  };
  return { along: middle((n) => n.along), across: middle((n) => n.across), cross: middle((n) => n.cross) };
}
