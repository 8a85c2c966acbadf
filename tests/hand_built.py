"""Sections built by hand, for tests of files and CAD: invented lenses and bodies with closed-form volumes."""

import numpy as np

from inverse.profile.section import MECHANICAL, REFLECTING, REFRACTING, Curve, Section, line


def spline(name, role, degree, points):
    """A clamped spline with even knots through the given control points."""
    points = np.array(points, float)
    inner = np.linspace(0.0, 1.0, len(points) - degree + 1)
    return Curve(name, role, degree, np.concatenate([np.zeros(degree), inner, np.ones(degree)]), points)


def lens(stepped=False):
    """A plausible 20 mm lens, control points with no round digits; optionally with a stepped exit face."""
    shake = np.random.default_rng(7)

    def bent(name, role, degree, points):
        points = np.array(points, float)
        points[1:-1] += shake.uniform(-0.02, 0.02, points[1:-1].shape)
        return spline(name, role, degree, points)

    foot, corner, low, high, edge = (
        (2.7198, -0.4),
        (2.6, 4.1),
        (3.3, -0.4),
        (10.0 - 1 / 47, 11.5),
        (10.0, 12.3),
    )
    curves = [
        bent("centre lens", REFRACTING, 3, [(0, 5.2), (0.6, 5.2), (1.4, 5.0), (2.1, 4.6), corner]),
        line("pocket wall", REFRACTING, corner, foot),
        line("foot", MECHANICAL, foot, low),
        bent(
            "flank", REFLECTING, 4, [low, (4.0, 0.6), (5.1, 2.3), (6.6, 4.6), (8.2, 7.4), (9.6, 10.4), high]
        ),
        line("rim", MECHANICAL, high, edge),
    ]
    if stepped:
        ring, disc = (4.6, 12.1), (4.57, 11.2)
        curves += [
            bent("exit ring", REFRACTING, 3, [edge, (8.0, 12.4), (6.0, 12.3), ring]),
            line("step", MECHANICAL, ring, disc),
            bent("exit disc", REFRACTING, 3, [disc, (3.0, 11.6), (1.5, 11.8), (0, 11.8)]),
        ]
    else:
        curves.append(
            bent("exit face", REFRACTING, 3, [edge, (7.0, 12.6), (4.0, 12.9), (1.2, 13.0), (0, 13.0)])
        )
    return Section(tuple(curves))


def cone_pocket(radius=5.0, height=7.0, mouth=3.0, depth=2.0):
    """A cylinder with a conical pocket from below, and its volume π R² H − π r² h / 3."""
    curves = (
        line("pocket", REFRACTING, (0.0, depth), (mouth, 0.0)),
        line("foot", MECHANICAL, (mouth, 0.0), (radius, 0.0)),
        line("rim", MECHANICAL, (radius, 0.0), (radius, height)),
        line("exit face", REFRACTING, (radius, height), (0.0, height)),
    )
    return Section(curves), np.pi * (radius**2 * height - mouth**2 * depth / 3.0)


def polygon(*corners):
    """A section of straight mechanical curves a, b, c …"""
    return Section(
        tuple(line(chr(97 + k), MECHANICAL, a, b) for k, (a, b) in enumerate(zip(corners, corners[1:])))
    )
