"""One smooth interface: Snell, Fresnel, total reflection.

Formulas: Born & Wolf, Principles of Optics, §1.5.  Numbers for PMMA: evaluated from them with
n = 1.49253 (Beadie et al., Appl. Opt. 54, F139, 2015, at 587.6 nm).
"""

import jax
import jax.numpy as jnp
import numpy as np
import pytest

from inverse.trace import interface

PMMA = 1.49253
UP = (0.0, 1.0)  # radial and axial component


def ray(degrees, azimuth=0.3):
    """Unit direction at the polar angle from +z."""
    t = np.radians(degrees)
    d = (np.sin(t) * np.cos(azimuth), np.sin(t) * np.sin(azimuth), np.cos(t))
    return interface.Ray(*map(jnp.asarray, (2.0, 0.0, *d)))


def heading(ray):
    """Its direction as an array (3, …)."""
    return np.array([ray.dr, ray.dt, ray.dz])


def reflectance(degrees, n1, n2):
    return 1.0 - float(interface.transmittance(jnp.cos(jnp.radians(degrees)), n1, n2))


@pytest.mark.parametrize("n1, n2", [(1.0, PMMA), (PMMA, 1.0), (1.3334, 1.0)])
@pytest.mark.parametrize("angle", [0.0, 5.0, 20.0, 41.0])
def test_snell(n1, n2, angle):
    """n₁ sin θ₁ = n₂ sin θ₂, the ray stays in the plane of incidence and keeps unit length."""
    out, _ = interface.refract(ray(angle), UP, n1, n2)
    out = heading(out)
    sine = np.hypot(out[0], out[1])
    assert float(n2 * sine) == pytest.approx(n1 * np.sin(np.radians(angle)), abs=1e-14)
    assert float(out @ out) == pytest.approx(1.0, abs=1e-14)
    assert float(out[1] * np.cos(0.3) - out[0] * np.sin(0.3)) == pytest.approx(0.0, abs=1e-15)
    assert float(out[2]) > 0.0


def test_a_tilted_interface_keeps_the_tangential_wave_vector():
    """n₂ d' − n₁ d is along the normal, for a normal that is not an axis."""
    m = tuple(np.array([-0.6, 0.8]))
    d = ray(25.0)
    out, _ = interface.refract(d, m, 1.0, PMMA)
    jump = PMMA * heading(out) - heading(d)
    assert np.linalg.norm(np.cross(jump, [m[0], 0.0, m[1]])) < 1e-14


@pytest.mark.parametrize("turn", [1.0, -1.0])
def test_either_sign_of_the_normal_will_do(turn):
    """A normal given on the wrong side is turned: refraction and reflection do not depend on its sign."""
    m = tuple(turn * v for v in UP)
    out, passed = interface.refract(ray(30.0), m, 1.0, PMMA)
    back, c = interface.reflect(ray(30.0), m)
    assert float(out.dz) == pytest.approx(np.sqrt(1.0 - 0.25 / PMMA**2), abs=1e-14)
    assert float(back.dz) == pytest.approx(-np.cos(np.pi / 6), abs=1e-14) and float(c) > 0.0
    assert 0.9 < float(passed) < 1.0


def test_reflection_mirrors_the_ray():
    """The component along the normal changes sign, the others stay."""
    d = ray(62.0)
    out, c = interface.reflect(d, UP)
    np.testing.assert_allclose(heading(out), heading(d) * [1.0, 1.0, -1.0], atol=1e-15)
    assert float(c) == pytest.approx(np.cos(np.radians(62.0)), abs=1e-15)


@pytest.mark.parametrize("n, expected", [(PMMA, 0.03905), (1.5, 0.04), (1.5168, 0.04216)])
def test_normal_incidence(n, expected):
    """R₀ = ((n − 1)/(n + 1))²; PMMA 3.905 %, crown of 1.5 4 %, N-BK7 4.216 %, from either side."""
    assert reflectance(0.0, 1.0, n) == pytest.approx(expected, abs=5e-6)
    assert reflectance(0.0, n, 1.0) == pytest.approx(((n - 1) / (n + 1)) ** 2, abs=1e-15)


def test_brewsters_angle():
    """At tan θ = n only s-light is reflected: R = ½ ((n² − 1)/(n² + 1))²; PMMA 56.18°."""
    angle = np.degrees(np.arctan(PMMA))
    assert angle == pytest.approx(56.18, abs=0.005)
    expected = 0.5 * ((PMMA**2 - 1) / (PMMA**2 + 1)) ** 2
    assert reflectance(angle, 1.0, PMMA) == pytest.approx(expected, abs=1e-14)


