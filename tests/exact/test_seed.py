"""Seed surfaces against closed forms, and the flux map traced exactly in the plane.

The formulas are those of a point source: the hyperboloid r = f (n − 1)/(n cos θ − 1) that collimates it
inside index n, and the flank behind a cylindrical wall of radius a,
s = cos θ/n, c = √(1 − s²), t = [C − a/sin θ + n a cot θ]/(n (1 − s)), R = a + t c, z = a cot θ + t s
(equal optical path to a plane wave along the axis).
"""

from dataclasses import replace

import numpy as np
import pytest

from inverse.emitter import CosinePower, Disk, Emitter, Table
from inverse.profile import moulding
from inverse.profile.lens import section
from inverse.seed import flux_map
from inverse.target import Target
from traced import BARE, BOX, PMMA, SHAPE, SPOT

AXIAL = lambda theta: np.zeros_like(theta)  # noqa: E731


def test_the_flank_behind_a_cylindrical_wall():
    """a = 3 mm, C = a + n: the closed form at every point to 1e-6 mm, and its values from outside."""
    a, n = 3.0, PMMA
    points, theta = flux_map.flank_points(1.0, np.pi / 2, np.radians(35.0), 0.0, a, 0.0, n, AXIAL)
    s = np.cos(theta) / n
    t = (a + n - a / np.sin(theta) + n * a / np.tan(theta)) / (n * (1.0 - s))
    expected = np.column_stack([a + t * np.sqrt(1.0 - s * s), a / np.tan(theta) + t * s])
    np.testing.assert_allclose(points, expected, atol=1e-6)
    known = {90: (4.0, 0.0), 75: (5.064732, 1.167400), 60: (6.430390, 2.951712), 45: (8.300663, 5.851595),
             35: (10.022411, 8.895042)}  # evaluated apart from this package  # fmt: skip
    for angle, place in known.items():
        i = int(np.argmin(np.abs(theta - np.radians(angle))))
        if abs(theta[i] - np.radians(angle)) < 1e-12:
            np.testing.assert_allclose(points[i], place, atol=2e-6)


def test_known_angles_are_among_the_points():
    """Control for the test above: the step divides 15° and 55°, so most known values are compared."""
    _, theta = flux_map.flank_points(1.0, np.pi / 2, np.radians(35.0), 0.0, 3.0, 0.0, PMMA, AXIAL)
    hit = [np.abs(theta - np.radians(a)).min() < 1e-12 for a in (90, 35)]
    assert all(hit)


@pytest.mark.parametrize("n", [PMMA, 1.585])
def test_the_centre_lens_is_the_hyperboloid(n):
    """From the pocket corner to the axis: r = f (n − 1)/(n cos θ − 1) to 1e-6 mm, f set by the corner."""
    corner = np.array([3.0, 5.5])
    points = flux_map.centre_points(corner, 0.0, n, AXIAL)
    theta, away = np.arctan2(points[:, 0], points[:, 1]), np.hypot(*points.T)
    focal = np.hypot(*corner) * (n * np.cos(np.arctan2(*corner)) - 1.0) / (n - 1.0)
    np.testing.assert_allclose(away, focal * (n - 1.0) / (n * np.cos(theta) - 1.0), atol=1e-6)
    assert abs(points[-1, 0]) < 1e-9 and points[0] == pytest.approx(corner)


def refracted(d, normal, mu):
    """Snell in the plane; ``normal`` points to the far side, ``mu`` = n₁/n₂. Written out apart from the package."""
    c = np.sum(d * normal, 1)
    return mu * d + (np.sqrt(1.0 - mu * mu * (1.0 - c * c)) - mu * c)[:, None] * normal


def normals(points, side):
    """Unit normals by differences along the curve, on the given side of it."""
    t = np.gradient(points, axis=0, edge_order=2)
    m = np.column_stack([-t[:, 1], t[:, 0]]) / np.hypot(*t.T)[:, None]
    return m * np.sign(m @ side)[:, None]


@pytest.mark.parametrize("draft", [0.0, 0.03])
@pytest.mark.parametrize("source", [0.0, -0.4])
def test_the_flank_sends_every_ray_where_it_is_told(draft, source):
    """Trace in the plane: in by the drafted wall, off the flank at the wanted angle, to 1e-4 rad."""
    wanted = lambda theta: 0.1 + 0.2 * (theta - 1.0)  # noqa: E731
    points, theta = flux_map.flank_points(1.2, 1.55, 0.65, source, 2.0, np.tan(draft), PMMA, wanted)
    d = np.column_stack([np.sin(theta), np.cos(theta)])
    wall_normal = np.tile([np.cos(draft), np.sin(draft)], (len(d), 1))
    inside = refracted(d, wall_normal, 1.0 / PMMA)
    entry = points - inside * ((points - [2.0, 0.0]) @ wall_normal[0] / (inside @ wall_normal[0]))[:, None]
    line = (entry - [source, 0.0]) / np.hypot(*(entry - [source, 0.0]).T)[:, None]
    np.testing.assert_allclose(line, d, atol=1e-9)  # the ray did come from the source
    m = normals(points, np.array([1.0, -0.3]))
    out = inside - 2.0 * np.sum(inside * m, 1)[:, None] * m
    np.testing.assert_allclose(np.arctan2(*out.T)[2:-2], wanted(theta)[2:-2], atol=1e-4)


