import { FWHM_PER_SIGMA } from "../../model/units.js";
import { normalCdf, normalPdf } from "../../numerics/erf.js";
import { BlurredDisc } from "./blurred_disc.js";
import type { TipModel } from "./types.js";

/** A feature as the tip shows it, g(s, t; θ): 0 on one plateau and 1 on the other (edge) or at the peak (bar, dot). Levels are linear
 *  and no part of it. θ in nm; `names` says which is which. */
export interface Shape {
  readonly model: TipModel;
  readonly names: readonly string[];
  /** Fills g (n) and, where it is not null, its slopes (n × names.length, row-major). False: θ is not allowed. */
  evaluate(theta: Float64Array, s: Float64Array, t: Float64Array, g: Float64Array, dg: Float64Array | null): boolean;
  /** Full width at half maximum of the feature as seen, along its normal. */
  apparentNm(theta: Float64Array): number;
}

/** Where the parameters of all shapes stand: middle along the line, [shape's own], σ third. */
export const SIGMA = 2;
export const TILT = 1;

/** Sharp straight or bent edge: Φ(z/σ), z the distance along the edge's normal. θ = (s0, tilt, σ, bend): edge at s = s0 + tilt·t + ½ bend·t². */
export const edge: Shape = {
  model: "edge",
  names: ["s0", "tilt", "sigma", "bend"],
  evaluate([s0, tilt, sigma, bend], s, t, g, dg) {
    if (!(sigma > 0) || Math.abs(tilt) > 3) return false;
    const c = 1 / Math.sqrt(1 + tilt * tilt);
    for (let k = 0; k < s.length; k++) {
      const d = s[k] - s0 - tilt * t[k] - 0.5 * bend * t[k] * t[k];
      const x = (d * c) / sigma;
      g[k] = normalCdf(x);
      if (dg === null) continue;
      const f = normalPdf(x) / sigma;
      dg[4 * k] = -c * f;
      dg[4 * k + 1] = (-t[k] * c - d * tilt * c * c * c) * f;
      dg[4 * k + 2] = -x * f;
      dg[4 * k + 3] = -0.5 * t[k] * t[k] * c * f;
    }
    return true;
  },
  apparentNm: (theta) => FWHM_PER_SIGMA * theta[SIGMA],
};

/** Long bar across the line: a top-hat of half-width a blurred, peak 1. θ = (s0, tilt, σ, a). */
export const bar: Shape = {
  model: "bar",
  names: ["s0", "tilt", "sigma", "half"],
  evaluate([s0, tilt, sigma, a], s, t, g, dg) {
    if (!(sigma > 0) || !(a >= 0) || Math.abs(tilt) > 3) return false;
    const c = 1 / Math.sqrt(1 + tilt * tilt);
    const point = a < 0.02 * sigma;
    const m = point ? 1 : 2 * normalCdf(a / sigma) - 1;
    const peakSlope = point ? 0 : (2 * normalPdf(a / sigma)) / sigma;
    for (let k = 0; k < s.length; k++) {
      const d = s[k] - s0 - tilt * t[k];
      const z = d * c;
      let gz: number;
      let gs: number;
      let ga = 0;
      if (point) {
        g[k] = Math.exp((-0.5 * z * z) / (sigma * sigma));
        gz = (-z / (sigma * sigma)) * g[k];
        gs = ((z * z) / sigma ** 3) * g[k];
      } else {
        const left = (z + a) / sigma;
        const right = (z - a) / sigma;
        g[k] = (normalCdf(left) - normalCdf(right)) / m;
        const fl = normalPdf(left) / (sigma * m);
        const fr = normalPdf(right) / (sigma * m);
        gz = fl - fr;
        ga = fl + fr - (g[k] * peakSlope) / m;
        gs = -left * fl + right * fr + (g[k] * peakSlope * a) / (sigma * m);
      }
      if (dg === null) continue;
      dg[4 * k] = -c * gz;
      dg[4 * k + 1] = (-t[k] * c - d * tilt * c * c * c) * gz;
      dg[4 * k + 2] = gs;
      dg[4 * k + 3] = ga;
    }
    return true;
  },
  apparentNm([, , sigma, a]) {
    const peak = a < 0.02 * sigma ? 0 : 2 * normalCdf(a / sigma) - 1;
    if (peak === 0) return FWHM_PER_SIGMA * sigma;
    const at = (z: number): number => (normalCdf((z + a) / sigma) - normalCdf((z - a) / sigma)) / peak;
    return 2 * halfPoint(at, a + 4 * sigma);
  },
};

