"""The verifier's own sampling of the LED, against closed forms."""

import numpy as np
import pytest
from scipy.stats import qmc

from inverse.emitter import CosinePower, Disk, Dome, Emitter, Rectangle, Table
from inverse.verify.source import emit, swallowed

UNIFORM = qmc.Sobol(4, seed=np.random.default_rng(11)).random_base2(16)
# Error of a fraction from 65536 scrambled Sobol points: below 5/65536 per dimension crossed.
FINE = 3e-4


def inside(light, theta):
    """Fraction of the weight within ``theta`` of the axis."""
    return np.sum(light.weight[light.direction[:, 2] >= np.cos(theta)]) / np.sum(light.weight)


@pytest.mark.parametrize("degrees", [5, 20, 45, 60, 80])
def test_a_lambertian_die_puts_sin_squared_inside(degrees):
    """Flux inside θ is sin²θ."""
    theta = np.radians(degrees)
    assert inside(emit(Emitter((Disk(1.0),)), UNIFORM), theta) == pytest.approx(np.sin(theta) ** 2, abs=FINE)


@pytest.mark.parametrize("power", [0.5, 1.0, 3.0, 40.0])
def test_a_power_of_the_cosine(power):
    """I = cosᵐ θ puts 1 − cosᵐ⁺¹ θ inside θ."""
    light = emit(Emitter((Disk(1.0),), law=CosinePower(power)), UNIFORM)
    for theta in (0.1, 0.5, 1.2):
        assert inside(light, theta) == pytest.approx(1.0 - np.cos(theta) ** (power + 1.0), abs=FINE)


def test_a_table_that_is_linear_in_the_angle():
    """I = 1 − θ/a up to a: inside θ lies ∫ (1 − θ/a) sin θ dθ over its whole, done by hand."""
    a = 1.0
    law = Table(np.array([0.0, a, 1.4]), np.array([1.0, 0.0, 0.0]))
    flux = lambda t: 1.0 - np.cos(t) - (np.sin(t) - t * np.cos(t)) / a
    light = emit(Emitter((Disk(1.0),), law=law), UNIFORM)
    for theta in (0.1, 0.4, 0.8):
        assert inside(light, theta) == pytest.approx(flux(theta) / flux(a), abs=FINE)
    assert np.arccos(light.direction[:, 2]).max() <= a


def test_a_table_past_the_horizon_counts_only_what_lies_above_it():
    """A constant table to 120° gives the uniform hemisphere, 1 − cos θ."""
    law = Table(np.array([0.0, np.radians(120.0)]), np.array([2.0, 2.0]))
    light = emit(Emitter((Disk(1.0),), law=law), UNIFORM)
    assert inside(light, 1.0) == pytest.approx(1.0 - np.cos(1.0), abs=FINE)
    assert light.direction[:, 2].min() >= 0.0


def test_a_dark_table_is_refused():
    """No light at all cannot be normalised."""
    with pytest.raises(ValueError, match="holds no light"):
        emit(Emitter((Disk(1.0),), law=Table(np.array([0.0, 1.0]), np.zeros(2))), UNIFORM)


def test_dies_shine_in_proportion_to_their_area():
    """Three dies of areas 1, 2 and π/4, each lit uniformly: shares, centres and second moments."""
    dies = (Rectangle(1.0, 1.0, -2.0, 0.0), Rectangle(1.0, 2.0, 2.0, 0.0), Disk(0.5, 0.0, 3.0))
    light = emit(Emitter(dies), UNIFORM)
    x, y = light.origin[:, 0], light.origin[:, 1]
    whole = 3.0 + np.pi / 4.0
    for here, area, spread in (
        (x < -1.0, 1.0, (1 / 12, 1 / 12)),
        (x > 1.0, 2.0, (1 / 12, 4 / 12)),
        (y > 2.0, np.pi / 4, (1 / 16, 1 / 16)),
    ):
        assert here.mean() == pytest.approx(area / whole, abs=FINE)
        assert (x[here].var(), y[here].var()) == pytest.approx(spread, rel=0.01)
    assert np.all(light.origin[:, 2] == 0.0)


