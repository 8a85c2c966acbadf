"""The limits against closed forms."""

import math

import numpy as np
import pytest
from scipy.integrate import quad

from inverse.emitter import CosinePower, Disk, Dome, Emitter, Rectangle, Table
from inverse.limit import bound, ceiling_at, narrowest_half_angle, refuse_impossible, smallest_radius
from inverse.limit import brightness, etendue, skewness, transmission
from inverse.outcome import BeyondLimit
from inverse.target import Port, Surroundings, Target
from inverse.units import rad

AIR = Surroundings()
WATER = Surroundings("water", 1.334, Port(index=1.49, thickness=5.0, gap=2.0))
DISK = Emitter((Disk(1.0),), flux=250.0)
SQUARE = Emitter((Rectangle(1.0, 1.0),), flux=300.0)
CONE = 0.0995  # sin θ of the reference beam
SPOT = Target("spot", math.asin(CONE))
N = 1.4918
RULE = 1e-4  # what the module promises for shares


def radius_for(ratio, emitter=DISK):
    """Aperture radius (mm) whose étendue with `SPOT` is ``ratio`` times the emitter's."""
    return math.sqrt(ratio * etendue.of_emitter(emitter)) / (math.pi * CONE)


@pytest.mark.parametrize("ratio", [0.01, 0.3, 0.49, 0.81, 1.0, 1.7])
def test_a_disk_is_limited_by_etendue_alone(ratio):
    """Two disks have skewness densities of one form, so that the ceiling is min(1, ratio)."""
    found = bound(DISK, radius_for(ratio), 12.0, SPOT, AIR, N)
    assert found.etendue_ratio == pytest.approx(ratio, rel=1e-12)
    assert found.ceiling == pytest.approx(min(1.0, ratio), abs=RULE)


@pytest.mark.parametrize("power", [1.0, 2.0, 5.0, 30.0])
@pytest.mark.parametrize("ratio", [0.1, 0.5, 0.9])
def test_a_disk_of_cosine_power_gives_its_inner_cone(power, ratio):
    """The brightest part q of the étendue is the cone sin² θ = q: flux 1 − (1 − q)^((m+1)/2)."""
    emitter = Emitter((Disk(1.0),), law=CosinePower(power))
    found = bound(emitter, radius_for(ratio), 12.0, SPOT, AIR, N)
    assert found.ceiling == pytest.approx(1 - (1 - ratio) ** ((power + 1) / 2), abs=RULE)


@pytest.mark.parametrize("ratio", [0.1, 0.5, 0.9])
def test_a_disk_brightest_at_grazing_gives_its_outer_cone(ratio):
    """For m < 1 the brightest light is the outermost; on a disk that cannot all be put into a disk target.

    Filling all of it would give q^((m+1)/2); the densities of an outer cone and of a disk differ, so the
    ceiling lies between that and the even share q.
    """
    emitter = Emitter((Disk(1.0),), law=CosinePower(0.5))
    found = bound(emitter, radius_for(ratio), 12.0, SPOT, AIR, N).ceiling
    assert ratio < found <= ratio**0.75


def test_etendue_of_a_die_counts_the_square_of_the_dome_index():
    """E = n² π A."""
    domed = Emitter((Rectangle(1.0, 2.0),), dome=Dome(3.0, 1.5))
    assert etendue.of_emitter(domed) == pytest.approx(1.5**2 * math.pi * 2.0, rel=1e-15)


def test_a_small_die_under_a_large_dome_is_limited_by_etendue():
    """Far from the dome's surface all rays meet it straight on: radiance even, ceiling = ratio."""
    emitter = Emitter((Disk(1.0),), dome=Dome(50.0, 1.41))
    found = bound(emitter, radius_for(0.6, emitter), 12.0, SPOT, AIR, N)
    assert found.ceiling == pytest.approx(0.6, abs=RULE)


def test_a_dome_that_traps_light_raises_the_share_of_what_leaves():
    """Light trapped by a tight dome never leaves, needs no room, and does not count as emitted."""
    loose = Emitter((Rectangle(1.0, 1.0),), dome=Dome(50.0, 1.53))
    tight = Emitter((Rectangle(1.0, 1.0),), dome=Dome(0.8, 1.53))
    shares = [bound(e, radius_for(0.7, e), 12.0, SPOT, AIR, N).ceiling for e in (loose, tight)]
    assert shares[1] > shares[0] + 0.02


