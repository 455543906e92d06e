import { normalPdf } from "./erf.js";
import { faddeeva } from "./faddeeva.js";

const scratch = new Float64Array(2);

/** A damped oscillation that begins at x = 0, through a Gaussian of standard deviation `sigma` > 0: writes
 *  c + is = ∫₀^∞ e^{−t/decay + 2πit/period} g(x − t; σ) dt to `out[0]`, `out[1]`; then A cos(2πx/period + ψ) e^{−x/decay} blurred is
 *  A (c cos ψ − s sin ψ). `decay` may be Infinity. Closed form by completing the square, ½ e^{k²σ²/2 − kx} erfc((kσ² − x)/(σ√2)) with
 *  k = 1/decay − 2πi/period, through Faddeeva's function so that nothing overflows; absolute error some 1e-15. */
export function dampedOscillation(x: number, period: number, decay: number, sigma: number, out: Float64Array): void {
  const kr = 1 / decay;
  const ki = (-2 * Math.PI) / period;
  const zr = (kr * sigma * sigma - x) / (sigma * Math.SQRT2);
  const zi = (ki * sigma) / Math.SQRT2;
  const half = 0.5 * Math.exp((-0.5 * x * x) / (sigma * sigma));
  if (zr >= 0) {
    // w(iζ), iζ = −ζ_i + iζ_r
    faddeeva(-zi, zr, scratch);
    out[0] = half * scratch[0];
    out[1] = half * scratch[1];
    return;
  }
  faddeeva(zi, -zr, scratch);
  const s2 = 0.5 * sigma * sigma;
  const size = Math.exp((kr * kr - ki * ki) * s2 - kr * x);
  const angle = 2 * kr * ki * s2 - ki * x;
  out[0] = size * Math.cos(angle) - half * scratch[0];
  out[1] = size * Math.sin(angle) - half * scratch[1];
}

/** As `dampedOscillation`, with slopes: `out` = c, s, then (∂c, ∂s) by x, by period, by decay and by sigma (10 numbers). */
export function dampedOscillationWithSlopes(
  x: number,
  period: number,
  decay: number,
  sigma: number,
  out: Float64Array,
): void {
  dampedOscillation(x, period, decay, sigma, out);
  const kr = 1 / decay;
  const ki = (-2 * Math.PI) / period;
  const c = out[0];
  const s = out[1];
  const z = x / sigma;
  const g = normalPdf(z) / sigma;
  // Integration by parts: I_x = g − kI; then I_k = −σ² I_x − xI, and the heat equation I_σ = σ I_xx with I_xx = g′ − k I_x.
  const xr = g - (kr * c - ki * s);
  const xi = -(kr * s + ki * c);
  const s2 = sigma * sigma;
  const kcr = -s2 * xr - x * c;
  const kci = -s2 * xi - x * s;
  out[2] = xr;
  out[3] = xi;
  // dk/d(period) = 2πi/period², dk/d(decay) = −1/decay²
  const byPeriod = (2 * Math.PI) / (period * period);
  out[4] = -byPeriod * kci;
  out[5] = byPeriod * kcr;
  out[6] = -kr * kr * kcr;
  out[7] = -kr * kr * kci;
  out[8] = sigma * ((-z / sigma) * g - (kr * xr - ki * xi));
  out[9] = -sigma * (kr * xi + ki * xr);
}
