"""What the Monte Carlo found, with standard errors from independent replicates.

M replicates, each a complete experiment with its own scrambling, give M values of every figure.
The figure is their mean, its standard error s/√M with s their sample deviation; quasi-random
points make s much smaller than binomial counting would, and only replicates show by how much.

Intensity in a ring between θ₁ and θ₂ is flux / ΔΩ with ΔΩ = 2π (cos θ₁ − cos θ₂).
"""

from dataclasses import dataclass

import numpy as np

from inverse.verify.ledger import ACCOUNTS, DESIGNED


@dataclass(frozen=True)
class Beam:
    """Intensity about the axis, as an average over each ring."""

    edges: np.ndarray  # (k + 1,) rad, from 0 to π/2
    candela: np.ndarray  # (k,) cd
    candela_se: np.ndarray  # (k,) cd

    @property
    def angle(self):
        """(k,) rad, the angle that halves the solid angle of each ring."""
        c = np.cos(self.edges)
        return np.arccos(np.clip(0.5 * (c[1:] + c[:-1]), 0.0, 1.0))

    @property
    def solid_angle(self):
        """(k,) sr."""
        return -2.0 * np.pi * np.diff(np.cos(self.edges))


@dataclass(frozen=True)
class Encircled:
    """Fraction of the emitted flux inside each angle of the target's coordinate."""

    angle: np.ndarray  # (k,) rad
    share: np.ndarray  # (k,)
    share_se: np.ndarray  # (k,)


@dataclass(frozen=True)
class Spot:
    """Picture of the beam, rows along y, columns along x, the axis in the middle cell.

    In the plane cells are in mm and ``brightness`` in lx; in the far field cells are in rad (the
    angle from the axis in the direction of its azimuth) and ``brightness`` in cd.
    """

    edges: np.ndarray  # (k + 1,) mm or rad, the same along x and y
    fraction: np.ndarray  # (k, k) of the emitted flux
    brightness: np.ndarray  # (k, k) lx or cd
    in_plane: bool


@dataclass(frozen=True)
class Landing:
    """All figures of one flight. Fractions are of the emitted flux; ``_se`` one standard error."""

    share: float  # in the target, all roads
    share_se: float
    designed_paths_share: float  # in the target by the designed roads only
    designed_paths_share_se: float
    ledger: dict  # account: fraction, in the order of ``ACCOUNTS``
    ledger_se: dict
    paths: dict  # road: fraction that ends by it, largest first; with "absorbed in the material" sums to 1
    paths_se: dict
    encircled: Encircled
    beam: Beam  # over the target's coordinate
    far_field: Beam  # over the direction in the outer medium; the same as ``beam`` for a far-field target
    spot: Spot
    skewness: tuple[float, float]  # mm, least and largest of n (x d_y − y d_x) at the source
    skewness_drift: float  # mm, largest change of it along any ray that landed
    rays: int  # drawn in all
    replicates: int


class Grids:
    """The angle and picture grids of one target: fine to past its edge, then widening to 90°."""

    def __init__(self, target):
        a = target.half_angle
        self.beam = _widening(a, 20)
        self.encircled = _widening(a, 100)
        reach = min(2.5 * a, 0.45 * np.pi)
        self.in_plane = target.distance is not None
        width = target.distance * np.tan(reach) if self.in_plane else reach
        self.spot = np.linspace(-width, width, 122)  # odd number of cells: one lies on the axis

    def brightness(self, lumens):
        """lx in the plane, cd in the far field, from ``lumens`` (k, k) in the cells of the picture."""
        cell = self.spot[1] - self.spot[0]
        if self.in_plane:
            return lumens / (cell * 1e-3) ** 2  # lm/m²
        middle = 0.5 * (self.spot[1:] + self.spot[:-1])
        theta = np.hypot(middle[:, None], middle[None, :])
        # Solid angle of a cell in these coordinates: sin θ / θ times its area; none beyond the horizon.
        solid = cell**2 * np.sinc(theta / np.pi)
        return np.where(theta < 0.5 * np.pi, lumens / np.where(solid > 0.0, solid, np.inf), 0.0)


def _widening(edge, steps, end=0.5 * np.pi, growth=1.12):
    """(k,) rad: 2·steps steps up to twice ``edge``, then each ``growth`` times the former, up to ``end``."""
    grid = [i * edge / steps for i in range(2 * steps + 1) if i * edge / steps < end]
    width = edge / steps
    while grid[-1] < end:
        if grid[-1] >= 2.0 * edge:
            width = min(width * growth, end / 30.0)
        grid.append(grid[-1] + width)
    grid[-1] = end
    if grid[-2] != edge and grid[-1] - grid[-2] < 0.3 * (grid[-2] - grid[-3]):
        del grid[-2]  # no sliver at the horizon
    return np.array(grid)


