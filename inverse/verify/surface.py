"""The body as the verifier sees it: plain points and slopes of the exported section, revolved.

Input is what ``profile.csv`` holds: for every named curve of the closed chain the points (r, z)
in mm and the unit tangents (τ_r, τ_z) along the chain.  The chain starts and ends on the axis and
keeps the material on its left, so the outward normal in the half plane is (τ_z, −τ_r).

Between two neighbours the curve is the cubic with the given end points and end tangents
(Hermite).  With h the distance and α the angle between the tangents, the tangents enter with the
length of the circular arc that fits both, S = h (α/2) / sin(α/2); the error is of order h⁴ times
the fourth derivative / 384 (de Boor, *A Practical Guide to Splines*, chapter IV, from memory).
A curve whose points all lie on one line becomes a single exact straight piece: a cone, cylinder
or plane when revolved.

``u`` numbers the pieces: u = 17.25 is a quarter of the way along piece 17 of the whole chain.
"""

import csv
from dataclasses import dataclass
from functools import cached_property

import numpy as np

HEADER = ("curve", "r_mm", "z_mm", "tangent_r", "tangent_z")
# Neighbouring curves share their end point; a file printed with fewer digits may miss by this much, mm.
JOINT_GAP = 1e-6
# A curve is straight when no point leaves its chord by more than rounding of coordinates of ~100 mm.
STRAIGHT_SAG = 1e-12
# ... and no tangent turns from it by more than rounding of a sagitta allows, rad.
STRAIGHT_BEND = 1e-9


@dataclass(frozen=True)
class Points:
    """The exported section. Raises ValueError when the chain is open, reversed or not finite."""

    names: tuple[str, ...]
    curves: tuple[np.ndarray, ...]  # each (k, 4): r, z in mm, unit tangent along the chain

    def __post_init__(self):
        if len(self.names) != len(self.curves) or not self.curves:
            got = f"{len(self.names)} names, {len(self.curves)} curves"
            raise ValueError(f"wanted one name a curve and at least one, got {got}")
        for name, rows in zip(self.names, self.curves):
            if rows.ndim != 2 or rows.shape[1] != 4 or len(rows) < 2:
                raise ValueError(f"{name}: wanted (k >= 2, 4) numbers, got shape {rows.shape}")
            if not np.all(np.isfinite(rows)):
                raise ValueError(f"{name}: row {int(np.argmin(np.isfinite(rows).all(1)))} is not finite")
            if rows[:, 0].min() < 0.0:
                raise ValueError(f"{name}: radius {rows[:, 0].min()} mm is negative")
        ends = self.curves[0][0, 0], self.curves[-1][-1, 0]
        if ends != (0.0, 0.0):
            raise ValueError(f"chain must start and end at r = 0, got r = {ends[0]} and {ends[1]} mm")
        for (a, left), (b, right) in zip(self._pairs(), self._pairs(1)):
            gap = float(np.hypot(*(left[-1, :2] - right[0, :2])))
            if gap > JOINT_GAP:
                raise ValueError(f"{gap} mm between the end of {a} and the start of {b}, at most {JOINT_GAP}")
        around = np.concatenate(self.curves)
        if np.sum((around[1:, 0] + around[:-1, 0]) * np.diff(around[:, 1])) <= 0.0:
            raise ValueError("the chain runs the wrong way round: the material must lie on its left")

    def _pairs(self, skip=0):
        return list(zip(self.names, self.curves))[skip:]

    @classmethod
    def read(cls, path):
        """From a ``profile.csv`` (lines that start with # are remarks); ValueError names a line of no use."""
        names, rows, place = [], [], None
        with open(path, newline="", encoding="utf-8") as file:
            reader = csv.reader(file)
            for line in reader:
                if not line or line[0].startswith("#"):
                    continue
                if place is None:
                    missing = [h for h in HEADER if h not in line]
                    if missing:
                        wanted = ", ".join(HEADER)
                        raise ValueError(f"{path}: column {missing[0]} is missing; wanted {wanted}")
                    place = [line.index(h) for h in HEADER]
                    continue
                try:
                    name, *numbers = (line[k] for k in place)
                    numbers = [float(x) for x in numbers]
                except (IndexError, ValueError):
                    where = f"{path}:{reader.line_num}"
                    raise ValueError(f"{where}: wanted a name and 4 numbers, got {line}") from None
                if not names or name != names[-1]:
                    names.append(name)
                    rows.append([])
                rows[-1].append(numbers)
        if not rows:
            raise ValueError(f"{path}: no points in it; export the lens again")
        return cls(tuple(names), tuple(np.array(r) for r in rows))

    @classmethod
    def of(cls, section, per_curve=400):
        """From a section in memory; the same numbers as its ``profile.csv``."""
        table, number = section.dense(per_curve)
        return cls(tuple(section.names), tuple(table[number == i] for i in range(len(section.names))))

    def scaled(self, factor):
        """The same body, every length times ``factor``."""
        return Points(self.names, tuple(c * np.array([factor, factor, 1.0, 1.0]) for c in self.curves))

    @property
    def top(self):
        """Largest z, mm."""
        return float(max(c[:, 1].max() for c in self.curves))

    @property
    def radius(self):
        """Largest r, mm."""
        return float(max(c[:, 0].max() for c in self.curves))

    @cached_property
    def chain(self):
        return Chain(self)


