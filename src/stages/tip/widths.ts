import type { Choice } from "./choose.js";
import { fitShape, type ShapeFit } from "./fit_shape.js";
import { SIGMA } from "./shapes.js";
import type { TipMeasured, Width } from "./types.js";

/** Width as seen, its standard deviation by the slopes of the shape's own parameters. */
export function apparentWidth(fit: ShapeFit, inflation: number): Width {
  const nm = fit.shape.apparentNm(fit.theta);
  const slopes = fit.free.map((f) => {
    if (f !== SIGMA && (f !== 3 || fit.shape.model === "edge")) return 0;
    const step = 1e-3 * fit.theta[SIGMA];
    const theta = fit.theta.slice();
    theta[f] += step;
    return (fit.shape.apparentNm(theta) - nm) / step;
  });
  let variance = 0;
  slopes.forEach((a, i) => slopes.forEach((b, j) => (variance += a * b * fit.covariance[i * slopes.length + j])));
  return { nm, sdNm: Math.sqrt(variance * inflation) };
}

/** Widths along the two lines of a dot, from a fit whose outline may be an ellipse of any direction. */
export function directionsOf(fit: ShapeFit, choice: Choice, inflation: number): TipMeasured["directions"] {
  const { data } = choice;
  const oval = fitShape(data, fit.shape, fit.base, fit.theta, [...fit.free, 4, 5]);
  if (oval === null || !oval.converged) return null;
  const [e1, e2] = [oval.theta[4], oval.theta[5]];
  const n = oval.free.length;
  const a = oval.free.indexOf(4);
  const b = oval.free.indexOf(5);
  const v11 = oval.covariance[a * n + a] * inflation;
  const v12 = oval.covariance[a * n + b] * inflation;
  const v22 = oval.covariance[b * n + b] * inflation;
  const det = v11 * v22 - v12 * v12;
  const distance2 = (v22 * e1 * e1 - 2 * v12 * e1 * e2 + v11 * e2 * e2) / det;
  const w = Math.sqrt(1 - e1 * e1 - e2 * e2);
  const whole = apparentWidth(oval, inflation);
  const one = (sign: 1 | -1): Width => {
    const nm = whole.nm / Math.sqrt((1 + sign * e1) / w);
    return { nm, sdNm: nm * Math.hypot(whole.sdNm / whole.nm, Math.sqrt(v11) / 2) };
  };
  return { along: one(1), across: one(-1), pValue: Math.exp(-0.5 * Math.max(0, distance2)) };
}
