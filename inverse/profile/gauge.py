"""The moulding measures taken again from the finished section, as an inspector would: plain points, no JAX.

The refinement measures graphs at a few dozen points (``moulding``); here every curve of the exact
chain is sampled densely and distances come from a k-d tree.  The greatest thickness is the
diameter of the largest inscribed circle, whose centre is a vertex of the Voronoi diagram of the
outline (Aurenhammer, ACM Computing Surveys 23, 345, 1991).  Names match ``moulding.limits``.
"""

from dataclasses import dataclass

import numpy as np
from scipy.spatial import Voronoi, cKDTree

from inverse.emitter import Emitter
from inverse.profile.envelope import Envelope
from inverse.profile.section import Section

SAMPLES = 1500  # a curve; a 20 mm curve is sampled every 13 µm, a distance is good to 0.1 µm
ROUNDING = 1e-7  # mm, rad: below what any gauge or file shows


@dataclass(frozen=True)
class Reading:
    """One measured quantity against its interval. ``unit`` mm or rad; ``where`` in words."""

    name: str
    unit: str
    measured: float
    lower: float | None
    upper: float | None
    where: str

    @property
    def slack(self):
        low = np.inf if self.lower is None else self.measured - self.lower
        high = np.inf if self.upper is None else self.upper - self.measured
        return float(min(low, high))

    @property
    def met(self):
        return self.slack >= -ROUNDING


class _Outline:
    """Dense points and unit tangents of every curve of a section."""

    def __init__(self, section: Section):
        u = np.linspace(0.0, 1.0, SAMPLES)
        self.points = {c.name: c.at(u) for c in section.curves}
        self.tangents = {}
        for c in section.curves:
            t = c.tangent(u)
            self.tangents[c.name] = t / np.hypot(*t.T)[:, None]

    def of(self, *names):
        return np.concatenate([self.points[n] for n in names if n in self.points])

    def draft(self, name):
        """How far each tangent leans from the pull direction, rad; negative where the curve is undercut.

        Along the chain the wall runs down and outwards, flank, rim and flange edge up and outwards.
        """
        t = self.tangents[name]
        outward = t[:, 0] if name in ("pocket wall", "flank", "rim", "flange edge") else np.abs(t[:, 0])
        return np.arctan2(outward, np.abs(t[:, 1]))


def _nearest(a, b):
    distance, index = cKDTree(b).query(a)
    i = int(np.argmin(distance))
    return float(distance[i]), 0.5 * (a[i] + b[index[i]])


def _place(point):
    return f"r = {point[0]:.2f} mm, z = {point[1]:.2f} mm"


def inscribed_circle(section: Section):
    """Diameter (mm) and centre (r, z) of the largest circle inside the section."""
    u = np.linspace(0.0, 1.0, 240, endpoint=False)
    loop = np.concatenate([c.at(u) for c in section.curves])
    mirror = loop[loop[:, 0] > 1e-6] * [-1.0, 1.0]
    outline = np.unique(np.round(np.concatenate([loop, mirror]), 9), axis=0)
    centres = Voronoi(outline).vertices
    low, high = outline.min(0), outline.max(0)
    centres = centres[np.all((centres > low) & (centres < high), axis=1) & (centres[:, 0] >= -1e-9)]
    centres = centres[_inside(centres, np.concatenate([loop, loop[::-1] * [-1.0, 1.0]]))]
    radius, _ = cKDTree(outline).query(centres)
    best = int(np.argmax(radius))
    return 2.0 * float(radius[best]), centres[best]


def _inside(points, polygon):
    """Even-odd rule: an upward ray from each point crosses the polygon an odd number of times."""
    a, b = polygon, np.roll(polygon, -1, axis=0)
    odd = np.zeros(len(points), bool)
    for (x0, y0), (x1, y1) in zip(a, b):
        if x0 != x1:
            spans = (x0 <= points[:, 0]) != (x1 <= points[:, 0])
            odd ^= spans & (points[:, 1] < y0 + (points[:, 0] - x0) * (y1 - y0) / (x1 - x0))
    return odd


