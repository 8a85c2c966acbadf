"""Where rays meet bodies whose crossings have a closed form."""

import numpy as np
import pytest

from inverse.verify.crossing import first_crossing
from inverse.verify.surface import Points
from lens_samples import cylinder

RADIUS = 5.0


def sphere(radius, count=400):
    """Points and tangents of a sphere straight from sine and cosine, their rounding included."""
    angle = np.linspace(-0.5 * np.pi, 0.5 * np.pi, count)
    rows = np.column_stack([np.cos(angle), np.sin(angle), -np.sin(angle), np.cos(angle)])
    rows[:, :2] *= radius
    rows[[0, -1], 0], rows[[0, -1], 3] = 0.0, -2e-16  # cos π/2 as it may come out, on the unlucky side
    return Points(("exit face",), (rows,))


BALL = sphere(RADIUS).chain
PLATE = Points.of(cylinder(4.0, 1.0, 3.0)).chain


def unit(vectors):
    return vectors / np.linalg.norm(vectors, axis=1)[:, None]


def rays_at(places, directions, back):
    """Rays (origin, direction) that pass the given places after ``back`` mm."""
    return places - back * directions, directions


def steep(kind, count, rng):
    """Unit directions: all ways, nearly or exactly horizontal, nearly or exactly axial."""
    d = rng.normal(size=(count, 3))
    if kind == "nearly horizontal":
        d[:, 2] *= 10.0 ** rng.uniform(-14, -1, count)
    elif kind == "horizontal":
        d[:, 2] = 0.0
    elif kind == "nearly axial":
        d[:, :2] *= 10.0 ** rng.uniform(-14, -1, count)[:, None]
    elif kind == "axial":
        d[:, :2] = 0.0
    elif kind == "meridional":
        d[:, 1] = 0.0
    return unit(d)


KINDS = ["all ways", "nearly horizontal", "horizontal", "nearly axial", "axial", "meridional"]


@pytest.mark.parametrize("kind", KINDS)
def test_a_sphere_from_outside(kind):
    """First crossing from outside is at t = −b − √(b² − c), b = o·d, c = o² − R²; none for b² < c."""
    rng = np.random.default_rng(KINDS.index(kind))
    d = steep(kind, 20_000, rng)
    places = rng.uniform(-6, 6, (len(d), 3)) * ([1, 0, 1] if kind == "meridional" else [1, 1, 1])
    o, d = rays_at(places, d, 30.0)
    b, c = np.sum(o * d, 1), np.sum(o * o, 1) - RADIUS**2
    inner = b * b - c
    sure = np.abs(inner) > 1e-8  # nearer to grazing the interpolation (1e-10 mm) decides
    expected = np.where(inner > 0.0, -b - np.sqrt(np.maximum(inner, 0.0)), np.inf)
    t = first_crossing(BALL, o, d, np.zeros(len(d), bool)).t
    assert sure.mean() > 0.99
    np.testing.assert_array_equal(np.isinf(t[sure]), np.isinf(expected[sure]))
    hit = sure & np.isfinite(t)
    # Place of the root against its depth: δt = δ(surface) / cos of incidence.
    slack = 1e-9 / np.sqrt(inner[hit] / RADIUS**2)
    assert np.all(np.abs(t[hit] - expected[hit]) < np.maximum(slack, 1e-9))


@pytest.mark.parametrize("kind", KINDS)
def test_a_sphere_from_within(kind):
    """From any inner point the body is left at t = −b + √(b² − c), and always left."""
    rng = np.random.default_rng(10 + KINDS.index(kind))
    d = steep(kind, 20_000, rng)
    o = unit(rng.normal(size=d.shape)) * (RADIUS * rng.random(len(d)) ** (1 / 3) * 0.999)[:, None]
    o = o * ([1, 0, 1] if kind == "meridional" else [1, 1, 1])
    b, c = np.sum(o * d, 1), np.sum(o * o, 1) - RADIUS**2
    t = first_crossing(BALL, o, d, np.ones(len(d), bool)).t
    np.testing.assert_allclose(t, -b + np.sqrt(b * b - c), atol=3e-9)


