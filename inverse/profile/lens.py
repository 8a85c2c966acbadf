"""The free numbers of a lens as one pytree, and the named curves they stand for.

Every curve is a graph, z(r) or r(z), on a clamped uniform cubic spline (``bspline``):

    centre lens   z(r) on [0, r_p], horizontal on the axis
    pocket wall   r(z) on [z_foot, z_p], falling with z at least as fast as the draft asks
    flank         r(z) on [z_foot, z_rim], from the foot to the rim
    exit face     z(r) on [0, R], or a disc on [0, r_s − w/2] and a ring on [r_s + w/2, R]
                  joined by a step whose radial width w = |Δz| tan(draft) is its draft

(r_p, z_p) is the pocket corner.  Draft of wall, rim and step and the rim's thickness hold by
construction: there is no number that could break them.
"""

from dataclasses import dataclass
from typing import NamedTuple

import jax
import jax.numpy as jnp
import numpy as np

from inverse.profile import bspline
from inverse.profile.envelope import Envelope
from inverse.profile.section import MECHANICAL, REFLECTING, REFRACTING, Curve, Section, line


RIM_MARGIN = 1.03  # the rim is built this much thicker than asked, so that true distances to it hold as well

class Graph(NamedTuple):
    """One curve: coefficients (c,) mm over [start, end] mm of the other coordinate."""

    start: jax.Array
    end: jax.Array
    coefficients: jax.Array

    def at(self, x):
        """Value and slope at ``x``."""
        return bspline.evaluate(bspline.pieces(self.coefficients), self.start, self.end, x)

    def sample(self, count):
        """``count`` abscissae over the interval, with values and slopes there."""
        x = self.start + (self.end - self.start) * jnp.linspace(0.0, 1.0, count)
        return (x, *self.at(x))


@jax.tree_util.register_dataclass
@dataclass(frozen=True)
class Lens:
    """The free numbers. Lengths in mm; ``wall`` holds tangents of the local draft."""

    corner: jax.Array  # (2,) r_p, z_p
    foot: jax.Array  # () width of the foot ring
    wall: jax.Array  # (w,) tan(draft) between neighbouring control points, mouth to corner
    centre: jax.Array  # (c,) heights over z_p: axis, then inner control points
    flank: jax.Array  # (f,) radii of the inner control points
    exit: jax.Array  # (e,) heights of the single face or of the ring, outward; axis counted once
    disc: jax.Array | None = None  # (d,) heights of the disc, outward
    step: jax.Array | None = None  # () radius of the step

    @property
    def stepped(self):
        return self.disc is not None


class Shape(NamedTuple):
    """The named graphs of a lens and the radii and heights where they meet."""

    centre: Graph
    wall: Graph
    flank: Graph
    exit: Graph  # the single face, or the ring
    disc: Graph | None
    rim_radius: jax.Array  # radius of the flank's upper end
    rim_height: jax.Array  # its z
    mouth_radius: jax.Array
    foot_radius: jax.Array  # where flank and foot meet


def shape(lens: Lens, box: Envelope) -> Shape:
    """The graphs of ``lens`` in the envelope ``box``."""
    r_p, z_p = lens.corner[0], lens.corner[1]
    tan_draft = float(np.tan(box.draft))
    w_spans = lens.wall.shape[0] + 1 - bspline.DEGREE
    gaps = jnp.asarray(np.diff(bspline.greville(w_spans))) * (z_p - box.foot)
    radii = r_p + jnp.concatenate([jnp.cumsum((gaps * lens.wall)[::-1])[::-1], jnp.zeros(1)])
    wall = Graph(jnp.asarray(box.foot, float), z_p, radii)
    centre = Graph(jnp.zeros(()), r_p, jnp.concatenate([lens.centre[:1], lens.centre, jnp.zeros(1)]) + z_p)
    edge = lens.exit[-1]
    rim_radius = jnp.asarray(box.radius - (0.0 if box.flange else RIM_MARGIN * box.rim * tan_draft))
    rim_height = edge - RIM_MARGIN * box.rim
    foot_radius = radii[0] + lens.foot
    inner = jnp.concatenate([foot_radius[None], lens.flank, rim_radius[None]])
    flank = Graph(jnp.asarray(box.foot, float), rim_height, inner)
    outer = jnp.asarray(float(box.radius))
    if not lens.stepped:
        face = Graph(jnp.zeros(()), outer, jnp.concatenate([lens.exit[:1], lens.exit]))
        return Shape(centre, wall, flank, face, None, rim_radius, rim_height, radii[0], foot_radius)
    drop = lens.exit[0] - lens.disc[-1]
    half = 0.5 * tan_draft * jnp.sqrt(drop**2 + 1e-6)  # a micron wide even when the step vanishes
    disc = Graph(jnp.zeros(()), lens.step - half, jnp.concatenate([lens.disc[:1], lens.disc]))
    ring = Graph(lens.step + half, outer, lens.exit)
    return Shape(centre, wall, flank, ring, disc, rim_radius, rim_height, radii[0], foot_radius)


def _curve(name, role, graph: Graph, over_radius, reverse=False):
    """A graph as an exact parametric spline: control points (Greville abscissa, coefficient)."""
    c = np.asarray(graph.coefficients, float)
    spans = len(c) - bspline.DEGREE
    x = float(graph.start) + (float(graph.end) - float(graph.start)) * bspline.greville(spans)
    x[0], x[-1] = float(graph.start), float(graph.end)
    points = np.column_stack([x, c] if over_radius else [c, x])
    return Curve(name, role, bspline.DEGREE, bspline.knots(spans), points[::-1].copy() if reverse else points)


def section(lens: Lens, box: Envelope) -> Section:
    """The exact closed chain of named curves that verify, export and report read."""
    s = shape(lens, box)
    curves = [
        _curve("centre lens", REFRACTING, s.centre, True),
        _curve("pocket wall", REFRACTING, s.wall, False, reverse=True),
    ]
    flank = _curve("flank", REFLECTING, s.flank, False)
    last = _curve("exit ring" if lens.stepped else "exit face", REFRACTING, s.exit, True, reverse=True)
    edge = last.points[0]
    if box.flange:
        outer = box.radius + box.flange
        low = outer - RIM_MARGIN * box.rim * np.tan(box.draft)
        rim = [
            line("flange underside", MECHANICAL, flank.points[-1], (low, flank.points[-1][1])),
            line("flange edge", MECHANICAL, (low, flank.points[-1][1]), (outer, edge[1])),
            line("flange top", MECHANICAL, (outer, edge[1]), edge),
        ]
    else:
        rim = [line("rim", MECHANICAL, flank.points[-1], edge)]
    curves += [line("foot", MECHANICAL, curves[-1].points[-1], flank.points[0]), flank, *rim, last]
    if lens.stepped:
        disc = _curve("exit disc", REFRACTING, s.disc, True, reverse=True)
        curves += [line("step", MECHANICAL, last.points[-1], disc.points[0]), disc]
    return Section(tuple(curves))
