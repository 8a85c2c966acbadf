"""The whole Monte Carlo against arrangements whose answer is known without it.

Comparisons are by standard error, |a − b| <= 4 σ, with a floor of one part in the rays drawn, the
grain of the counting.
"""

import numpy as np
import pytest

from inverse.emitter import CosinePower, Disk, Dome, Emitter, Rectangle
from inverse.target import Port, Surroundings, Target
from inverse.verify import Points, compare, fly
from inverse.verify.crossing import first_crossing
from lens_samples import PMMA, collimator, cylinder, moulded, shell

AIR = Surroundings()
RAYS = 65_536
POINT = Emitter((Disk(1e-7),), above_board=0.0)
SMALL = Emitter((Disk(0.5),), flux=250.0)
PART = Points.of(moulded())


def agrees(a, se, b, rays=RAYS):
    return abs(a - b) <= max(4.0 * se, 16.0 / rays)


def within(landing, theta):
    """(share, se) inside the grid angle next to ``theta``, and that angle."""
    k = int(np.argmin(np.abs(landing.encircled.angle - theta)))
    return landing.encircled.share[k], landing.encircled.share_se[k], landing.encircled.angle[k]


@pytest.mark.parametrize("degrees", [3.0, 20.0, 60.0])
def test_without_a_lens_sin_squared_lands_inside(degrees):
    """A bare Lambertian LED puts sin²θ inside θ, and the rest forward outside."""
    theta = np.radians(degrees)
    out = fly(None, SMALL, 1.0, 0.0, AIR, Target("spot", theta), RAYS)
    assert agrees(out.share, out.share_se, np.sin(theta) ** 2)
    assert out.ledger["forward outside target"] == pytest.approx(1.0 - out.share, abs=1e-12)
    assert out.paths == {"no lens": pytest.approx(1.0, abs=1e-12)}


def test_without_a_lens_the_beam_is_lambertian_in_candela():
    """I(θ) = Φ/π cos θ over every ring, within 4 of its own standard errors almost always."""
    out = fly(None, SMALL, 1.0, 0.0, AIR, Target("spot", 0.5), 4 * RAYS)
    c = np.cos(out.beam.edges)
    ring = SMALL.flux / np.pi * 0.5 * (c[1:] + c[:-1])  # mean of cos θ over the solid angle of the ring
    grain = SMALL.flux / out.rays / out.beam.solid_angle  # one ray more or less
    off = np.abs(out.beam.candela - ring) / (out.beam.candela_se + grain)
    # Student's t with 15 degrees of freedom lies beyond 4 once in 900; there are some sixty rings.
    assert np.sum(off > 4.0) <= 1 and np.all(off < 8.0)
    assert np.sum(out.beam.candela * out.beam.solid_angle) == pytest.approx(SMALL.flux, rel=1e-9)
    np.testing.assert_array_equal(out.beam.candela, out.far_field.candela)


def test_a_tiny_die_lights_a_near_wall_by_the_square_of_the_distance():
    """A tiny die 100 mm from a wall: r < d tan θ gets sin²θ; lux on the axis is Φ/(π d²)."""
    led, wall = Emitter((Disk(1e-3),), flux=100.0), Target("spot", 0.3, distance=100.0)
    out = fly(None, led, 1.0, 0.0, AIR, wall, 4 * RAYS)
    assert agrees(out.share, out.share_se, np.sin(0.3) ** 2)
    middle = out.spot.brightness.shape[0] // 2
    patch = out.spot.brightness[middle - 6 : middle + 7, middle - 6 : middle + 7].mean()
    # The patch reaches 6 of 121 cells over ± tan(0.75) d: cos⁴θ falls by 1 % at its corner.
    assert patch == pytest.approx(100.0 / (np.pi * 0.1**2), rel=0.03)


