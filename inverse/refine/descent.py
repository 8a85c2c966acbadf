"""Stochastic descent of the merit under limits: Adam, a fresh shift of one point set a step.

Lengths are divided by the clear radius, so a step size means the same for every lens.  The
step follows a cosine to zero, gradients are clipped, the target's edge narrows geometrically,
and after every chunk of steps the multipliers of the limits are updated.  Drafts and the foot
have simple bounds, held by projection.
"""

import time
from dataclasses import dataclass, replace
from typing import NamedTuple

import jax
import jax.numpy as jnp
import numpy as np
import optax
from jax.flatten_util import ravel_pytree

from inverse.outcome import Stop
from inverse.profile.lens import Lens
from inverse.refine import merit as merit_of
from inverse.trace import farfield

TANGENT = 10.0  # a pocket wall may lean 10 rad/R faster than a length moves (tuned on reference k = 1: +0.3 %)
STILL_FALLING = 2e-3  # merit gained over the last eighth of the steps: not converged yet
CHUNK = 50  # steps between looks at the clock, the log and the multipliers


@dataclass(frozen=True)
class Adam:
    """Tuning only. ``rate`` is the first step size over the clear radius (20 µm at R = 10 mm)."""

    steps: int
    rate: float = 2e-3
    softness: tuple = (0.25, 0.02)  # first and last relative edge width
    stiffness: float = 10.0  # per mm² of violation
    settle: bool = True  # let the step size fall to zero at the end; otherwise to a half


class State(NamedTuple):
    """What one chunk hands to the next; plain arrays, so it can be saved and resumed."""

    x: jax.Array
    moments: tuple
    key: jax.Array
    multipliers: jax.Array
    step: int


class Result(NamedTuple):
    lens: Lens
    state: State
    stop: Stop
    figures: merit_of.Figures


def _scales(lens: Lens, radius):
    """What one unit of every free number means: the radius for lengths, ``TANGENT`` for draft tangents."""
    ones = jax.tree_util.tree_map(lambda a: jnp.full_like(a, radius), lens)
    return ravel_pytree(replace(ones, wall=jnp.full_like(lens.wall, TANGENT)))[0]


def _lower(lens: Lens, box):
    low = jax.tree_util.tree_map(lambda a: jnp.full_like(a, -jnp.inf), lens)
    least = box.wall / np.cos(box.draft)
    low = replace(low, foot=jnp.asarray(least), wall=jnp.full_like(lens.wall, np.tan(box.draft) * (1 + 1e-6)))
    if lens.stepped:
        low = replace(low, step=jnp.asarray(0.12 * box.radius))
    return ravel_pytree(low)[0]


class Descent:
    """Compiled once per lens structure and ray count; runs any number of lenses and schedules."""

    def __init__(self, problem: merit_of.Problem, template: Lens, rays: int, seed: int):
        self.problem, self.rays, self.seed = problem, rays, seed
        self._unravel = ravel_pytree(template)[1]
        self._scale = _scales(template, problem.scene.box.radius)
        self._low = _lower(template, problem.scene.box) / self._scale
        self._points = jnp.asarray(farfield.points(rays, seed))
        self._optimiser = optax.chain(optax.clip_by_global_norm(10.0), optax.scale_by_adam())
        self._chunk = jax.jit(self._run_chunk)

    def lens(self, x) -> Lens:
        return self._unravel(x * self._scale)

    def leaves(self, state: State):
        """The state as a list of plain arrays, for a memory on disk."""
        return [np.asarray(a) for a in jax.tree_util.tree_leaves(state[:4])]

    def restore(self, like: State, leaves, step) -> State:
        """The state of ``leaves``; ``like`` is a fresh one. ValueError when the arrays do not fit."""
        old, tree = jax.tree_util.tree_flatten(like[:4])
        if [np.shape(a) for a in old] != [np.shape(a) for a in leaves]:
            raise ValueError("the saved state belongs to another lens")
        restored = [jnp.asarray(a, dtype=b.dtype) for a, b in zip(leaves, old)]
        return State(*jax.tree_util.tree_unflatten(tree, restored), int(step))

    def start(self, lens: Lens) -> State:
        x = jnp.maximum(ravel_pytree(lens)[0] / self._scale, self._low)
        moments = self._optimiser.init(x)
        return State(x, moments, jax.random.PRNGKey(self.seed), jnp.zeros(len(self.problem.limits)), 0)

    def _run_chunk(self, x, moments, key, multipliers, step, total, rate, floor, soft0, soft1, stiffness):
        problem = self.problem

        def loss(x, shift, softness):
            u = farfield.shifted(self._points, shift)
            return merit_of.augmented(self.lens(x), problem, u, softness, multipliers, stiffness)

        def body(carry, i):
            x, moments, key = carry
            done = (step + i) / total
            softness = soft0 * (soft1 / soft0) ** done
            key, draw = jax.random.split(key)
            (_, figures), slope = jax.value_and_grad(loss, has_aux=True)(x, jax.random.uniform(draw, (3,)), softness)
            with jax.numpy_dtype_promotion("standard"):
                update, moments = self._optimiser.update(slope, moments, x)
            pace = rate * (floor + (1.0 - floor) * 0.5 * (1.0 + jnp.cos(jnp.pi * done)))
            x = jnp.maximum(x - pace * update, self._low)
            return (x, moments, key), (figures, jnp.linalg.norm(slope))

        (x, moments, key), (figures, norms) = jax.lax.scan(body, (x, moments, key), jnp.arange(CHUNK))
        mean = jax.tree_util.tree_map(lambda a: jnp.mean(a, axis=0), figures)
        last = figures.violation[-1]
        multipliers = jnp.maximum(0.0, multipliers + stiffness * last)
        worst = mean._replace(
            closure=jnp.max(jnp.abs(figures.closure)),
            residual=jnp.max(figures.residual),
            measured=figures.measured[-1],
            violation=last,
        )
        return x, moments, key, multipliers, worst, norms[-1]

    def run(self, state: State, method: Adam, *, stage="", record=None) -> Result:
        """Carry ``state`` to the end of ``method``; ``record(row, state)`` sees every chunk."""
        figures, history, begun = None, [], time.monotonic()
        while state.step < method.steps:
            x, moments, key, multipliers, figures, norm = self._chunk(
                state.x,
                state.moments,
                state.key,
                state.multipliers,
                jnp.asarray(float(state.step)),
                float(method.steps),
                method.rate,
                0.0 if method.settle else 0.5,
                *method.softness,
                method.stiffness,
            )
            if not bool(jnp.all(jnp.isfinite(x))):
                return Result(self.lens(state.x), state, Stop.NOT_FINITE, figures)
            state = State(x, moments, key, multipliers, state.step + CHUNK)
            history.append(float(figures.merit))
            if record is not None:
                record(self._row(stage, state, figures, norm, time.monotonic() - begun), state)
        settled = len(history) < 8 or history[-1 - len(history) // 8] - history[-1] < STILL_FALLING
        return Result(self.lens(state.x), state, Stop.CONVERGED if settled else Stop.STEPS_EXHAUSTED, figures)

    def _row(self, stage, state, figures, norm, seconds):
        row = {
            "stage": stage,
            "step": state.step,
            "merit": float(figures.merit),
            "share": float(figures.share),
            "share_over_ceiling": float(figures.share) / self.problem.best_share,
        }
        row |= {limit.name: float(v) for limit, v in zip(self.problem.limits, figures.measured)}
        row |= {
            "gradient_norm": float(norm),
            "ledger_error": float(figures.closure),
            "rays": 3 * self.rays * CHUNK,
            "seconds": seconds,
        }
        return row
