"""What a moulder measures on the profile: draft, walls, gaps, heights. Measured in mm and rad, no penalties.

Every measure is the least (or greatest) over dense samples of the curves, so it is differentiable
almost everywhere and means the same in the refinement, the log and the report.  Distances
between curves are true distances in the section (a body of revolution has its least walls there).
Draft, rim and step hold by construction (``lens``) and are measured all the same.
"""

from dataclasses import dataclass
from typing import Callable, NamedTuple

import jax
import jax.numpy as jnp
import numpy as np

from inverse.emitter import Emitter
from inverse.profile import bspline
from inverse.profile.envelope import Envelope
from inverse.profile.lens import Lens, Shape, shape

EDGE = 0.006  # mm the edge is steered beyond the rule: its least distance lies between samples
COARSE, DENSE = 48, 400  # samples a curve: in the refinement, in the final check


@dataclass(frozen=True)
class Limit:
    """A measured quantity in an interval. ``measure(cloud) -> ()`` in ``unit``; ``where`` in words."""

    name: str
    unit: str
    measure: Callable
    where: str
    lower: float = -np.inf
    upper: float = np.inf
    margin: float = 0.0  # aimed beyond the bound, where samples may miss the extreme
    scale: float = 1.0  # a deviation of this size matters as much as the whole merit


class Cloud(NamedTuple):
    """Samples of a shape, made once for all measures. Points (k, 2) in mm; slopes (j,) hold the extremes."""

    shape: Shape
    centre: jax.Array
    pocket: jax.Array  # from the axis over the corner to the mouth
    flank: jax.Array
    outer: jax.Array  # from the axis to the rim: exit face, or disc, step and ring
    wall_slope: jax.Array
    flank_slope: jax.Array
    face_slopes: jax.Array  # of all graphs over the radius