@pytest.mark.parametrize("absorption", [0.0, 0.02])
def test_a_hollow_hemisphere_about_a_point_bends_nothing(absorption):
    """Radial rays meet both spheres squarely: T = (1 − R)² a/(1 − R² a²), a = exp(−μ d), R = R0, any θ.

    Closed form (sum over the multiple reflections between the two surfaces). Light sent back to the
    centre ends on the board.
    """
    n, thickness = PMMA, 2.0
    R, a = ((n - 1.0) / (n + 1.0)) ** 2, np.exp(-absorption * thickness)
    through = (1.0 - R) ** 2 * a / (1.0 - (R * a) ** 2)
    back = R + (1.0 - R) ** 2 * R * a**2 / (1.0 - (R * a) ** 2)
    out = fly(Points.of(shell(3.0, 5.0)), POINT, n, absorption, AIR, Target("spot", 0.8), 4 * RAYS)
    assert agrees(out.share, out.share_se, through * np.sin(0.8) ** 2, 4 * RAYS)
    for theta in (0.2, 0.5, 1.3):
        share, se, angle = within(out, theta)
        assert agrees(share, se, through * np.sin(angle) ** 2, 4 * RAYS)
    gone = out.ledger["absorbed in the board"] + out.ledger["absorbed in the emitter"]
    se = np.hypot(out.ledger_se["absorbed in the board"], out.ledger_se["absorbed in the emitter"])
    assert agrees(gone, se, back, 4 * RAYS)
    taken = out.ledger["absorbed in the material"]
    assert agrees(taken, out.ledger_se["absorbed in the material"], 1.0 - through - back, 4 * RAYS)


@pytest.mark.parametrize("index, passes", [(1.49253, 0.92484), (1.5305, 0.91580), (1.51680, 0.91908)])
def test_a_plane_slab_passes_with_all_its_multiples(index, passes):
    """Nearly normal light through a clear plate: T = 2n/(n² + 1), tabled for PMMA, COP and N-BK7."""
    pencil = Emitter((Disk(0.1),), law=CosinePower(2e5))  # within 1°, where R differs from R0 by 1e-7
    out = fly(Points.of(cylinder(40.0, 2.0, 4.0)), pencil, index, 0.0, AIR, Target("spot", 0.1), 4 * RAYS)
    # The table is rounded to 5e-6.
    assert abs(out.share - passes) <= 4.0 * out.share_se + 5e-6
    straight = (1.0 - ((index - 1.0) / (index + 1.0)) ** 2) ** 2  # without the multiples
    assert agrees(out.designed_paths_share, out.designed_paths_share_se, straight)


def fresnel_flux(low, high):
    """∫ R(θ) sin 2θ dθ from the textbook sines and tangents, for a Lambertian point under a plane."""
    theta = low + (np.arange(50_000) + 0.5) * (high - low) / 50_000
    inside = np.arcsin(np.sin(theta) / PMMA)
    rs, rp = (f(theta - inside) / f(theta + inside) for f in (np.sin, np.tan))
    return np.sum(0.5 * (rs**2 + rp**2) * np.sin(2 * theta)) * (high - low) / 50_000


def test_a_black_plate_sorts_the_light_into_known_accounts():
    """A point 2 mm under an absorbing plate of radius 1.

    What misses it (cos² of its rim's angle) has left below the foot; what its face mirrors falls at
    twice the radius, on the board up to the plate's own radius, beside it beyond; the rest is absorbed.
    """
    plate = Points.of(cylinder(1.0, 2.0, 3.0))
    out = fly(plate, POINT, PMMA, 1e3, AIR, Target("spot", 0.01), 4 * RAYS)
    rim, half = np.arctan(0.5), np.arctan(0.25)
    home, away = fresnel_flux(0.0, half), fresnel_flux(half, rim)
    ledger, se = out.ledger, out.ledger_se
    on_board = ledger["absorbed in the board"] + ledger["absorbed in the emitter"]
    assert agrees(on_board, se["absorbed in the board"], home, 4 * RAYS)
    assert agrees(ledger["below the foot"], se["below the foot"], np.cos(rim) ** 2 + away, 4 * RAYS)
    taken = ledger["absorbed in the material"]
    assert agrees(taken, se["absorbed in the material"], np.sin(rim) ** 2 - home - away, 4 * RAYS)
    assert out.paths["under the foot"] == pytest.approx(np.cos(rim) ** 2, abs=2e-4)


def test_the_point_source_collimator_collimates():
    """Hyperboloid and flank send all they pass along the axis, here within 2e-6 rad (die: 1e-7/f)."""
    out = fly(Points.of(collimator()), POINT, PMMA, 0.0, AIR, Target("spot", 2e-6), RAYS)
    arrived = out.paths["centre lens → exit"] + out.paths["pocket wall → flank → exit"]
    assert out.share == pytest.approx(arrived, abs=1e-12)
    assert out.designed_paths_share == pytest.approx(arrived, abs=1e-12)
    assert arrived > 0.85


