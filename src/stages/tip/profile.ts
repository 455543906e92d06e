import type { Choice } from "./choose.js";
import { fitShape, sdOf, type ShapeFit } from "./fit_shape.js";
import { apparentVariance, radiusOfVariance } from "./models.js";
import { SIGMA } from "./shapes.js";

/** A first step along σ: its standard deviation, within reason. */
export function firstStep(fit: ShapeFit, sigma: number): number {
  const sd = sdOf(fit, SIGMA);
  return Number.isFinite(sd) ? Math.min(Math.max(1.9 * sd, 1e-3 * sigma), 0.5 * sigma) : 0.1 * sigma;
}

/** A fit with σ held: χ², and the half-size that goes with it. */
export interface Held {
  readonly chi2: number;
  readonly half: number;
}

/** Least χ² with σ held. A particle's size follows: it starts where the width as seen stays the same. */
export function profileOfSigma(choice: Choice, sizeNm: number | null): (sigma: number) => Held {
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
