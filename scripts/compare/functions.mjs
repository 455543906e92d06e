// Special functions and distributions, over random arguments.
import { erf, erfc, erfcx, normalCdf, normalQuantile } from "../../dist/numerics/erf.js";
import {
  chi2Quantile,
  chi2UpperTail,
  fUpperTail,
  incompleteBeta,
  incompleteGamma,
  logGamma,
  studentQuantile,
  studentUpperTail,
} from "../../dist/numerics/distributions.js";
import { faddeeva } from "../../dist/numerics/faddeeva.js";
import { largestDifference, largestRelative, row } from "./rows.mjs";

const N = 400;

export function makeFunctions(random, put) {
  const draw = (name, of) => {
    const v = Float64Array.from({ length: N }, of);
    put(name, v, [N]);
    return v;
  };
  const x = draw("x", () => 12 * (random.uniform() - 0.5));
  const p = draw("p", () => random.uniform() ** 4);
  const a = draw("a", () => 30 * random.uniform() + 0.2);
  const b = draw("b", () => 30 * random.uniform() + 0.2);
  const t = draw("t", () => random.uniform());
  const g = draw("g", () => 40 * random.uniform());
  const dof = draw("dof", () => 1 + random.below(60));
  const y = draw("y", () => 5 * random.uniform());
  const over = (of) => Array.from(x, (_, k) => of(k));
  put(
    "tQuantile",
    t.map((v, k) => studentQuantile(v, dof[k])),
    [N],
  );
  const w = new Float64Array(2);
  const complex = over((k) => {
    faddeeva(x[k], y[k], w);
    return [...w];
  });
  return {
    input: {},
    compare(s) {
      const relative = (what, ours, theirs, tolerance, why) =>
        row(what, N, largestRelative(ours, theirs), tolerance, why);
      const few = "a few units of the last digit";
      const tails = "front factors of both lose digits with the size of their logarithm";
      return [
        relative(
          "erf",
          over((k) => erf(x[k])),
          s.erf,
          2e-15,
          few,
        ),
        relative(
          "erfc",
          over((k) => erfc(x[k])),
          s.erfc,
          1e-14,
          few,
        ),
        relative(
          "erfcx",
          over((k) => erfcx(x[k])),
          s.erfcx,
          1e-14,
          few,
        ),
        relative(
          "normal distribution (ndtr)",
          over((k) => normalCdf(x[k])),
          s.ndtr,
          2e-14,
          "theirs rounds x/√2",
        ),
        row(
          "normal quantile (ndtri), absolute over 1 + |z|",
          N,
          largestDifference(
            over((k) => normalQuantile(p[k])),
            s.ndtri,
            (z) => 1 + Math.abs(z),
          ),
          1e-14,
          few,
        ),
        row(
          "log gamma function, absolute over 1 + |ln Γ|",
          N,
          largestDifference(
            over((k) => logGamma(a[k])),
            s.gammaln,
            (v) => 1 + Math.abs(v),
          ),
          2e-14,
          "terms up to 30 that cancel",
        ),
        row(
          "incomplete gamma functions, absolute",
          2 * N,
          Math.max(
            largestDifference(
              over((k) => incompleteGamma(a[k], g[k])[0]),
              s.gammainc,
            ),
            largestDifference(
              over((k) => incompleteGamma(a[k], g[k])[1]),
              s.gammaincc,
            ),
          ),
          1e-13,
          tails,
        ),
        row(
          "incomplete beta function, absolute",
          N,
          largestDifference(
            over((k) => incompleteBeta(t[k], a[k], b[k])),
            s.betainc,
          ),
          1e-12,
          tails,
        ),
        relative(
          "χ² upper tail",
          over((k) => chi2UpperTail(g[k], dof[k])),
          s.chi2_sf,
          1e-11,
          tails,
        ),
        relative(
          "χ² quantile",
          over((k) => chi2Quantile(t[k], dof[k])),
          s.chi2_ppf,
          1e-10,
          tails,
        ),
        relative(
          "F upper tail",
          over((k) => fUpperTail(y[k], dof[k], dof[N - 1 - k])),
          s.f_sf,
          1e-11,
          tails,
        ),
        relative(
          "Student's t upper tail",
          over((k) => studentUpperTail(x[k], dof[k])),
          s.t_sf,
          1e-11,
          tails,
        ),
        relative(
          "Student's t distribution at our quantile",
          t,
          s.t_at_ours,
          1e-11,
          "their own quantile is off by some 1e-9 in SciPy 1.10",
        ),
        row(
          "Faddeeva's function (wofz), relative to its size",
          2 * N,
          Math.max(
            ...complex.map(
              (c, k) => Math.hypot(c[0] - s.wofz_re[k], c[1] - s.wofz_im[k]) / Math.hypot(s.wofz_re[k], s.wofz_im[k]),
            ),
          ),
          1e-13,
          few,
        ),
      ];
    },
  };
}