def test_the_collimator_splits_light_at_its_pocket_corner():
    """Light inside the corner's polar angle goes by the centre lens: sin²θ_c of it, less three reflections.

    The centre lens sees θ < θ_c; reflections are integrated from Fresnel's formula along the known
    incidence, tan i = n sin θ/(n cos θ − 1) on the hyperboloid (its normal halves nothing: Snell with
    the axial ray inside gives sin i = n sin(i − θ)).
    """
    section = collimator()
    corner = section.curve("centre lens").points[-1]
    widest = np.arctan2(corner[0], corner[1])
    theta = (np.arange(20_000) + 0.5) * widest / 20_000
    i = np.arctan2(PMMA * np.sin(theta), PMMA * np.cos(theta) - 1.0)
    i2 = i - theta
    rs = np.sin(i - i2) / np.sin(i + i2)
    rp = np.tan(i - i2) / np.tan(i + i2)
    first = 1.0 - 0.5 * (rs**2 + rp**2)
    last = 1.0 - ((PMMA - 1.0) / (PMMA + 1.0)) ** 2
    expected = np.sum(2.0 * np.sin(theta) * np.cos(theta) * first) * widest / 20_000 * last
    out = fly(Points.of(section), POINT, PMMA, 0.0, AIR, Target("spot", 0.01), 4 * RAYS)
    name = "centre lens → exit"
    assert agrees(out.paths[name], out.paths_se[name], expected, 4 * RAYS)


def test_index_one_is_no_lens():
    """A body of the index of air changes nothing: the same photons land at the same angles."""
    target = Target("spot", 0.3)
    bare = fly(None, SMALL, 1.0, 0.0, AIR, target, RAYS)
    ghost = fly(PART, SMALL, 1.0, 0.0, AIR, target, RAYS)
    np.testing.assert_allclose(ghost.encircled.share, bare.encircled.share, atol=1e-6)
    # Transmitted everywhere, so the only way out is on: nothing comes back.
    assert ghost.ledger["absorbed in the board"] == 0.0


def test_an_index_almost_one_is_almost_no_lens():
    """n = 1 + 1e-7 turns rays by some 1e-6 rad and sends back 1e-14: shares move by less than 1e-4."""
    target = Target("spot", 0.3)
    bare = fly(None, SMALL, 1.0, 0.0, AIR, target, RAYS)
    thin = fly(PART, SMALL, 1.0 + 1e-7, 0.0, AIR, target, RAYS)
    assert thin.share == pytest.approx(bare.share, abs=1e-4)


def test_one_percent_of_index_is_seen():
    """Control: at 4°, on the steep side of the beam, a 1 % wrong index stands 20 σ out or more."""
    target = Target("spot", np.radians(4.0))
    right = fly(PART, SMALL, PMMA, 0.0, AIR, target, RAYS)
    wrong = fly(PART, SMALL, 1.01 * PMMA, 0.0, AIR, target, RAYS, seed=5)
    assert abs(wrong.share - right.share) > 20.0 * np.hypot(wrong.share_se, right.share_se)
    assert not compare(wrong.designed_paths_share, wrong.designed_paths_share_se, right).agrees


def test_bulk_absorption_is_that_of_the_length_inside():
    """A pencil through 2 mm of plate loses 1 − exp(−μ d) of what enters, to first order in R."""
    pencil = Emitter((Disk(0.1),), law=CosinePower(2e5))
    out = fly(Points.of(cylinder(40.0, 2.0, 4.0)), pencil, 1.0, 0.1, AIR, Target("spot", 0.1), RAYS)
    taken = out.ledger["absorbed in the material"]
    assert taken == pytest.approx(1.0 - np.exp(-0.2), rel=2e-5)  # paths are longer by 1/cos θ, some 5e-6


def test_a_port_costs_its_two_faces_and_narrows_the_beam():
    """Near-axial collimated light behind a port: the ledger shows 1 − (1 − R₁)(1 − R₂) of the exit light."""
    port = Surroundings("water", 1.3334, Port(PMMA, 6.0, 1.0))
    dry = fly(Points.of(collimator()), POINT, PMMA, 0.0, AIR, Target("spot", 0.01), RAYS)
    wet = fly(Points.of(collimator()), POINT, PMMA, 0.0, port, Target("spot", 0.01), RAYS)
    first, second = (0.49253 / 2.49253) ** 2, ((PMMA - 1.3334) / (PMMA + 1.3334)) ** 2
    assert wet.share / dry.share == pytest.approx((1.0 - first) * (1.0 - second), rel=1e-6)


