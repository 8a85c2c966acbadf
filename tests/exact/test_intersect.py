"""Rays against revolved graphs whose meeting points have closed forms: planes, cones, spheres, paraboloids."""

import jax
import jax.numpy as jnp
import numpy as np
import pytest

from inverse.profile import bspline
from inverse.profile.lens import Graph
from inverse.trace import intersect
from inverse.trace.interface import ray

RNG = np.random.default_rng(11)
COUNT = 400


def graph(function, start, end, spans):
    """A graph over [start, end] mm that interpolates ``function``; exact for cubics."""
    c = bspline.fit(lambda x: function(start + (end - start) * x), spans)
    return Graph(jnp.asarray(start), jnp.asarray(end), jnp.asarray(c))


def rays(slant):
    """Skew rays from near the emitter, polar angles up to ``slant`` (rad): tuples of (COUNT,)."""
    theta, phi = slant * np.sqrt(RNG.uniform(0.0, 1.0, COUNT)), RNG.uniform(0.0, 2 * np.pi, COUNT)
    p = (*RNG.uniform(-0.5, 0.5, (2, COUNT)), np.zeros(COUNT))
    d = (np.sin(theta) * np.cos(phi), np.sin(theta) * np.sin(phi), np.cos(theta))
    return tuple(map(jnp.asarray, p)), tuple(map(jnp.asarray, d))


def meet(road, p, d, *given, **options):
    """Cartesian point (3, N), normal in its meridional plane (m_r, m_z) and residual of ``road``; checks the path."""
    there, m, length, residual = road(ray(p, d), *given, **options)
    q = np.array([a + length * b for a, b in zip(p, d)])
    np.testing.assert_allclose(there.r, np.hypot(q[0], q[1]), atol=1e-12)
    np.testing.assert_allclose(there.z, q[2], atol=1e-12)
    np.testing.assert_allclose(there.dr * there.r, q[0] * d[0] + q[1] * d[1], atol=1e-12)
    np.testing.assert_allclose(there.dt * there.r, q[0] * d[1] - q[1] * d[0], atol=1e-12)
    return q, m, residual


def test_a_plane():
    """z = 4: t = (4 − p_z)/d_z, normal along the axis."""
    p, d = rays(1.0)
    q, m, residual = meet(intersect.with_height, p, d, graph(lambda r: 4.0 + 0.0 * r, 0.0, 9.0, 5), jnp.full(COUNT, 2.0))
    t = 4.0 / d[2]
    np.testing.assert_allclose(q, [p[0] + t * d[0], p[1] + t * d[1], np.full(COUNT, 4.0)], atol=1e-13)
    np.testing.assert_allclose(m, [np.zeros(COUNT), np.ones(COUNT)], atol=1e-13)
    assert float(residual.max()) < 1e-13


def test_a_cone():
    """r = 2 + z tan 20°: the quadratic's positive root; the normal leans back by 20°."""
    p, d = rays(0.9)
    d = (d[1], d[0], d[2])
    slope = np.tan(np.radians(20.0))
    guess = intersect.to_cylinder(ray(p, d), 3.0)
    away = jnp.hypot(d[0], d[1]) > 0.6  # the others run up inside the cone far past its end
    p, d, guess = jax.tree_util.tree_map(lambda a: a[away], (p, d, guess))
    q, m, residual = meet(intersect.with_radius, p, d, graph(lambda z: 2.0 + slope * z, -0.4, 12.0, 4), guess, steps=8)
    a = d[0] ** 2 + d[1] ** 2 - slope**2 * d[2] ** 2
    b = p[0] * d[0] + p[1] * d[1] - 2.0 * slope * d[2]
    c = p[0] ** 2 + p[1] ** 2 - 4.0
    t = (-b + np.sqrt(b * b - a * c)) / a
    np.testing.assert_allclose(q, [v + t * w for v, w in zip(p, d)], atol=1e-10)
    np.testing.assert_allclose(m[1], -np.sin(np.radians(20.0)), atol=1e-12)
    np.testing.assert_allclose(np.hypot(*m), 1.0, atol=1e-13)
    assert len(t) > 50 and float(residual.max()) < 1e-10


def test_a_paraboloid():
    """z = 5 − r²/8, a cubic graph: the quadratic's root; normal (r/4, 1)/√(1 + r²/16)."""
    p, d = rays(0.6)
    q, m, residual = meet(intersect.with_height, p, d, graph(lambda r: 5.0 - r * r / 8.0, 0.0, 6.0, 3), 5.0 / d[2])
    a, b = (d[0] ** 2 + d[1] ** 2) / 8.0, (p[0] * d[0] + p[1] * d[1]) / 4.0 + d[2]
    c = (p[0] ** 2 + p[1] ** 2) / 8.0 - 5.0
    t = -2.0 * c / (b + np.sqrt(b * b - 4.0 * a * c))  # the stable form: a is zero on the axis
    np.testing.assert_allclose(q, [v + t * w for v, w in zip(p, d)], atol=1e-12)
    r = np.hypot(q[0], q[1])
    np.testing.assert_allclose(m[1], 1.0 / np.sqrt(1.0 + r * r / 16.0), atol=1e-12)
    np.testing.assert_allclose(m[0], r / 4.0 * np.asarray(m[1]), atol=1e-12)
    assert float(residual.max()) < 1e-12


