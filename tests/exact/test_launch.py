"""Rays as they leave the LED: flux inside a cone, splits at an edge circle, the dome's own losses."""

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from scipy.integrate import quad

from inverse.emitter import CosinePower, Disk, Dome, Emitter, Rectangle, Table
from inverse.trace import farfield, intersect
from inverse.trace.launch import bracketed_root, launcher

DISK = Emitter((Disk(0.6),))
DOMED = Emitter((Disk(0.6),), dome=Dome(1.3, 1.41))
POINTS = farfield.points(512, 7)


def sampled(source):
    """(ρ, turn) of the fixed points."""
    u = jnp.asarray(POINTS)
    return source.radius(u[:, 0]), (jnp.cos(jnp.pi * u[:, 1]), jnp.sin(jnp.pi * u[:, 1]))


@pytest.mark.parametrize("theta", [0.0, 0.2, 0.7, 1.3, 0.5 * np.pi])
def test_a_lambertian_surface_sends_the_squared_sine_into_a_cone(theta):
    """Flux inside θ is sin² θ."""
    assert float(launcher(DISK).cumulative(np.cos(theta))) == pytest.approx(np.sin(theta) ** 2, abs=1e-14)


@pytest.mark.parametrize("power", [0.5, 2.0, 5.0])
def test_a_power_of_the_cosine(power):
    """I = cosᵐ: flux inside θ by quadrature of I sin θ."""
    source = launcher(Emitter((Disk(0.6),), law=CosinePower(power)))
    flux = lambda end: quad(lambda t: np.cos(t) ** power * np.sin(t), 0.0, end, epsabs=1e-12)[0]  # noqa: E731
    for theta in (0.3, 0.9, 1.4):
        assert float(source.cumulative(np.cos(theta))) == pytest.approx(flux(theta) / flux(np.pi / 2), abs=1e-9)


def test_a_tabulated_law():
    """Linear between its angles, zero beyond the last: flux inside θ by quadrature, to 1e-6."""
    angles, values = np.radians([0.0, 30.0, 60.0, 80.0]), np.array([0.6, 1.0, 0.5, 0.0])
    source = launcher(Emitter((Disk(0.6),), law=Table(angles, values)))
    shine = lambda t: np.interp(t, angles, values, right=0.0) * np.sin(t)  # noqa: E731
    flux = lambda end: quad(shine, 0.0, end, points=angles[1:-1], epsabs=1e-12)[0]  # noqa: E731
    for theta in (0.1, 0.6, 1.2):
        wanted = flux(theta) / flux(np.pi / 2)
        assert float(source.cumulative(np.cos(theta))) == pytest.approx(wanted, abs=1e-6)
    assert float(source.cumulative(np.cos(1.5))) == pytest.approx(1.0, abs=1e-12)


LAWS = [CosinePower(), CosinePower(3.0), Table(np.radians([0.0, 40.0, 90.0]), np.array([1.0, 0.8, 0.1]))]


@pytest.mark.parametrize("law", LAWS, ids=["Lambert", "cos³", "table"])
def test_cosine_is_the_inverse_of_cumulative(law):
    """cos θ(u) encloses the flux u."""
    source = launcher(Emitter((Disk(0.6),), law=law))
    u = jnp.linspace(1e-4, 0.9999, 301)
    np.testing.assert_allclose(source.cumulative(source.cosine(u)), u, atol=1e-9)


def test_the_radius_follows_the_area():
    """A disk of 0.6 mm: the flux u lies inside 0.6 √u; a square's corner is its farthest point."""
    u = np.linspace(0.0, 1.0, 101)
    np.testing.assert_allclose(launcher(DISK).radius(jnp.asarray(u)), 0.6 * np.sqrt(u), atol=1e-12)
    square = launcher(Emitter((Rectangle(1.0, 1.0),)))
    assert float(square.radius(jnp.asarray(1.0))) == pytest.approx(np.sqrt(0.5), abs=1e-12)
    inscribed = float(square.radius(jnp.asarray(np.pi / 4)))  # the inscribed circle holds π/4 of the area
    assert inscribed == pytest.approx(0.5, abs=2e-4)


