"""The emitter against closed forms and against counting points."""

import numpy as np
import pytest

from inverse.emitter import CosinePower, Disk, Dome, Emitter, Rectangle, Table
from inverse.units import rad

DICE = tuple(Rectangle(1.0, 1.0, x, y) for x in (-0.6, 0.6) for y in (-0.6, 0.6))
SHAPES = {
    "disk": Disk(0.8),
    "disk off axis": Disk(0.5, 1.0, 0.3),
    "disk over the axis": Disk(0.5, 0.2, 0.1),
    "square": Rectangle(1.0, 1.0),
    "rectangle": Rectangle(4.0, 1.0),
    "square off centre": Rectangle(1.0, 1.0, 0.2, 0.0),
    "rectangle far out": Rectangle(0.7, 0.4, -1.3, 0.9),
}


@pytest.mark.parametrize("name", SHAPES)
def test_arc_is_what_counting_points_on_the_circle_gives(name):
    """The closed form of the arc equals the counted part of the circle, for every shape."""
    die, count = SHAPES[name], 100_000
    phi = (np.arange(count) + 0.5) * 2 * np.pi / count
    r = np.linspace(0.0, 1.1 * die.reach, 37)[1:]
    counted = [die.contains(x * np.cos(phi), x * np.sin(phi)).mean() * 2 * np.pi * x for x in r]
    # A circle meets a side at most twice: eight ends at most, each misjudged by a point.
    np.testing.assert_allclose(die.arc(r), counted, atol=8 * 2 * np.pi * r.max() / count)


def test_arc_of_a_centred_square_in_closed_form():
    """Beyond half the side h, four pieces 2 r arccos(h/r) of the circle stand out (elementary geometry)."""
    r = np.linspace(0.501, 0.707, 9)
    expected = 2 * np.pi * r - 8 * r * np.arccos(0.5 / r)
    np.testing.assert_allclose(Rectangle(1.0, 1.0).arc(r), expected, atol=1e-14)


@pytest.mark.parametrize("name", SHAPES)
def test_arc_density_integrates_to_the_area(name):
    """∫ a(r) dr = A, piece by piece between the breaks, whose square-root ends an arcsine map removes."""
    emitter = Emitter((SHAPES[name],))
    nodes, weights = np.polynomial.legendre.leggauss(40)
    total = 0.0
    for low, high in zip(emitter.breaks[:-1], emitter.breaks[1:]):
        t = 0.5 * np.pi * nodes
        r = low + (high - low) * (0.5 + 0.5 * np.sin(t))
        total += np.sum(emitter.arc_density(r) * 0.25 * np.pi * (high - low) * np.cos(t) * weights)
    assert total == pytest.approx(emitter.area, rel=1e-8)


def test_arc_at_the_axis_is_zero():
    """The circle of radius zero has no length, whatever lies on the axis."""
    for die in SHAPES.values():
        assert die.arc(np.zeros(1))[0] == 0.0


def test_arc_densities_of_several_dice_add():
    """Four dice carry the sum of their arcs, although alike ones are computed once only."""
    turned = (Rectangle(0.4, 0.8, 2.0, 0.1), Rectangle(0.8, 0.4, 0.1, -2.0))
    only_moved = (Rectangle(0.4, 0.8, -0.1, 2.0), Disk(0.2, -2.0, 0.0))  # moved, not turned
    odd = (*DICE, *turned, *only_moved)
    r = np.linspace(0.0, 2.6, 50)
    np.testing.assert_allclose(Emitter(odd).arc_density(r), sum(d.arc(r) for d in odd), atol=1e-13)


def test_radial_quantile_of_a_centred_disk_is_exact():
    """The fraction u of a disk's area lies within R √u."""
    u = np.linspace(0.0, 1.0, 101)
    np.testing.assert_allclose(Emitter((Disk(1.7),)).radial_quantile(u), 1.7 * np.sqrt(u), atol=1e-15)


def test_radial_quantile_of_a_square_inside_its_inscribed_circle():
    """Up to u = π/4 the circle lies inside a unit square, so that π r² = u."""
    u = np.linspace(0.0, np.pi / 4, 50)
    found = Emitter((Rectangle(1.0, 1.0),)).radial_quantile(u)
    np.testing.assert_allclose(found, np.sqrt(u / np.pi), atol=2e-7)  # a table of a thousand steps a piece


@pytest.mark.parametrize("name", SHAPES)
def test_radial_quantile_rises_from_the_inner_to_the_outer_edge(name):
    """The quantile is monotone and ends at the emitter's reach."""
    emitter = Emitter((SHAPES[name],))
    r = emitter.radial_quantile(np.linspace(0.0, 1.0, 20_001))
    assert np.all(np.diff(r) >= 0)
    assert r[-1] == pytest.approx(emitter.reach, abs=1e-9)


