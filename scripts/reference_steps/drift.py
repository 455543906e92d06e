"""Where a frame lies on the sample: masked cross-correlation in whole pixels, then upsampled cross-correlation of the overlap."""

import numpy as np
from scipy import ndimage
from skimage.registration import phase_cross_correlation

COARSE_SIDE = 128


def binned(image, seen, factor):
    rows, cols = (n // factor * factor for n in image.shape)
    def total(v):
        return v[:rows, :cols].reshape(rows // factor, factor, cols // factor, factor).sum((1, 3))

    weight = total(seen.astype(float))
    return total(np.where(seen, image, 0)) / np.maximum(weight, 1), weight > 0.5 * factor**2


def register(reference, moving):
    """Shift of `moving` to be laid on `reference`, (rows, columns) in pixels, and the correlation of the overlap there."""
    seen = [np.isfinite(v) for v in (reference, moving)]
    # A single high particle must not outvote the film's relief.
    filled = []
    for image, mask in zip((reference, moving), seen):
        limit = 4 * 1.4826 * np.median(np.abs(image[mask]))
        filled.append(np.where(mask, np.clip(image, -limit, limit), 0))
    factor = max(1, round(max(reference.shape) / COARSE_SIDE))
    (a, a_seen), (b, b_seen) = (binned(v, m, factor) for v, m in zip(filled, seen))
    shift = factor * np.asarray(
        phase_cross_correlation(a, b, reference_mask=a_seen, moving_mask=b_seen, overlap_ratio=0.3), float
    )
    correlation = 0.0
    spline = ndimage.spline_filter(filled[1], order=3)
    moving_seen = seen[1].astype(np.float32)
    for _ in range(6):
        # The overlap of both frames under the present shift; the moving one is interpolated, so that what is left goes to nothing.
        top, left = (max(0, int(np.ceil(s)) + 2) for s in shift)
        bottom, right = (min(n, n + int(np.floor(s)) - 2) for n, s in zip(reference.shape, shift))
        if bottom - top < 16 or right - left < 16:
            return shift, 0.0
        window = np.hanning(bottom - top)[:, None] * np.hanning(right - left)
        part = ndimage.shift(spline, shift, order=3, prefilter=False)[top:bottom, left:right]
        fixed = filled[0][top:bottom, left:right]
        also = ndimage.shift(moving_seen, shift, order=1)[top:bottom, left:right] > 0.999
        both = seen[0][top:bottom, left:right] & also
        pair = [np.where(both, v - v[both].mean(), 0) * window for v in (fixed, part)]
        correlation = (pair[0] * pair[1]).sum() / np.sqrt((pair[0] ** 2).sum() * (pair[1] ** 2).sum())
        rest = phase_cross_correlation(*pair, upsample_factor=200, normalization=None, return_error=False)
        if np.abs(rest).max() > 2 * factor + 1:
            return shift, 0.0
        shift = shift + rest
        if np.abs(rest).max() <= 0.005:
            break
    return shift, float(correlation)