@pytest.mark.parametrize("skew", [0.0, 0.01, 0.05, 0.099])
def test_disk_density_is_the_integral_of_its_chords(skew):
    """4π[√(R²P² − s²) − |s| arccos(|s|/(RP))] = ∫ C(s/p) dp with C(b) = 4π √(R² − b²)."""
    chord = lambda p: 4 * math.pi * math.sqrt(max(1 - (skew / p) ** 2, 0.0))  # noqa: E731
    expected = quad(chord, max(skew, 1e-12), 0.1)[0]
    assert skewness.disk_density(np.array([skew]), 1.0, 0.1)[0] == pytest.approx(expected, rel=1e-6)


def test_chord_of_a_disk():
    """C(b) = 4π √(R² − b²), zero beyond the edge."""
    b = np.linspace(0.0, 2.5, 26)
    expected = 4 * math.pi * np.sqrt(np.maximum(4.0 - b**2, 0.0))
    np.testing.assert_allclose(skewness.chord(Emitter((Disk(2.0),)), b), expected, atol=2e-4 * expected[0])


def test_chord_of_a_square_through_its_centre():
    """C(0) = 2π times the mean chord through the centre of a unit square, (4/π) ln(1 + √2)."""
    found = skewness.chord(SQUARE, np.array([0.0]))[0]
    assert found == pytest.approx(8 * math.log(1 + math.sqrt(2)), rel=1e-4)


@pytest.mark.parametrize(
    "radius, spot, apart", [(10.0, 40.0, 500.0), (10.0, 10.0, 20.0), (3.0, 30.0, 5.0), (5.0, 2.0, 1.0)]
)
def test_etendue_of_two_coaxial_disks_in_air(radius, spot, apart):
    """Hottel's view factor of coaxial disks (from memory): (π²/2)[S − √(S² − 4R²ρ²)]."""
    s = radius**2 + spot**2 + apart**2
    expected = math.pi**2 / 2 * (s - math.sqrt(s * s - 4 * (radius * spot) ** 2))
    assert etendue.of_pair(radius, spot, ((apart, 1.0),)) == pytest.approx(expected, rel=1e-10)


@pytest.mark.parametrize("path", [((300.0, 1.0),), ((2.0, 1.0), (5.0, 1.49), (300.0, 1.334)), ((8.0, 1.0),)])
@pytest.mark.parametrize("radius, spot", [(10.0, 25.0), (25.0, 10.0), (10.0, 10.0)])
def test_pair_density_integrates_to_the_etendue_of_the_pair(radius, spot, path):
    """∫ dE/ds ds = E, through air and through a port into water, for either disk the larger."""
    count = 4000
    s = 10.0 * (np.arange(count) + 0.5) / count  # |s| <= the smaller radius, as p <= 1
    total = 2 * np.sum(skewness.pair_density(s, radius, spot, path, steps=200)) * 10.0 / count
    assert total == pytest.approx(etendue.of_pair(radius, spot, path), rel=1e-4)


def test_overlap_of_circles():
    """Half-covered equal circles at a distance R share R² (2π/3 − √3/2); apart or inside are plain."""
    half = 2 * math.pi / 3 - math.sqrt(3) / 2
    assert etendue.common_area(1.0, 1.0, np.array(1.0)) == pytest.approx(half, rel=1e-14)
    assert etendue.common_area(1.0, 1.0, np.array(0.0)) == pytest.approx(math.pi, rel=1e-14)
    assert etendue.common_area(1.0, 2.0, np.array(3.5)) == pytest.approx(0.0, abs=1e-14)
    assert etendue.common_area(1.0, 2.0, np.array(0.5)) == pytest.approx(math.pi, rel=1e-14)


@pytest.mark.parametrize("off_axis", [0.0, 3.0, 9.99, 10.0, 14.0, 60.0])
def test_illuminance_from_a_shining_disk(off_axis):
    """E = (πL/2)[1 − k/√(k² + 4h²R²)], k = h² + r² − R², of a disk R at a distance h (from memory)."""
    h, radius = 20.0, 10.0
    k = h**2 + off_axis**2 - radius**2
    expected = math.pi / 2 * (1 - k / math.sqrt(k**2 + 4 * h**2 * radius**2))
    found = brightness.illuminance_per_radiance([off_axis], radius, ((h, 1.0),))[0]
    assert found == pytest.approx(expected, rel=1e-5)


