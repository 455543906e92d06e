import { describe, expect, it } from "vitest";
import { choleskyInPlace, choleskySolve } from "../../src/numerics/cholesky.js";
import {
  chi2Quantile,
  chi2UpperTail,
  fUpperTail,
  incompleteBeta,
  incompleteGamma,
  logGamma,
  studentQuantile,
  studentUpperTail,
  wilsonInterval,
} from "../../src/numerics/distributions.js";
import { erf, erfc, erfcx, normalCdf, normalQuantile } from "../../src/numerics/erf.js";
import { faddeeva } from "../../src/numerics/faddeeva.js";
import { aicc, bic, effectiveSampleSize } from "../../src/numerics/information.js";
import { SD_PER_MAD, circularMean } from "../../src/numerics/quantile.js";
import { fixture } from "./fixture.js";

// Source: mpmath in 30 digits and scipy; nested models also by R's anova, AIC and BIC.
const d = fixture<{
  special_functions: Record<string, number[][]> & { faddeeva_w: [number, number, [number, number]][] };
  distributions: Record<string, number[][]> & { mad_to_sd: number; half_chi2_mixture_one_sided_5_percent: number };
  nested_models: {
    x: number[];
    y: number[];
    models: { degree: number; rss: number; coefficients: number[]; aicc: number; bic: number }[];
    f_tests: { smaller: number; larger: number; F: number; dof: [number, number]; p: number }[];
  };
  circular: { angles_rad: number[]; circular_mean_rad: number; mean_resultant_length: number };
  effective_sample_size: { cases: number[][] };
}>("statistics");

function agree(pairs: number[][], f: (...a: number[]) => number, relative = 1e-12): void {
  expect(pairs.length).toBeGreaterThan(0);
  for (const row of pairs) {
    const expected = row[row.length - 1];
    const value = f(...row.slice(0, -1));
    expect(Math.abs(value - expected)).toBeLessThanOrEqual(relative * Math.abs(expected) + 1e-300);
  }
}

describe("special functions and distributions, against 30-digit values", () => {
  const s = d.special_functions;
  it("error functions and the normal quantile", () => {
    agree(s["erf"], erf, 1e-15);
    agree(s["erfc"], erfc, 1e-15);
    agree(s["erfcx"], erfcx, 1e-15);
    agree(s["normal_quantile"], normalQuantile, 1e-15);
    agree(s["erfinv"], (p) => normalQuantile(0.5 + 0.5 * p) / Math.SQRT2, 1e-10);
  });
  it("Faddeeva's function", () => {
    const out = new Float64Array(2);
    for (const [x, y, [re, im]] of s.faddeeva_w) {
      faddeeva(x, y, out);
      expect(Math.hypot(out[0] - re, out[1] - im)).toBeLessThan(1e-14 * Math.hypot(re, im));
    }
  });
  it("gamma and beta functions", () => {
    for (const [x, v] of s["log_gamma"]) expect(Math.abs(logGamma(x) - v)).toBeLessThan(1e-14 * Math.max(1, v));
    agree(s["regularised_lower_gamma_P(a,x)"], (a, x) => incompleteGamma(a, x)[0]);
    agree(s["regularised_beta_I(x;a,b)"], incompleteBeta);
  });
  it("tails and quantiles of chi-squared, F and t", () => {
    const q = d.distributions;
    agree(q["chi2_quantiles"], chi2Quantile);
    agree(q["chi2_survival"], chi2UpperTail);
    agree(q["f_survival"], fUpperTail);
    agree(q["t_quantiles"], studentQuantile);
    for (const p of [0.6, 0.95, 0.975, 0.9999]) {
      expect(studentQuantile(p, 1) * Math.tan(Math.PI * (1 - p))).toBeCloseTo(1, 12);
      expect(studentQuantile(p, 2) / ((2 * p - 1) / Math.sqrt(2 * p * (1 - p)))).toBeCloseTo(1, 12);
    }
    for (const [p, dof, t] of q["t_quantiles"]) expect(studentUpperTail(t, dof)).toBeCloseTo(1 - p, 12);
    expect(chi2Quantile(0.9, 1)).toBeCloseTo(q.half_chi2_mixture_one_sided_5_percent, 11);
    expect(SD_PER_MAD).toBeCloseTo(q.mad_to_sd, 14);
    expect(1 / normalQuantile(0.75)).toBeCloseTo(q.mad_to_sd, 14);
    expect(normalCdf(normalQuantile(0.975))).toBeCloseTo(0.975, 15);
  });
  it("Wilson's interval of a count", () => {
    for (const [hits, n, low, high] of d.distributions["binomial_wilson_95"]) {
      const interval = wilsonInterval(hits, n);
      expect(interval[0]).toBeCloseTo(low, 14);
      expect(interval[1]).toBeCloseTo(high, 14);
    }
  });
});

describe("worked statistics, against R and scipy", () => {
  it("nested polynomials: coefficients, residual sums, AICc, BIC, F tests", () => {
    const { x, y, models, f_tests: tests } = d.nested_models;
    for (const m of models) {
      const k = m.degree + 1;
      const a = new Float64Array(k * k);
      const b = new Float64Array(k);
      x.forEach((xi, i) => {
        for (let r = 0; r < k; r++) {
          b[r] += xi ** r * y[i];
          for (let c = 0; c <= r; c++) a[r * k + c] += xi ** (r + c);
        }
      });
      expect(choleskyInPlace(a, k)).toBe(true);
      choleskySolve(a, k, b);
      m.coefficients.forEach((v, i) => expect(b[i]).toBeCloseTo(v, 9));
      const rss = x.reduce((sum, xi, i) => sum + (y[i] - b.reduce((v, bj, j) => v + bj * xi ** j, 0)) ** 2, 0);
      expect(rss).toBeCloseTo(m.rss, 9);
      expect(aicc(m.rss, x.length, k)).toBeCloseTo(m.aicc, 10);
      expect(bic(m.rss, x.length, k)).toBeCloseTo(m.bic, 10);
    }
    for (const t of tests) {
      const f = ((models[t.smaller].rss - models[t.larger].rss) / t.dof[0]) * (t.dof[1] / models[t.larger].rss);
      expect(f / t.F).toBeCloseTo(1, 10);
      expect(fUpperTail(t.F, ...t.dof) / t.p).toBeCloseTo(1, 10);
    }
  });
  it("circular mean", () => {
    const m = circularMean(d.circular.angles_rad);
    expect(m.meanRad).toBeCloseTo(d.circular.circular_mean_rad, 12);
    expect(m.resultant).toBeCloseTo(d.circular.mean_resultant_length, 12);
  });
  it("effective sample size of correlated values", () => {
    for (const [n, rho, , exact] of d.effective_sample_size.cases) {
      expect(effectiveSampleSize(n, rho) / exact).toBeCloseTo(1, 12);
    }
  });
});
