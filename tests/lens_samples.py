"""Sections for the verifier's tests: bodies whose optics has a closed form, built from splines.

The splines interpolate their formula at so many points that they stand for it to 1e-9 mm.
"""

import numpy as np
from scipy.interpolate import make_interp_spline
from scipy.optimize import brentq

from inverse.profile.section import MECHANICAL, REFLECTING, REFRACTING, Curve, Section, line

PMMA = 1.49253  # Beadie et al., Appl. Opt. 54, F139 (2015), at 587.6 nm


def through(name, role, points, degree=3):
    """A clamped spline through all ``points`` (k, 2), first and last exactly."""
    points = np.asarray(points, float)
    u = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(points, axis=0).T))])
    spline = make_interp_spline(u / u[-1], points, k=degree)
    control = spline.c.copy()
    control[0], control[-1] = points[0], points[-1]
    return Curve(name, role, degree, spline.t, control)


def arc(name, role, radius, start, end, count=120):
    """Part of a circle about the origin, polar angle from +z running from ``start`` to ``end`` (rad)."""
    angle = np.linspace(start, end, count)
    points = radius * np.column_stack([np.sin(angle), np.cos(angle)])
    points[np.abs(points[:, 0]) < 1e-15, 0] = 0.0  # sin π is not quite zero
    return through(name, role, points, degree=5)


def ball(radius):
    """A whole sphere, one curve from the lower to the upper pole."""
    return Section((arc("exit face", REFRACTING, radius, np.pi, 0.0),))


def cylinder(radius, low, high):
    """A plate: plane faces at z = low and high, called centre lens and exit face."""
    return Section((
        line("centre lens", REFRACTING, (0.0, low), (radius, low)),
        line("rim", MECHANICAL, (radius, low), (radius, high)),
        line("exit face", REFRACTING, (radius, high), (0.0, high)),
    ))


def shell(inner, outer):
    """Half a hollow sphere about the origin, standing on z = 0."""
    right = 0.5 * np.pi
    inside, outside = (arc(n, REFRACTING, r, *ends) for n, r, ends in (
        ("centre lens", inner, (0.0, right)), ("exit face", outer, (right, 0.0))))
    foot = line("foot", MECHANICAL, inside.points[-1], outside.points[0])
    return Section((inside, foot, outside))


def hyperboloid(index, focal, radius, count=200):
    """(k, 2) of the surface that collimates an air point source in the origin inside index ``index``:
    r = f (n − 1)/(n cos θ − 1), from the axis to the distance ``radius`` from it."""
    away = lambda angle: focal * (index - 1.0) / (index * np.cos(angle) - 1.0)
    angle = np.linspace(0.0, brentq(lambda a: away(a) * np.sin(a) - radius, 0.0, 0.7), count)
    points = np.column_stack([away(angle) * np.sin(angle), away(angle) * np.cos(angle)])
    points[-1, 0] = radius
    return points


def flank(index, radius, constant, narrowest, count=200):
    """(k, 2) of the flank that collimates a point source in the centre of a cylindrical pocket wall,
    from the polar angle θ = 90° (first) to ``narrowest``: s = cos θ/n, c = √(1 − s²),
    t = [C − a/sin θ + n a cot θ]/(n (1 − s)), R = a + t c, z = a cot θ + t s."""
    angle = np.linspace(0.5 * np.pi, narrowest, count)
    s = np.cos(angle) / index
    t = (constant - radius / np.sin(angle) + index * radius / np.tan(angle)) / (index * (1.0 - s))
    return np.column_stack([radius + t * np.sqrt(1.0 - s * s), radius / np.tan(angle) + t * s])


def collimator(index=PMMA, focal=5.0, wall=3.0):
    """The point-source collimator: hyperboloid, cylindrical wall from z = 0, exact flank, plane exit.

    Every ray of a point source in the origin leaves along the axis, by centre lens or flank.
    """
    rise = hyperboloid(index, focal, wall)
    side = flank(index, wall, wall + index, np.arctan2(rise[-1, 0], rise[-1, 1]))
    side[0] = wall + 1.0, 0.0  # what θ = 90° gives for C = a + n, without the rounding of cos
    centre = through("centre lens", REFRACTING, rise)
    outer = through("flank", REFLECTING, side)
    corner, edge = (centre.points[-1, 0], 0.0), outer.points[-1]
    top = edge[1] + 0.5
    return Section((
        centre,
        line("pocket wall", REFRACTING, centre.points[-1], corner),
        line("foot", MECHANICAL, corner, outer.points[0]),
        outer,
        line("rim", MECHANICAL, edge, (edge[0], top)),
        line("exit face", REFRACTING, (edge[0], top), (0.0, top)),
    ))


def moulded(stepped=False, flanged=False, index=PMMA):
    """A plausible part: drafted wall, foot below the emitter, bulged exit face or disc, step and ring."""
    rise = hyperboloid(index, 4.5, 2.8)
    side = flank(index, 2.8, 2.8 + index, 0.62)
    side = np.vstack([side[0] + (side[1] - side[0]) * (-0.4 - side[0, 1]) / (side[1, 1] - side[0, 1]), side])
    centre, outer = through("centre lens", REFRACTING, rise), through("flank", REFLECTING, side)
    mouth, edge = (centre.points[-1, 0] + 0.17, -0.4), outer.points[-1]
    curves = [
        centre,
        line("pocket wall", REFRACTING, centre.points[-1], mouth),
        line("foot", MECHANICAL, mouth, outer.points[0]),
        outer,
    ]
    top = np.array([edge[0] + 0.02, edge[1] + 0.8])
    if flanged:
        wide = edge[0] + 1.5
        curves += [
            line("flange underside", MECHANICAL, edge, (wide, edge[1])),
            line("flange edge", MECHANICAL, (wide, edge[1]), (wide + 0.02, top[1])),
            line("flange top", MECHANICAL, (wide + 0.02, top[1]), top),
        ]
    else:
        curves.append(line("rim", MECHANICAL, edge, top))
    bulge = lambda r: top[1] + 0.5 * (1.0 - (r / top[0]) ** 2)
    if not stepped:
        r = np.linspace(top[0], 0.0, 60)
        curves.append(through("exit face", REFRACTING, np.column_stack([r, bulge(r)])))
    else:
        r, s = np.linspace(top[0], 3.0, 40), np.linspace(2.95, 0.0, 30)
        ring = through("exit ring", REFRACTING, np.column_stack([r, bulge(r)]))
        disc = through("exit disc", REFRACTING, np.column_stack([s, bulge(s) - 1.2]))
        curves += [ring, line("step", MECHANICAL, ring.points[-1], disc.points[0]), disc]
    return Section(tuple(curves))
