"""From the lens to the target: plane, far field and the flat port, by hand."""

import numpy as np
import pytest

from inverse.target import Port, Surroundings, Target
from inverse.verify import medium

AIR = Surroundings()
WATER = Surroundings("water", 1.3334, Port(1.49253, 6.0, 2.0))
FAR = Target("spot", 0.1)


def tilted(degrees, azimuth=0.7):
    a = np.radians(np.atleast_1d(degrees))
    return np.column_stack([np.sin(a) * np.cos(azimuth), np.sin(a) * np.sin(azimuth), np.cos(a)])


def test_a_flat_port_narrows_the_angles():
    """5, 10, 20, 45° in air become 3.75, 7.48, 14.86, 32.03° in water (sin θ / 1.3334, to these digits)."""
    d = tilted([5, 10, 20, 45])
    theta = medium.arrive(WATER, FAR, 10.0, np.full((4, 3), 9.0), d).theta
    np.testing.assert_allclose(np.degrees(theta), [3.75, 7.48, 14.86, 32.03], atol=0.006)


def test_nothing_enters_water_wider_than_its_critical_angle():
    """Grazing light in air enters water at 48.6° at most, whatever the port is made of."""
    theta = medium.arrive(WATER, FAR, 0.0, np.zeros((1, 3)), tilted(89.999)).theta
    assert np.degrees(theta[0]) == pytest.approx(48.6, abs=0.05)


def test_a_port_passes_the_product_of_its_faces():
    """At normal incidence (1 − R₁)(1 − R₂), R = ((a − b)/(a + b))²."""
    passed = medium.arrive(WATER, FAR, 0.0, np.zeros((1, 3)), tilted(0.0)).passed
    first, second = (0.49253 / 2.49253) ** 2, ((1.49253 - 1.3334) / (1.49253 + 1.3334)) ** 2
    assert passed[0] == pytest.approx((1.0 - first) * (1.0 - second), rel=1e-12)
    assert medium.arrive(AIR, FAR, 0.0, np.zeros((1, 3)), tilted(30.0)).passed[0] == 1.0


def test_a_plane_in_air_is_met_where_the_ray_points():
    """From (1, 2, 9) along 20° to z = 209: r by the tangent, θ = atan(r / 209)."""
    wall = Target("spot", 0.1, distance=209.0)
    out = medium.arrive(AIR, wall, 9.5, np.array([[1.0, 2.0, 9.0]]), tilted(20.0))
    x, y = np.array([1.0, 2.0]) + 200.0 * np.tan(np.radians(20.0)) * np.array([np.cos(0.7), np.sin(0.7)])
    np.testing.assert_allclose(out.place, [[x, y]], rtol=1e-12)
    assert out.theta[0] == pytest.approx(np.arctan(np.hypot(x, y) / 209.0), rel=1e-12)


def test_a_plane_beyond_a_port_is_reached_by_three_straight_pieces():
    """From (0, 0, 7) at 30°: 5 mm of air to the port at 12, 6 mm of port, then water to z = 1000."""
    s = np.sin(np.radians(30.0))
    pieces = (5.0, 1.0), (6.0, 1.49253), (982.0, 1.3334)  # mm, index
    legs = [length * np.tan(np.arcsin(s / index)) for length, index in pieces]
    where = np.array([[0.0, 0.0, 7.0]])
    out = medium.arrive(WATER, Target("spot", 0.1, distance=1000.0), 10.0, where, tilted(30.0))
    assert np.hypot(*out.place[0]) == pytest.approx(sum(legs), rel=1e-12)


def test_the_far_field_picture_keeps_angle_and_azimuth():
    """Place is θ in the direction of the azimuth, also on the axis."""
    place = medium.arrive(AIR, FAR, 0.0, np.zeros((2, 3)), np.vstack([tilted(25.0), tilted(0.0)])).place
    wanted = np.radians([[25.0 * np.cos(0.7), 25.0 * np.sin(0.7)], [0.0, 0.0]])
    np.testing.assert_allclose(place, wanted, atol=1e-15)


def test_skewness_passes_the_port_unchanged():
    """n (x d_y − y d_x) in water equals x d_y − y d_x in air."""
    rng = np.random.default_rng(2)
    o, angles = rng.normal(size=(50, 3)), zip(rng.uniform(0, 80, 50), rng.random(50))
    d = np.vstack([tilted(*a) for a in angles])
    out = medium.arrive(WATER, Target("spot", 0.1, distance=500.0), 5.0, o, d)
    np.testing.assert_allclose(out.skewness, o[:, 0] * d[:, 1] - o[:, 1] * d[:, 0], atol=1e-12)


@pytest.mark.parametrize("surroundings, target, complaint", [
    (Surroundings("water", 1.333), FAR, "needs a port"),
    (Surroundings("water", 1.333, Port(1.5, 5.0, -1.0)), FAR, "gap and thickness >= 0"),
    (AIR, Target("spot", 0.1, distance=9.0), "lies inside lens or port"),
    (WATER, Target("spot", 0.1, distance=17.0), "lies inside lens or port"),
])
def test_requests_that_make_no_sense_are_refused(surroundings, target, complaint):
    """Water without a port, a port inside the lens, a target plane inside lens or port."""
    with pytest.raises(ValueError, match=complaint):
        medium.check(surroundings, target, 10.0)
