"""The wall between two states through a Gaussian tip, (1 + tanh(x/w))/2 * Gaussian(sigma), in a table for fits."""

import numpy as np
from scipy.ndimage import gaussian_filter1d
from scipy.special import expit

RISE = np.log(9)  # 10-90 % rise of the tanh wall over w
STEP = 0.5  # nm, grid of the convolution and of the table


class Kink:
    """Value and derivatives of the profile for one tip; distances and w in nm."""

    def __init__(self, sigma, reach=600):
        x = np.arange(-reach - 200, reach + 200 + STEP, STEP)
        keep = slice(int(200 / STEP), -int(200 / STEP))
        self.x = x[keep]
        self.w = np.concatenate([np.linspace(1, 40, 79), np.geomspace(41, 400, 90)])
        value = np.array([gaussian_filter1d(expit(2 * x / w), sigma / STEP, mode="nearest", truncate=8) for w in self.w])
        self.tables = [v[:, keep] for v in (value, np.gradient(value, STEP, axis=1), np.gradient(value, self.w, axis=0))]
        self.apparent = 2 * np.array([np.interp(0.9, row, self.x) for row in self.tables[0]])

    def __call__(self, x, w, parts=1):
        """Value, and with parts=3 also the derivatives by x and by w, for one w and any x: linear between the nodes (within 4e-5)."""
        w = min(max(abs(w), self.w[0]), self.w[-1])
        k = min(int(np.searchsorted(self.w, w, side="right")) - 1, len(self.w) - 2)
        t = (w - self.w[k]) / (self.w[k + 1] - self.w[k])
        at = np.clip((x - self.x[0]) / STEP, 0, len(self.x) - 1.001)
        i = at.astype(np.intp)
        f = at - i
        found = []
        for table in self.tables[:parts]:
            low, high = table[k], table[k + 1]
            found.append((1 - t) * ((1 - f) * low[i] + f * low[i + 1]) + t * ((1 - f) * high[i] + f * high[i + 1]))
        return found if parts > 1 else found[0]

    def apparent_width(self, w):
        return float(np.interp(w, self.w, self.apparent))
