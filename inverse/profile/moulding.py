"""What a moulder measures on the profile: draft, walls, gaps, heights. Measured in mm and rad, no penalties.

Every measure is the least (or greatest) over dense samples of the curves, so it is differentiable
almost everywhere and means the same in the refinement, the log and the report.  Distances
between curves are true distances in the section (a body of revolution has its least walls there).
Draft, rim and step hold by construction (``lens``) and are measured all the same.
"""

from dataclasses import dataclass
from typing import Callable

import jax.numpy as jnp
import numpy as np

from inverse.emitter import Emitter
from inverse.profile.envelope import Envelope
from inverse.profile.lens import Lens, Shape, shape

COARSE, DENSE = 48, 400  # samples a curve: in the refinement, in the final check


@dataclass(frozen=True)
class Limit:
    """A measured quantity in an interval. ``measure(shape, samples) -> ()`` in ``unit``; ``where`` in words."""

    name: str
    unit: str
    measure: Callable
    where: str
    lower: float = -np.inf
    upper: float = np.inf
    scale: float = 1.0  # a deviation of this size matters as much as the whole merit


def _points(graph, count, over_radius):
    x, value, _ = graph.sample(count)
    return jnp.stack([x, value] if over_radius else [value, x], axis=-1)


def _line(a, b, count):
    w = jnp.linspace(0.0, 1.0, count)[:, None]
    return jnp.stack(a)[None, :] * (1.0 - w) + jnp.stack(b)[None, :] * w