def readings(section: Section, box: Envelope, emitter: Emitter) -> list[Reading]:
    """Every limit of the envelope, measured on the section."""
    line = _Outline(section)
    pocket, exits = ("centre lens", "pocket wall"), ("exit face", "exit ring", "step", "exit disc")
    out = []

    def add(name, unit, value, where, lower=None, upper=None):
        out.append(Reading(name, unit, float(value), lower, upper, where))

    def gap(name, a, b):
        value, point = _nearest(a, b)
        add(name, "mm", value, _place(point), lower=box.wall)

    flank, face = line.of("flank"), line.of(*exits)
    gap("pocket to flank wall", line.of(*pocket), flank)
    gap("pocket to exit wall", line.of(*pocket), face)
    edge = line.of("exit face", "exit ring")[0]
    rim_height = float(edge[1] - flank[-1, 1])
    inner = flank[flank[-1, 0] - flank[:, 0] > 1.5 * rim_height]
    gap("flank to exit wall", inner, face)
    value, point = _nearest(flank, face)
    add("flank to exit edge", "mm", value, _place(point), lower=box.rim)
    add("rim thickness", "mm", rim_height, "rim" if not box.flange else "flange", lower=box.rim)
    foot = line.of("foot")
    add("foot width", "mm", foot[:, 0].max() - foot[:, 0].min(), "foot", lower=box.wall)
    everything = np.concatenate(list(line.points.values()))
    top = everything[np.argmax(everything[:, 1])]
    add("part height", "mm", top[1] - foot[0, 1], f"highest at {_place(top)}", upper=box.height)
    add("pocket clearance", "mm", *_clearance(line.of(*pocket), emitter), lower=box.clearance)
    for name, curve in (("pocket draft", "pocket wall"), ("flank draft", "flank"), ("rim draft", "rim"),
                        ("flange draft", "flange edge"), ("step draft", "step")):  # fmt: skip
        if curve in line.points and np.ptp(line.points[curve][:, 1]) > 1e-5:
            lean = line.draft(curve)
            place = line.points[curve][int(np.argmin(lean))]
            add(name, "rad", lean.min(), f"{curve}, {_place(place)}", lower=box.draft)
    lean = np.concatenate([line.draft(c) for c in ("centre lens", *exits[:2], exits[3]) if c in line.points])
    add("face draft", "rad", lean.min(), "centre lens and exit face", lower=box.draft)
    diameter, centre = inscribed_circle(section)
    add("greatest thickness", "mm", diameter, f"circle about {_place(centre)}", upper=box.thickest)
    if box.corner_radius > 0.0:
        value, name = _least_radius(section)
        add("least curve radius", "mm", value, name, lower=box.corner_radius)
    return out


def _clearance(pocket, emitter):
    r, z = pocket.T
    if emitter.dome is not None:
        away = np.hypot(r, np.maximum(z, 0.0)) - emitter.dome.radius
    else:
        away = np.hypot(np.maximum(r - emitter.reach, 0.0), z)
    i = int(np.argmin(away))
    return away[i], f"pocket, {_place(pocket[i])}"


def _least_radius(section):
    """Least radius of curvature of the optical curves, inside each curve."""
    best, where = np.inf, "optical curves"
    u = np.linspace(0.0, 1.0, SAMPLES)
    for c in section.curves:
        if c.straight or c.role == "mechanical":
            continue
        t = c.tangent(u)
        angle = np.unwrap(np.arctan2(t[:, 1], t[:, 0]))
        run = np.hypot(*np.diff(c.at(u), axis=0).T)
        radius = run / np.maximum(np.abs(np.diff(angle)), 1e-12)
        if radius.min() < best:
            best, where = radius.min(), f"{c.name}, {_place(c.at(u)[int(np.argmin(radius))])}"
    return best, where
