import type { FrameLevels, NoiseCovariance } from "../../model/signal.js";

/** Variance of the noise along the unit direction (ex, ey) of the complex signal. */
export function varianceAlong(c: NoiseCovariance, ex: number, ey: number): number {
  return ex * ex * c.rr + 2 * ex * ey * c.ri + ey * ey * c.ii;
}

/** Noise of the share, both states averaged, and by how much neighbour correlation raises its power at long wavelengths. */
export function shareNoise(levels: FrameLevels): { sd: number; areaFactor: number } {
  const dre = levels.metallic.re - levels.insulating.re;
  const dim = levels.metallic.im - levels.insulating.im;
  const contrast = Math.hypot(dre, dim);
  if (!(contrast > 0)) return { sd: 0, areaFactor: 1 };
  const ex = dre / contrast;
  const ey = dim / contrast;
  const variance = (varianceAlong(levels.noiseInsulating, ex, ey) + varianceAlong(levels.noiseMetallic, ex, ey)) / 2;
  return {
    sd: Math.sqrt(Math.max(0, variance)) / contrast,
    areaFactor: longWave(levels.noiseCorrelationX) * longWave(levels.noiseCorrelationY),
  };
}

/** (1 + ρ)/(1 − ρ): sum of the autocorrelation ρ^|k| over all lags. */
export function longWave(rho: number): number {
  const r = Math.min(0.95, Math.max(-0.5, rho));
  return (1 + r) / (1 - r);
}
