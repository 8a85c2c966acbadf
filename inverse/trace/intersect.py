"""Where a ray meets a revolved graph.

A ray from (r, z) with the direction (d_r, d_φ, d_z) is, after the length t, at

    ϱ = √((r + t d_r)² + (t d_φ)²) ,   ζ = z + t d_z ,   with   ϱ' = ((r + t d_r) d_r + t d_φ²)/ϱ .

For z = f(r) the root of g = ζ − f(ϱ) is wanted, for r = h(z) that of g = ϱ − h(ζ).  It is searched
without derivatives, then one step t = t* − g/stop(g') carries them; ϱ, ϱ' and the graph's slope
follow that step to first order (ϱ'' = d_φ'²/ϱ).  Once converged, values and first derivatives
with respect to everything g depends on are exact, at the cost of one evaluation of the graph.  The
residual in mm is returned, so that callers can count what did not converge.
"""

import jax
import jax.numpy as jnp

from inverse.profile import bspline
from inverse.trace.interface import TINY, Ray, inverse_root, reciprocal
from inverse.trace.stage import stage

STEPS = 5  # Newton steps; the residual is returned, so a ray that needs more is seen


def _hold(tree):
    return jax.tree_util.tree_map(jax.lax.stop_gradient, tree)


@stage
def _at(ray, t):
    """ϱ, ϱ' and 1/ϱ after the length ``t``."""
    x, y = ray.r + t * ray.dr, t * ray.dt
    square = x * x + y * y + TINY
    over = inverse_root(square)
    return square * over, (x * ray.dr + y * ray.dt) * over, over


@stage
def _moved(ray, t, there, step):
    """The ray at its meeting point: t*, (ϱ, ϱ', 1/ϱ) there, and the step that carries the derivatives."""
    hold = jax.lax.stop_gradient
    r, speed, over = there
    along = hold(speed) * step
    around = ray.r * ray.dt * (over - hold(over * over) * along)
    radial = speed + hold(around * around * over) * step
    return Ray(r + along, ray.z + (t + step) * ray.dz, radial, around, ray.dz)


@stage
def with_height(ray, graph, guess, steps=STEPS):
    """Meet z = f(r). Returns the ray there, the surface's upward unit normal (m_r, m_z), the length and the residual (mm)."""
    A = bspline.pieces(graph.coefficients)
    held, B, start, end = _hold((ray, A, graph.start, graph.end))

    def g(t):
        r, speed, _ = _at(held, t)
        f, slope = bspline.evaluate(B, start, end, r)
        return held.z + t * held.dz - f, held.dz - slope * speed

    t, residual = _newton(g, jax.lax.stop_gradient(guess), steps)
    r, speed, over = _at(ray, t)
    x, f, slope, bend = bspline.expand(A, graph.start, graph.end, r)
    hold = jax.lax.stop_gradient
    miss = ray.z + t * ray.dz - f - hold(slope) * (r - x)
    step = -miss * hold(1.0 / _away(ray.dz - slope * speed))
    there = _moved(ray, t, (r, speed, over), step)
    slope = slope + bend * (there.r - x)
    scale = inverse_root(1.0 + slope * slope)
    return there, (-slope * scale, scale), t + step, residual


@stage
def with_radius(ray, graph, guess, steps=STEPS):
    """Meet r = h(z). Returns the ray there, the surface's outward unit normal (m_r, m_z), the length and the residual (mm)."""
    A = bspline.pieces(graph.coefficients)
    held, B, start, end = _hold((ray, A, graph.start, graph.end))

    def g(t):  # squares: smooth where the ray passes near the axis
        x, y = held.r + t * held.dr, t * held.dt
        h, slope = bspline.evaluate(B, start, end, held.z + t * held.dz)
        return x * x + y * y - h * h, 2.0 * (x * held.dr + y * held.dt - h * slope * held.dz)

    t, _ = _newton(g, jax.lax.stop_gradient(guess), steps)
    r, speed, over = _at(ray, t)
    z = ray.z + t * ray.dz
    x, h, slope, bend = bspline.expand(A, graph.start, graph.end, z)
    hold = jax.lax.stop_gradient
    miss = r - h - hold(slope) * (z - x)
    step = -miss * hold(1.0 / _away(speed - slope * ray.dz))
    there = _moved(ray, t, (r, speed, over), step)
    slope = slope + bend * (there.z - x)
    scale = inverse_root(1.0 + slope * slope)
    return there, (scale, -slope * scale), t + step, hold(jnp.abs(miss))


def _away(slope):
    """``slope`` kept away from zero, where a ray runs along the surface."""
    return jnp.where(jnp.abs(slope) > 1e-12, slope, 1e-12)


def _newton(g, t, steps):
    def step(_, t):
        value, slope = g(t)
        return t - value / _away(slope)

    t = jax.lax.fori_loop(0, steps, step, t)
    return t, jnp.abs(g(t)[0])


@stage
def to_cylinder(ray, r):
    """Path length to the cylinder of radius ``r`` from inside it (N,)."""
    a = ray.dr * ray.dr + ray.dt * ray.dt + TINY
    b = ray.r * ray.dr
    c = ray.r * ray.r - r * r
    disc = b * b - a * c
    safe = jnp.where(disc > 0.0, disc, TINY)
    return (safe * inverse_root(safe) - b) * reciprocal(a)


@stage
def radius_at(ray, z):
    """Radius (N,) at which a climbing ray passes the height ``z``."""
    return _at(ray, (z - ray.z) * reciprocal(ray.dz))[0]