def test_far_plane_is_the_far_field():
    """At 100 m a plane's ceilings and candela are those of the far field."""
    far, plane = SPOT, Target("spot", SPOT.half_angle, distance=1e5)
    a, b = (bound(SQUARE, 6.0, 12.0, t, AIR, N) for t in (far, plane))
    assert b.ceiling == pytest.approx(a.ceiling, abs=3e-4)  # 12 mm of height in 1e5 mm: 1.2e-4 a side
    assert b.largest_candela == pytest.approx(a.largest_candela, rel=3e-4)


def test_target_plane_inside_the_lens_is_refused():
    """A plane below the top of the lens, or inside the port, is a fault with a remedy."""
    with pytest.raises(ValueError, match="at 10 mm lies inside the lens.*at least 2 mm further"):
        bound(DISK, 10.0, 12.0, Target("spot", 0.1, distance=10.0), AIR, N)
    with pytest.raises(ValueError, match="lens or the port.*at least 4 mm further"):
        bound(DISK, 10.0, 12.0, Target("spot", 0.1, distance=15.0), WATER, N)


@pytest.mark.parametrize("radius, height", [(0.0, 1.0), (-1.0, 1.0), (math.nan, 1.0), (5.0, -1.0)])
def test_a_lens_without_size_is_refused(radius, height):
    """Radius and height must be lengths."""
    with pytest.raises(ValueError, match="must be a positive length in mm"):
        bound(DISK, radius, height, SPOT, AIR, N)


def test_water_gains_the_square_of_its_index():
    """The same half-angle in water has n_w² times the étendue and the axis n_w² times the candela."""
    a, w = (bound(SQUARE, 4.0, 12.0, SPOT, medium, N) for medium in (AIR, WATER))
    assert w.target_etendue / a.target_etendue == pytest.approx(1.334**2, rel=1e-12)
    gain = w.largest_candela / w.transmission / (a.largest_candela / a.transmission)
    assert gain == pytest.approx(1.334**2, rel=1e-12)


def test_a_flat_port_gives_no_light_beyond_its_critical_angle():
    """Beyond arcsin(1/n_w) a wider target in water brings no more light."""
    radius = 0.8  # narrow enough for less than all the light at any angle
    edge = math.asin(1 / 1.334)
    shares = ceiling_at(DISK, radius, 12.0, SPOT, WATER, [edge * 0.9, edge, 1.2])
    assert shares[0] < shares[1] - 0.05
    assert shares[2] == pytest.approx(shares[1], abs=1e-12)


def test_port_faces_are_counted():
    """Two faces of the lens in air, then air to port and port to water, each 1 − R0."""
    r = [((a - b) / (a + b)) ** 2 for a, b in ((1, N), (N, 1), (1, 1.49), (1.49, 1.334))]
    assert transmission.faces(N, WATER) == pytest.approx(np.prod(1 - np.array(r)), rel=1e-14)


def test_a_slab_with_returns_passes_the_closed_form():
    """All orders of reflection inside one slab: 2n/(n² + 1)."""
    assert transmission.faces_with_returns(N, AIR) == pytest.approx(2 * N / (N * N + 1), rel=1e-14)


def test_fresnel_at_brewster_and_beyond_the_critical_angle():
    """At Brewster's angle one polarisation loses ((n²−1)/(n²+1))², the other nothing; beyond total all."""
    n = 1.5
    sine = math.sin(math.atan(n))
    expected = 1 - 0.5 * ((n * n - 1) / (n * n + 1)) ** 2
    assert float(transmission.unpolarised(1.0, n, sine)) == pytest.approx(expected, rel=1e-13)
    assert transmission.unpolarised(n, 1.0, np.array([0.7, 1.0]))[0] == 0.0


def test_critical_angle_needs_the_denser_medium_inside():
    """From the thinner side there is no total reflection to speak of."""
    with pytest.raises(ValueError, match="denser medium inside"):
        transmission.critical_angle(1.33, 1.49)


SHAPE = Target("shape", rad(20.0), None, None, rad(np.array([0.0, 10.0, 20.0])), np.array([1.0, 1.0, 0.0]))


def test_a_wanted_shape_is_limited_where_it_is_brightest():
    """share ≤ L π R² cos θ / f(θ) at every angle; for this shape the edge of the plateau decides."""
    radius = 0.9
    f = lambda t: np.interp(t, SHAPE.angles, SHAPE.intensity)  # noqa: E731
    whole = quad(lambda t: 2 * math.pi * f(t) * math.sin(t), 0, rad(20.0), points=[rad(10.0)])[0]
    expected = math.pi * radius**2 * math.cos(rad(10.0)) * whole / etendue.of_emitter(SQUARE)
    found = bound(SQUARE, radius, 12.0, SHAPE, AIR, N)
    assert found.brightness_ceiling == pytest.approx(expected, rel=1e-6)
    assert found.ceiling <= found.brightness_ceiling < 1.0


