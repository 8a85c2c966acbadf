"""The LED as a whole: one or several dies, one emission law, perhaps a dome, above a board.

The arc densities of the dies add up: a(r) = Σ aᵢ(r).  Dies must not overlap (the brief sees to that);
where they did, the overlap would count twice, here as in the area and in the samples.
"""

from dataclasses import dataclass, field
from functools import cached_property

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

    @cached_property
    def breaks(self):
        """Radii (k,) in mm, increasing from 0 to ``reach``, between which the arc density is smooth."""
        radii = np.unique(np.concatenate([[0.0], *(d.breaks for d in self.dies)]))
        distinct = np.concatenate([[True], np.diff(radii) > 1e-9 * self.reach])  # rounding of equal radii
        return radii[distinct]

    @cached_property
    def _alike(self):
        """Dies of equal arc density, mirror images of one another, counted once: pairs (die, how many)."""
        count = {}
        for d in self.dies:
            at = (abs(d.x), abs(d.y))
            sides = (d.width, d.height) if isinstance(d, Rectangle) else (d.radius,)
            turned = (at[::-1], sides[::-1]) < (at, sides)  # a quarter turn changes nothing either
            key = (type(d), at[::-1], sides[::-1]) if turned else (type(d), at, sides)
            count[key] = (d, count.get(key, (d, 0))[1] + 1)
        return tuple(count.values())

    def arc_density(self, radius):
        """a(r) in mm, shape of ``radius``, at least (1,): arc of that circle on light-giving area."""
        radius = np.atleast_1d(np.asarray(radius, float))
        return sum(many * die.arc(radius) for die, many in self._alike)

    def radial_nodes(self, per_piece):
        """Radii (k,) in mm from 0 to ``reach``: ``per_piece`` steps between breaks, dense at both ends.

        The arc density leaves its breaks like a square root; in the angle of these cosine-spaced
        nodes it is smooth.
        """
        ease = 0.5 - 0.5 * np.cos(np.pi * np.arange(1, per_piece + 1) / per_piece)
        low, high = self.breaks[:-1, None], self.breaks[1:, None]
        return np.concatenate([[0.0], (low + (high - low) * ease).ravel()])

    @cached_property
    def radial_table(self):
        """(√u, r): arrays (k,) to interpolate linearly; the fraction u of the lit area lies inside r (mm).

        Ready for another array library's own interpolation.  Exact for one centred disk; otherwise the
        radius is good to about 1e-6 of ``reach``.
        """
        r = self.radial_nodes(1024)
        # Gauss's three points inside every step: the area of a step is far below rounding of the table.
        nodes, weights = np.polynomial.legendre.leggauss(3)
        half = 0.5 * np.diff(r)
        inside = (r[:-1] + half)[:, None] + half[:, None] * nodes
        area = np.concatenate([[0.0], np.cumsum(half * (self.arc_density(inside) @ weights))])
        return np.sqrt(area / area[-1]), r

    def radial_quantile(self, u):
        """Radius in mm inside which the fraction ``u`` of the light-giving area lies, shape of ``u``.

        Monotone in ``u`` and continuous, except over rings without light, which it skips.
        """
        return np.interp(np.sqrt(u), *self.radial_table)
