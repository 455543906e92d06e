"""Other people's answers to the questions that compare_scipy.mjs puts: python3 compare_scipy.py FOLDER.

FOLDER holds a folder a topic with its arrays as .npy, and questions.json; answers.json is written beside it.
"""

import json
import sys
from pathlib import Path

import numpy as np
from scipy import ndimage, optimize, special, stats
from skimage import measure
from skimage.registration import phase_cross_correlation


def registration(load, q):
    plain, masked, refined = [], [], []
    for k in range(q["pairs"]):
        reference, moving = load(f"pair{k}a"), load(f"pair{k}b")
        plain.append(
            phase_cross_correlation(
                reference, moving, upsample_factor=q["upsampling"], normalization=None, return_error=False
            )
        )
        reference, moving = load(f"pair{k}c"), load(f"pair{k}d")
        seen = [np.isfinite(v) for v in (reference, moving)]
        filled = [np.where(m, v, 0) for v, m in zip((reference, moving), seen)]
        whole = phase_cross_correlation(*filled, reference_mask=seen[0], moving_mask=seen[1], overlap_ratio=0.3)
        masked.append(np.asarray(whole))
        refined.append(refine(filled, seen, whole))
    return {name: [[float(v) for v in s] for s in found] for name, found in
            {"plain": plain, "masked": masked, "refined": refined}.items()}


def refine(images, seen, start):
    """Least squares over the pixels that both frames hold, both blurred alike, the moving one through a cubic spline."""
    blurred, whole = [], []
    for image, mask in zip(images, seen):
        weight = ndimage.gaussian_filter(mask.astype(float), 1, mode="constant")
        blurred.append(ndimage.gaussian_filter(image.astype(float), 1, mode="constant") / np.maximum(weight, 1e-9))
        # The spline rings beside a gap: pixels next to one say nothing.
        whole.append(ndimage.binary_erosion(mask, np.ones((9, 9))))
    spline = ndimage.spline_filter(blurred[1], order=3)
    rows, cols = np.indices(images[0].shape)

    def overlap(shift):
        at = [rows - shift[0], cols - shift[1]]
        inside = ndimage.map_coordinates(whole[1].astype(float), at, order=1) > 0.999
        return whole[0] & inside

    fixed = overlap(start)
    r = blurred[0][fixed]

    def residuals(p):
        at = [rows[fixed] - p[0], cols[fixed] - p[1]]
        m = ndimage.map_coordinates(spline, at, order=3, prefilter=False)
        return p[2] + p[3] * r - m

    return optimize.least_squares(residuals, [*start, 0, 1], x_scale=[0.1, 0.1, 0.1, 0.1], xtol=1e-10).x[:2]


def contours(load, q):
    out = []
    for k in range(q["fields"]):
        for join in ("high", "low"):
            lines = measure.find_contours(load(f"field{k}"), q["levels"][k], fully_connected=join)
            lengths = [np.hypot(*np.diff(c, axis=0).T).sum() for c in lines]
            closed = [c for c in lines if (c[0] == c[-1]).all()]
            areas = [abs(np.sum(c[:-1, 0] * c[1:, 1] - c[1:, 0] * c[:-1, 1])) / 2 for c in closed]
            out.append({"lengths": sorted(lengths), "areas": sorted(areas)})
    return out


def labels(load, q):
    out = []
    for k in range(q["maps"]):
        metallic = load(f"map{k}")
        rows, cols = metallic.shape
        for state, connectivity in ((metallic == 1, 2), (metallic == 0, 1)):
            regions = measure.regionprops(measure.label(state, connectivity=connectivity))
            out.append([
                {
                    "area": int(r.area),
                    "y": r.centroid[0],
                    "x": r.centroid[1],
                    "border": bool(r.bbox[0] == 0 or r.bbox[1] == 0 or r.bbox[2] == rows or r.bbox[3] == cols),
                    "perimeter": measure.perimeter_crofton(np.pad(r.image, 1), directions=4),
                }
                for r in regions
            ])
    return out


NODE, WEIGHT = np.polynomial.legendre.leggauss(240)


def kink(x, w, sigma):
    """(1 + tanh(x/w))/2 through a Gaussian, by Gauss-Legendre quadrature over nine standard deviations of the narrower part."""
    x = np.asarray(x, float)[..., None]
    t = 9 * sigma * NODE
    gauss = 9 * WEIGHT * np.exp(-0.5 * (9 * NODE) ** 2) / np.sqrt(2 * np.pi)
    if w >= sigma:
        return (special.expit(2 * (x - t) / w) * gauss).sum(-1)
    # A narrow kink: the sum runs over its own density instead, (1/2w)/cosh^2(t/w).
    t = 20 * w * NODE
    density = 20 * WEIGHT * 0.5 / np.cosh(20 * NODE) ** 2
    return (special.ndtr((x - t) / sigma) * density).sum(-1)


