"""The meridional section as a closed chain of named exact curves: what verify, export and report read.

Each curve is a clamped B-spline in the half plane (r, z), r >= 0, mm.  The chain starts on the
axis at the centre lens, runs outward, down the pocket wall, along the foot, up the flank, over
the rim and back to the axis along the exit face, so the material lies on its left.  Neighbours
share their end points exactly; the two axis points have r = 0 exactly.
"""

from dataclasses import dataclass

import numpy as np
from scipy.interpolate import BSpline

REFRACTING, REFLECTING, MECHANICAL = "refracting", "reflecting", "mechanical"


@dataclass(frozen=True)
class Curve:
    """One named curve. ``role``: refracting, reflecting (total reflection wanted) or mechanical."""

    name: str
    role: str
    degree: int
    knots: np.ndarray  # (count + degree + 1,) clamped, from 0 to 1
    points: np.ndarray  # (count, 2) mm, columns r and z

    def at(self, u):
        """Points (..., 2) in mm at parameters ``u`` in [0, 1]."""
        return BSpline(self.knots, self.points, self.degree)(u)

    def tangent(self, u):
        """d(r, z)/du, shape (..., 2)."""
        return BSpline(self.knots, self.points, self.degree).derivative()(u)

    @property
    def straight(self):
        return self.degree == 1 and len(self.points) == 2


def line(name, role, start, end):
    """A straight curve between two points (r, z)."""
    return Curve(name, role, 1, np.array([0.0, 0.0, 1.0, 1.0]), np.array([start, end], float))


@dataclass(frozen=True)
class Section:
    """The closed chain. Raises ValueError when the chain has a gap or leaves the axis."""

    curves: tuple[Curve, ...]

    def __post_init__(self):
        first, last = self.curves[0].points[0], self.curves[-1].points[-1]
        if first[0] != 0.0 or last[0] != 0.0:
            raise ValueError(f"section must start and end on the axis, got r = {first[0]} and {last[0]} mm")
        for a, b in zip(self.curves, self.curves[1:]):
            if not np.array_equal(a.points[-1], b.points[0]):
                raise ValueError(f"gap between {a.name} and {b.name}: {a.points[-1]} to {b.points[0]} mm")

    def curve(self, name):
        return next(c for c in self.curves if c.name == name)

    @property
    def names(self):
        return [c.name for c in self.curves]

    def dense(self, per_curve=400):
        """Plain arrays (r, z, dr, dz, curve number); dr, dz is the unit tangent along the chain."""
        u = np.linspace(0.0, 1.0, per_curve)
        points = np.concatenate([c.at(u) for c in self.curves])
        tangent = np.concatenate([c.tangent(u) for c in self.curves])
        tangent = tangent / np.hypot(*tangent.T)[:, None]
        number = np.repeat(np.arange(len(self.curves)), per_curve)
        return np.column_stack([points, tangent]), number

    @property
    def volume(self):
        """Volume of the body in mm³: 2π times the exact integral of r dr dz, by Gauss quadrature a span."""
        total = 0.0
        for c in self.curves:
            nodes, weights = np.polynomial.legendre.leggauss(3 * c.degree // 2 + 2)
            spans = np.unique(c.knots)
            for a, b in zip(spans[:-1], spans[1:]):
                u = 0.5 * (b - a) * nodes + 0.5 * (a + b)
                total += 0.5 * (b - a) * np.sum(weights * c.at(u)[:, 0] ** 2 * c.tangent(u)[:, 1])
        return float(np.pi * total)
