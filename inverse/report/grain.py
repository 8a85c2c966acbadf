"""Takes the grain of the ray count out of a picture of the spot, and leaves what the lens did.

Around the axis at radius ρ the picture is  g = m(ρ) + e , with m the mean of the ring.  A body of
revolution makes e small; a square or off-centre die makes it real but smooth; the ray count adds
grain that differs from cell to cell.  With V the variance of e in the ring and N half the mean
square of its step to the next cell (the variance of pure grain, for which it is unbiased), the
picture shown is

    m + max(0, 1 − N / V) · e ,   m and e smoothed over about one cell,

an empirical-Bayes shrinkage (Efron and Morris, J. Am. Stat. Assoc. 68, 117, 1973, from memory).
Where e is nothing but grain the ring's mean remains; where it is structure, it stays.
"""

import numpy as np
from scipy.ndimage import gaussian_filter, gaussian_filter1d

SMOOTH = 1.0  # cells; finer rings than this cannot be told from grain


def without_grain(grid):
    """The picture (k, k), axis in its middle, without grain; same shape and unit, never negative."""
    g = np.asarray(grid, float)
    middle = (len(g) - 1) / 2
    y, x = np.indices(g.shape) - middle
    radius = np.hypot(x, y)
    ring = _Rings(radius)
    mean = ring.mean(g)
    e = g - ring.between(mean)
    m = ring.between(gaussian_filter1d(mean, SMOOTH, mode="mirror"))  # the axis mirrors the rings
    across, along = np.diff(e, axis=1), np.diff(e, axis=0)
    step = np.zeros_like(e)
    step[:, :-1] += across**2
    step[:-1, :] += along**2
    weight = np.full_like(e, 2.0)
    weight[:, -1] -= 1.0
    weight[-1, :] -= 1.0
    noise = 0.5 * ring.mean(step) / np.maximum(ring.mean(weight), 1.0)
    spread = ring.mean(e**2)
    kept = np.where(spread > 0.0, 1.0 - noise / np.where(spread > 0.0, spread, 1.0), 0.0)
    structure = ring.between(np.maximum(kept, 0.0)) * gaussian_filter(e, SMOOTH, mode="nearest")
    return np.maximum(m + structure, 0.0)


class _Rings:
    """Rings one cell wide about the axis; ``radius`` (k, k) in cells."""

    def __init__(self, radius):
        self.radius = radius
        self.number = np.rint(radius).astype(int)
        self.size = np.bincount(self.number.ravel())
        self.at = self._sum(radius) / self.size

    def _sum(self, values):
        return np.bincount(self.number.ravel(), values.ravel())

    def mean(self, values):
        """Mean of each ring, (rings,)."""
        return self._sum(values) / self.size

    def between(self, means):
        """Means carried back to the cells, linear in the radius, (k, k)."""
        return np.interp(self.radius, self.at, means)