@pytest.mark.parametrize("kind", KINDS[:-1])
def test_chords_from_the_surface_itself(kind):
    """A ray that starts on the sphere and dives in leaves after 2 R cos i; its start is not found again."""
    rng = np.random.default_rng(20 + KINDS.index(kind))
    d = steep(kind, 20_000, rng)
    o, d = rays_at(rng.uniform(-3, 3, d.shape), d, 30.0)
    found = first_crossing(BALL, o, d, np.zeros(len(d), bool))
    hit = np.isfinite(found.t)
    p, d = o[hit] + found.t[hit, None] * d[hit], d[hit]
    chord = -2.0 * np.sum(p * d, 1)
    deep = chord > 1e-3
    t = first_crossing(BALL, p, d, np.ones(len(p), bool)).t
    assert deep.mean() > 0.99
    np.testing.assert_allclose(t[deep], chord[deep], atol=1e-6)  # 1e-10 mm of surface at grazing i
    assert np.all(np.isfinite(t))


@pytest.mark.parametrize("depth", 10.0 ** np.arange(-1, -8, -1))
def test_grazing_rays_hit_by_a_hair_and_miss_by_a_hair(depth):
    """Impact parameter R (1 − depth) always hits, R (1 + depth) never; the surface is good to 1e-10."""
    rng = np.random.default_rng(3)
    d = unit(rng.normal(size=(4000, 3)))
    side = unit(np.cross(d, rng.normal(size=d.shape)))
    for sign in (-1.0, 1.0):
        o = side * RADIUS * (1.0 + sign * depth) - 20.0 * d
        hit = np.isfinite(first_crossing(BALL, o, d, np.zeros(len(d), bool)).t)
        assert np.all(hit == (sign < 0.0))


@pytest.mark.parametrize("depth", 10.0 ** np.arange(-1, -8, -1))
def test_near_horizontal_rays_at_every_height_hit_by_a_hair(depth):
    """Chords of the circles of latitude, poles included, from far to near grazing and tilted by 0 to 0.1."""
    rng = np.random.default_rng(9)
    count = 8000
    z = RADIUS * (1.0 - 10.0 ** rng.uniform(-6, 0, count)) * rng.choice([-1.0, 1.0], count)
    turn, tilt = rng.uniform(0, 2 * np.pi, count), rng.choice([0.0, 1e-12, 1e-6, 1e-3, 0.04, 0.1], count)
    latitude = np.sqrt(RADIUS**2 - z**2)
    # Closest to the axis at this point, inside by the given part of the circle's radius.
    near = (latitude * (1.0 - depth))[:, None] * np.column_stack([np.cos(turn), np.sin(turn)])
    d = np.column_stack([-np.sin(turn), np.cos(turn), tilt * latitude / RADIUS])
    o, d = rays_at(np.column_stack([near, z]), unit(d), 30.0)
    b, c = np.sum(o * d, 1), np.sum(o * o, 1) - RADIUS**2
    sure = b * b - c > 1e-7
    assert sure.mean() > 0.1
    found = first_crossing(BALL, o, d, np.zeros(count, bool)).t
    expected = -b[sure] - np.sqrt(b[sure] ** 2 - c[sure])
    np.testing.assert_allclose(found[sure], expected, atol=2e-6)  # 1e-9 mm of surface by the slope at grazing


