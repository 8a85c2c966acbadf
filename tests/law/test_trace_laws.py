"""Laws of the tracer for any lens: energy, skewness, scale, symmetry of two descriptions, the étendue ceiling."""

from dataclasses import replace

import jax.numpy as jnp
import numpy as np
import pytest

from inverse.emitter import Dome, Emitter, Rectangle
from inverse.limit import bound
from inverse.target import Target
from inverse.trace import farfield
from inverse.trace.interface import Ray
from traced import (
    AIR, BARE, BOX, DOMED, PMMA, SPOT, WATER, points, random_lens, scene, seed_lens, share, tracer,
)  # fmt: skip

# The direct road is sampled by the first quarter of the points.  Four times the same radii and azimuths
# make that quarter stand for all of them exactly, so the books must close to rounding.
QUARTER = points(256, 9)
EVEN = jnp.concatenate([QUARTER] * 4).at[:, 2].set(points(1024, 10)[:, 2])
LOSSES = {
    "under the foot", "entry reflection", "flank leak", "back into the pocket", "absorbed in the material",
    "exit reflection", "into the step", "past the exit face", "over the rim",
}  # fmt: skip


def closure(beam, lost):
    return float(jnp.sum(beam.weight)) + sum(map(float, lost.values())) - 1.0


@pytest.mark.parametrize("blur", [1e-6, 0.02])
@pytest.mark.parametrize("drop, seed", [(None, 1), (None, 2), (-0.6, 3), (0.6, 4)])
def test_every_part_of_the_light_is_booked(drop, seed, blur):
    """Beam and losses sum to the emitted flux to 1e-12 for a bare LED, absorption included."""
    beam, lost, residual = tracer()(random_lens(seed, drop), EVEN, blur, PMMA)
    assert set(lost) == LOSSES
    assert abs(closure(beam, lost)) < 1e-12
    assert float(jnp.min(beam.weight)) >= 0.0 and min(map(float, lost.values())) >= -1e-15
    assert float(lost["absorbed in the material"]) > 0.01
    assert float(residual) < 1e-9  # mm, worst intersection of a lit ray


def test_under_a_dome_the_books_close_to_the_noise_of_the_points():
    """A dome's weights are 1 on average only: each shift of 1024 points closes to 5e-4, the mean to 4 of its σ."""
    lens = random_lens(1, emitter=DOMED)
    shifts = np.random.default_rng(6).random((32, 3))
    sets = [farfield.shifted(points(), jnp.asarray(s)) for s in shifts]
    found = np.array([closure(*tracer(DOMED)(lens, u, 0.01, PMMA)[:2]) for u in sets])
    assert np.abs(found).max() < 5e-4
    assert abs(found.mean()) < 4.0 * found.std(ddof=1) / np.sqrt(32) + 2e-5  # the mean transmittance is a midpoint sum


def test_a_dome_of_air_is_no_dome():
    """Index 1: another code path with other roots, the same beam to 1e-9 and books that close."""
    lens = random_lens(2, emitter=DOMED)
    air = Emitter(DOMED.dies, dome=Dome(DOMED.dome.radius, 1.0))
    (bare, lost, _), (domed, same, _) = (tracer(e)(lens, EVEN, 0.01, PMMA) for e in (BARE, air))
    np.testing.assert_allclose(domed.weight, bare.weight, atol=1e-8)  # splits are roots, found to about 1e-9
    np.testing.assert_allclose(domed.ray[2:], bare.ray[2:], atol=1e-9)
    assert abs(closure(domed, same)) < 1e-9
    assert {k: float(v) for k, v in same.items()} == pytest.approx({k: float(v) for k, v in lost.items()}, abs=1e-10)