def _hermite(rows):
    """Cubic coefficients (pieces, 8) of one curve: r0..r3, z0..z3 in powers of the local parameter."""
    start, step = rows[:-1, :2], np.diff(rows[:, :2], axis=0)
    chord = np.hypot(*step.T)
    keep = chord > 0.0  # repeated points carry no length
    start, step, chord = start[keep], step[keep], chord[keep]
    t0, t1 = rows[:-1, 2:][keep], rows[1:, 2:][keep]
    if not len(chord) or np.any(np.sum(step * t0, 1) <= 0.0) or np.any(np.sum(step * t1, 1) <= 0.0):
        raise ValueError("tangents must point along the chain, less than 90° from the step between points")
    whole = rows[-1, :2] - rows[0, :2]
    along = whole / np.hypot(*whole)
    away = (rows[:, :2] - rows[0, :2]) @ np.array([-along[1], along[0]])
    bend = np.abs(rows[:, 2:] @ np.array([-along[1], along[0]])).max()
    if bend <= STRAIGHT_BEND and np.abs(away).max() <= STRAIGHT_SAG * max(1.0, np.abs(rows[:, :2]).max()):
        out = np.zeros((1, 8))
        out[0, [0, 4]], out[0, [1, 5]] = rows[0, :2], whole
        return out
    half = 0.5 * np.arctan2(np.abs(t0[:, 0] * t1[:, 1] - t0[:, 1] * t1[:, 0]), np.sum(t0 * t1, 1))
    arc = (chord / np.sinc(half / np.pi))[:, None]
    a, b = arc * t0, arc * t1
    powers = [start, a, 3.0 * step - 2.0 * a - b, a + b - 2.0 * step]
    return np.column_stack([p[:, 0] for p in powers] + [p[:, 1] for p in powers])


class Chain:
    """All pieces of the closed chain in one table, and a coarser set of nodes to search with.

    A *band* is a run of pieces between two nodes, short enough to turn by at most ``TURN``; a
    straight curve is one band.  Node columns are contiguous a curve, so the joint between two
    curves appears twice, as ``twin`` (later, earlier) columns with one common point.
    """

    TURN = 0.05  # rad: sagitta of a 1 mm band 6 µm; finer bands gain no accuracy and cost time
    RUN = 20  # most pieces in a band

    def __init__(self, points, run=None):
        self.points = points
        tables = []
        for name, rows in zip(points.names, points.curves):
            try:
                tables.append(_hermite(rows))
            except ValueError as fault:
                raise ValueError(f"{name}: {fault}") from None
        for before, after in zip(tables, tables[1:]):  # close print-rounding gaps at the joints
            after[0, [1, 5]] += after[0, [0, 4]] - before[-1].reshape(2, 4).sum(1)
            after[0, [0, 4]] = before[-1].reshape(2, 4).sum(1)
        self.table = np.concatenate(tables)  # (pieces, 8) mm
        self.rows = np.ascontiguousarray(self.table.T)
        counts = [len(t) for t in tables]
        self.last = np.cumsum(counts)  # (curves,) u at the end of each curve
        self.first = self.last - counts
        self.size = max(points.radius, float(np.abs(np.concatenate(points.curves)[:, 1]).max()))  # mm
        self._nodes(run or self.RUN)

    def _nodes(self, run):
        u, curve = [], []
        for c, (a, b) in enumerate(zip(self.first, self.last)):
            _, _, dr, dz = self.at(np.arange(a, b + 1.0), np.full(b - a + 1, c))
            turn = np.abs(np.diff(np.unwrap(np.arctan2(dz, dr))))
            nodes, turned = [a], 0.0
            for k in range(a, b):
                turned += turn[k - a]
                if k > nodes[-1] and (turned > self.TURN or k - nodes[-1] >= run):
                    nodes.append(k)
                    turned = turn[k - a]
            u += [float(k) for k in nodes] + [float(b)]
            curve += [c] * (len(nodes) + 1)
        self.u, self.curve = np.array(u), np.array(curve)
        r, z, dr, dz = self.at(self.u, self.curve)
        self.twin = np.flatnonzero(np.diff(self.curve)) + 1
        r[self.twin], z[self.twin] = r[self.twin - 1], z[self.twin - 1]
        r[0] = r[-1] = 0.0
        self.r, self.z = r, z
        speed = np.hypot(dr, dz)
        self.dr, self.dz = dr / speed, dz / speed
        self.span = np.append(np.diff(self.u), 0.0)  # pieces in the band that starts at each node
        self.length = np.append(np.hypot(np.diff(r), np.diff(z)), 0.0)  # mm, chord of that band
        self.band = np.append(np.diff(self.curve) == 0, False)[:-1]  # False across a joint

    def at(self, u, curve):
        """r, z (mm) and their derivatives by ``u`` (mm), each the shape of ``u``; ``curve`` as integers."""
        piece = np.clip(u.astype(np.int64), self.first[curve], self.last[curve] - 1)
        x = u - piece
        c = self.rows.take(piece, axis=1)
        r = ((c[3] * x + c[2]) * x + c[1]) * x + c[0]
        z = ((c[7] * x + c[6]) * x + c[5]) * x + c[4]
        dr = (3.0 * c[3] * x + 2.0 * c[2]) * x + c[1]
        dz = (3.0 * c[7] * x + 2.0 * c[6]) * x + c[5]
        return r, z, dr, dz

    def outward(self, u, curve, place):
        """Unit normals (k, 3) out of the material at points ``place`` (k, 3) of the surface."""
        _, _, dr, dz = self.at(u, curve)
        speed = np.hypot(dr, dz)
        radius = np.maximum(np.hypot(place[:, 0], place[:, 1]), np.finfo(float).tiny)
        return np.column_stack([place[:, :2] * (dz / speed / radius)[:, None], -dr / speed])