def test_a_bare_ray_starts_on_the_die_with_unit_direction():
    """Start at radius ρ, height 0; direction from (φ, cos θ); full weight."""
    ray, weight = launcher(DISK).ray(jnp.asarray([0.4]), (jnp.cos(2.0)[None], jnp.sin(2.0)[None]), jnp.asarray([0.8]))
    np.testing.assert_allclose(np.ravel(ray), [0.4, 0.0, 0.6 * np.cos(2.0), 0.6 * np.sin(2.0), 0.8], atol=1e-15)
    assert float(weight[0]) == 1.0


def test_a_ray_through_the_dome_refracts_at_its_sphere():
    """The ray starts on the sphere, keeps n·(skewness), and obeys Snell's law about the radius."""
    source = launcher(DOMED)
    rho, turn = sampled(source)
    c = jnp.asarray(0.2 + 0.7 * POINTS[:, 2])
    ray, _ = source.ray(rho, turn, c)
    sine = np.sqrt(1.0 - np.asarray(c) ** 2)
    np.testing.assert_allclose(np.hypot(ray.r, ray.z), 1.3, atol=1e-13)
    np.testing.assert_allclose(np.linalg.norm([ray.dr, ray.dt, ray.dz], axis=0), 1.0, atol=1e-13)
    np.testing.assert_allclose(ray.r * ray.dt, 1.41 * rho * sine * turn[1], atol=1e-13)
    d = np.array([sine * turn[0], sine * turn[1], np.asarray(c)])
    along = np.asarray(rho) * d[0]
    t = -along + np.sqrt(along**2 + 1.3**2 - np.asarray(rho) ** 2)
    p = np.array([rho + t * d[0], t * d[1], t * d[2]])
    inside = np.linalg.norm(np.cross(d.T, p.T), axis=1)  # R sin of the angle to the radius
    outside = np.linalg.norm(np.cross(np.transpose([ray.dr, ray.dt, ray.dz]), np.transpose([ray.r, 0 * ray.r, ray.z])), axis=1)
    np.testing.assert_allclose(outside, 1.41 * inside, atol=1e-12)


def test_a_point_in_the_middle_of_its_dome_is_not_bent():
    """At normal incidence the direction stays and T = 4n/(n + 1)² for every ray: all weights are equal to one."""
    source = launcher(Emitter((Disk(1e-6),), dome=Dome(1.3, 1.41)))
    rho, turn = sampled(source)
    ray, weight = source.ray(rho, turn, jnp.full(512, 0.7))
    np.testing.assert_allclose(ray.dz, 0.7, atol=2e-6)
    np.testing.assert_allclose(weight, 1.0, atol=1e-9)
    assert source.transmittance == pytest.approx(4 * 1.41 / 2.41**2, abs=1e-9)


@pytest.mark.parametrize("emitter", [DOMED, Emitter((Disk(0.8),), dome=Dome(1.0, 1.53))], ids=["roomy", "tight"])
def test_the_domes_mean_transmittance(emitter):
    """Against quadrature of Fresnel's formula over radius, azimuth and polar angle.

    By symmetry about the dome's centre only the incidence counts: its sine is p/R, with
    p² = ρ² (1 − sin² θ cos² φ) the squared distance of the ray from the centre.
    """
    n, R, die = emitter.dome.index, emitter.dome.radius, emitter.dies[0].radius

    def passed(s):
        t = n * s
        i = np.sqrt(1.0 - s * s)
        o = np.sqrt(np.maximum(1.0 - t * t, 0.0))
        r_s, r_p = (n * i - o) / (n * i + o), (n * o - i) / (n * o + i)
        return np.where(t < 1.0, 1.0 - 0.5 * (r_s**2 + r_p**2), 0.0)

    x, w = np.polynomial.legendre.leggauss(200)
    x, w = 0.5 * (x + 1.0), 0.5 * w
    rho, phi, u = np.meshgrid(die * np.sqrt(x), np.pi * x, x, indexing="ij", sparse=True)
    s = rho * np.sqrt(1.0 - u * np.cos(phi) ** 2) / R  # u = sin² θ carries equal flux
    wanted = np.einsum("i,j,k,ijk", w, w, w, passed(s))
    assert launcher(emitter).transmittance == pytest.approx(wanted, abs=1e-4)