def _outer(s: Shape, count):
    """Points of the exit side: face, or ring, step and disc."""
    face = _points(s.exit, count, True)
    if s.disc is None:
        return face
    step = _line(
        (s.exit.start, s.exit.coefficients[0]), (s.disc.end, s.disc.coefficients[-1]), max(count // 4, 8)
    )
    return jnp.concatenate([face, step, _points(s.disc, count, True)])


def _pocket(s: Shape, count):
    return jnp.concatenate([_points(s.centre, count, True), _points(s.wall, count, False)])


def _gap(a, b):
    d2 = jnp.sum((a[:, None, :] - b[None, :, :]) ** 2, axis=-1)
    return jnp.sqrt(jnp.min(d2) + 1e-18)


def side_wall(s, count):
    """Least distance between the pocket (wall and centre lens) and the flank."""
    return _gap(_pocket(s, count), _points(s.flank, count, False))


def top_wall(s, count):
    """Least distance between the pocket and the exit side."""
    return _gap(_pocket(s, count), _outer(s, count))


def neck_wall(s, count):
    """Least distance between the flank and the inner part of the exit side (the rim itself is thinner)."""
    inner = _outer(s, count)
    flank = _points(s.flank, count, False)
    # the wedge at the rim is the rim's business: measure where the flank is a wall and a half inside it
    inside = (s.rim_radius - flank[:, 0]) > 1.5 * (s.exit.coefficients[-1] - s.rim_height)
    d2 = jnp.sum((flank[:, None, :] - inner[None, :, :]) ** 2, axis=-1)
    return jnp.sqrt(jnp.min(jnp.where(inside[:, None], d2, 1e6)))


def part_height(s, count):
    """Foot to the highest point."""
    return jnp.max(_outer(s, count)[:, 1]) - s.wall.start


def flank_draft(s, count):
    _, _, slope = s.flank.sample(count)
    return jnp.min(jnp.arctan(slope))


def wall_draft(s, count):
    _, _, slope = s.wall.sample(count)
    return jnp.min(jnp.arctan(-slope))


def face_slope(s, count):
    """Steepest slope of the surfaces drawn along the axis (centre lens, exit side), as its draft."""
    steepest = jnp.max(jnp.abs(s.centre.sample(count)[2]))
    steepest = jnp.maximum(steepest, jnp.max(jnp.abs(s.exit.sample(count)[2])))
    if s.disc is not None:
        steepest = jnp.maximum(steepest, jnp.max(jnp.abs(s.disc.sample(count)[2])))
    return jnp.arctan(1.0 / steepest)


def rim_thickness(s, count):
    return s.exit.coefficients[-1] - s.rim_height


def foot_width(s, count):
    return s.foot_radius - s.mouth_radius


def clearance(emitter: Emitter):
    """Measure: least distance from the dies (or the dome) to the pocket."""

    def measure(s, count):
        p = _pocket(s, count)
        r, z = p[:, 0], p[:, 1]
        if emitter.dome is not None:
            above = jnp.sqrt(r * r + jnp.maximum(z, 0.0) ** 2 + 1e-18) - emitter.dome.radius
            return jnp.min(above)
        beyond = jnp.maximum(r - emitter.reach, 0.0)
        return jnp.sqrt(jnp.min(beyond**2 + z * z) + 1e-18)

    return measure


def bulge(emitter: Emitter):
    """Measure: least height of the centre lens over the line from the far edge of the emitter to the corner.

    A bulge below that line would hide part of the pocket wall from the emitter.
    """
    reach = emitter.reach * emitter.index  # a dome shows its dies magnified by its index

    def measure(s, count):
        x, z, _ = s.centre.sample(count)
        sight = s.wall.end * (x[:-1] + reach) / (s.centre.end + reach)
        return jnp.min((z[:-1] - sight) / (s.centre.end - x[:-1]))

    return measure


def thickness(s, count):
    """Diameter of the largest circle in the section, by its centre over a grid between pocket and outside."""
    count = min(count, 48)
    w = jnp.linspace(0.02, 0.98, 25)
    boundary = jnp.concatenate([_pocket(s, count), _points(s.flank, count, False), _outer(s, count)])
    pocket = _pocket(s, count)
    x = pocket[:, 0] / s.centre.end
    top = s.exit.at(jnp.clip(pocket[:, 0], 0.0, s.exit.end))[0]
    if s.disc is not None:
        top = jnp.where(pocket[:, 0] < s.exit.start, s.disc.at(jnp.clip(pocket[:, 0], 0.0, s.disc.end))[0], top)
    up = jnp.stack([pocket[:, 0], top], -1)
    flank = _points(s.flank, count, False)
    face = jnp.stack([flank[:, 0], s.exit.at(jnp.maximum(flank[:, 0], s.exit.start))[0]], -1)
    del x
    grids = [
        (pocket[None] * (1 - w[:, None, None]) + up[None] * w[:, None, None]).reshape(-1, 2),
        (flank[None] * (1 - w[:, None, None]) + face[None] * w[:, None, None]).reshape(-1, 2),
    ]
    centres = jnp.concatenate(grids)
    d2 = jnp.sum((centres[:, None, :] - boundary[None, :, :]) ** 2, axis=-1)
    return 2.0 * jnp.sqrt(jnp.max(jnp.min(d2, axis=1)))


def concave_radius(s, count):
    """Least radius of curvature of the optical curves where the tool must fit into the part's hollow side."""
    worst = jnp.zeros(())
    graphs = [s.centre, s.wall, s.flank, s.exit] + ([s.disc] if s.disc is not None else [])
    for g in graphs:
        x, _, slope = g.sample(count)
        bend = jnp.diff(slope) / jnp.diff(x)
        mid = 0.5 * (slope[1:] + slope[:-1])
        worst = jnp.maximum(worst, jnp.max(jnp.abs(bend) / (1.0 + mid * mid) ** 1.5))
    return 1.0 / jnp.maximum(worst, 1e-6)


def limits(box: Envelope, emitter: Emitter) -> list[Limit]:
    """Every constraint of the envelope, with its bound."""
    rows = [
        Limit("pocket to flank wall", "mm", side_wall, "pocket wall and flank", lower=box.wall),
        Limit("pocket to exit wall", "mm", top_wall, "centre lens and exit face", lower=box.wall),
        Limit("flank to exit wall", "mm", neck_wall, "flank and exit face inside the rim", lower=box.wall),
        Limit("rim thickness", "mm", rim_thickness, "rim", lower=box.rim),
        Limit("foot width", "mm", foot_width, "foot", lower=box.wall),
        Limit("part height", "mm", part_height, "foot to highest point", upper=box.height),
        Limit("pocket clearance", "mm", clearance(emitter), "emitter to pocket", lower=box.clearance),
        Limit("pocket draft", "rad", wall_draft, "pocket wall", lower=box.draft, scale=0.2),
        Limit("flank draft", "rad", flank_draft, "flank", lower=box.draft, scale=0.2),
        Limit("face draft", "rad", face_slope, "centre lens and exit face", lower=box.draft, scale=0.2),
        Limit("line of sight", "1", bulge(emitter), "centre lens hides no pocket wall", lower=0.0, scale=0.5),
    ]
    if box.thickest is not None:
        rows.append(Limit("greatest thickness", "mm", thickness, "largest inscribed circle", upper=box.thickest))
    if box.corner_radius > 0.0:
        rows.append(Limit("least curve radius", "mm", concave_radius, "optical curves", lower=box.corner_radius))
    return rows


def measured(lens: Lens, box: Envelope, rows, samples):
    """Values of every limit, shape (len(rows),)."""
    s = shape(lens, box)
    return jnp.stack([row.measure(s, samples) for row in rows])
