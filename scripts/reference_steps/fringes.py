"""Fringes: the optical phase beside each wall, over and above the step across it."""

import warnings

import numpy as np
from scipy import optimize, stats
from scipy.spatial import cKDTree

BIN = 15.0  # nm
FAR = 330.0  # nm
LEAST_CONTRAST = 0.06  # rad; smaller departures may be the model's


def profiles_of_phase(states, valid, pixel, walls, w, kink):
    """Of each wall: mean departure of the phase in bins of distance (nan where few pixels) and its standard error."""
    lines = [wall["points"] for wall in walls]
    owner = np.repeat(np.arange(len(lines)), [len(line) for line in lines])
    rows, cols = np.nonzero(valid)
    d, nearest = cKDTree(np.vstack(lines)).query(np.column_stack([rows, cols]) * pixel, distance_upper_bound=FAR)
    near = np.isfinite(d)
    rows, cols, d, which = rows[near], cols[near], d[near], owner[nearest[near]]
    d = np.where(states["metallic"][rows, cols], d, -d)
    u = kink(d, w)
    z, low, high = states["z"][rows, cols], states["low"], states["high"]
    model = (1 - u) * low + u * high
    departure = np.angle(z * model.conj())
    # The noise is the same on both sides of the complex signal: a small amplitude has an uncertain phase.
    weight = np.abs(model) ** 2
    bins = ((d + FAR) / BIN).astype(int)
    number = int(2 * FAR / BIN)
    cell = which * number + np.clip(bins, 0, number - 1)
    size = len(lines) * number
    count = np.bincount(cell, minlength=size)
    total = np.bincount(cell, weight, size)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.bincount(cell, weight * departure, size) / total
        spread = np.bincount(cell, weight * departure**2, size) / total - mean**2
        error = np.sqrt(spread / count)
    mean[count < 40] = np.nan
    centres = -FAR + BIN * (np.arange(number) + 0.5)
    return centres, mean.reshape(-1, number), error.reshape(-1, number)


def oscillation(d, amplitude, period, phase, decay):
    return amplitude * np.cos(2 * np.pi * d / period + phase) * np.exp(-d / decay)


def test_walls(states, valid, pixel, walls, w, kink, tip):
    if not walls:
        return []
    centres, mean, error = profiles_of_phase(states, valid, np.asarray(pixel), walls, w, kink)
    out = []
    for k in range(len(walls)):
        use = np.isfinite(mean[k]) & (np.abs(centres) > 0.7 * tip)
        if use.sum() < 10 or walls[k]["length"] < 6 * tip:
            continue
        d, y, sd = centres[use], mean[k, use], np.hypot(error[k, use], 0.004)
        y = y - np.average(y[np.abs(d) > 150], weights=1 / sd[np.abs(d) > 150] ** 2) if (np.abs(d) > 150).any() else y
        worst = int(np.argmax(np.abs(y) / sd))
        p = min(1.0, len(d) * 2 * stats.norm.sf(abs(y[worst]) / sd[worst]))
        side = "metallic" if d[worst] > 0 else "insulating"
        row = {"wall": k, "p": p, "side": side, "contrast": y[worst], "contrast_sd": sd[worst], "offset": d[worst]}
        here = d * np.sign(d[worst]) > 0
        if abs(y[worst]) > LEAST_CONTRAST and p < 0.01 and here.sum() >= 8:
            start = (2 * abs(y[worst]), 200.0, 0.0, 150.0)
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")
                try:
                    q, c = optimize.curve_fit(oscillation, np.abs(d[here]), y[here], start, sd[here], maxfev=400)
                    if 60 < abs(q[1]) < 600 and 30 < q[3] < 600:
                        row |= {"period": abs(q[1]), "period_sd": c[1, 1] ** 0.5, "decay": q[3], "decay_sd": c[3, 3] ** 0.5}
                except (RuntimeError, ValueError):
                    pass
        out.append(row)
    return out


def control(rows, level=0.05):
    """Benjamini and Hochberg 1995 over the cooldown, and a contrast large enough not to be the model's."""
    p = np.array([r["p"] for r in rows])
    order = np.argsort(p)
    adjusted = np.minimum.accumulate((p[order] * len(p) / np.arange(1, len(p) + 1))[::-1])[::-1]
    for k, q in zip(order, adjusted):
        rows[k]["detected"] = int(q <= level and abs(rows[k]["contrast"]) > LEAST_CONTRAST)
