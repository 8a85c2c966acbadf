"""Rays as they leave the LED, and where they split between the parts of the pocket.

A round lens cannot tell azimuths apart, so a ray is given by the radius ρ of its start, the
azimuth φ of its direction relative to that radius, and its polar angle θ.  The radius follows
the emitter's radial density and θ its emission law, so every ray carries the same flux (times
the dome's transmittance).

*Splits.*  Whether a ray meets the centre lens or the pocket wall is decided by an edge circle
(r, z): a jump that a gradient by sampling would miss.  Here the polar angle θ_e at which the
ray passes exactly through the edge is found per (ρ, φ), and each part of the pocket is sampled
on its own side of it.  The flux of a part is C(θ_hi) − C(θ_lo), with C the cumulative law, so
the sum over parts is one by construction and the derivative with respect to the edge is exact
(the moving-boundary idea of path-space differentiable rendering, Zhang et al., ACM TOG 39(4),
2020, with the boundary straightened by a change of variable).
"""

from dataclasses import dataclass

import jax
import jax.numpy as jnp
import numpy as np

from inverse.emitter import CosinePower, Emitter
from inverse.trace import interface, intersect

HALVINGS, NEWTONS = 6, 4  # brackets to 1.4°, then quadratic convergence


@dataclass(frozen=True)
class Launcher:
    """The emitter in the form the tracer samples. ``squares``: r² at equal steps of flux, mm²."""

    emitter: Emitter
    squares: np.ndarray
    transmittance: float  # mean over the emission, dome surface only
    law_grid: tuple | None  # (θ, cumulative) for tabulated laws

    @property
    def dome(self):
        return self.emitter.dome

    def radius(self, u):
        """ρ (mm) for flux fractions ``u``."""
        grid = jnp.linspace(0.0, 1.0, len(self.squares))
        return jnp.sqrt(jnp.interp(u, grid, jnp.asarray(self.squares)))

    def cumulative(self, theta):
        """Fraction of the flux inside θ."""
        if self.law_grid is None:
            return 1.0 - jnp.cos(theta) ** (self.emitter.law.power + 1.0)
        return jnp.interp(theta, *map(jnp.asarray, self.law_grid))

    def angle(self, u):
        """θ inside which the fraction ``u`` of the flux lies."""
        if self.law_grid is None:
            c = (1.0 - jnp.clip(u, 0.0, 1.0)) ** (1.0 / (self.emitter.law.power + 1.0))
            return jnp.arctan2(jnp.sqrt(jnp.maximum(1.0 - c * c, 1e-30)), c)
        return jnp.interp(u, *map(jnp.asarray, self.law_grid[::-1]))

    def ray(self, rho, phi, theta):
        """Start, unit direction and weight of the rays in the air of the pocket."""
        p = (rho, jnp.zeros_like(rho), jnp.zeros_like(rho))
        st = jnp.sin(theta)
        d = (st * jnp.cos(phi), st * jnp.sin(phi), jnp.cos(theta))
        if self.dome is None:
            return p, d, jnp.ones_like(theta)
        radius = self.dome.radius
        b = interface.dot(p, d)
        room = b * b + radius * radius - rho * rho
        t = -b + jnp.sqrt(room)
        q = tuple(a + t * c for a, c in zip(p, d))
        out, passed = interface.refract(d, tuple(a / radius for a in q), self.dome.index, 1.0)
        return q, out, passed / self.transmittance

    def split(self, rho, phi, edge_radius, edge_height):
        """θ at which a ray from (ρ, φ) passes through the circle (edge_radius, edge_height) in the pocket."""
        if self.dome is None:
            s = rho * jnp.sin(phi)
            reach = -rho * jnp.cos(phi) + jnp.sqrt(edge_radius * edge_radius - s * s)
            return jnp.arctan2(reach, edge_height)

        def excess(theta):
            p, d, _ = self.ray(rho, phi, theta)
            return p[2] + intersect.to_cylinder(p, d, edge_radius) * d[2] - edge_height

        low = jnp.zeros_like(rho) + 1e-9
        return bracketed_root(excess, low, jnp.zeros_like(rho) + np.pi / 2)


def launcher(emitter: Emitter) -> Launcher:
    """Tabulate an emitter for the tracer. NumPy only; costs a few milliseconds."""
    u = np.linspace(0.0, 1.0, 2049)
    squares = emitter.radial_quantile(u) ** 2
    grid = None
    if not isinstance(emitter.law, CosinePower):
        theta = np.linspace(0.0, np.pi / 2, 8001)
        cumulative = emitter.law.cumulative(theta)
        keep = np.concatenate([[True], np.diff(cumulative) > 0])
        grid = (theta[keep], cumulative[keep])
    free = Launcher(emitter, squares, 1.0, grid)
    if emitter.dome is None:
        return free
    # midpoints of a regular 64³ grid: the integrand is smooth, the error is far below 1e-4
    m = (np.arange(64) + 0.5) / 64
    a, b, c = (x.ravel() for x in np.meshgrid(m, m, m))
    weight = free.ray(free.radius(jnp.asarray(a)), jnp.asarray(np.pi * b), free.angle(jnp.asarray(c)))[2]
    return Launcher(emitter, squares, float(jnp.mean(weight)), grid)


def bracketed_root(excess, low, high):
    """θ in [low, high] where the falling function ``excess`` crosses zero; the end it leans to if it does not.

    Found without derivatives, then one step that carries them: value and first derivative are
    exact for interior roots; for the others the result is ``low`` or ``high`` itself.
    """

    hold = jax.lax.stop_gradient
    lo0, hi0 = hold(low), hold(high)
    held = lambda t: hold(excess(t))

    def halve(_, ends):
        lo, hi = ends
        mid = 0.5 * (lo + hi)
        above = held(mid) > 0.0
        return jnp.where(above, mid, lo), jnp.where(above, hi, mid)

    lo, hi = jax.lax.fori_loop(0, HALVINGS, halve, (lo0, hi0))

    def newton(_, state):
        t, lo, hi = state
        value, slope = jax.jvp(held_free, (t,), (jnp.ones_like(t),))
        lo, hi = jnp.where(value > 0, t, lo), jnp.where(value > 0, hi, t)
        new = t - value / jnp.where(slope < 0, slope, -1.0)
        return jnp.where((new > lo) & (new < hi), new, 0.5 * (lo + hi)), lo, hi

    held_free = excess
    t, _, _ = jax.lax.fori_loop(0, NEWTONS, newton, (0.5 * (lo + hi), lo, hi))
    t = hold(t)
    value = excess(t)
    _, slope = jax.jvp(excess, (t,), (jnp.ones_like(t),))
    slope = hold(slope)
    root = t - value / jnp.where(slope < 0, slope, -1.0)
    inside = (held(lo0) > 0.0) & (held(hi0) < 0.0)
    return jnp.where(inside, root, jnp.where(held(lo0) <= 0.0, low, high))