def landed(law, half_angle, intensity, angles):
    """θ and the angle in air of rays from a point through flank and centre lens of a shape's seed."""
    emitter = Emitter((Disk(1e-6),), law=law)
    target = Target("shape", half_angle, angles=angles, intensity=intensity)
    corner = np.radians(38.0)
    flank_out, centre_out = flux_map._maps(flux_map.Recipe(1.0, 1.0), emitter, target, PMMA, 1.0, corner)
    points, theta = flux_map.flank_points(1.2, 1.57, corner, 0.0, 2.0, 0.0, PMMA, flank_out)
    inside = refracted(np.column_stack([np.sin(theta), np.cos(theta)]), np.tile([1.0, 0.0], (len(theta), 1)), 1 / PMMA)
    m = normals(points, np.array([1.0, -0.3]))
    off = inside - 2.0 * np.sum(inside * m, 1)[:, None] * m
    side = theta, np.arcsin(PMMA * np.abs(off[:, 0]))
    rise = flux_map.centre_points(np.array([2.0, 2.0 / np.tan(corner)]), 0.0, PMMA, centre_out)
    angle = np.arctan2(rise[:, 0], rise[:, 1])
    through = refracted(np.column_stack([np.sin(angle), np.cos(angle)]), normals(rise, np.array([0.0, 1.0])), 1 / PMMA)
    return emitter, target, corner, side, (angle, np.arcsin(PMMA * through[:, 0]))


@pytest.mark.parametrize("law", [CosinePower(), CosinePower(2.0), Table(np.radians([0.0, 50.0, 90.0]), [1.0, 0.9, 0.2])],
                         ids=["Lambert", "cos²", "table"])  # fmt: skip
def test_a_shape_is_lit_with_the_wanted_cumulative_flux(law):
    """Traced exactly in the plane, the flux of each channel inside every angle is the wanted one, to 2e-3."""
    angles, intensity = np.radians([0.0, 6.0, 12.0]), np.array([1.0, 0.7, 0.2])
    emitter, target, corner, (theta, out), (angle, through) = landed(law, angles[-1], intensity, angles)
    flux = emitter.law.cumulative
    grid = np.linspace(0.0, angles[-1], 4001)
    ring = np.interp(grid, angles, intensity) * np.sin(grid)
    whole = np.concatenate([[0.0], np.cumsum(0.5 * (ring[1:] + ring[:-1]))])
    wanted = lambda a: np.interp(a, grid, whole / whole[-1])  # noqa: E731
    inner = slice(3, -3)  # the ends have no neighbours to take a normal from
    below = (flux(theta) - flux(corner)) / (1.0 - flux(corner))
    np.testing.assert_allclose(wanted(out)[inner], 1.0 - below[inner], atol=2e-3)
    np.testing.assert_allclose(wanted(through)[inner], (flux(angle) / flux(corner))[inner], atol=2e-3)


@pytest.mark.parametrize("recipe, target", [
    (flux_map.Recipe(1.25, 1.6), SPOT), (flux_map.Recipe(1.6, 1.6, 1.0), SPOT), (flux_map.Recipe(1.6, 1.6, 0.5, False, -0.5), SPOT),
    (flux_map.Recipe(1.6, 1.6, 0.0, False), SHAPE), (flux_map.Recipe(1.6, 1.6, 0.0, True), SHAPE),
])  # fmt: skip
def test_a_seed_is_a_lens_in_its_box(recipe, target):
    """Height, clearance, drafts, rim and foot within the envelope, section sound."""
    lens = flux_map.build(recipe, BARE, BOX, PMMA, target)
    assert lens is not None
    assert section(lens, BOX).volume > 0.0
    rows = moulding.limits(BOX, BARE)
    values = dict(zip([r.name for r in rows], np.asarray(moulding.measured(lens, BOX, rows, moulding.DENSE))))
    assert values["part height"] < 1.03 * BOX.height
    assert values["pocket clearance"] > BOX.clearance - 1e-6
    assert values["pocket draft"] > BOX.draft and values["foot width"] > BOX.wall
    assert lens.stepped == (recipe.drop != 0.0)


def test_where_no_seed_exists_none_comes_back():
    """A box too flat for a flank, and an aperture too small for pocket and foot."""
    assert flux_map.build(flux_map.Recipe(1.25, 1.6), BARE, replace(BOX, height=3.0), PMMA, SPOT) is None
    assert flux_map.build(flux_map.Recipe(1.25, 1.6), BARE, replace(BOX, radius=1.5), PMMA, SPOT) is None
