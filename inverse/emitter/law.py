"""How the intensity of the bare emitting surface falls with the angle from its normal.

``I(θ)`` is relative.  The flux inside θ is proportional to ∫ I sin θ dθ; a Lambertian surface
has I = cos θ and flux sin²θ.  Under a dome the law holds inside the dome's material.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np


@dataclass(frozen=True)
class CosinePower:
    """I = cosᵐ θ, zero beyond 90°; m = 1 is Lambertian."""

    power: float = 1.0

    def intensity(self, theta):
        cosine = np.cos(theta)
        return np.where(cosine > 0, np.where(cosine > 0, cosine, 1.0) ** self.power, 0.0)

    @property
    def brightest(self):
        """Largest I/cos θ: the radiance of the brightest direction, in units of the axial intensity."""
        return 1.0 if self.power >= 1.0 else np.inf

    def cumulative(self, theta):
        """Fraction of the flux inside θ."""
        return 1.0 - np.clip(np.cos(theta), 0.0, None) ** (self.power + 1.0)

    def quantile(self, u):
        """cos θ such that the fraction ``u`` of the flux lies inside θ."""
        return (1.0 - u) ** (1.0 / (self.power + 1.0))


@dataclass(frozen=True, eq=False)  # an array has no single answer to ==, so a table equals itself only
class Table:
    """I(θ) from a table, linear in between, zero beyond the last angle and beyond 90°."""

    angles: np.ndarray  # (k,) rad, increasing from 0
    values: np.ndarray  # (k,) relative, >= 0

    def __post_init__(self):
        for name in ("angles", "values"):
            object.__setattr__(self, name, np.asarray(getattr(self, name), float))

    def intensity(self, theta):
        inside = np.asarray(theta) <= np.pi / 2
        return np.where(inside, np.interp(theta, self.angles, self.values, right=0.0), 0.0)

    @cached_property
    def _grid(self):
        """(cos θ falling, fraction of the flux inside θ); the table's own angles are among the nodes."""
        own = self.angles
        t = np.union1d(np.linspace(0.0, np.pi / 2, 4001), own[own <= np.pi / 2])
        # Flux of one step exactly, for I linear over it: I sin θ integrates to −I cos θ + I' sin θ.
        # A table that ends early ends with a jump, so the value just before the end counts.
        value = np.where(t <= own[-1], np.interp(t, own, self.values), 0.0)
        before = np.where(t[1:] <= own[-1], value[1:], 0.0)
        after = np.where(t[:-1] < own[-1], value[:-1], 0.0)
        slope = (before - after) / np.diff(t)
        step = after * np.cos(t[:-1]) - before * np.cos(t[1:]) + slope * np.diff(np.sin(t))
        flux = np.concatenate([[0.0], np.cumsum(np.maximum(step, 0.0))])
        return np.cos(t), flux / flux[-1]

    @property
    def brightest(self):
        """Largest I/cos θ in the units of ``values``; infinite when light is left at 90°."""
        if float(self.intensity(np.pi / 2)) > 0.0:
            return np.inf
        t = np.union1d(np.linspace(0.0, np.pi / 2, 4001)[:-1], self.angles[self.angles < np.pi / 2])
        return float(np.max(self.intensity(t) / np.cos(t)))  # falls towards 90° over a last step to zero

    def cumulative(self, theta):
        """Fraction of the flux inside θ."""
        cosine, flux = self._grid
        return np.interp(np.cos(np.clip(theta, 0.0, np.pi / 2)), cosine[::-1], flux[::-1])

    def quantile(self, u):
        """cos θ such that the fraction ``u`` of the flux lies inside θ."""
        cosine, flux = self._grid
        return np.interp(u, flux, cosine)
