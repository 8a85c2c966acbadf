"""What the refinement makes small: one number for a spot, one for a shaped beam.

With F(θ) the share inside θ (soft edge of relative width ε in tan²θ, annealed) and E the
largest share physics allows after Fresnel losses:

    spot    −F(θ_t)/E
    shape   −S/E + w_c ⟨(F_j/S − F*_j)²⟩ + w_r ⟨((ΔF_j/S)/ΔF*_j − 1)²⟩ ,   S = F(θ_end)

The second term compares cumulative flux (a one-dimensional Wasserstein-type distance), the
third the light in each ring (ripple).  A violated limit adds the augmented-Lagrangian term
(ρ/2) max(0, g + λ/ρ)², g being the violation of a measured quantity over its scale
(Nocedal & Wright, Numerical Optimization, §17.4); it is kept out of the logged merit.
"""

from dataclasses import dataclass
from typing import NamedTuple

import jax
import jax.numpy as jnp
import numpy as np

from inverse.profile import moulding
from inverse.trace import farfield

RINGS = 16  # rings a shaped beam is compared in
SLACK = 0.003  # mm or rad·scale kept inside every limit, so that dense measures still hold
BLUR = 0.005  # soft edges of the surfaces behind the pocket, as a fraction of R per unit of softness


class Figures(NamedTuple):
    """What one evaluation shows beside the merit."""

    share: jax.Array  # () inside the target's edge, soft
    merit: jax.Array  # () without the limit terms
    measured: jax.Array  # (limits,)
    violation: jax.Array  # (limits,) scaled, positive when violated (SLACK included)
    closure: jax.Array  # () launched − (forward + lost)
    residual: jax.Array  # () mm


@dataclass(frozen=True)
class Problem:
    """The scene, its limits and the best share physics allows: what is wanted, no tuning."""

    scene: farfield.Scene
    limits: tuple  # moulding.Limit
    best_share: float  # ceiling × transmission
    room: float = 1.0  # étendue of the target over that of the source
    cumulative_weight: float = 20.0
    ripple_weight: float = 0.3

    @property
    def target(self):
        return self.scene.target

    def angles(self):
        """Angles (rad) at which the flux is compared; the last is the target's edge."""
        if self.target.kind == "spot":
            return np.array([self.target.half_angle])
        # rings of equal wanted flux would be wide in dim parts: take the mean of equal angle and equal flux
        grid = np.linspace(0.0, self.target.half_angle, 4001)
        rank = 0.5 * (self.target.cumulative(grid) + grid / grid[-1])
        return np.interp(np.linspace(0.0, 1.0, RINGS + 1)[1:], rank, grid)

    def violations(self, values):
        lower = np.array([r.lower for r in self.limits])
        upper = np.array([r.upper for r in self.limits])
        scale = np.array([r.scale for r in self.limits])
        slack = SLACK * scale + np.array([r.margin for r in self.limits])
        low = jnp.where(np.isfinite(lower), np.where(np.isfinite(lower), lower, 0.0) + slack - values, -jnp.inf)
        high = jnp.where(np.isfinite(upper), values - np.where(np.isfinite(upper), upper, 0.0) + slack, -jnp.inf)
        return jnp.maximum(low, high) / scale


def evaluate(lens, problem: Problem, u, softness):
    """Merit without limits, and the figures. ``softness`` relative width of the target's edge in tan²θ."""
    scene = problem.scene
    angles = problem.angles()
    blur = BLUR * softness * scene.box.radius
    shares, facts = farfield.flux_inside(lens, scene, u, angles, softness, blur)
    total = shares[-1]
    merit = -total / problem.best_share
    if problem.target.kind == "shape":
        wanted = jnp.asarray(problem.target.cumulative(angles))
        got = shares / total
        rings = jnp.diff(got, prepend=0.0) / jnp.diff(wanted, prepend=0.0)
        merit = merit + problem.cumulative_weight * jnp.mean((got - wanted) ** 2)
        merit = merit + problem.ripple_weight * jnp.mean((rings - 1.0) ** 2)
    values = moulding.measured(lens, scene.box, problem.limits, moulding.COARSE)
    closure = facts["launched"] - facts["forward"] - sum(facts["lost"].values())
    return merit, Figures(total, merit, values, problem.violations(values), closure, facts["residual"])


def augmented(lens, problem: Problem, u, softness, multipliers, stiffness):
    """Merit plus the augmented-Lagrangian terms, for the gradient; figures as auxiliary."""
    merit, figures = evaluate(lens, problem, u, softness)
    push = jnp.maximum(0.0, figures.violation + multipliers / stiffness)
    return merit + 0.5 * stiffness * jnp.sum(push**2), figures