def test_a_cosine_shape_is_limited_like_the_spot_it_fills():
    """An aperture of even radiance shines with cos θ: that shape's ceiling is the étendue ratio."""
    theta = np.linspace(0.0, SPOT.half_angle, 201)
    even = Target("shape", SPOT.half_angle, angles=theta, intensity=np.cos(theta))
    found = bound(DISK, radius_for(0.64), 12.0, even, AIR, N)
    assert found.brightness_ceiling == pytest.approx(0.64, rel=1e-4)
    # A fine table still has a linear edge, and the cones' cumulative a finite grid.
    assert found.skewness_ceiling == pytest.approx(0.64, abs=1e-3)


def test_a_peaked_shape_is_limited_in_its_inner_cones():
    """A peak that holds half the light in a cone of a quarter of the étendue halves the share."""
    inner, edge = SPOT.half_angle / 2, SPOT.half_angle
    step = 1e-6
    # Flux inside a small cone goes with its square: heights 3 and 1 over areas 1 and 3 hold half each.
    angles, heights = np.array([0.0, inner, inner + step, edge]), np.array([3.0, 3.0, 1.0, 1.0])
    peaked = Target("shape", edge, angles=angles, intensity=heights)
    spot = bound(SQUARE, radius_for(0.8, SQUARE), 12.0, SPOT, AIR, N)
    found = bound(SQUARE, radius_for(0.8, SQUARE), 12.0, peaked, AIR, N)
    # Half a per cent: sin θ against θ at 5.7°.
    assert found.skewness_ceiling == pytest.approx(spot.etendue_ratio / 2, rel=5e-3)


def flat_shape(half_angle, distance=None):
    """Even intensity up to the edge."""
    return Target("shape", half_angle, distance, None, np.array([0.0, half_angle]), np.array([1.0, 1.0]))


def test_a_shape_wider_than_a_port_allows_is_impossible():
    """Even intensity out to 60° in water asks for light where a flat port gives none."""
    assert bound(SQUARE, 10.0, 12.0, flat_shape(rad(60.0)), WATER, N).ceiling == 0.0
    assert bound(SQUARE, 10.0, 12.0, flat_shape(rad(48.0)), WATER, N).ceiling > 0.9


def test_a_shape_on_a_near_plane_is_limited_by_the_disk_formula():
    """share ≤ L E(r) D²/cos³ θ / f with E of a shining disk (from memory, as above), the lens flat."""
    radius, distance, edge = 0.7, 30.0, rad(40.0)
    theta = np.linspace(0.0, edge, 2001)
    k = distance**2 * (1 + np.tan(theta) ** 2) - radius**2
    lit = math.pi / 2 * (1 - k / np.sqrt(k**2 + 4 * distance**2 * radius**2))
    wanted = 1 / (2 * math.pi * (1 - math.cos(edge)))
    expected = np.min(lit * distance**2 / np.cos(theta) ** 3) / wanted / etendue.of_emitter(SQUARE)
    found = bound(SQUARE, radius, 0.0, flat_shape(edge, distance), AIR, N).brightness_ceiling
    assert 0.2 < expected < 0.95
    assert found == pytest.approx(expected, rel=1e-4)


def test_brightness_of_a_square_die():
    """On the axis I ≤ T Φ/(πA) · πR²; a dome of index n costs n²."""
    bare = bound(SQUARE, 10.0, 12.0, SPOT, AIR, N)
    assert bare.largest_candela == pytest.approx(300.0 * 100.0 * transmission.faces(N, AIR), rel=1e-12)
    domed = bound(Emitter((Rectangle(1.0, 1.0),), 300.0, dome=Dome(50.0, 1.41)), 10.0, 12.0, SPOT, AIR, N)
    assert domed.largest_candela == pytest.approx(bare.largest_candela / 1.41**2, rel=1e-4)


def test_largest_candela_at_a_finite_distance():
    """E(0) D² = Φ/A · R² D²/(R² + h²) · T, h from the top of the lens."""
    found = bound(SQUARE, 10.0, 12.0, Target("spot", 0.1, distance=112.0), AIR, N)
    expected = 300.0 * 100.0 * 112.0**2 / (100.0 + 100.0**2) * found.transmission
    assert found.largest_candela == pytest.approx(expected, rel=1e-10)