def plate_distance(o, d):
    """First crossing of the cylinder r <= 4, 1 <= z <= 3 from outside, by slabs (closed form)."""
    a, b, c = (np.sum(p[:, :2] * q[:, :2], 1) for p, q in ((d, d), (o, d), (o, o)))
    c = c - 16.0
    root = np.sqrt(np.maximum(b * b - a * c, 0.0))
    round_in, round_out = (-b - root) / a, (-b + root) / a
    flat = np.sort(np.stack([(1.0 - o[:, 2]) / d[:, 2], (3.0 - o[:, 2]) / d[:, 2]]), axis=0)
    first, last = np.maximum(round_in, flat[0]), np.minimum(round_out, flat[1])
    return np.where((b * b > a * c) & (first < last), first, np.inf)


def test_a_plate_of_cylinder_and_planes_is_exact():
    """Straight curves: crossings to 1e-12 mm, right down to rays that clip its edges."""
    rng = np.random.default_rng(5)
    o, d = rays_at(rng.uniform(-5, 5, (50_000, 3)), steep("all ways", 50_000, rng), 30.0)
    t, expected = first_crossing(PLATE, o, d, np.zeros(len(d), bool)).t, plate_distance(o, d)
    np.testing.assert_array_equal(np.isinf(t), np.isinf(expected))
    hit = np.isfinite(t)
    np.testing.assert_allclose(t[hit], expected[hit], atol=1e-11)


def test_no_ray_slips_through_a_joint():
    """Rays aimed at the edge circle where two curves meet, offset by rounding and less than a nanometre."""
    rng = np.random.default_rng(6)
    count = 20_000
    turn, z = rng.uniform(0, 2 * np.pi, count), np.where(rng.random(count) < 0.5, 1.0, 3.0)
    off = 10.0 ** rng.uniform(-17, -9, count)
    edge = np.column_stack([(4.0 - off) * np.cos(turn), (4.0 - off) * np.sin(turn), z])
    middle = np.column_stack([rng.uniform(-1, 1, (count, 2)), rng.uniform(1.5, 2.5, count)])
    d = unit(edge - middle)
    leaving = first_crossing(PLATE, middle, d, np.ones(count, bool))
    np.testing.assert_allclose(leaving.t, np.linalg.norm(edge - middle, axis=1), atol=1e-6)
    entering = first_crossing(PLATE, middle + 10.0 * d, -d, np.zeros(count, bool))
    assert np.all(np.isfinite(entering.t))
    assert set(np.unique(leaving.curve)) == {0, 1, 2}


def test_the_axis_itself_is_no_hole():
    """Rays along the axis and rays through the poles at any tilt meet the plate and the sphere."""
    tilt = np.concatenate([[0.0], 10.0 ** np.arange(-18.0, 0.0)])
    d = np.column_stack([np.sin(tilt), np.zeros_like(tilt), np.cos(tilt)])
    for chain, low, high in ((PLATE, 1.0, 3.0), (BALL, -5.0, 5.0)):
        t = first_crossing(chain, np.array([0.0, 0.0, low]) - 2.0 * d, d, np.zeros(len(d), bool)).t
        np.testing.assert_allclose(t, 2.0, atol=1e-9)
        up = np.tile([0.0, 0.0, 1.0], (2, 1)) * [[1], [-1]]
        inside = first_crossing(chain, np.full((2, 3), [0.0, 0.0, 1.5]), up, np.ones(2, bool))
        np.testing.assert_allclose(inside.t, [high - 1.5, 1.5 - low], atol=1e-9)


def test_the_curve_met_is_named():
    """From below a plate shows its centre lens, from the side its rim, from above its exit face."""
    o = np.array([[1.0, 1.0, -5.0], [9.0, 0.5, 2.0], [1.0, 1.0, 9.0], [9.0, 9.0, 9.0]])
    d = np.array([[0.0, 0.0, 1.0], [-1.0, 0.0, 0.0], [0.0, 0.0, -1.0], [0.0, 0.0, 1.0]])
    found = first_crossing(PLATE, o, d, np.zeros(4, bool))
    np.testing.assert_array_equal(found.curve, [0, 1, 2, -1])
    assert np.isinf(found.t[3])
