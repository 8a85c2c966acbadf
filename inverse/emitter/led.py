"""The LED as a whole: one or several dies, one emission law, perhaps a dome, above a board."""

from dataclasses import dataclass, field

import numpy as np

from inverse.emitter.law import CosinePower, Table
from inverse.emitter.shapes import Disk, Rectangle


@dataclass(frozen=True)
class Dome:
    """A hemisphere centred on the origin, filled with index ``index``."""

    radius: float  # mm
    index: float


@dataclass(frozen=True)
class Emitter:
    """``flux`` is what the LED's data sheet gives: lumens *leaving the package*, dome included."""

    dies: tuple[Disk | Rectangle, ...]
    flux: float = 100.0  # lm
    law: CosinePower | Table = field(default_factory=CosinePower)
    dome: Dome | None = None
    above_board: float = 0.4  # mm from the board up to the emitter plane

    @property
    def area(self):
        return float(sum(d.area for d in self.dies))

    @property
    def reach(self):
        """Largest distance of light-giving area from the axis, mm."""
        return max(d.reach for d in self.dies)

    @property
    def index(self):
        """Index of the medium the dies radiate into."""
        return self.dome.index if self.dome else 1.0

    @property
    def keep_out(self):
        """Radius of the circle (bare) or hemisphere (dome) the pocket must stay clear of, mm."""
        return max(self.reach, self.dome.radius) if self.dome else self.reach

    def sample(self, u, v, w):
        """Points (x, y) uniform over all light-giving area from uniform numbers; ``w`` picks the die."""
        share = np.cumsum([d.area for d in self.dies]) / self.area
        pick = np.searchsorted(share, w, side="right").clip(0, len(self.dies) - 1)
        x, y = np.empty_like(u), np.empty_like(u)
        for i, die in enumerate(self.dies):
            here = pick == i
            x[here], y[here] = die.sample(u[here], v[here])
        return x, y

    def arc_density(self, radius):
        """a(r) in mm, same shape as ``radius``: length of the circle of that radius on light-giving area."""
        radius = np.atleast_1d(np.asarray(radius, float))
        phi = (np.arange(4096) + 0.5) * (2 * np.pi / 4096)
        lit = np.zeros(radius.shape + phi.shape, bool)
        x, y = radius[:, None] * np.cos(phi), radius[:, None] * np.sin(phi)
        for die in self.dies:
            lit |= die.contains(x, y)
        return lit.mean(-1) * 2 * np.pi * radius
