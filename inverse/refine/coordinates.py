"""Coordinates a descent moves in: lens numbers = origin + matrix · coordinates.

Light answers to slopes.  A control point moved alone tilts its curve on both sides, many moved
together tilt it little: the heights of control points are coordinates of bad condition, the worse
the more there are, and a step that suits one suits none of the others.  There are two ways out: few
heights, the splines on a coarser set of knots (exact on the fine one), or the tangents between
neighbouring control points of the fine set, summed from one end (the corner for the centre lens,
the rim for flank and exit face), which are nearly independent of each other.  Tangents mostly end
higher, but some starts survive only the few heights, so the search tries both.
"""

from dataclasses import replace

import jax
import numpy as np
from scipy.linalg import block_diag

from inverse.profile import bspline
from inverse.profile.lens import Lens

WALL = 10.0  # rad a pocket wall leans while a length moves by R (tuned on reference k = 1: +0.3 %)
SLOPE = 10.0  # the same for the tangents of the other curves (tuned on k = 1.25: 3 ends 0.8 % lower, 30 diverges)
COARSE = {"centre": 8, "flank": 12, "exit": 10, "disc": 6}  # spans of the few heights


def _held(lens: Lens):
    """Of each curve: its number of control points, and which of them are free numbers of the lens."""
    n = {"centre": lens.centre.size + 2, "flank": lens.flank.size + 2, "exit": lens.exit.size + (not lens.stepped)}
    free = {
        "centre": np.delete(np.arange(n["centre"]), [1, n["centre"] - 1]),
        "flank": np.arange(1, n["flank"] - 1),
        "exit": np.arange(n["exit"]) if lens.stepped else np.delete(np.arange(n["exit"]), 1),
    }
    if lens.stepped:
        n["disc"] = lens.disc.size + 1
        free["disc"] = np.delete(np.arange(n["disc"]), 1)
    return n, free


def _matrix(lens: Lens, radius, blocks):
    """The whole matrix: ``blocks`` for the curves, a length or a wall's tangent for everything else."""
    every = jax.tree_util.tree_map(lambda a: radius * np.eye(np.size(a)), lens)
    every = replace(every, wall=WALL * np.eye(lens.wall.size), **blocks)
    return block_diag(*jax.tree_util.tree_leaves(every))


def heights(lens: Lens, radius):
    """Columns: heights of the coarse control points; those that are left over are zero. (n, n)"""
    blocks = {}
    counts, places = _held(lens)
    for name, count in counts.items():
        free = places[name]
        fine, spans = count - bspline.DEGREE, COARSE[name]
        if fine <= spans or fine % spans:  # already coarse, or the coarse knots are not among the fine ones
            blocks[name] = radius * np.eye(len(free))
            continue
        small = spans + bspline.DEGREE
        level = () if name == "exit" and lens.stepped else (1,)
        pins = {"centre": (1, small - 1), "flank": (0, small - 1)}.get(name, level)
        spread = np.eye(small)
        if 1 in pins:  # level on the axis: the first two control points move together
            spread[:, 0] += spread[:, 1]
        spread = np.delete(spread, pins, axis=1)
        grown = (bspline.refiner(spans, fine) @ spread)[free]
        blocks[name] = radius * np.pad(grown, ((0, 0), (0, len(free) - grown.shape[1])))
    return _matrix(lens, radius, blocks)


def tangents(lens: Lens, radius):
    """Columns: tangents between neighbouring control points, and one height where a curve's end is free. (n, n)"""
    count, free = _held(lens)
    r_p, r_s = float(lens.corner[0]), float(lens.step) if lens.stepped else 0.0
    length = {"centre": r_p, "flank": float(lens.exit[-1]), "exit": radius - r_s, "disc": r_s}
    blocks = {}
    for name in count:
        gaps = np.diff(bspline.greville(count[name] - bspline.DEGREE)) * length[name]
        n, hinged = len(free[name]), name in ("exit", "disc")
        tilts = n - 1 if hinged else n
        sums = -SLOPE * np.triu(np.ones((tilts, tilts))) * gaps[-tilts:]
        if hinged:  # nothing holds the outer end: its height is a coordinate
            sums = np.hstack([np.vstack([sums, np.zeros((1, tilts))]), np.full((n, 1), radius)])
        blocks[name] = sums
    return _matrix(lens, radius, blocks)


KINDS = {"heights": heights, "tangents": tangents}
