// Least squares on the convolved kink, with covariance: the general solver, and the one that fits the wall profiles.
import { kink, fastKink } from "../../dist/numerics/kink.js";
import { leastSquares } from "../../dist/numerics/least_squares.js";
import { ProfileData } from "../../dist/stages/walls/profile_data.js";
import { ProfileFitter, CENTRE, WIDTH_SQUARED } from "../../dist/stages/walls/profile_fit.js";
import { largestDifference, largestRelative, row } from "./rows.mjs";

const FITS = 12;
const PIXELS = 300;
const SIGMA = 30 / 2.3548200450309493;

/** Levels of the two sides, centre, width w² of ½(1 + tanh(x/w)), blur σ (held by a prior). Every one but the last is free in the data. */
const model = (p, x, u) => {
  fastKink(x - p[2], Math.sqrt(p[3]), p[4], u);
  return p[0] + (p[1] - p[0]) * u[0];
};

function fitGeneral(x, y, sd, prior, curve) {
  const u = new Float64Array(4);
  return leastSquares(
    {
      parameters: 5,
      residuals: x.length + 1,
      evaluate(p, r, jacobian) {
        if (!(p[3] >= 0 && p[4] >= 0)) return false;
        const w = Math.sqrt(p[3]);
        for (let i = 0; i < x.length; i++) {
          curve(x[i] - p[2], w, p[4], u);
          r[i] = (p[0] + (p[1] - p[0]) * u[0] - y[i]) / sd;
          jacobian?.set(
            [1 - u[0], u[0], (p[0] - p[1]) * u[1], (p[1] - p[0]) * u[2], (p[1] - p[0]) * u[3]].map((v) => v / sd),
            5 * i,
          );
        }
        r[x.length] = (p[4] - SIGMA) / prior;
        jacobian?.set([0, 0, 0, 0, 1 / prior], 5 * x.length);
        return true;
      },
    },
    [y[0], y[y.length - 1], 0, 40 ** 2, SIGMA],
    { tolerance: 1e-9 },
  );
}

/** The same profile through the fitter of the walls stage: its arcs are all 0, so that its tilt says nothing. */
function fitProfile(x, y, sd, prior) {
  const data = new ProfileData();
  data.reserve(x.length);
  data.count = x.length;
  for (let k = 0; k < x.length; k++) {
    data.distance[k] = x[k];
    data.arc[k] = 0;
    data.value[k] = y[k];
    data.alpha[k] = 1;
    data.beta[k] = 1;
    data.weight[k] = 1 / sd;
  }
  const fitter = new ProfileFitter();
  fitter.p.set([y[0], y[y.length - 1], 0, 0, 40 ** 2, SIGMA]);
  const free = [true, true, true, false, true, true];
  const status = fitter.fit(data, free, { sigmaNm: SIGMA, sdNm: prior }, 100, 1e-12);
  const all = new Float64Array(36);
  if (status !== "converged" || !fitter.covariance(free, all)) return null;
  const keep = [0, 1, CENTRE, WIDTH_SQUARED, 5];
  return {
    parameters: keep.map((k) => fitter.p[k]),
    covariance: keep.flatMap((a) => keep.map((b) => all[6 * a + b])),
  };
}

export function makeFits(random, put) {
  const u = new Float64Array(4);
  const sd = 0.06;
  const prior = 1;
  const cases = [];
  const curveX = Float64Array.from({ length: 400 }, () => 400 * (random.uniform() - 0.5));
  const curveW = Float64Array.from({ length: 400 }, () => 150 * random.uniform() ** 2);
  const curveS = Float64Array.from({ length: 400 }, () => 5 + 40 * random.uniform());
  put("curveX", curveX, [400]);
  put("curveW", curveW, [400]);
  put("curveS", curveS, [400]);
  const column = (of, curve) =>
    Array.from(curveX, (v, k) => {
      curve(v, curveW[k], curveS[k], u);
      return u[of];
    });
  for (let k = 0; k < FITS; k++) {
    const truth = [1, 2.2, 20 * (random.uniform() - 0.5), (20 + 60 * random.uniform()) ** 2, SIGMA + random.normal()];
    const x = Float64Array.from({ length: PIXELS }, () => 360 * (random.uniform() - 0.5)).sort();
    const y = x.map((v) => model(truth, v, u) + sd * random.normal());
    put(`x${k}`, x, [PIXELS]);
    put(`y${k}`, y, [PIXELS]);
    cases.push({
      exact: fitGeneral(x, y, sd, prior, kink),
      table: fitGeneral(x, y, sd, prior, fastKink),
      profile: fitProfile(x, y, sd, prior),
    });
  }
  return {
    input: { fits: FITS, sd, prior, sigma: SIGMA },
    compare(theirs) {
      const sdOf = (t, j) => Math.sqrt(t.covariance[j * 5 + j]);
      const parameters = (of) =>
        Math.max(
          ...cases.map((c, k) =>
            c[of] === null
              ? Infinity
              : largestDifference(c[of].parameters, theirs.fits[k].parameters, (_, j) => sdOf(theirs.fits[k], j)),
          ),
        );
      // Each element in units of the two standard deviations that it belongs to.
      const covariances = (of) =>
        Math.max(
          ...cases.map((c, k) =>
            c[of] === null
              ? Infinity
              : largestDifference(
                  c[of].covariance,
                  theirs.fits[k].covariance,
                  (_, e) => sdOf(theirs.fits[k], Math.floor(e / 5)) * sdOf(theirs.fits[k], e % 5),
                ),
          ),
        );
      const all = cases.flatMap((c) => [c.exact, c.table]);
      return [
        row(
          "convolved kink: value (quadrature in the script)",
          400,
          largestDifference(column(0, kink), theirs.kink),
          1e-12,
          "both sums are exact to rounding",
        ),
        row(
          "convolved kink, tabulated: value",
          400,
          largestDifference(column(0, fastKink), theirs.kink),
          2e-7,
          "what the table promises",
        ),
        row(
          "least squares, fits that converged (least_squares, 5 parameters, 300 values)",
          all.length,
          all.filter((f) => f.status !== "converged").length,
          0,
          "a number",
        ),
        row(
          "least squares: parameters, in standard deviations",
          5 * FITS,
          parameters("exact"),
          1e-5,
          "both stop far below a standard deviation",
        ),
        row(
          "least squares: covariance, in pairs of standard deviations",
          25 * FITS,
          covariances("exact"),
          1e-4,
          "their derivatives are differences of values",
        ),
        row(
          "the same with the tabulated kink: parameters, in standard deviations",
          5 * FITS,
          parameters("table"),
          1e-3,
          "slopes of the table are right to 3e-6",
        ),
        row(
          "wall profile fit: parameters, in standard deviations",
          5 * FITS,
          parameters("profile"),
          1e-3,
          "slopes of the table are right to 3e-6",
        ),
        row(
          "wall profile fit: covariance, in pairs of standard deviations",
          25 * FITS,
          covariances("profile"),
          1e-3,
          "slopes of the table are right to 3e-6",
        ),
        row(
          "least squares: w² against curve_fit, relative",
          FITS,
          largestRelative(
            cases.map((c) => c.exact.parameters[3]),
            theirs.fits.map((f) => f.curve_fit_w2),
          ),
          1e-4,
          "their second front to the same data, its derivatives by single differences",
        ),
      ];
    },
  };
}
