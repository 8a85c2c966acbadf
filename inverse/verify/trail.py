"""Rays drawn in the section: where light from the centre and from the edge of the emitter goes.

For the picture only.  Each ray stays in the meridional plane and follows the stronger of the
refracted and the reflected part at every crossing.
"""

import numpy as np

from inverse.verify.crossing import first_crossing
from inverse.verify.optics import reflectance, reflected, transmitted
from inverse.verify.surface import Points

CROSSINGS = 8  # surfaces followed at most
TAIL = 0.8  # length of the last leg over the size of the body


def trails(points: Points, emitter, index, count=13):
    """{"centre": [...], "edge": [...]}: polylines (k, 2) of signed r and z in mm, ``count`` rays each."""
    angles = np.linspace(-1.0, 1.0, count) * np.radians(86.0)
    return {
        "centre": _bundle(points, emitter, index, 0.0, angles),
        "edge": _bundle(points, emitter, index, emitter.reach, angles),
    }


def _bundle(points, emitter, index, start, angles):
    o = np.zeros((len(angles), 3))
    o[:, 0] = start
    d = np.column_stack([np.sin(angles), np.zeros_like(angles), np.cos(angles)])
    legs = [[p] for p in o[:, [0, 2]]]
    if emitter.dome is not None:
        b = np.sum(o * d, 1)
        t = -b + np.sqrt(b * b + emitter.dome.radius**2 - np.sum(o * o, 1))
        o = o + t[:, None] * d
        for leg, p in zip(legs, o[:, [0, 2]]):
            leg.append(p)
        normal = -o / emitter.dome.radius
        d = _cross(o, d, normal, np.full(len(o), emitter.dome.index), np.ones(len(o)))[0]
    inside, going = np.zeros(len(o), bool), np.ones(len(o), bool)
    for _ in range(CROSSINGS):
        hit = first_crossing(points.chain, o, d, inside)
        going &= np.isfinite(hit.t)
        k = np.flatnonzero(going)
        if not len(k):
            break
        o[k] = o[k] + hit.t[k, None] * d[k]
        for i in k:
            legs[i].append(o[i, [0, 2]])
        outward = points.chain.outward(hit.u[k], hit.curve[k], o[k])
        normal = np.where(inside[k], -1.0, 1.0)[:, None] * outward
        before, behind = np.where(inside[k], index, 1.0), np.where(inside[k], 1.0, index)
        d[k], through = _cross(o[k], d[k], normal, before, behind)
        inside[k] ^= through
    tail = TAIL * points.radius
    return [np.array([*leg, leg[-1] + tail * v]) for leg, v in zip(legs, d[:, [0, 2]])]


def _cross(o, d, normal, before, behind):
    """Directions of the stronger part, and whether it went through."""
    cosine = np.clip(-np.sum(d * normal, 1), 0.0, 1.0)
    part, cosine_behind = reflectance(cosine, before, behind)
    through = part < 0.5
    out = transmitted(d, normal, cosine, cosine_behind, before, behind)
    return np.where(through[:, None], out, reflected(d, normal, cosine)), through
