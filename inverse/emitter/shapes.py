"""Flat light-giving shapes in the emitter plane z = 0, and how their area is spread over the radius.

A body of revolution cannot tell azimuths apart, so the azimuth-averaged beam of any flat
emitter depends only on its *arc density* a(r): the length (mm) of the circle of radius r that
lies on light-giving area, A = ∫ a(r) dr.
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

    def contains(self, x, y):
        return (x - self.x) ** 2 + (y - self.y) ** 2 <= self.radius**2

    def sample(self, u, v):
        """Points (x, y) uniform over the area from two uniform numbers in [0, 1)."""
        r, phi = self.radius * np.sqrt(u), 2 * np.pi * v
        return self.x + r * np.cos(phi), self.y + r * np.sin(phi)


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
        return float(np.hypot(abs(self.x) + self.width / 2, abs(self.y) + self.height / 2))

    def contains(self, x, y):
        return (np.abs(x - self.x) <= self.width / 2) & (np.abs(y - self.y) <= self.height / 2)

    def sample(self, u, v):
        return self.x + (u - 0.5) * self.width, self.y + (v - 0.5) * self.height
