"""Flat light-giving shapes in the emitter plane z = 0, and how their area is spread over the radius.

A body of revolution cannot tell azimuths apart, so the azimuth-averaged beam of any flat
emitter depends only on its *arc density* a(r): the length (mm) of the circle of radius r that
lies on light-giving area, A = ∫ a(r) dr.

Both shapes give it in closed form.  Disk of radius R whose centre is d off the axis:
a = 2 r arccos((r² + d² − R²)/(2 r d)).  Rectangle [x₁, x₂] × [y₁, y₂]: with F(X, Y) the angle over which
r cos φ ≤ X and r sin φ ≤ Y (the overlap of two arcs, of half-widths π − arccos(X/r) about φ = π and
π/2 + arcsin(Y/r) about φ = −π/2), a = r [F(x₂, y₂) − F(x₁, y₂) − F(x₂, y₁) + F(x₁, y₁)].
"""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Disk:
    """A round die centred at (x, y)."""

    radius: float  # mm
    x: float = 0.0  # mm
    y: float = 0.0  # mm

    @property
    def area(self):
        return np.pi * self.radius**2

    @property
    def reach(self):
        """Largest distance from the axis, mm."""
        return float(np.hypot(self.x, self.y) + self.radius)

    @property
    def breaks(self):
        """Radii (mm) at which the arc density is not smooth."""
        d = float(np.hypot(self.x, self.y))
        return (abs(d - self.radius), d + self.radius)

    def contains(self, x, y):
        return (x - self.x) ** 2 + (y - self.y) ** 2 <= self.radius**2

    def sample(self, u, v):
        """Points (x, y) uniform over the area from two uniform numbers in [0, 1)."""
        r, phi = self.radius * np.sqrt(u), 2 * np.pi * v
        return self.x + r * np.cos(phi), self.y + r * np.sin(phi)

    def arc(self, radius):
        """Length in mm of the circle about the axis that lies on the die, same shape as ``radius``."""
        r, d = np.asarray(radius, float), np.hypot(self.x, self.y)
        rise = r**2 + d**2 - self.radius**2
        across = 2 * r * d
        if d == 0:
            return 2 * np.pi * r * (rise <= 0)
        cosine = rise / np.where(across > 0, across, 1.0)  # any will do at r = 0, where the arc is zero
        return 2 * r * np.arccos(np.clip(cosine, -1.0, 1.0))


@dataclass(frozen=True)
class Rectangle:
    """A rectangular die centred at (x, y), sides along the axes."""

    width: float  # mm along x
    height: float  # mm along y
    x: float = 0.0  # mm
    y: float = 0.0  # mm

    @property
    def area(self):
        return self.width * self.height

    @property
    def reach(self):
        """Largest distance from the axis, mm."""
        return float(np.hypot(abs(self.x) + self.width / 2, abs(self.y) + self.height / 2))

    @property
    def _sides(self):
        half_x, half_y = self.width / 2, self.height / 2
        return (self.x - half_x, self.x + half_x, self.y - half_y, self.y + half_y)

    @property
    def breaks(self):
        """Radii (mm) at which the arc density is not smooth: feet of the sides, corners."""
        x1, x2, y1, y2 = self._sides
        corners = [float(np.hypot(x, y)) for x in (x1, x2) for y in (y1, y2)]
        return tuple(abs(side) for side in self._sides) + tuple(corners)

    def contains(self, x, y):
        return (np.abs(x - self.x) <= self.width / 2) & (np.abs(y - self.y) <= self.height / 2)

    def sample(self, u, v):
        """Points (x, y) uniform over the area from two uniform numbers in [0, 1)."""
        return self.x + (u - 0.5) * self.width, self.y + (v - 0.5) * self.height

    def arc(self, radius):
        """Length in mm of the circle about the axis that lies on the die, same shape as ``radius``."""
        r = np.asarray(radius, float)
        safe = np.where(r > 0, r, 1.0)
        x1, x2, y1, y2 = self._sides
        left = [np.pi - np.arccos(np.clip(x / safe, -1.0, 1.0)) for x in (x1, x2)]
        below = [np.pi / 2 + np.arcsin(np.clip(y / safe, -1.0, 1.0)) for y in (y1, y2)]

        def overlap(i, j):
            a, b = left[i], below[j]  # arcs about π and 3π/2; the second is met again one turn earlier
            first = np.minimum(np.pi + a, 1.5 * np.pi + b) - np.maximum(np.pi - a, 1.5 * np.pi - b)
            again = np.minimum(np.pi + a, -0.5 * np.pi + b) - np.maximum(np.pi - a, -0.5 * np.pi - b)
            return np.maximum(first, 0.0) + np.maximum(again, 0.0)

        return r * np.maximum(overlap(1, 1) - overlap(0, 1) - overlap(1, 0) + overlap(0, 0), 0.0)