@pytest.mark.parametrize("angle", [10.0, 35.0, 70.0, 85.0])
def test_oblique_incidence(angle):
    """Fresnel in the form of angles: r_s = −sin(i − t)/sin(i + t), r_p = tan(i − t)/tan(i + t)."""
    i = np.radians(angle)
    t = np.arcsin(np.sin(i) / PMMA)
    expected = 0.5 * ((np.sin(i - t) / np.sin(i + t)) ** 2 + (np.tan(i - t) / np.tan(i + t)) ** 2)
    assert reflectance(angle, 1.0, PMMA) == pytest.approx(expected, abs=1e-14)


@pytest.mark.parametrize("angle", [0.0, 20.0, 41.9])
def test_light_passes_alike_both_ways(angle):
    """Reciprocity: the reflectance inside at θ is that outside at asin(n sin θ)."""
    outside = np.degrees(np.arcsin(PMMA * np.sin(np.radians(angle))))
    assert reflectance(angle, PMMA, 1.0) == pytest.approx(reflectance(outside, 1.0, PMMA), abs=1e-12)


def test_total_reflection_begins_at_the_critical_angle():
    """sin θ_c = 1/n, 42.067° for PMMA: below it some light passes, beyond it none."""
    critical = np.degrees(np.arcsin(1.0 / PMMA))
    assert critical == pytest.approx(42.067, abs=1e-3)
    assert reflectance(critical - 0.01, PMMA, 1.0) < 0.99
    for beyond in (1e-9, 0.01, 10.0, 47.9):
        assert reflectance(critical + beyond, PMMA, 1.0) == 1.0
        assert float(interface.refract(ray(critical + beyond), UP, PMMA, 1.0)[1]) == 0.0


@pytest.mark.parametrize("n1, n2", [(1.0, PMMA), (PMMA, 1.0)])
def test_energy_is_conserved(n1, n2):
    """R + T = 1 with T from the amplitudes: T = (n₂ cos t/(n₁ cos i)) ½ (t_s² + t_p²)."""
    i = np.radians(np.linspace(0.0, 41.9, 40))
    t = np.arcsin(n1 * np.sin(i) / n2)
    ts = 2 * n1 * np.cos(i) / (n1 * np.cos(i) + n2 * np.cos(t))
    tp = 2 * n1 * np.cos(i) / (n2 * np.cos(i) + n1 * np.cos(t))
    passed = n2 * np.cos(t) / (n1 * np.cos(i)) * 0.5 * (ts**2 + tp**2)
    d = interface.Ray(jnp.ones(40), jnp.zeros(40), jnp.sin(i), jnp.zeros(40), jnp.cos(i))
    m = (jnp.zeros(40), jnp.ones(40))
    np.testing.assert_allclose(interface.refract(d, m, n1, n2)[1], passed, atol=1e-12)
    np.testing.assert_allclose(interface.transmittance(jnp.cos(i), n1, n2), passed, atol=1e-12)
    s = (n1 * np.cos(i) - n2 * np.cos(t)) / (n1 * np.cos(i) + n2 * np.cos(t))
    p = (n2 * np.cos(i) - n1 * np.cos(t)) / (n2 * np.cos(i) + n1 * np.cos(t))
    np.testing.assert_allclose(0.5 * (s**2 + p**2) + passed, 1.0, atol=1e-12)


@pytest.mark.parametrize("offset", [-1.0, -1e-3, -1e-9, 0.0, 1e-9, 1e-3, 1.0])
def test_gradients_are_finite_around_the_critical_angle(offset):
    """Reflectance and refracted direction differentiate to finite numbers on, before and behind the edge."""
    angle = jnp.asarray(np.arcsin(1.0 / PMMA) + np.radians(offset))

    def both(angle):
        d = interface.Ray(jnp.ones(()), jnp.zeros(()), jnp.sin(angle), jnp.zeros(()), jnp.cos(angle))
        out, passed = interface.refract(d, UP, PMMA, 1.0)
        return out.dr + out.dz + passed + interface.transmittance(d.dz, PMMA, 1.0)

    assert np.isfinite(float(jax.grad(both)(angle)))


def test_the_slope_of_the_reflectance_is_right_below_the_edge_and_zero_beyond():
    """Derivative by JAX against central differences a degree below; exactly zero a degree beyond."""
    loss = lambda t: 1.0 - interface.transmittance(jnp.cos(t), PMMA, 1.0)  # noqa: E731
    below, beyond = (float(np.arcsin(1.0 / PMMA) + np.radians(s)) for s in (-1.0, 1.0))
    step = 1e-6
    central = float(loss(below + step) - loss(below - step)) / (2 * step)
    assert float(jax.grad(loss)(below)) == pytest.approx(central, rel=1e-6)
    assert float(jax.grad(loss)(beyond)) == 0.0