@pytest.mark.parametrize("emitter", [BARE, DOMED], ids=["bare", "dome"])
def test_skewness_is_that_of_the_emission(emitter):
    """x d_y − y d_x at the exit lies within ρ n sin θ of the source, ray by ray, and has its mean square.

    On the die it is ρ n sin θ sin φ, with independent ρ, θ, φ: the mean square over all light is
    n² ⟨ρ²⟩ ⟨sin² θ⟩ ⟨sin² φ⟩ = n² ⟨ρ²⟩/4 for a Lambertian surface, less what the lens loses unevenly.
    """
    beam, lost, _ = tracer(emitter)(random_lens(3, emitter=emitter), points(), 1e-6, PMMA)
    skew, weight = np.asarray(beam.ray.r * beam.ray.dt), np.asarray(beam.weight)
    lit = weight > 1e-12
    assert np.abs(skew[lit]).max() <= emitter.index * emitter.reach
    # The rays of one sample share ρ and φ; only θ differs between the roads: s / (n ρ sin φ) = sin θ < 1.
    u = points()
    rho = np.asarray(scene(emitter).launcher.radius(u[:, 0]))
    sine = rho * np.sin(np.pi * np.asarray(u[:, 1])) * emitter.index
    few = len(u) // 4
    start = np.concatenate([sine, sine[:few], sine])  # centre, direct, flank
    assert len(start) == len(skew)
    ratio = skew[lit] / start[lit]
    assert ratio.min() > -1e-9 and ratio.max() < 1.0 + 1e-9


def test_skewness_is_conserved_to_rounding():
    """Through centre lens and exit: x d_y − y d_x of each ray as launched, to 1e-9 mm."""
    lens, u = random_lens(4), points()
    source = scene().launcher
    rho, phi = source.radius(u[:, 0]), jnp.pi * u[:, 1]
    turn = (jnp.cos(phi), jnp.sin(phi))
    corner = source.split(rho, turn, lens.corner[0], lens.corner[1])
    cosine = source.cosine(u[:, 2] * source.cumulative(corner))
    start = rho * jnp.sqrt(1.0 - cosine**2) * turn[1]
    beam, _, _ = tracer()(lens, u, 1e-6, PMMA)
    skew = (beam.ray.r * beam.ray.dt)[: len(u)]
    lit = np.asarray(beam.weight[: len(u)]) > 1e-12
    assert lit.mean() > 0.9
    np.testing.assert_allclose(skew[lit], start[lit], atol=1e-9)


def test_a_direction_stays_a_unit_vector():
    """|d| = 1 to 1e-12 on every lit ray."""
    beam, _, _ = tracer()(random_lens(5, -0.6), points(), 1e-6, PMMA)
    lit = np.asarray(beam.weight) > 1e-12
    np.testing.assert_allclose(np.linalg.norm(beam.ray[2:], axis=0)[lit], 1.0, atol=1e-12)


def test_doubling_every_length_changes_nothing_that_counts():
    """All lengths × 2, absorption / 2: every weight and direction the same to 1e-9."""
    lens = seed_lens()
    twice = replace(
        lens, **{f: 2.0 * getattr(lens, f) for f in ("corner", "foot", "centre", "flank", "exit")}
    )  # the wall holds tangents
    box = replace(BOX, **{f: 2.0 * getattr(BOX, f) for f in ("radius", "height", "foot", "clearance", "wall", "rim")})
    large = Emitter((Rectangle(2.0, 2.0),))
    one, lost, _ = tracer()(lens, points(), 0.01, PMMA)
    two, same, _ = tracer(large, box, 1e-3)(twice, points(), 0.02, PMMA)
    np.testing.assert_allclose(two.weight, one.weight, atol=1e-12)
    np.testing.assert_allclose(two.ray[2:], one.ray[2:], atol=1e-9)
    np.testing.assert_allclose(two.ray[:2], 2.0 * np.asarray(one.ray[:2]), atol=1e-9)
    assert {k: float(v) for k, v in same.items()} == pytest.approx({k: float(v) for k, v in lost.items()}, abs=1e-12)


@pytest.mark.parametrize("half_angle", np.radians([0.5, 2.0, 4.0, 8.0]))
@pytest.mark.parametrize("emitter", [BARE, DOMED], ids=["bare", "dome"])
def test_no_share_exceeds_the_etendue_ceiling(emitter, half_angle):
    """Random lenses, narrow to wide: never more in the cone than physics allows."""
    ceiling = bound(emitter, BOX.radius, BOX.height, Target("spot", half_angle), AIR, PMMA).ceiling
    for seed in range(3):
        found = share(random_lens(seed, emitter=emitter), scene(emitter), points(), edge=half_angle)
        assert 0.0 < found < ceiling + 0.01  # the noise of 1024 points