def fits(load, q):
    x, w, sigma = load("curveX"), load("curveW"), load("curveS")
    values = [float(kink(a, b, c)) for a, b, c in zip(x, w, sigma)]

    def model(x, low, high, centre, w2, s):
        return low + (high - low) * kink(x - centre, np.sqrt(w2), s)

    out = []
    for k in range(q["fits"]):
        x, y = load(f"x{k}"), load(f"y{k}")
        start = [y[0], y[-1], 0, 1600, q["sigma"]]

        def residuals(p):
            return np.append((model(x, *p) - y) / q["sd"], (p[4] - q["sigma"]) / q["prior"])

        tight = dict(xtol=1e-14, ftol=1e-14, gtol=1e-14, x_scale=[0.1, 0.1, 10, 1000, 1],
                     bounds=([-np.inf, -np.inf, -np.inf, 1, 1], np.inf))
        fit = optimize.least_squares(residuals, start, jac="3-point", **tight)

        def with_prior(x, *p):
            return np.append(model(x[:-1], *p), p[4])

        found, _ = optimize.curve_fit(
            with_prior, np.append(x, 0), np.append(y, q["sigma"]), start,
            sigma=np.append(np.full(len(y), q["sd"]), q["prior"]), absolute_sigma=True, **tight,
        )
        out.append({
            "parameters": fit.x.tolist(),
            "covariance": np.linalg.inv(fit.jac.T @ fit.jac).ravel().tolist(),
            "curve_fit_w2": float(found[3]),
        })
    return {"kink": values, "fits": out}


def functions(load, q):
    x, p, a, b, t, g, dof, y = (load(n) for n in ("x", "p", "a", "b", "t", "g", "dof", "y"))
    w = special.wofz(x + 1j * y)
    found = {
        "erf": special.erf(x), "erfc": special.erfc(x), "erfcx": special.erfcx(x),
        "ndtr": special.ndtr(x), "ndtri": special.ndtri(p), "gammaln": special.gammaln(a),
        "gammainc": special.gammainc(a, g), "gammaincc": special.gammaincc(a, g), "betainc": special.betainc(a, b, t),
        "chi2_sf": stats.chi2.sf(g, dof), "chi2_ppf": stats.chi2.ppf(t, dof), "f_sf": stats.f.sf(y, dof, dof[::-1]),
        "t_sf": stats.t.sf(x, dof), "t_at_ours": stats.t.cdf(load("tQuantile"), dof), "wofz_re": w.real, "wofz_im": w.imag,
    }
    return {name: v.tolist() for name, v in found.items()}


def rising(y, weights):
    """Isotonic regression as least squares with increments that may not be negative (the first is a difference of two)."""
    steps = np.tril(np.ones((len(y), len(y))))
    design = np.hstack([steps, -steps[:, :1]]) * np.sqrt(weights)[:, None]
    found, _ = optimize.nnls(design, y * np.sqrt(weights), maxiter=100 * len(y))
    return steps @ np.concatenate([[found[0] - found[-1]], found[1:-1]])


def statistics(load, q):
    branches = [(load(f"y{k}"), load(f"weights{k}")) for k in range(q["branches"])]
    newer = getattr(optimize, "isotonic_regression", None)
    totals = []
    for k in range(q["assignments"]):
        weight = load(f"weight{k}")
        totals.append(float(weight[optimize.linear_sum_assignment(weight, maximize=True)].sum()))
    angles = load("angles")
    mean = stats.circmean(angles)
    intervals = [stats.binomtest(k, n).proportion_ci(method="wilson") for k, n in q["counts"]]
    return {
        "rising": np.concatenate([rising(y, w) for y, w in branches]).tolist(),
        "falling": np.concatenate([-rising(-y, w) for y, w in branches]).tolist(),
        "isotonic_regression": newer and np.concatenate([newer(y, weights=w).x for y, w in branches]).tolist(),
        "assignment": totals,
        "quantiles": np.quantile(load("values"), q["shares"]).tolist(),
        "circular": [np.cos(mean), np.sin(mean), 1 - stats.circvar(angles)],
        "wilson": [float(v) for i in intervals for v in (i.low, i.high)],
    }


def blur(load, q):
    out = []
    for k in range(q["fields"]):
        image = load(f"image{k}").astype(float)
        mask = np.isfinite(image)
        sigma_x, sigma_y = q["sigmas"][k]
        # Whole taps on each side, as many as hold four standard deviations.
        def smooth(v):
            for axis, sigma in ((0, sigma_y), (1, sigma_x)):
                radius = int(np.ceil(4 * sigma))
                v = ndimage.gaussian_filter1d(v, sigma, axis=axis, mode="constant", truncate=(radius + 0.1) / sigma)
            return v

        weight = smooth(mask.astype(float))
        values = smooth(np.where(mask, image, 0)) / np.where(weight > 1e-4, weight, np.nan)
        out.append({"values": values.ravel().tolist(), "weight": weight.ravel().tolist()})
    return out


def main(folder):
    questions = json.loads((folder / "questions.json").read_text())
    answers = {}
    for topic, answer in [(f.__name__, f) for f in (registration, contours, labels, fits, functions, statistics, blur)]:
        answers[topic] = answer(lambda name: np.load(folder / topic / f"{name}.npy"), questions[topic])
    # A value that is not a number is null on the other side.
    text = json.dumps(answers, default=float).replace("NaN", "null")
    (folder / "answers.json").write_text(text)


if __name__ == "__main__":
    main(Path(sys.argv[1]))
