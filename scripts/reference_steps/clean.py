"""One frame cleaned: topography levelled, rows brought to one phase, pixels that say nothing masked; first guess of the two levels."""

import numpy as np
from scipy import ndimage
from skimage.filters import threshold_otsu

from .cooldown import read_images


def blur(values, mask, sigma):
    """Gaussian mean over the pixels of the mask."""
    weight = ndimage.gaussian_filter(mask.astype(np.float32), sigma, mode="constant")
    total = ndimage.gaussian_filter(np.where(mask, values, 0).astype(np.float32), sigma, mode="constant")
    return total / np.maximum(weight, 1e-3)


def level(topography):
    """Plane by least squares, then the median of each row."""
    rows, cols = np.indices(topography.shape)
    seen = np.isfinite(topography)
    design = np.column_stack([np.ones(seen.sum()), rows[seen], cols[seen]])
    plane = np.linalg.lstsq(design, topography[seen], rcond=None)[0]
    flat = topography - (plane[0] + plane[1] * rows + plane[2] * cols)
    with np.errstate(all="ignore"):
        middle = np.where(seen.any(1), np.nanmedian(np.where(seen.any(1)[:, None], flat, 0), axis=1), 0)
    return flat - middle[:, None]


def scars(amplitude):
    """Runs of three pixels and more along a row that leave both neighbouring rows on the same side."""
    padded = np.pad(amplitude, ((1, 1), (0, 0)), mode="reflect")
    above, below = amplitude - padded[:-2], amplitude - padded[2:]
    step = np.minimum(np.abs(above), np.abs(below)) * (np.sign(above) == np.sign(below))
    noise = 1.4826 * np.nanmedian(np.abs(above)) / np.sqrt(2)
    high = step > 3.5 * noise
    return ndimage.binary_opening(high, np.ones((1, 3)))


def debris(topography, pixel, tip):
    """Particles stand out of the film's relief; around them the signal is theirs as far as the tip reaches."""
    seen = np.isfinite(topography)
    relief = np.where(seen, topography, 0) - blur(topography, seen, [120 / p for p in pixel])
    sd = 1.4826 * np.median(np.abs(relief[seen]))
    high = (blur(relief, seen, 0.7) > 4.0 * sd) & seen
    if not high.any():
        return high
    return ndimage.distance_transform_edt(~high, sampling=pixel) < 1.2 * tip


def clean(frame, pixel, tip):
    topography, amplitude, phase = (v.astype(np.float64) for v in read_images(frame))
    topography = level(topography)
    valid = np.isfinite(amplitude) & np.isfinite(phase)
    valid &= ~scars(np.where(np.isfinite(amplitude), amplitude, 0))
    particles = debris(topography, pixel, tip)
    z = np.where(valid, amplitude * np.exp(1j * phase), 0)
    # The interferometer's phase differs from row to row: each row against the one above.
    steps = np.angle((z[1:] * z[:-1].conj()).sum(1))
    z *= np.exp(-1j * np.concatenate([[0], np.cumsum(steps)]))[:, None]
    return {"topography": topography.astype(np.float32), "z": z.astype(np.complex64), "valid": valid & ~particles,
            "measured": valid}


def first_levels(z, valid, pixel, tip):
    """Two levels by Otsu's threshold, well away from the line between them; what tells whether there are two at all."""
    smooth = blur(np.abs(z), valid, 1)
    threshold = threshold_otsu(smooth[valid])
    high = smooth > threshold
    pure = {}
    for name, side in (("insulating", ~high), ("metallic", high)):
        inside = ndimage.distance_transform_edt(side, sampling=pixel) > 2.5 * tip
        pure[name] = inside & valid
    counts = {name: int(p.sum()) for name, p in pure.items()}
    histogram, edges = np.histogram(smooth[valid], 80)
    top = int(np.argmax(histogram))
    found = {"mode": 0.5 * (edges[top] + edges[top + 1]), "clear": False}
    if min(counts.values()) > 0.02 * valid.sum():
        low, high = (np.median(z.real[pure[n]]) + 1j * np.median(z.imag[pure[n]]) for n in ("insulating", "metallic"))
        sd = np.sqrt(sum(np.var(np.abs(z[pure[n]])) for n in pure) / 2)
        found |= {"insulating": low, "metallic": high, "clear": abs(high) - abs(low) > 4 * sd}
    return found