@pytest.mark.parametrize("emitter", [DISK, DOMED], ids=["bare", "dome"])
@pytest.mark.parametrize("radius, height", [(2.0, 4.0), (1.9, 0.3), (3.5, 9.0)])
def test_the_split_passes_through_the_edge_circle(emitter, radius, height):
    """The ray at the split meets r = radius exactly at z = height."""
    source = launcher(emitter)
    rho, turn = sampled(source)
    c = source.split(rho, turn, jnp.asarray(radius), jnp.asarray(height))
    ray, _ = source.ray(rho, turn, c)
    z = ray.z + intersect.to_cylinder(ray, radius) * ray.dz
    np.testing.assert_allclose(z, height, atol=1e-9)


@pytest.mark.parametrize("emitter", [DISK, DOMED], ids=["bare", "dome"])
def test_the_derivative_of_a_split_is_exact(emitter):
    """d(flux inside the split)/d(edge radius, edge height) against central differences, 1e-6 relative."""
    source = launcher(emitter)
    rho, turn = sampled(source)
    inside = jax.jit(lambda e: jnp.mean(source.cumulative(source.split(rho, turn, e[0], e[1]))))
    edge, step = np.array([2.0, 4.0]), 1e-5
    slope = np.asarray(jax.jit(jax.grad(inside))(edge))
    for i in range(2):
        move = step * np.eye(2)[i]
        central = float(inside(edge + move) - inside(edge - move)) / (2 * step)
        assert slope[i] == pytest.approx(central, rel=1e-6)


def test_a_higher_split_takes_less_and_the_parts_sum_to_one():
    """Nested edges cut the flux into parts that are positive and sum to one, ray by ray."""
    source = launcher(DISK)
    rho, turn = sampled(source)
    edges = [source.split(rho, turn, jnp.asarray(2.0), jnp.asarray(z)) for z in (0.5, 2.0, 5.0)]
    flux = [np.zeros(512), *map(source.cumulative, reversed(edges)), np.ones(512)]
    parts = np.diff(np.array(flux), axis=0)
    assert parts.min() > 0.0
    np.testing.assert_allclose(parts.sum(0), 1.0, atol=1e-15)


def test_half_of_a_point_source_meets_the_roof_of_a_square_pocket():
    """Edge at 45° from a point: sin² 45° = ½ of the flux inside."""
    source = launcher(Emitter((Disk(1e-9),)))
    rho, turn = sampled(source)
    c = source.split(rho, turn, jnp.asarray(3.0), jnp.asarray(3.0))
    np.testing.assert_allclose(source.cumulative(c), 0.5, atol=1e-9)


def test_a_root_that_does_not_exist_gives_the_end_it_leans_to():
    """Always above zero: the low end; never above: the high end; inside: the root, with its derivative."""
    low, high = jnp.zeros(3), jnp.ones(3)
    shift = lambda s: bracketed_root(lambda c: c**3 - jnp.array([-0.1, 8.0, 0.125]) * s, low, high)  # noqa: E731
    np.testing.assert_allclose(shift(1.0), [0.0, 1.0, 0.5], atol=1e-12)
    np.testing.assert_allclose(jax.jacfwd(shift)(1.0), [0.0, 0.0, 0.5 / 3.0], atol=1e-9)