def test_a_point_in_the_centre_of_a_dome_shines_as_without():
    """Radial light is not bent and all loses the same part, ((n − 1)/(n + 1))²: in line with the origin."""
    light = emit(Emitter((Disk(1e-9),), dome=Dome(1.5, 1.41)), UNIFORM)
    np.testing.assert_allclose(light.weight, 1.0 - (0.41 / 2.41) ** 2, atol=1e-7)
    np.testing.assert_allclose(light.origin, 1.5 * light.direction, atol=1e-7)


def test_trapped_light_is_left_out():
    """A die as wide as 0.95 of its dome traps light by total reflection exactly where n |p × d| > R."""
    led, dome = Emitter((Disk(1.425),)), Dome(1.5, 1.5)
    inner = emit(led, UNIFORM)
    trapped = dome.index * np.linalg.norm(np.cross(inner.origin, inner.direction), axis=1) > dome.radius
    light = emit(Emitter(led.dies, dome=dome), UNIFORM)
    assert 0.05 < trapped.mean() < 0.5
    np.testing.assert_array_equal(light.row, np.flatnonzero(~trapped))
    assert np.all(light.weight > 0.0) and np.all(light.weight <= 1.0)


def test_a_dome_bends_by_snell_at_its_surface():
    """n sin i inside equals sin i' outside at the point on the dome (sine = |p × d| / R)."""
    dome = Dome(2.0, 1.41)
    bare = emit(Emitter((Rectangle(1.0, 1.0),)), UNIFORM)  # the same numbers give the same ray inside
    light = emit(Emitter((Rectangle(1.0, 1.0),), dome=dome), UNIFORM)
    assert len(light.row) == len(UNIFORM)
    ways = bare.direction, light.direction
    before, after = (np.linalg.norm(np.cross(light.origin, d), axis=1) for d in ways)
    np.testing.assert_allclose(after, 1.41 * before, atol=1e-12)
    np.testing.assert_allclose(np.linalg.norm(light.origin, axis=1), 2.0, rtol=1e-12)


def test_a_die_outside_its_dome_is_refused():
    """Geometry that cannot exist is not traced."""
    with pytest.raises(ValueError, match="outside its dome"):
        emit(Emitter((Disk(1.0, 1.0),), dome=Dome(1.5, 1.41)), UNIFORM)


def test_light_that_comes_back_ends_on_the_die():
    """Falling through the emitter plane inside a die is absorbed there; beside it, or rising, it is not."""
    led = Emitter((Rectangle(1.0, 2.0), Disk(0.2, 3.0)))
    o = np.array([[0.4, 0.9, 2.0], [0.6, 0.0, 2.0], [3.1, 0.0, 2.0], [0.0, 0.0, 2.0], [2.4, 0.0, 2.0]])
    d = np.array([[0, 0, -1.0], [0, 0, -1.0], [0, 0, -1.0], [0, 0, 1.0], [-0.6, 0.0, -0.8]])
    np.testing.assert_allclose(swallowed(led, o, d), [2.0, np.inf, 2.0, np.inf, np.inf])
    np.testing.assert_allclose(swallowed(led, o[4:] + [-0.6, 0, 0], d[4:]), [2.5])


def test_light_that_comes_back_ends_on_the_dome():
    """A dome of radius 1.5 takes light from z = 4 after 2.5 mm; light that passes beside it goes on."""
    led = Emitter((Disk(0.5),), dome=Dome(1.5, 1.41))
    o = np.array([[0.0, 0.0, 4.0], [1.6, 0.0, 4.0], [0.0, 1.5, 0.0]])
    d = np.array([[0, 0, -1.0], [0, 0, -1.0], [0.0, 1.0, 0.0]])
    np.testing.assert_allclose(swallowed(led, o, d), [2.5, np.inf, np.inf])
