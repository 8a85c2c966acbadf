"""How the intensity of the bare emitting surface falls with the angle from its normal.

``I(θ)`` is relative.  The flux inside θ is proportional to ∫ I sin θ dθ; a Lambertian surface
has I = cos θ and flux sin²θ.  Under a dome the law holds inside the dome's material.
"""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class CosinePower:
    """I = cosᵐ θ; m = 1 is Lambertian."""

    power: float = 1.0

    def intensity(self, theta):
        return np.clip(np.cos(theta), 0.0, None) ** self.power

    def cumulative(self, theta):
        """Fraction of the flux inside θ."""
        return 1.0 - np.cos(theta) ** (self.power + 1.0)

    def quantile(self, u):
        """cos θ such that the fraction ``u`` of the flux lies inside θ."""
        return (1.0 - u) ** (1.0 / (self.power + 1.0))


@dataclass(frozen=True)
class Table:
    """I(θ) from a table, linear in between, zero beyond the last angle and beyond 90°."""

    angles: np.ndarray  # (k,) rad, increasing from 0
    values: np.ndarray  # (k,) relative, >= 0

    def intensity(self, theta):
        return np.where(np.asarray(theta) <= np.pi / 2, np.interp(theta, self.angles, self.values, right=0.0), 0.0)

    def _grid(self):
        t = np.linspace(0.0, np.pi / 2, 8001)
        density = self.intensity(t) * np.sin(t)
        flux = np.concatenate([[0.0], np.cumsum((density[1:] + density[:-1]) / 2)])
        return t, flux / flux[-1]

    def cumulative(self, theta):
        return np.interp(theta, *self._grid())

    def quantile(self, u):
        t, flux = self._grid()
        return np.cos(np.interp(u, flux, t))
