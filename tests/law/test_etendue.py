"""Laws that every limit obeys, whatever the emitter."""

import math

import numpy as np
import pytest

from inverse.emitter import CosinePower, Disk, Dome, Emitter, Rectangle
from inverse.limit import bound, ceiling_at, etendue
from inverse.target import Port, Surroundings, Target

AIR = Surroundings()
WATER = Surroundings("water", 1.334, Port(index=1.49, thickness=5.0, gap=2.0))
RULE = 1e-4  # what the module promises for shares


def drawn(seed):
    """A random emitter, lens and far-field spot with an étendue ratio between 0.2 and 2."""
    rng = np.random.default_rng(seed)
    count = rng.integers(1, 4)
    dies = tuple(
        Rectangle(*rng.uniform(0.3, 1.5, 2), 2.0 * i + rng.uniform(-0.2, 0.2), rng.uniform(-1, 1))
        if rng.random() < 0.6
        else Disk(rng.uniform(0.2, 0.8), 2.0 * i + rng.uniform(-0.2, 0.2), rng.uniform(-1, 1))
        for i in range(count)
    )
    emitter = Emitter(dies, law=CosinePower(rng.choice([0.6, 1.0, 1.0, 2.0])))
    half_angle = rng.uniform(0.03, 0.5)
    radius = math.sqrt(rng.uniform(0.2, 2.0) * etendue.of_emitter(emitter)) / (math.pi * math.sin(half_angle))
    return emitter, radius, Target("spot", half_angle)


SEEDS = range(12)


@pytest.mark.parametrize("seed", SEEDS)
def test_doubling_every_length_changes_no_share(seed):
    """Étendue scales with the square of length on both sides, skewness with length."""
    emitter, radius, target = drawn(seed)
    twice = Emitter(
        tuple(
            Disk(2 * d.radius, 2 * d.x, 2 * d.y)
            if isinstance(d, Disk)
            else Rectangle(2 * d.width, 2 * d.height, 2 * d.x, 2 * d.y)
            for d in emitter.dies
        ),
        law=emitter.law,
    )
    a = bound(emitter, radius, 10.0, target, AIR, 1.49).ceiling
    b = bound(twice, 2 * radius, 20.0, target, AIR, 1.49).ceiling
    assert b == pytest.approx(a, abs=1e-9), f"{emitter} {radius} {target}"


@pytest.mark.parametrize("seed", SEEDS)
def test_turning_the_emitter_by_a_quarter_changes_no_share(seed):
    """A body of revolution cannot tell azimuths apart."""
    emitter, radius, target = drawn(seed)
    turned = Emitter(
        tuple(
            Disk(d.radius, -d.y, d.x) if isinstance(d, Disk) else Rectangle(d.height, d.width, -d.y, d.x)
            for d in emitter.dies
        ),
        law=emitter.law,
    )
    a, b = (bound(e, radius, 10.0, target, AIR, 1.49).ceiling for e in (emitter, turned))
    assert b == pytest.approx(a, abs=1e-9), f"{emitter} {radius} {target}"


@pytest.mark.parametrize("seed", SEEDS)
def test_more_room_never_holds_less(seed):
    """The ceiling does not fall when the lens or the target grows."""
    emitter, radius, target = drawn(seed)
    angles = target.half_angle * np.linspace(0.0, 2.0, 9)
    small, large = (ceiling_at(emitter, r, 10.0, target, AIR, angles) for r in (radius, 1.1 * radius))
    assert np.all(np.diff(small) >= 0), f"{emitter} {radius} {target}"
    assert np.all(large >= small), f"{emitter} {radius} {target}"


@pytest.mark.parametrize("seed", SEEDS)
def test_a_lambertian_ceiling_never_exceeds_etendue(seed):
    """The skewness bound is at least as strict as étendue alone, and positive."""
    emitter, radius, target = drawn(seed)
    emitter = Emitter(emitter.dies)
    found = bound(emitter, radius, 10.0, target, AIR, 1.49)
    most = min(1.0, found.etendue_ratio) + RULE
    assert 0.0 < found.skewness_ceiling <= most, f"{emitter} {radius} {target}"