def test_radial_quantile_skips_rings_without_light():
    """No radius is drawn between a central die and an outer one."""
    emitter = Emitter((Disk(0.5), Disk(0.3, 2.0, 0.0)))
    r = emitter.radial_quantile(np.linspace(0.0, 1.0, 50_001))
    assert not np.any((r > 0.501) & (r < 1.699))


def test_samples_lie_on_the_dies_in_proportion_to_their_area():
    """A die of three times the area gets three times the samples, all of them on it."""
    dies = (Rectangle(1.0, 1.0, -1.0, 0.0), Rectangle(1.5, 2.0, 1.5, 0.0))
    count = 40_000
    x, y = Emitter(dies).sample(*np.random.default_rng(3).random((3, count)))
    on = [d.contains(x, y) for d in dies]
    assert np.all(on[0] | on[1])
    assert abs(on[1].mean() - 0.75) <= 4 * np.sqrt(0.75 * 0.25 / count)


def test_samples_follow_the_radial_quantile():
    """The radii of area samples are distributed as the radial quantile says."""
    emitter, count = Emitter(DICE), 100_000
    x, y = emitter.sample(*np.random.default_rng(5).random((3, count)))
    r, u = np.hypot(x, y), np.linspace(0.1, 0.9, 9)
    below = np.array([(r < q).mean() for q in emitter.radial_quantile(u)])
    assert np.all(np.abs(below - u) <= 4 * np.sqrt(u * (1 - u) / count))


def test_lambertian_flux_inside_an_angle_is_sine_squared():
    """Lambert's law: the flux inside θ is sin² θ of all."""
    theta = np.linspace(0.0, np.pi / 2, 19)
    np.testing.assert_allclose(CosinePower().cumulative(theta), np.sin(theta) ** 2, atol=1e-15)


def test_cosine_power_is_dark_behind_the_emitter():
    """Beyond 90° there is no intensity, and all the flux has been counted, for any power."""
    for power in (0.0, 0.5, 1.0, 3.0):
        law = CosinePower(power)
        assert law.intensity(np.array([1.6, 3.0])).tolist() == [0.0, 0.0]
        assert law.cumulative(np.array([1.6, 3.0])).tolist() == [1.0, 1.0]


LAWS = {
    "lambertian": CosinePower(),
    "narrow": CosinePower(3.5),
    "table": Table(rad(np.array([0.0, 30.0, 60.0, 80.0])), np.array([1.0, 0.9, 0.4, 0.1])),
}


@pytest.mark.parametrize("name", LAWS)
def test_quantile_inverts_cumulative(name):
    """The fraction inside the angle of fraction u is u."""
    law, u = LAWS[name], np.linspace(0.0, 0.999, 50)
    # The table's inverse is interpolated between 4000 angles.
    np.testing.assert_allclose(law.cumulative(np.arccos(law.quantile(u))), u, atol=1e-6)


def test_table_of_even_intensity_has_the_flux_of_its_solid_angle():
    """I = 1 up to 60°: the flux inside θ is (1 − cos θ)/(1 − cos 60°)."""
    law = Table(np.array([0.0, rad(60.0)]), np.array([2.0, 2.0]))
    theta = rad(np.array([10.0, 37.0, 60.0, 80.0]))
    expected = np.minimum((1 - np.cos(theta)) / 0.5, 1.0)
    np.testing.assert_allclose(law.cumulative(theta), expected, atol=1e-9)


def test_table_of_linear_intensity_has_the_flux_of_its_integral():
    """I = 1 − θ up to 1 rad: ∫ (1 − θ) sin θ dθ = 1 − cos θ − sin θ + θ cos θ."""
    law, theta = Table(np.array([0.0, 1.0]), np.array([1.0, 0.0])), np.linspace(0.0, 1.0, 11)
    expected = (1 - np.cos(theta) - np.sin(theta) + theta * np.cos(theta)) / (1 - np.sin(1.0))
    np.testing.assert_allclose(law.cumulative(theta), expected, atol=1e-6)


def test_brightest_direction_of_a_law():
    """Radiance I/cos θ peaks on the axis for m >= 1, is unbounded at 90° for m < 1."""
    assert CosinePower(1.0).brightest == CosinePower(4.0).brightest == 1.0
    assert CosinePower(0.5).brightest == np.inf
    even = Table(np.array([0.0, rad(60.0)]), np.array([3.0, 3.0]))
    assert even.brightest == pytest.approx(6.0, rel=1e-12)  # 3/cos 60°
    assert Table(np.array([0.0, rad(90.0)]), np.array([1.0, 0.5])).brightest == np.inf


def test_a_dome_sets_index_and_keep_out():
    """Dies radiate into the dome's index, and the pocket stays clear of the dome."""
    bare, domed = Emitter((Rectangle(1.0, 1.0),)), Emitter((Rectangle(1.0, 1.0),), dome=Dome(1.5, 1.41))
    assert (bare.index, domed.index) == (1.0, 1.41)
    assert (bare.keep_out, domed.keep_out) == (pytest.approx(np.sqrt(0.5)), 1.5)
