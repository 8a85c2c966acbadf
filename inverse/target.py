"""The wanted beam.

A target is a rotational intensity shape seen from the emitter plane.  The coordinate of a
landing is the angle θ (rad) from the axis: the direction of the ray in the far field, or
atan(r / distance) where it crosses the plane z = distance.  Angles are those in the outer
medium (air, or water beyond the port).
"""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Target:
    """What is wanted.

    ``kind`` is "spot" (as much light as possible inside ``half_angle``) or "shape" (the
    distribution ``intensity`` over ``angles``, as much light in it as possible).
    """

    kind: str
    half_angle: float  # rad; edge of the spot, or the last angle of the shape with light
    distance: float | None = None  # mm from the emitter plane; None = far field
    share: float | None = None  # wanted fraction of the emitted flux inside half_angle; None = largest
    angles: np.ndarray | None = None  # (k,) rad from 0, increasing (shape only)
    intensity: np.ndarray | None = None  # (k,) relative, linear in between, zero beyond (shape only)

    def cumulative(self, theta):
        """Fraction of the wanted flux inside each ``theta`` (rad); a spot counts as uniform intensity."""
        theta = np.asarray(theta, float)
        if self.kind == "spot":
            return np.clip((1 - np.cos(theta)) / (1 - np.cos(self.half_angle)), 0.0, 1.0)
        grid = np.linspace(0.0, self.half_angle, 4001)
        density = np.interp(grid, self.angles, self.intensity, right=0.0) * np.sin(grid)
        flux = np.concatenate([[0.0], np.cumsum((density[1:] + density[:-1]) / 2)])
        return np.interp(theta, grid, flux / flux[-1])


@dataclass(frozen=True)
class Port:
    """A flat window between the lens and the outer medium."""

    index: float
    thickness: float  # mm
    gap: float  # mm from the top of the lens to the inner face


@dataclass(frozen=True)
class Surroundings:
    """The medium the beam is wanted in. The lens itself always stands in air."""

    name: str = "air"
    index: float = 1.0
    port: Port | None = None