def cloud(s: Shape, count) -> Cloud:
    """``count`` samples a curve."""
    r, z, _ = s.centre.sample(count)
    centre = jnp.stack([r, z], axis=-1)
    height, radius, _ = s.wall.sample(count)
    wall = jnp.stack([radius, height], axis=-1)
    height, radius, _ = s.flank.sample(count)
    flank = jnp.stack([radius, height], axis=-1)
    r, z, _ = s.exit.sample(count)
    face, outer, slopes = jnp.stack([r, z], axis=-1), [], [_steepness(s.centre), _steepness(s.exit)]
    if s.disc is not None:
        w = jnp.linspace(0.0, 1.0, max(count // 4, 8))[:, None]
        r, z, _ = s.disc.sample(count)
        disc = jnp.stack([r, z], axis=-1)
        outer = [disc, disc[-1:] * (1.0 - w) + face[:1] * w]
        slopes.append(_steepness(s.disc))
    pocket = jnp.concatenate([centre, wall[::-1]])
    return Cloud(
        s, centre, pocket, flank, jnp.concatenate([*outer, face]), _steepness(s.wall), _steepness(s.flank),
        jnp.concatenate(slopes),
    )


def _squares(a, b):
    """Squared distances of points ``a`` from points ``b``, (len(a), len(b))."""
    return (a[:, 0, None] - b[None, :, 0]) ** 2 + (a[:, 1, None] - b[None, :, 1]) ** 2


def _to_chain(a, b):
    """Squared distances of points ``a`` from the segments of the polyline ``b``, (len(a), len(b) − 1)."""
    step = b[1:] - b[:-1]
    x, z = a[:, 0, None] - b[None, :-1, 0], a[:, 1, None] - b[None, :-1, 1]
    length = jnp.sum(step**2, axis=1) + 1e-18
    w = jnp.clip((x * step[None, :, 0] + z * step[None, :, 1]) / length[None, :], 0.0, 1.0)
    return (x - w * step[None, :, 0]) ** 2 + (z - w * step[None, :, 1]) ** 2


def _gap(a, b):
    return jnp.sqrt(jnp.min(_to_chain(a, b)) + 1e-18)


def side_wall(c):
    """Least distance between the pocket (wall and centre lens) and the flank."""
    return _gap(c.pocket, c.flank)


def top_wall(c):
    """Least distance between the pocket and the exit side."""
    return _gap(c.pocket, c.outer)


def neck_wall(c):
    """Least distance between the flank and the exit side, away from the rim (which is thinner by right)."""
    s = c.shape
    inside = (s.rim_radius - c.flank[:, 0]) > 1.5 * (s.exit.coefficients[-1] - s.rim_height)
    return jnp.sqrt(jnp.min(jnp.where(inside[:, None], _to_chain(c.flank, c.outer), 1e6)))


def edge_wall(c):
    """Least distance between the flank and the exit side everywhere, the rim's edge included."""
    return _gap(c.flank, c.outer)


def part_height(c):
    """Foot to the highest point."""
    return jnp.max(c.outer[:, 1]) - c.shape.wall.start


def flank_draft(c):
    return jnp.min(jnp.arctan(c.flank_slope))


def wall_draft(c):
    return jnp.min(jnp.arctan(-c.wall_slope))


def face_draft(c):
    """Draft of the surfaces drawn along the axis (centre lens, exit side), where they are steepest."""
    return jnp.arctan(1.0 / jnp.max(jnp.abs(c.face_slopes)))


def rim_thickness(c):
    return c.shape.exit.coefficients[-1] - c.shape.rim_height


def foot_width(c):
    return c.shape.foot_radius - c.shape.mouth_radius


def clearance(emitter: Emitter):
    """Measure: least distance from the dies (or the dome) to the pocket."""

    def measure(c):
        r, z = c.pocket[:, 0], c.pocket[:, 1]
        if emitter.dome is not None:
            return jnp.min(jnp.sqrt(r * r + jnp.maximum(z, 0.0) ** 2 + 1e-18)) - emitter.dome.radius
        beyond = jnp.maximum(r - emitter.reach, 0.0)
        return jnp.sqrt(jnp.min(beyond**2 + z * z) + 1e-18)

    return measure


def bulge(emitter: Emitter):
    """Measure: how far the centre lens stays above the line from the emitter's far edge to the corner (a slope).

    A bulge below that line would hide part of the pocket wall from the emitter.
    """
    reach = emitter.reach * emitter.index  # a dome shows its dies magnified by its index

    def measure(c):
        x, z = c.centre[:-1, 0], c.centre[:-1, 1]
        end = c.shape.centre.end
        sight = c.shape.wall.end * (x + reach) / (end + reach)
        return jnp.min((z - sight) / (end - x))

    return measure


def thickness(c):
    """Diameter of the largest circle in the section, its centre on a grid between pocket or flank and exit side."""
    s, every = c.shape, max(len(c.flank) // 48, 1)
    boundary = jnp.concatenate([c.pocket, c.flank, c.outer])
    w = jnp.linspace(0.02, 0.98, 33)[:, None, None]
    grids = []
    foot = s.mouth_radius + (s.foot_radius - s.mouth_radius) * jnp.linspace(0.0, 1.0, 9)
    foot = jnp.stack([foot, jnp.zeros_like(foot) + s.wall.start], axis=-1)
    for low in (c.pocket[::every], foot, c.flank[::every]):
        top = s.exit.at(low[:, 0])[0]
        if s.disc is not None:
            top = jnp.where(low[:, 0] < s.exit.start, s.disc.at(low[:, 0])[0], top)
        high = jnp.stack([low[:, 0], top], axis=-1)
        grids.append((low[None] * (1.0 - w) + high[None] * w).reshape(-1, 2))
    return 2.0 * jnp.sqrt(jnp.max(jnp.min(_squares(jnp.concatenate(grids), boundary), axis=1)))


def _bends(graph):
    """Slope and second derivative at both ends of every span, (2 spans,) each: where they are extreme."""
    A = bspline.pieces(graph.coefficients)
    scale = A.shape[0] / (graph.end - graph.start)
    slope = jnp.concatenate([A[:, 1], A[:, 1] + 2.0 * A[:, 2] + 3.0 * A[:, 3]]) * scale
    return slope, jnp.concatenate([2.0 * A[:, 2], 2.0 * A[:, 2] + 6.0 * A[:, 3]]) * scale**2


def _steepness(graph):
    """Slopes at the ends of every span and at its stationary point, (3 spans,): the extremes are among them."""
    A = bspline.pieces(graph.coefficients)
    scale = A.shape[0] / (graph.end - graph.start)
    flat = jnp.abs(A[:, 3]) < 1e-12
    w = jnp.clip(jnp.where(flat, 0.0, -A[:, 2] / jnp.where(flat, 1.0, 3.0 * A[:, 3])), 0.0, 1.0)
    slope = lambda w: A[:, 1] + w * (2.0 * A[:, 2] + w * 3.0 * A[:, 3])
    return jnp.concatenate([slope(0.0), slope(w), slope(1.0)]) * scale


def curve_radius(c):
    """Least radius of curvature of the optical curves (the second derivative is extreme at knots)."""
    s, worst = c.shape, jnp.zeros(())
    for g in [s.centre, s.wall, s.flank, s.exit] + ([s.disc] if s.disc is not None else []):
        slope, bend = _bends(g)
        worst = jnp.maximum(worst, jnp.max(jnp.abs(bend) / (1.0 + slope * slope) ** 1.5))
    return 1.0 / jnp.maximum(worst, 1e-6)


def limits(box: Envelope, emitter: Emitter) -> list[Limit]:
    """Every constraint of the envelope, with its bound."""
    rows = [
        Limit("pocket to flank wall", "mm", side_wall, "pocket wall and flank", lower=box.wall),
        Limit("pocket to exit wall", "mm", top_wall, "centre lens and exit face", lower=box.wall),
        Limit("flank to exit wall", "mm", neck_wall, "flank and exit face inside the rim", lower=box.wall),
        Limit("flank to exit edge", "mm", edge_wall, "flank and exit face up to the rim", lower=box.rim, margin=EDGE),
        Limit("rim thickness", "mm", rim_thickness, "rim", lower=box.rim),
        Limit("foot width", "mm", foot_width, "foot", lower=box.wall),
        Limit("part height", "mm", part_height, "foot to highest point", upper=box.height),
        Limit("pocket clearance", "mm", clearance(emitter), "emitter to pocket", lower=box.clearance),
        Limit("pocket draft", "rad", wall_draft, "pocket wall", lower=box.draft, scale=0.05),
        Limit("flank draft", "rad", flank_draft, "flank", lower=box.draft, scale=0.05),
        Limit("face draft", "rad", face_draft, "centre lens and exit face", lower=box.draft, scale=0.05),
        Limit("line of sight", "1", bulge(emitter), "centre lens hides no pocket wall", lower=0.0, scale=0.5),
    ]
    if box.thickest is not None:
        rows.append(Limit("greatest thickness", "mm", thickness, "largest inscribed circle", upper=box.thickest))
    if box.corner_radius > 0.0:
        rows.append(Limit("least curve radius", "mm", curve_radius, "optical curves", lower=box.corner_radius))
    return rows


def measured(lens: Lens, box: Envelope, rows, samples):
    """Values of every limit, shape (len(rows),)."""
    c = cloud(shape(lens, box), samples)
    return jnp.stack([row.measure(c) for row in rows])
