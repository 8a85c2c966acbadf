"""Where a ray meets a revolved graph.

For z = f(r) the root of g(t) = z(t) − f(r(t)), for r = h(z) that of g(t) = r(t)² − h(z(t))².
The root is searched without derivatives, then one step carries them,

    t = t* − g(t*)/stop(g'(t*)) ,

which has the right value and, once converged, the exact first derivative with respect to
everything g depends on.  Rays are tuples of component arrays (N,); the residual in mm is
returned so that callers can count what did not converge.
"""

import jax
import jax.numpy as jnp

from inverse.profile import bspline

STEPS = 5  # Newton steps; the residual is returned, so a ray that needs more is seen
TINY = 1e-30  # mm²; keeps the radius differentiable on the axis


def _along(p, d, t):
    return tuple(a + t * b for a, b in zip(p, d))


def radius(q):
    """Distance from the axis, with a finite derivative on it."""
    return jnp.sqrt(q[0] * q[0] + q[1] * q[1] + TINY)


def _finish(g, t):
    t = jax.lax.stop_gradient(t)
    value, slope = g(t)
    return t - value / jax.lax.stop_gradient(slope)


def _hold(tree):
    return jax.tree_util.tree_map(jax.lax.stop_gradient, tree)


def with_height(p, d, graph, guess, steps=STEPS):
    """Meet z = f(r). Returns the point, its upward unit normal and the residual (mm)."""

    def equation(p, d, A, start, end):
        def g(t):
            x, y, z = _along(p, d, t)
            r = radius((x, y))
            f, slope = bspline.evaluate(A, start, end, r)
            return z - f, d[2] - slope * (x * d[0] + y * d[1]) / r

        return g

    A = bspline.pieces(graph.coefficients)
    free = equation(p, d, A, graph.start, graph.end)
    held = equation(*_hold((p, d, A, graph.start, graph.end)))
    t = _newton(held, jax.lax.stop_gradient(guess), steps)
    residual = jnp.abs(held(t)[0])
    q = _along(p, d, _finish(free, t))
    r = radius(q)
    _, slope = bspline.evaluate(A, graph.start, graph.end, r)
    scale = 1.0 / jnp.sqrt(1.0 + slope * slope)
    return q, (-slope * q[0] / r * scale, -slope * q[1] / r * scale, scale), residual


def with_radius(p, d, graph, guess, steps=STEPS):
    """Meet r = h(z). Returns the point, its outward unit normal and the residual (mm)."""

    def equation(p, d, A, start, end):
        def g(t):
            x, y, z = _along(p, d, t)
            h, slope = bspline.evaluate(A, start, end, z)
            return x * x + y * y - h * h, 2.0 * (x * d[0] + y * d[1] - h * slope * d[2])

        return g

    A = bspline.pieces(graph.coefficients)
    free = equation(p, d, A, graph.start, graph.end)
    held = equation(*_hold((p, d, A, graph.start, graph.end)))
    t = _newton(held, jax.lax.stop_gradient(guess), steps)
    q = _along(p, d, _finish(free, t))
    h, slope = bspline.evaluate(A, graph.start, graph.end, q[2])
    residual = jnp.abs(held(t)[0]) / (2.0 * jnp.abs(h))
    scale = 1.0 / (jnp.sqrt(1.0 + slope * slope) * radius(q))
    return q, (q[0] * scale, q[1] * scale, -slope * radius(q) * scale), jax.lax.stop_gradient(residual)


def _newton(g, t, steps):
    def step(_, t):
        value, slope = g(t)
        safe = jnp.where(jnp.abs(slope) > 1e-12, slope, 1e-12)
        return t - value / safe

    return jax.lax.fori_loop(0, steps, step, t)


def to_cylinder(p, d, r):
    """Path length to the cylinder of radius ``r`` from inside it (N,)."""
    a = d[0] * d[0] + d[1] * d[1] + TINY
    b = p[0] * d[0] + p[1] * d[1]
    c = p[0] * p[0] + p[1] * p[1] - r * r
    disc = b * b - a * c
    return (-b + jnp.sqrt(jnp.where(disc > 0.0, disc, TINY))) / a