def test_a_law_with_light_at_ninety_degrees_still_has_a_largest_candela():
    """Its radiance is unbounded there; a mean over a small cone is finite, and above Lambert's."""
    law = Table(rad(np.array([0.0, 90.0])), np.array([1.0, 0.5]))
    found = bound(Emitter((Rectangle(1.0, 1.0),), 300.0, law), 10.0, 12.0, SPOT, AIR, N)
    assert math.isfinite(found.largest_candela)
    assert found.largest_candela > 300.0 * 100.0 * found.transmission


def test_smallest_radius_of_a_disk_in_closed_form():
    """Without losses share = (R sin θ)², so that R = √(share/T)/sin θ."""
    passed = transmission.faces(N, AIR)
    found = smallest_radius(DISK, SPOT, AIR, N, 0.7)
    assert found == pytest.approx(math.sqrt(0.7 / passed) / CONE, rel=1e-4)


@pytest.mark.parametrize("medium", [AIR, WATER])
@pytest.mark.parametrize("target", [SPOT, SHAPE, Target("spot", 0.1, distance=300.0),
                                    Target("shape", rad(20.0), 300.0, None, SHAPE.angles, SHAPE.intensity)])
def test_smallest_radius_just_reaches_the_share(medium, target):
    """The bound at the smallest radius is the share asked for, a little below it is less."""
    radius = smallest_radius(SQUARE, target, medium, N, 0.7, height=12.0)
    assert bound(SQUARE, radius, 12.0, target, medium, N).ceiling_with_losses == pytest.approx(0.7, abs=1e-4)
    assert bound(SQUARE, 0.99 * radius, 12.0, target, medium, N).ceiling_with_losses < 0.7


def test_smallest_radius_says_when_no_lens_is_enough():
    """A spot smaller than the emitter at a finite distance takes no more than its own half space of light."""
    with pytest.raises(BeyondLimit, match="no lens of any size.*Widen the target"):
        smallest_radius(DISK, Target("spot", 0.01, distance=50.0), AIR, N, 0.8)


def test_narrowest_half_angle_of_a_disk_in_closed_form():
    """sin θ = √(share/T)/R; in water divided by its index."""
    for medium in (AIR, WATER):
        expected = math.asin(math.sqrt(0.6 / transmission.faces(N, medium)) / 10.0 / medium.index)
        assert narrowest_half_angle(DISK, 10.0, medium, N, 0.6) == pytest.approx(expected, rel=1e-4)


def test_narrowest_half_angle_says_when_the_lens_is_too_small():
    """An aperture smaller than the emitter cannot pass all the light at any angle."""
    with pytest.raises(BeyondLimit, match="at no angle. Use a larger lens"):
        narrowest_half_angle(DISK, 0.5, AIR, N, 0.8)


def test_no_question_takes_more_than_the_faces_pass():
    """A share above (1 − R0)² is refused as such."""
    for question in (lambda: smallest_radius(DISK, SPOT, AIR, N, 0.95),
                     lambda: narrowest_half_angle(DISK, 10.0, AIR, N, 0.95)):
        with pytest.raises(BeyondLimit, match="uncoated faces of index 1.492 pass 0.9236 at most"):
            question()


def test_an_impossible_brief_is_refused_with_the_nearest_possible_one():
    """At k = 0.9 the disk's ceiling is 0.81; the message names a share, diameter and half-angle that do."""
    asked = Target("spot", SPOT.half_angle, share=0.85)
    diameter = 2 * math.sqrt(0.85 / transmission.faces(N, AIR)) / CONE
    with pytest.raises(BeyondLimit, match=rf"largest is 0.81.*0.748 or less.*{diameter:.4g} mm.*6.09 deg"):
        refuse_impossible(DISK, 0.9 / CONE, 12.0, asked, AIR, N)


def test_a_possible_brief_is_let_through():
    """The same lens may be asked for what it can do, or for the largest share."""
    for share in (0.74, None):
        asked = Target("spot", SPOT.half_angle, share=share)
        found = refuse_impossible(DISK, 0.9 / CONE, 12.0, asked, AIR, N)
        assert found.ceiling == pytest.approx(0.81, abs=RULE)


def test_ceiling_at_is_the_spot_ceiling_of_each_angle():
    """The encircled ceiling of a disk is (R sin θ)² up to all the light."""
    theta = rad(np.array([0.0, 1.0, 3.0, 5.0, 8.0]))
    found = ceiling_at(DISK, 10.0, 12.0, SPOT, AIR, theta)
    np.testing.assert_allclose(found, np.minimum((10.0 * np.sin(theta)) ** 2, 1.0), atol=RULE)
