"""Which pixels are metallic: levels of both states, rows tied to them, the share of the metallic signal cut at one half."""

import numpy as np
from scipy import ndimage
from skimage.morphology import remove_small_objects

from .clean import blur


def common_levels(first):
    """What the frames with two clear levels agree on: the usual amplitudes, and the ratio of the two complex levels."""
    clear = [f for f in first if f["clear"]]
    if not clear:
        raise SystemExit("no frame shows two states clearly: nothing to tell the states by")
    ratio = np.array([f["metallic"] / f["insulating"] for f in clear])
    return {
        "insulating": float(np.median([abs(f["insulating"]) for f in clear])),
        "metallic": float(np.median([abs(f["metallic"]) for f in clear])),
        "ratio": complex(np.median(ratio.real), np.median(ratio.imag)),
    }


def levels_of(z, valid, first, common):
    if first["clear"]:
        return first["insulating"], first["metallic"]
    # One state, or nearly so: its level is the histogram's mode, and which one it is the amplitude tells.
    mode = first["mode"]
    nearest = min(("insulating", "metallic"), key=lambda n: abs(np.log(mode / common[n])))
    smooth = blur(np.abs(z), valid, 1)
    its_own = valid & (np.abs(smooth - mode) < 0.1 * mode)
    level = np.median(z.real[its_own]) + 1j * np.median(z.imag[its_own])
    return (level, level * common["ratio"]) if nearest == "insulating" else (level / common["ratio"], level)


def share_of(z, low, high):
    """Share u of the metallic signal: where |low + u (high - low)| is the amplitude seen, for a fringe turns the phase alone; where the
    amplitude hardly tells the states apart, by the projection on the line between them."""
    chord = high - low
    a, b, c = abs(chord) ** 2, (low.conjugate() * chord).real, abs(low) ** 2
    if b < 0.3 * abs(low) * abs(chord):
        return np.real((z - low) * np.conj(chord)) / a
    return (np.sqrt(np.maximum(b * b + a * (np.abs(z) ** 2 - c), 0)) - b) / a


def find_states(z, valid, first, common, pixel, tip):
    """Share u of the metallic signal (noise included), the same smoothed, map of states, levels, noise of u."""
    low, high = levels_of(z, valid, first, common)
    z = z.copy()
    for _ in range(3):
        smooth = blur(share_of(z, low, high), valid, 1)
        metallic = smooth > 0.5
        distance = np.where(
            metallic, *(ndimage.distance_transform_edt(m, sampling=pixel) for m in (metallic, ~metallic))
        )
        pure = valid & (distance > 2.5 * tip)
        # Gain and phase of each row from its pixels of one state; a row without any keeps those of its neighbours.
        model = np.where(metallic, high, low)
        weight = np.where(pure, np.abs(model) ** 2, 0).sum(1)
        factor = np.where(pure, z * model.conj(), 0).sum(1)
        known = pure.sum(1) >= 12
        if known.sum() >= 2:
            factor = factor[known] / weight[known]
            rows = np.arange(len(z))
            z /= (np.interp(rows, rows[known], factor.real) + 1j * np.interp(rows, rows[known], factor.imag))[:, None]
        for name, side in (("low", ~metallic), ("high", metallic)):
            inside = pure & side
            if inside.sum() < 300:
                continue
            level = z[inside].mean()
            low, high = (level, high) if name == "low" else (low, level)
    share = share_of(z, low, high)
    smooth = blur(share, valid, 1)
    least = int(np.ceil(np.pi * (tip / 2) ** 2 / (pixel[0] * pixel[1])))
    metallic = remove_small_objects(smooth > 0.5, least, connectivity=2)
    metallic = ~remove_small_objects(~metallic, least, connectivity=1)
    noise = np.std(share[pure]) if pure.any() else np.nan
    return {"z": z, "share": share, "smooth": smooth, "metallic": metallic, "low": low, "high": high, "noise": noise}
