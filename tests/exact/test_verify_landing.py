"""Grids, and how replicates become a mean with an error."""

import numpy as np
import pytest

from inverse.target import Target
from inverse.verify.landing import Beam, Grids, Tally, gather
from inverse.verify.ledger import Road
from inverse.verify.medium import Arrival

NAMES = ("centre lens", "exit face")


@pytest.mark.parametrize("degrees", [0.1, 1.0, 4.0, 20.0, 45.0, 60.0, 80.0, 89.0, 90.0])
def test_the_grids_reach_from_the_axis_to_the_horizon_and_hold_the_edge(degrees):
    """Growing angles from 0 to 90°, the target's edge among them, no ring more than 5° wide or a sliver."""
    edge = np.radians(degrees)
    grids = Grids(Target("spot", edge))
    for grid in (grids.beam, grids.encircled):
        assert grid[0] == 0.0 and grid[-1] == 0.5 * np.pi
        assert np.abs(grid - edge).min() < 1e-12
        width = np.diff(grid)
        assert width.min() >= 0.0029 * edge and width.max() < np.radians(5.0)


def test_rings_fill_the_half_space():
    """Solid angles add up to 2π, and each ring's angle halves it."""
    beam = Beam(np.array([0.0, 0.3, 1.0, 0.5 * np.pi]), np.ones(3), np.zeros(3))
    assert np.sum(beam.solid_angle) == pytest.approx(2.0 * np.pi, rel=1e-14)
    inner = 2.0 * np.pi * (np.cos(beam.edges[:-1]) - np.cos(beam.angle))
    np.testing.assert_allclose(inner, 0.5 * beam.solid_angle, rtol=1e-12)


def replicate(grids, inside, weight):
    """A tally of two designed rays of the given weight, ``inside`` of them on the axis, the rest at 1 rad."""
    tally, road = Tally(grids), Road(NAMES)
    code = road.after(road.after(np.zeros(2, int), 0, 0, 0), 1, 1, 0)
    theta = np.where(np.arange(2) < inside, 0.0, 1.0)
    direction = np.column_stack([np.sin(theta), np.zeros(2), np.cos(theta)])
    place = np.column_stack([theta, np.zeros(2)])
    tally.emitted = 2.0 * weight
    assert np.all(tally.book_roads(road, code, np.full(2, weight)))
    wanted = theta <= 0.2
    tally.book("in target", np.full(2, weight)[wanted])
    tally.book("forward outside target", np.full(2, weight)[~wanted])
    tally.designed += weight * wanted.sum()
    tally.skewness = [0.0, 0.0]
    tally.land(Arrival(theta, place, direction, np.ones(2), np.zeros(2)), np.full(2, weight))
    return tally.close()


def test_replicates_give_mean_and_standard_error():
    """Shares 0, ½, ½, 1 whatever their weights: mean ½, error (√(1/6))/√4, by hand."""
    grids = Grids(Target("spot", 0.2))
    out = gather([replicate(grids, k, w) for k, w in ((0, 1.0), (1, 0.5), (1, 2.0), (2, 0.9))], 120.0, 8)
    assert (out.share, out.designed_paths_share) == pytest.approx((0.5, 0.5))
    assert (out.share_se, out.designed_paths_share_se) == pytest.approx((np.sqrt(1 / 6) / 2,) * 2)
    assert out.paths == {"centre lens → exit": pytest.approx(1.0)} and out.rays == 8 and out.replicates == 4
    middle = out.spot.fraction.shape[0] // 2
    assert out.spot.fraction[middle, middle] == pytest.approx(0.5)
    lumens = out.beam.candela * out.beam.solid_angle
    assert lumens[0] == pytest.approx(60.0) and lumens.sum() == pytest.approx(120.0)
    assert out.encircled.share[0] == 0.0 and out.encircled.share[1] == pytest.approx(0.5)


def test_brightness_of_a_cell_is_flux_by_solid_angle_or_area():
    """One lumen in a cell: I = 1/ΔΩ with ΔΩ = sin θ/θ times the cell; E = 1 lm over the cell in m²."""
    far, wall = Grids(Target("spot", 0.4)), Grids(Target("spot", 0.4, distance=500.0))
    cell, one = far.spot[1] - far.spot[0], np.ones((121, 121))
    mid = 0.5 * (far.spot[1:] + far.spot[:-1])
    assert far.brightness(one)[60, 60] == pytest.approx(1.0 / cell**2, rel=1e-9)
    assert far.brightness(one)[60, 110] == pytest.approx(mid[110] / np.sin(mid[110]) / cell**2, rel=1e-9)
    side = (wall.spot[1] - wall.spot[0]) * 1e-3
    np.testing.assert_allclose(wall.brightness(one), 1.0 / side**2, rtol=1e-9)