/** Round dot: a disc of radius R blurred, peak 1. θ = (s0, t0, σ, R, e1, e2); e stretches the whole as seen, 0 for a round one. */
export const dot: Shape = {
  model: "dot",
  names: ["s0", "t0", "sigma", "radius", "e1", "e2"],
  evaluate([s0, t0, sigma, radius, e1, e2], s, t, g, dg) {
    const e = e1 * e1 + e2 * e2;
    if (!(sigma > 0) || !(radius >= 0) || radius > 60 * sigma || !(e < 0.8)) return false;
    const w = Math.sqrt(1 - e);
    const point = radius < 0.05 * sigma;
    const disc = point ? null : new BlurredDisc(radius, sigma);
    const peakByR = disc === null ? 0 : (radius / sigma ** 2) * (1 - disc.peak);
    const peakBySigma = (-radius / sigma) * peakByR;
    for (let k = 0; k < s.length; k++) {
      const ds = s[k] - s0;
      const dt = t[k] - t0;
      const q = (1 + e1) * ds * ds + (1 - e1) * dt * dt + 2 * e2 * ds * dt;
      const r = Math.sqrt(Math.max(0, q / w));
      let slopeOverR: number;
      let bySigma: number;
      let byRadius = 0;
      if (disc === null) {
        g[k] = Math.exp((-0.5 * r * r) / (sigma * sigma));
        slopeOverR = -g[k] / (sigma * sigma);
        bySigma = ((r * r) / sigma ** 3) * g[k];
      } else {
        g[k] = disc.valueAt(r) / disc.peak;
        if (dg === null) continue;
        const slope = disc.slopeAt(r);
        const byR = disc.byRadius(r);
        slopeOverR =
          r > 1e-6 * sigma
            ? slope / (r * disc.peak)
            : (-0.5 * radius * radius * (1 - disc.peak)) / (sigma ** 4 * disc.peak);
        byRadius = (byR - g[k] * peakByR) / disc.peak;
        bySigma = (-(r * slope + radius * byR) / sigma - g[k] * peakBySigma) / disc.peak;
      }
      if (dg === null) continue;
      // ∂g/∂(r²) = slope / (2 r)
      const f = 0.5 * slopeOverR;
      dg[6 * k] = (f * -2 * ((1 + e1) * ds + e2 * dt)) / w;
      dg[6 * k + 1] = (f * -2 * ((1 - e1) * dt + e2 * ds)) / w;
      dg[6 * k + 2] = bySigma;
      dg[6 * k + 3] = byRadius;
      dg[6 * k + 4] = f * ((ds * ds - dt * dt) / w + (q * e1) / w ** 3);
      dg[6 * k + 5] = f * ((2 * ds * dt) / w + (q * e2) / w ** 3);
    }
    return true;
  },
  apparentNm([, , sigma, radius]) {
    if (radius < 0.05 * sigma) return FWHM_PER_SIGMA * sigma;
    const disc = new BlurredDisc(radius, sigma);
    return 2 * halfPoint((r) => disc.valueAt(r) / disc.peak, radius + 4 * sigma);
  },
};

/** Where a falling profile passes ½, by bisection. */
function halfPoint(at: (z: number) => number, far: number): number {
  let low = 0;
  let high = far;
  for (let k = 0; k < 50; k++) {
    const middle = (low + high) / 2;
    if (at(middle) > 0.5) low = middle;
    else high = middle;
  }
  return (low + high) / 2;
}

/** The shape with a small departure added, d · column, d being one more parameter (the last). The column is frozen. */
export function withColumn(shape: Shape, column: Float64Array): Shape {
  const k = shape.names.length;
  let scratch = new Float64Array(0);
  return {
    model: shape.model,
    names: [...shape.names, "departure"],
    evaluate(theta, s, t, g, dg) {
      if (scratch.length !== s.length * k) scratch = new Float64Array(s.length * k);
      if (!shape.evaluate(theta.subarray(0, k), s, t, g, dg === null ? null : scratch)) return false;
      for (let i = 0; i < s.length; i++) {
        g[i] += theta[k] * column[i];
        if (dg === null) continue;
        for (let a = 0; a < k; a++) dg[i * (k + 1) + a] = scratch[i * k + a];
        dg[i * (k + 1) + k] = column[i];
      }
      return true;
    },
    apparentNm: (theta) => shape.apparentNm(theta.subarray(0, k)),
  };
}