def test_a_port_takes_what_fresnel_says_and_bends_by_snell():
    """A bundle along the axis: two faces of the port; a slanted one: sin θ_water = sin θ_air/n_water."""
    given = scene(surroundings=WATER)
    t = np.radians([0.0, 10.0, 20.0])
    zero = jnp.zeros(3)
    beam = farfield.route.Beam(Ray(zero, zero + 10.0, jnp.sin(t), zero, jnp.cos(t)), jnp.ones(3), {}, zero)
    q, weight, turned = farfield.land(beam, given, 10.0)
    np.testing.assert_allclose(np.arctan(np.sqrt(q)), np.arcsin(np.sin(t) / WATER.index), atol=1e-12)
    np.testing.assert_allclose(weight + turned, 1.0, atol=1e-15)
    n, w = WATER.port.index, WATER.index
    faces = (1 - ((n - 1) / (n + 1)) ** 2) * (1 - ((n - w) / (n + w)) ** 2)
    assert float(weight[0]) == pytest.approx(faces, abs=1e-12)


@pytest.mark.parametrize("surroundings", [AIR, WATER], ids=["air", "water"])
def test_a_ray_lands_in_the_plane_where_geometry_says(surroundings):
    """Straight through air, or through gap, port and water with Snell at each layer: r at the plane."""
    target = Target("spot", 0.1, distance=400.0)
    given = replace(scene(surroundings=surroundings), target=target)
    t, x, top = np.radians([0.0, 5.0, -25.0]), np.array([0.0, 3.0, 4.0]), 11.0
    z = np.array([11.0, 10.5, 9.0])
    zero = jnp.zeros(3)
    ray = Ray(jnp.asarray(x), jnp.asarray(z), jnp.sin(t), zero, jnp.cos(t))
    beam = farfield.route.Beam(ray, jnp.ones(3), {}, zero)
    if surroundings.port is None:
        layers = [(400.0 - z, 1.0)]
    else:
        gap, thick = top + surroundings.port.gap, surroundings.port.thickness
        layers = [(gap - z, 1.0), (thick, surroundings.port.index), (400.0 - gap - thick, surroundings.index)]
    r = x + sum(length * np.tan(np.arcsin(np.sin(t) / n)) for length, n in layers)
    q, _, _ = farfield.land(beam, given, top)
    np.testing.assert_allclose(np.sqrt(q), np.abs(r) / 400.0, atol=1e-12)


def test_light_that_goes_back_is_booked_as_turned():
    """A ray that leaves downwards lands nowhere: its whole weight is in the third figure."""
    zero, one = jnp.zeros(1), jnp.ones(1)
    beam = farfield.route.Beam(Ray(zero, one, zero + 0.6, zero, -0.8 * one), one, {}, zero)
    _, weight, turned = farfield.land(beam, scene(), 10.0)
    assert (float(weight[0]), float(turned[0])) == (0.0, 1.0)


def test_a_soft_edge_sharpens_to_the_share():
    """flux_inside with an edge of relative width 1e-5 is the sharp count; several edges grow with the angle."""
    lens, given = seed_lens(), scene()
    beam, _, _ = tracer()(lens, points(), 1e-6, PMMA)
    q, weight, _ = farfield.land(beam, given, farfield.highest(lens, BOX))
    soft = np.array([float(weight @ _sigmoid((1 - q / np.tan(a) ** 2) / 1e-5)) for a in (0.05, SPOT.half_angle)])
    sharp = [share(lens, given, points(), edge=a) for a in (0.05, SPOT.half_angle)]
    np.testing.assert_allclose(soft, sharp, atol=1e-3)


def _sigmoid(x):
    return 1.0 / (1.0 + jnp.exp(-jnp.clip(x, -500.0, 500.0)))


def test_shifted_points_stay_in_the_unit_cube_and_keep_their_differences():
    """Cranley–Patterson: v − u is the shift modulo 1."""
    u, shift = points(), jnp.asarray([0.3, 0.9, 0.5])
    v = farfield.shifted(u, shift)
    assert float(v.min()) >= 0.0 and float(v.max()) < 1.0
    off = np.asarray(v - u - shift[None, :])
    np.testing.assert_allclose(off, np.round(off), atol=1e-12)