@pytest.mark.parametrize("power", [0.5, 3.0])
@pytest.mark.parametrize("seed", SEEDS)
def test_skewness_is_stricter_than_the_brightest_etendue(seed, power):
    """The brightest q of all étendue is an inner cone (m > 1) or an outer one (m < 1); no ceiling exceeds it.

    With sin² θ = q the inner cone has the flux 1 − (1 − q)^((m+1)/2), the outer one q^((m+1)/2).
    """
    emitter, radius, target = drawn(seed)
    found = bound(Emitter(emitter.dies, law=CosinePower(power)), radius, 10.0, target, AIR, 1.49)
    q, half = min(1.0, found.etendue_ratio), (power + 1) / 2
    most = 1 - (1 - q) ** half if power > 1 else q**half
    assert found.ceiling <= most + RULE, f"{emitter} {radius} {target}"


@pytest.mark.parametrize("distance", [40.0, 200.0])
@pytest.mark.parametrize("surroundings", [AIR, WATER], ids=["air", "water"])
def test_a_taller_lens_never_lowers_the_ceiling_of_a_near_spot(distance, surroundings):
    """The exit face may stand anywhere below the top, so that height can only add."""
    emitter, target = Emitter((Rectangle(2.0, 1.0),)), Target("spot", 0.05, distance=distance)
    shares = [bound(emitter, 9.0, h, target, surroundings, 1.49).ceiling for h in (0.0, 10.0, 20.0, 30.0)]
    assert np.all(np.diff(shares) >= 0)
    assert shares[0] < shares[-1] - 1e-3  # it does matter here


def test_a_taller_lens_never_lowers_the_ceiling_of_a_near_shape():
    """Far off the axis a low exit face lights a near plane better; a tall lens may have a low one too."""
    shape = Target("shape", 1.0, 30.0, None, np.array([0.0, 1.0]), np.array([1.0, 1.0]))
    emitter = Emitter((Rectangle(1.0, 1.0),))
    found = [bound(emitter, 0.7, h, shape, AIR, 1.49).brightness_ceiling for h in (0.0, 10.0, 25.0)]
    assert found[0] < 0.95  # a real limit
    assert np.all(np.diff(found) >= -1e-12)


def test_cutting_a_die_into_touching_pieces_changes_nothing():
    """Four quarters of a square, side by side, are the square."""
    whole = Emitter((Rectangle(1.0, 1.0),))
    pieces = Emitter(tuple(Rectangle(0.5, 0.5, x, y) for x in (-0.25, 0.25) for y in (-0.25, 0.25)))
    target = Target("spot", 0.1)
    for radius in (4.0, 5.65, 7.0):
        a, b = (bound(e, radius, 10.0, target, AIR, 1.49).ceiling for e in (whole, pieces))
        assert b == pytest.approx(a, abs=2e-5)


def test_moving_a_die_off_the_axis_costs_share():
    """Off the axis the same die has more skewness to place."""
    target = Target("spot", 0.1)
    shares = [
        bound(Emitter((Rectangle(1.0, 1.0, x, 0.0),)), 5.65, 10.0, target, AIR, 1.49).ceiling
        for x in (0.0, 0.2, 0.5, 1.0)
    ]
    assert np.all(np.diff(shares) < -0.01)


@pytest.mark.parametrize("index, radius", [(1.41, 1.5), (1.53, 1.2)])
def test_an_ordinary_dome_is_nearly_even(index, radius):
    """With n · reach well inside the dome, Fresnel moves the bare die's ceiling by under one per cent."""
    bare, domed = Emitter((Rectangle(1.0, 1.0),)), Emitter((Rectangle(1.0, 1.0),), dome=Dome(radius, index))
    target = Target("spot", 0.1)
    for ratio in (0.4, 0.8, 1.1):
        shares = []
        for e in (bare, domed):
            r = math.sqrt(ratio * etendue.of_emitter(e)) / (math.pi * math.sin(0.1))
            shares.append(bound(e, r, 10.0, target, AIR, 1.49).ceiling)
        assert shares[0] - RULE <= shares[1] <= shares[0] * 1.01
