"""Rays as they leave the LED, and where they split between the parts of the pocket.

A round lens cannot tell azimuths apart, so a ray is given by the radius ρ of its start, the
azimuth φ of its direction relative to that radius, and its polar angle θ, written as c = cos θ.
The radius follows the emitter's radial density and c its emission law, so every ray carries the
same flux (times the dome's transmittance).

*Splits.*  Whether a ray meets the centre lens or the pocket wall is decided by an edge circle
(r, z): a jump that a gradient by sampling would miss.  Here the c_e at which the ray passes
exactly through the edge is found per (ρ, φ), and each part of the pocket is sampled on its own
side of it.  The flux of a part is C(c_lo) − C(c_hi), with C the flux inside θ, so
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

HALVINGS, SECANTS = 2, 8  # halvings guard the secants; the last step is Newton's
TINY = 1e-30  # keeps roots differentiable at the ends of the emission


@dataclass(frozen=True)
class Launcher:
    """The emitter in the form the tracer samples. ``squares``: r² at equal steps of flux, mm²."""

    emitter: Emitter
    squares: np.ndarray
    transmittance: float  # mean over the emission, dome surface only
    law_grid: tuple | None  # (cos θ, cumulative) falling in cos θ, for tabulated laws

    @property
    def dome(self):
        return self.emitter.dome

    def radius(self, u):
        """ρ (mm) for flux fractions ``u``."""
        grid = jnp.linspace(0.0, 1.0, len(self.squares))
        return jnp.sqrt(jnp.interp(u, grid, jnp.asarray(self.squares)))

    def cumulative(self, c):
        """Fraction of the flux inside the cone of cosine ``c``."""
        if self.law_grid is None:
            power = self.emitter.law.power + 1.0
            return 1.0 - (c * c if power == 2.0 else jnp.maximum(c, 0.0) ** power)
        cosines, flux = self.law_grid
        return jnp.interp(c, jnp.asarray(cosines[::-1]), jnp.asarray(flux[::-1]))

    def cosine(self, u):
        """cos θ inside which the fraction ``u`` of the flux lies."""
        if self.law_grid is None:
            power = self.emitter.law.power + 1.0
            rest = jnp.maximum(1.0 - u, TINY)
            return rest * interface.inverse_root(rest) if power == 2.0 else rest ** (1.0 / power)
        cosines, flux = self.law_grid
        return jnp.interp(u, jnp.asarray(flux), jnp.asarray(cosines))

    def ray(self, rho, turn, c):
        """The rays in the air of the pocket, and their weight. ``turn`` = (cos φ, sin φ)."""
        square = jnp.maximum(1.0 - c * c, TINY)
        s = square * interface.inverse_root(square)
        start = interface.Ray(rho, jnp.zeros_like(rho), s * turn[0], s * turn[1], c)
        if self.dome is None:
            return start, jnp.ones_like(c)
        radius = self.dome.radius
        b = rho * start.dr
        t = -b + jnp.sqrt(b * b + radius * radius - rho * rho)
        x, y, z = rho + t * start.dr, t * start.dt, t * c
        there = interface.ray((x, y, z), (start.dr, start.dt, c))
        out, passed = interface.refract(there, (there.r / radius, z / radius), self.dome.index, 1.0)
        return out, passed / self.transmittance

    def split(self, rho, turn, edge_radius, edge_height):
        """cos θ at which a ray from (ρ, φ) passes through the circle (edge_radius, edge_height) in the pocket."""
        if self.dome is None:
            s = rho * turn[1]
            square = jnp.maximum(edge_radius * edge_radius - s * s, TINY)  # a narrower edge is passed by no ray
            reach = square * interface.inverse_root(square) - rho * turn[0]
            return edge_height * interface.inverse_root(edge_height * edge_height + reach * reach)

        def excess(c):
            # times the sine: the height alone grows without bound near the axis, and secants crawl
            ray, _ = self.ray(rho, turn, c)
            sine = jnp.sqrt(ray.dr * ray.dr + ray.dt * ray.dt + TINY)
            return (ray.z - edge_height + intersect.to_cylinder(ray, edge_radius) * ray.dz) * sine

        zero = jnp.zeros_like(rho)
        return bracketed_root(excess, zero, zero + (1.0 - 1e-12))


def launcher(emitter: Emitter) -> Launcher:
    """Tabulate an emitter for the tracer. NumPy only; costs a few milliseconds."""
    u = np.linspace(0.0, 1.0, 2049)
    squares = emitter.radial_quantile(u) ** 2
    grid = None
    if not isinstance(emitter.law, CosinePower):
        theta = np.linspace(0.0, np.pi / 2, 8001)
        cumulative = emitter.law.cumulative(theta)
        keep = np.concatenate([[True], np.diff(cumulative) > 0])
        grid = (np.cos(theta[keep]), cumulative[keep])
    free = Launcher(emitter, squares, 1.0, grid)
    if emitter.dome is None:
        return free
    # midpoints of a regular 64³ grid: the integrand is smooth, the error is far below 1e-4
    m = (np.arange(64) + 0.5) / 64
    a, b, u = (x.ravel() for x in np.meshgrid(m, m, m))
    turn = (jnp.asarray(np.cos(np.pi * b)), jnp.asarray(np.sin(np.pi * b)))
    weight = free.ray(free.radius(jnp.asarray(a)), turn, free.cosine(jnp.asarray(u)))[1]
    return Launcher(emitter, squares, float(jnp.mean(weight)), grid)


def bracketed_root(excess, low, high):
    """c in [low, high] where the rising function ``excess`` crosses zero; the end it leans to if it does not.

    Searched without derivatives (Illinois variant of regula falsi: Dowell & Jarratt, BIT 11, 168,
    1971), then one step that carries them: value and first derivative are exact for interior
    roots; for the others the result is ``low`` or ``high`` itself.
    """
    hold = jax.lax.stop_gradient
    held = lambda c: hold(excess(c))
    lo, hi = hold(low), hold(high)
    at_lo, at_hi = jax.vmap(held)(jnp.stack([lo, hi]))
    inside, never = (at_lo < 0.0) & (at_hi > 0.0), at_hi <= 0.0

    def narrow(i, state):
        lo, hi, at_lo, at_hi, side = state
        secant = (lo * at_hi - hi * at_lo) / jnp.where(inside, at_hi - at_lo, 1.0)
        c = jnp.where(inside & (i >= HALVINGS), secant, 0.5 * (lo + hi))
        value = held(c)
        above = value > 0.0
        # Illinois: an end that has stayed twice counts half, so both ends close in
        keep_lo = jnp.where(side > 0, 0.5, 1.0) * at_lo
        keep_hi = jnp.where(side < 0, 0.5, 1.0) * at_hi
        return (
            jnp.where(above, lo, c),
            jnp.where(above, c, hi),
            jnp.where(above, keep_lo, value),
            jnp.where(above, value, keep_hi),
            jnp.where(above, 1.0, -1.0),
        )

    ends = (lo, hi, jnp.where(inside, at_lo, -1.0), jnp.where(inside, at_hi, 1.0), jnp.zeros_like(lo))
    lo, hi, at_lo, at_hi, _ = jax.lax.fori_loop(0, HALVINGS + SECANTS, narrow, ends)
    # where there is no root the unused branch must stay finite too: its gradient is multiplied by zero
    c = hold(jnp.where(inside, jnp.where(jnp.abs(at_lo) < jnp.abs(at_hi), lo, hi), 0.5 * (low + high)))
    value, slope = jax.jvp(excess, (c,), (jnp.ones_like(c),))
    slope = hold(slope)
    root = c - value / jnp.where(slope > 0.0, slope, 1.0)
    return jnp.where(inside, root, jnp.where(never, high, low))