def test_a_sphere():
    """z = √(36 − r²) on 60 spans (true to 1e-9 mm): the point at distance 6, the normal radial."""
    p, d = rays(0.5)
    ball = graph(lambda r: np.sqrt(36.0 - r * r), 0.0, 4.0, 60)
    q, m, residual = meet(intersect.with_height, p, d, ball, 6.0 / d[2])
    b = p[0] * d[0] + p[1] * d[1]
    t = -b + np.sqrt(b * b + 36.0 - p[0] ** 2 - p[1] ** 2)
    np.testing.assert_allclose(q, [v + t * w for v, w in zip(p, d)], atol=1e-8)
    np.testing.assert_allclose(m, [np.hypot(q[0], q[1]) / 6.0, q[2] / 6.0], atol=1e-6)
    assert float(residual.max()) < 1e-12


def test_a_cylinder():
    """Path to a cylinder from inside: the far root, whichever way the ray goes."""
    p, d = rays(1.4)
    t = intersect.to_cylinder(ray(p, d), 2.5)
    x, y = (v + t * w for v, w in zip(p[:2], d[:2]))
    np.testing.assert_allclose(np.hypot(x, y), 2.5, atol=1e-9)
    assert float(t.min()) > 0.0


def test_a_ray_that_does_not_converge_says_so():
    """A ray along the axis never meets a cylinder: its residual is large, not its point silently wrong."""
    p, d = tuple(jnp.asarray([v]) for v in (0.1, 0.0, 0.0)), tuple(jnp.asarray([v]) for v in (0.0, 0.0, 1.0))
    *_, residual = intersect.with_radius(ray(p, d), graph(lambda z: 2.0 + 0.0 * z, 0.0, 5.0, 2), jnp.asarray([1.0]))
    assert float(residual[0]) > 0.5


def test_a_ray_on_the_axis_differentiates():
    """r has no tangent plane at the axis of r itself; the guarded radius keeps the derivative finite."""
    one = lambda v: jnp.asarray([v])  # noqa: E731

    def height(c):
        bowl = Graph(jnp.asarray(0.0), jnp.asarray(6.0), c)
        along = ray((one(0.0),) * 3, (one(0.0), one(0.0), one(1.0)))
        there, m, *_ = intersect.with_height(along, bowl, one(3.0))
        return there.z[0] + m[1][0] + m[0][0]

    c = graph(lambda r: 5.0 - r * r / 8.0, 0.0, 6.0, 3).coefficients
    assert np.all(np.isfinite(np.asarray(jax.grad(height)(c))))


KINDS = {
    "height": (lambda x: 5.0 - x * x / 8.0 + 0.01 * x**3, 0.0, 6.0, intersect.with_height, 0.7),
    "radius": (lambda x: 3.0 + 0.6 * x - 0.02 * x * x, -0.4, 9.0, intersect.with_radius, 1.2),
}


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("of", ["coefficients", "ends", "start point", "direction"])
def test_the_last_step_carries_the_derivative(kind, of):
    """d(ray there, normal, length)/d(anything the ray or the graph is made of) against central differences, 1e-6 relative."""
    function, start, end, road, slant = KINDS[kind]
    c = bspline.fit(lambda x: function(start + (end - start) * x), 4)
    p = (np.array([0.3]), np.array([-0.2]), np.array([0.1]))
    d = (np.sin(slant) * np.array([0.8]), np.sin(slant) * np.array([0.6]), np.array([np.cos(slant)]))
    sizes = {"coefficients": len(c), "ends": 2, "start point": 3, "direction": 3}
    towards = np.random.default_rng(1).uniform(-1.0, 1.0, sizes[of])

    def landed(s):
        move = s * towards
        at = lambda name: move if of == name else np.zeros(sizes[name])  # noqa: E731
        g = Graph(start + at("ends")[0], end + at("ends")[1], jnp.asarray(c) + at("coefficients"))
        start_at = tuple(v + w for v, w in zip(p, at("start point")))
        heading = tuple(v + w for v, w in zip(d, at("direction")))
        guess = jnp.asarray([5.0])
        there, m, length, _ = road(ray(start_at, heading), g, guess, steps=12)
        return jnp.concatenate([*there, *m, length])

    step = 1e-5
    slope = np.asarray(jax.jacfwd(landed)(0.0))
    central = (np.asarray(landed(step)) - np.asarray(landed(-step))) / (2 * step)
    assert np.abs(slope).max() > 1e-3
    np.testing.assert_allclose(slope, central, atol=1e-6 * np.abs(central).max())
    back = np.asarray(jax.jacrev(landed)(0.0))
    np.testing.assert_allclose(back, slope, atol=1e-12)
