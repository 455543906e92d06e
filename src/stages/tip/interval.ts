import type { FrameNoise } from "./noise.js";
import type { CutPixels } from "./pixels.js";
import type { ShapeFit } from "./fit_shape.js";

/** How many times larger the variance of shape parameter `index` is than white noise of the same size would make it:
 *  Σ w_i C_ij w_j / Σ w_i², w the influence of each residual on the parameter, C the measured correlation (a product of one along x
 *  and one along y). 1 for white noise. The sandwich covariance of one parameter. */
export function correlationFactor(
  fit: ShapeFit,
  data: CutPixels,
  index: number,
  cols: number,
  noise: readonly FrameNoise[],
): number {
  if (noise.every((n) => n.correlationX[0] === 0 && n.correlationY[0] === 0)) return 1;
  const k = fit.free.indexOf(index);
  if (k < 0) return 1;
  const { problem, parameters, covariance } = fit.solved;
  const P = problem.parameters;
  const r = new Float64Array(problem.residuals);
  const jacobian = new Float64Array(problem.residuals * P);
  if (!problem.evaluate(parameters, r, jacobian)) return 1;
  const place = new Map<number, number>();
  for (let i = 0; i < data.n; i++) place.set(data.index[i], i);
  let white = 0;
  let full = 0;
  noise.forEach((component, c) => {
    const w = new Float64Array(data.n);
    for (let i = 0; i < data.n; i++) {
      for (let q = 0; q < P; q++) w[i] += jacobian[(c * data.n + i) * P + q] * covariance[q * P + k];
    }
    const cx = [1, ...component.correlationX];
    const cy = [1, ...component.correlationY];
    for (let i = 0; i < data.n; i++) {
      white += w[i] * w[i];
      const col = data.index[i] % cols;
      for (let dy = 0; dy < cy.length; dy++) {
        for (let dx = dy === 0 ? 0 : 1 - cx.length; dx < cx.length; dx++) {
          const rho = cx[Math.abs(dx)] * cy[dy];
          if (rho === 0 || col + dx < 0 || col + dx >= cols) continue;
          const j = place.get(data.index[i] + dy * cols + dx);
          // each pair once, the pixel with itself once
          if (j !== undefined) full += (dx === 0 && dy === 0 ? 1 : 2) * rho * w[i] * w[j];
        }
      }
    }
  });
  return white > 0 ? Math.max(full / white, 0.25) : 1;
}

/** Σ ρ² over all lags: by how much correlation widens the scatter of χ². */
export function correlationSquared(noise: readonly FrameNoise[]): number {
  const along = (c: readonly number[]): number => 1 + 2 * c.reduce((a, v) => a + v * v, 0);
  return Math.max(...noise.map((n) => along(n.correlationX) * along(n.correlationY)));
}

/** Where the profiled χ² has risen by `rise` above its least value on one side of `at`, by the secant with bracketing on √Δχ², which is
 *  nearly a straight line. `floor` where it never does before it.
 *  @param profile least χ² with the parameter held at a value; Infinity where there is no fit */
export function profileEnd(
  profile: (value: number) => number,
  at: number,
  least: number,
  rise: number,
  firstStep: number,
  floor: number,
): number {
  const target = Math.sqrt(rise);
  const height = (v: number): number => Math.sqrt(Math.max(0, profile(v) - least)) - target;
  const sign = Math.sign(firstStep);
  let inner = at;
  let innerHeight = -target;
  let step = Math.abs(firstStep);
  let outer = at;
  let outerHeight = -target;
  for (let k = 0; k < 40; k++) {
    outer = sign < 0 ? Math.max(floor, inner - step) : inner + step;
    outerHeight = height(outer);
    if (outerHeight >= 0) break;
    if (outer === floor) return floor;
    inner = outer;
    innerHeight = outerHeight;
    step *= 1.7;
  }
  if (!(outerHeight >= 0)) return sign < 0 ? floor : outer;
  if (!Number.isFinite(outerHeight)) outerHeight = 4 * target;
  for (let k = 0; k < 12 && Math.abs(outer - inner) > 1e-4 * at; k++) {
    const next = inner + ((outer - inner) * -innerHeight) / (outerHeight - innerHeight);
    const h = height(next);
    if (Math.abs(h) < 0.004 * target) return next;
    if (h < 0) {
      inner = next;
      innerHeight = h;
      outerHeight /= k > 3 ? 2 : 1;
    } else {
      outer = next;
      outerHeight = h;
      innerHeight /= k > 3 ? 2 : 1;
    }
  }
  return (inner + outer) / 2;
}