class Tally:
    """Sums of weights of one replicate; ``close`` turns them into fractions of the emitted flux."""

    def __init__(self, grids):
        self.grids, self.emitted = grids, 0.0
        self.accounts = dict.fromkeys(ACCOUNTS, 0.0)
        self.paths = {}
        self.designed = 0.0
        self.beam = np.zeros(len(grids.beam) - 1)
        self.far = np.zeros(len(grids.beam) - 1)
        self.inner = np.zeros(len(grids.encircled) - 1)
        self.spot = np.zeros((len(grids.spot) - 1,) * 2)
        self.skewness = [np.inf, -np.inf]
        self.drift = 0.0

    def book(self, account, weight):
        self.accounts[account] += float(np.sum(weight))

    def book_roads(self, road, code, weight):
        """Add the weights to the paths; returns (k,) bool, True on designed roads."""
        codes, which = np.unique(code, return_inverse=True)
        words = [road.words(c) for c in codes]
        for name, amount in zip(words, np.bincount(which, weight, len(codes))):
            self.paths[name] = self.paths.get(name, 0.0) + float(amount)
        return np.isin(words, DESIGNED)[which] if len(code) else np.zeros(0, bool)

    def land(self, arrival, weight):
        """Histograms of light that reached the outer medium going forward."""
        polar = np.arctan2(np.hypot(*arrival.direction[:, :2].T), arrival.direction[:, 2])
        self.beam += np.histogram(arrival.theta, self.grids.beam, weights=weight)[0]
        self.far += np.histogram(polar, self.grids.beam, weights=weight)[0]
        self.inner += np.histogram(arrival.theta, self.grids.encircled, weights=weight)[0]
        grid = self.grids.spot
        cell = np.floor((arrival.place - grid[0]) * ((len(grid) - 1) / (grid[-1] - grid[0])))
        cell = np.clip(cell, -1, len(grid) - 1).astype(np.int64)
        seen = np.all((cell >= 0) & (cell < len(grid) - 1), axis=1)
        index = cell[seen, 1] * (len(grid) - 1) + cell[seen, 0]  # rows along y
        self.spot += np.bincount(index, weight[seen], self.spot.size).reshape(self.spot.shape)

    def close(self):
        """Divide every sum by the emitted one."""
        for book in (self.accounts, self.paths):
            for name in book:
                book[name] /= self.emitted
        self.designed /= self.emitted
        for histogram in (self.beam, self.far, self.inner, self.spot):
            histogram /= self.emitted
        return self


def gather(tallies, flux, rays):
    """The ``Landing`` of all replicates; ``flux`` in lm."""
    grids = tallies[0].grids

    def mean(values):
        values = np.array(values)
        return values.mean(0), values.std(0, ddof=1) / np.sqrt(len(values))

    def book(pick, names):
        columns = {name: mean([pick(t).get(name, 0.0) for t in tallies]) for name in names}
        return tuple({name: float(c[i]) for name, c in columns.items()} for i in (0, 1))

    def beam(values):
        solid = -2.0 * np.pi * np.diff(np.cos(grids.beam))
        fraction, error = mean(values)
        return Beam(grids.beam, flux * fraction / solid, flux * error / solid)

    ledger, ledger_se = book(lambda t: t.accounts, ACCOUNTS)
    everywhere = {name for t in tallies for name in t.paths}
    size = {name: sum(t.paths.get(name, 0.0) for t in tallies) for name in everywhere}
    paths, paths_se = book(lambda t: t.paths, sorted(everywhere, key=lambda name: (-size[name], name)))
    inner, inner_se = mean([np.concatenate([[0.0], np.cumsum(t.inner)]) for t in tallies])
    spot = np.mean([t.spot for t in tallies], axis=0)
    designed, designed_se = mean([t.designed for t in tallies])
    return Landing(
        share=ledger["in target"],
        share_se=ledger_se["in target"],
        designed_paths_share=float(designed),
        designed_paths_share_se=float(designed_se),
        ledger=ledger,
        ledger_se=ledger_se,
        paths=paths,
        paths_se=paths_se,
        encircled=Encircled(grids.encircled, inner, inner_se),
        beam=beam([t.beam for t in tallies]),
        far_field=beam([t.far for t in tallies]),
        spot=Spot(grids.spot, spot, grids.brightness(flux * spot), grids.in_plane),
        skewness=(float(min(t.skewness[0] for t in tallies)), float(max(t.skewness[1] for t in tallies))),
        skewness_drift=max(t.drift for t in tallies),
        rays=rays,
        replicates=len(tallies),
    )