def test_a_dome_keeps_the_flux_and_widens_the_source():
    """Through a dome of index n a small die looks n times as wide: the collimated cone has n times the sine.

    For a collimator with its centre lens alone in view, the die's edge at radius a leaves under a/f
    near the axis; the dome magnifies a to n a (aplanatic image of the dome's centre, first order).
    """
    narrow = CosinePower(400.0)  # light near the axis only: centre lens
    section, target = Points.of(collimator()), Target("spot", 0.03)
    spread = []
    for dome in (None, Dome(2.0, 1.5)):
        led = Emitter((Disk(0.1),), law=narrow, dome=dome)
        out = fly(section, led, PMMA, 0.0, AIR, target, RAYS)
        mid, step = out.encircled.angle, np.diff(out.encircled.share)
        near = mid[1:] < 0.06  # without the few stray percents far out
        spread.append(np.sqrt(np.sum(step[near] * mid[1:][near] ** 2) / np.sum(step[near])))
    assert spread[1] / spread[0] == pytest.approx(1.5, rel=0.02)
    assert spread[0] == pytest.approx(0.1 / 5.0 / np.sqrt(2.0), rel=0.02)  # rms radius of a disk, f = 5


def test_a_square_die_shows_in_the_picture():
    """Four-fold moment <cos 4φ> of the far spot: clearly there for a square, absent for a disk."""
    moments = []
    for die in (Rectangle(1.0, 1.0), Disk(np.sqrt(1.0 / np.pi))):
        out = fly(PART, Emitter((die,)), PMMA, 0.0, AIR, Target("spot", 0.15), 4 * RAYS)
        mid = 0.5 * (out.spot.edges[1:] + out.spot.edges[:-1])
        y, x = np.meshgrid(mid, mid, indexing="ij")
        r = np.hypot(x, y)
        edge = (r > 0.11) & (r < 0.16)  # where the corners of the image reach and the sides do not
        moments.append(np.sum((out.spot.fraction * np.cos(4 * np.arctan2(y, x)))[edge]))
    assert abs(moments[0]) > 10.0 * abs(moments[1])


def test_a_long_die_lies_along_x_in_the_picture():
    """Rows are y, columns x: a die long in x gives a spot long in x."""
    out = fly(PART, Emitter((Rectangle(1.6, 0.2),)), PMMA, 0.0, AIR, Target("spot", 0.15), RAYS)
    mid = 0.5 * (out.spot.edges[1:] + out.spot.edges[:-1])
    wide, high = (np.sum(out.spot.fraction.sum(axis) * mid**2) for axis in (0, 1))
    assert wide > 1.5 * high


def test_first_crossings_agree_with_marching_through_the_plain_polygon():
    """A second, slow road to the geometry: step along each ray and ask whether the point lies in the
    polygon of the section's points (ray casting in the half plane)."""
    from matplotlib.path import Path

    section = moulded(stepped=True, flanged=True)
    points = Points.of(section)
    outline = Path(np.concatenate([c[:, :2] for c in points.curves]))
    rng = np.random.default_rng(4)
    count, step = 400, 0.005
    places = np.column_stack([rng.uniform(-8, 8, (count, 2)), rng.uniform(-0.3, 9.0, count)])
    d = rng.normal(size=(count, 3))
    d /= np.linalg.norm(d, axis=1)[:, None]
    o = places - 30.0 * d
    found = first_crossing(points.chain, o, d, np.zeros(count, bool))
    s = np.arange(10.0, 60.0, step)
    for k in range(count):
        p = o[k] + s[:, None] * d[k]
        within = outline.contains_points(np.column_stack([np.hypot(p[:, 0], p[:, 1]), p[:, 2]]))
        first = s[np.argmax(within)] if within.any() else np.inf
        # Marching may step over a sliver of the body, never invent one.
        sliver = np.isfinite(found.t[k]) and _length_inside(points, o[k], d[k], found.t[k]) < 2.0 * step
        if np.isfinite(first):
            assert first - step - 1e-4 <= found.t[k] <= first + 1e-4 or sliver
        else:
            assert np.isinf(found.t[k]) or sliver


def _length_inside(points, origin, direction, t):
    """mm in the body behind the crossing at ``t`` of one ray."""
    start = (origin + t * direction)[None]
    return first_crossing(points.chain, start, direction[None], np.ones(1, bool)).t[0]
