"""Walls: contours of the share at one half, profiles sampled across them, the convolved kink fitted to each."""

import warnings

import numpy as np
from scipy import ndimage, optimize
from skimage.measure import find_contours

from .kink import RISE

REACH = 300.0  # nm, half length of a profile


def trace(states, valid, pixel, tip):
    """Contours in nm as (points [n, 2] in (y, x), closed), without those round patches too small for the tip."""
    out = []
    for line in find_contours(states["smooth"], 0.5, mask=valid):
        closed = bool((line[0] == line[-1]).all())
        points = line * pixel
        if closed:
            y, x = points[:-1].T
            area = 0.5 * abs(np.sum(y * np.roll(x, -1) - x * np.roll(y, -1)))
            if area < np.pi * (tip / 2) ** 2:
                continue
        elif len(line) < 6:
            continue
        # The line of noisy data zigzags by a fraction of a pixel.
        mode = "wrap" if closed else "nearest"
        body = points[:-1] if closed else points
        smooth = ndimage.gaussian_filter1d(body, 2, axis=0, mode=mode)
        out.append((np.vstack([smooth, smooth[:1]]) if closed else smooth, closed))
    return out


def stations(line, spacing):
    """Points, tangents and arc lengths along a wall, one a profile, in the middle of pieces of equal length."""
    arc = np.concatenate([[0], np.cumsum(np.hypot(*np.diff(line, axis=0).T))])
    number = int(arc[-1] // spacing)
    if number == 0:
        return np.empty((0, 2)), np.empty((0, 2)), np.empty(0), arc[-1]
    at = (np.arange(number) + 0.5) * arc[-1] / number
    point = np.column_stack([np.interp(at, arc, line[:, k]) for k in (0, 1)])
    ahead = np.column_stack([np.interp(np.minimum(at + 15, arc[-1]), arc, line[:, k]) for k in (0, 1)])
    behind = np.column_stack([np.interp(np.maximum(at - 15, 0), arc, line[:, k]) for k in (0, 1)])
    tangent = ahead - behind
    return point, tangent / np.hypot(*tangent.T)[:, None], at, arc[-1]


def sample(states, valid, points, normals, tangents, pixel, spacing):
    """Mean share along each normal over lines side by side, with the number of lines that have a value: [profiles, distances]."""
    step = min(pixel)
    d = np.arange(-REACH, REACH + step / 2, step)
    aside = (np.arange(round(spacing / step)) - (round(spacing / step) - 1) / 2) * step
    at = (
        points[:, None, None, :]
        + d[None, None, :, None] * normals[:, None, None, :]
        + aside[None, :, None, None] * tangents[:, None, None, :]
    ) / pixel
    at = np.moveaxis(at, -1, 0)
    # What was not measured is filled in for the spline alone: no sample near it is used.
    nearest = ndimage.distance_transform_edt(~valid, return_distances=False, return_indices=True)
    filled = states["share"][tuple(nearest)]
    value = ndimage.map_coordinates(filled, at, order=3, mode="nearest")
    good = ndimage.map_coordinates(valid.astype(np.float32), at, order=1, mode="constant") > 0.99
    side = ndimage.map_coordinates(states["metallic"].astype(np.float32), at, order=1, mode="nearest")
    count = good.sum(1)
    with np.errstate(invalid="ignore"):
        mean = np.where(good, value, 0).sum(1) / count
        side = np.where(good, side, 0).sum(1) / count
    return d, mean, count, side


def usable(d, count, side, lines):
    """Which samples of each profile belong to its own wall: up to half way to where the state changes back, and without gaps."""
    centre = len(d) // 2
    good = count >= 0.5 * lines
    wrong = np.where(d > 0, side < 0.5, side > 0.5) & (np.abs(d) > 40)
    keep = good.copy()
    for half, order in ((slice(centre, None), 1), (slice(centre, None, -1), -1)):
        back = wrong[:, half]
        first = np.where(back.any(1), back.argmax(1), back.shape[1] * 2)
        limit = np.abs(d[half])[None, :] < np.minimum(first, 2 * back.shape[1])[:, None] * abs(d[1] - d[0]) / 2
        gap = np.cumsum(~good[:, half] & (np.abs(d[half]) > 40)[None, :], axis=1) > 0
        keep[:, half] &= limit & ~gap
    return keep


def fit_profile(d, y, weight, kink, start):
    """Levels, centre and w with their covariance by curve_fit; None where it does not converge."""
    def model(x, low, high, centre, w):
        return low + (high - low) * kink(x - centre, w)

    def jacobian(x, low, high, centre, w):
        u, by_x, by_w = kink(x - centre, w, 3)
        return np.column_stack([1 - u, u, -(high - low) * by_x, (high - low) * by_w])

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error", optimize.OptimizeWarning)
            p, c = optimize.curve_fit(
                model, d, y, start, sigma=1 / np.sqrt(weight), jac=jacobian, method="lm", ftol=1e-5, xtol=1e-5,
                maxfev=60,
            )
    except (RuntimeError, optimize.OptimizeWarning):
        return None
    chi2 = np.sum(weight * (y - model(d, *p)) ** 2) / (len(d) - 4)
    return p, np.sqrt(np.diag(c)), chi2


def fit_walls(states, valid, pixel, tip, kink):
    """Rows of the walls table, and the walls themselves."""
    pixel = np.asarray(pixel)
    spacing = 2 * tip
    walls, profiles = [], []
    for line, closed in trace(states, valid, pixel, tip):
        wall = len(walls)
        point, tangent, arc, length = stations(line, spacing)
        walls.append({"points": line, "closed": closed, "length": length})
        if len(arc) == 0:
            continue
        normal = np.column_stack([-tangent[:, 1], tangent[:, 0]])
        # Towards the metallic side.
        ahead, behind = (
            ndimage.map_coordinates(states["smooth"], ((point + s * 30 * normal) / pixel).T, order=1, mode="nearest")
            for s in (1, -1)
        )
        normal *= np.where(ahead > behind, 1, -1)[:, None]
        d, mean, count, side = sample(states, valid, point, normal, tangent, pixel, spacing)
        lines = round(spacing / min(pixel))
        keep = usable(d, count, side, lines)
        for k in range(len(arc)):
            row = {"wall": wall, "profile": k, "y": point[k, 0], "x": point[k, 1], "arc": arc[k],
                   "normal_deg": np.degrees(np.arctan2(-normal[k, 0], normal[k, 1])), "flag": ""}
            profiles.append(row)
            use = keep[k]
            left, right = (d[use] < -40).sum(), (d[use] > 40).sum()
            if use.sum() < 12 or min(left, right) < 4:
                row["flag"] = "few-pixels"
                continue
            fit = fit_profile(d[use], mean[k, use], count[k, use] / states["noise"] ** 2, kink, (0, 1, 0, 40))
            if fit is None:
                row["flag"] = "not-converged"
                continue
            (low, high, centre, w), sd, chi2 = fit
            w = abs(w)
            row |= {"width": RISE * w, "sd": RISE * sd[3], "chi2": chi2, "apparent": kink.apparent_width(w)}
            reach = min(-d[use][0] + centre, d[use][-1] - centre)
            if reach < 0.6 * row["apparent"] or abs(low) > 0.25 or abs(high - 1) > 0.25:
                row["flag"] = "plateau-not-reached"
            elif chi2 > 4:
                row["flag"] = "poor-fit"
    return walls, profiles
