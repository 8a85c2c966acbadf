"""Stochastic descent of the merit under limits: Adam, a fresh shift of one point set a step.

Lengths are divided by the clear radius, so a step size means the same for every lens.  The
step follows a cosine to zero, gradients are clipped, the target's edge narrows geometrically,
and after every chunk of steps the multipliers of the limits are updated.  Drafts, the foot and the
corner have simple bounds, held by projection.  A step whose gradient is not finite is not taken.
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
from inverse.refine import coordinates
from inverse.refine import merit as merit_of
from inverse.trace import farfield

STILL_FALLING = 2e-3  # merit gained over the last eighth of the steps: not converged yet
CORNER = 0.3  # least corner radius and height over the least pocket radius: below, there is no pocket left
WARM = 100  # steps until the first full step: at first Adam moves every number by the same amount
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
    origin: jax.Array  # (n,) the lens it began with
    basis: jax.Array  # (n, n) its numbers are origin + basis · x
    step: int


class Result(NamedTuple):
    lens: Lens
    state: State
    stop: Stop
    figures: merit_of.Figures


def _lower(lens: Lens, box, pocket):
    """Least value of every number; ``pocket`` is the least radius of the pocket (mm)."""
    low = jax.tree_util.tree_map(lambda a: jnp.full_like(a, -jnp.inf), lens)
    least = box.wall / np.cos(box.draft)
    steepest = np.tan(box.draft) * (1 + 1e-6)
    low = replace(
        low,
        corner=jnp.full(2, CORNER * pocket),
        foot=jnp.asarray(least),
        wall=jnp.full_like(lens.wall, steepest),
    )
    if lens.stepped:
        low = replace(low, step=jnp.asarray(0.12 * box.radius))
    return ravel_pytree(low)[0]


class Descent:
    """Compiled once per lens structure and ray count; runs any number of lenses and schedules."""

    def __init__(self, problem: merit_of.Problem, template: Lens, rays: int, seed: int):
        self.problem, self.rays, self.seed = problem, rays, seed
        self._unravel = ravel_pytree(template)[1]
        box = problem.scene.box
        self._low = _lower(template, box, problem.scene.emitter.keep_out + box.clearance)
        self._points = jnp.asarray(farfield.points(rays, seed))
        self._optimiser = optax.chain(optax.clip_by_global_norm(10.0), optax.scale_by_adam())
        self._chunk = jax.jit(self._run_chunk)

    def lens(self, state: State) -> Lens:
        return self._unravel(state.origin + state.basis @ state.x)

    def leaves(self, state: State):
        """The state as a list of plain arrays, for a memory on disk."""
        return [np.asarray(a) for a in jax.tree_util.tree_leaves(state[:-1])]

    def restore(self, like: State, leaves, step) -> State:
        """The state of ``leaves``; ``like`` is a fresh one. ValueError when the arrays do not fit."""
        old, tree = jax.tree_util.tree_flatten(like[:-1])
        if [np.shape(a) for a in old] != [np.shape(a) for a in leaves]:
            raise ValueError("the saved state belongs to another lens")
        restored = [jnp.asarray(a, dtype=b.dtype) for a, b in zip(leaves, old)]
        return State(*jax.tree_util.tree_unflatten(tree, restored), int(step))

    def start(self, lens: Lens, kind="heights") -> State:
        """Before the first step, in the coordinates ``kind`` (``coordinates.KINDS``)."""
        origin = jnp.maximum(ravel_pytree(lens)[0], self._low)
        basis = jnp.asarray(coordinates.KINDS[kind](lens, self.problem.scene.box.radius))
        x = jnp.zeros_like(origin)
        none = jnp.zeros(len(self.problem.limits))
        return State(x, self._optimiser.init(x), jax.random.PRNGKey(self.seed), none, origin, basis, 0)

    def _run_chunk(
        self, x, moments, key, multipliers, origin, basis, step, total, rate, floor, soft0, soft1, stiffness
    ):
        bounded = jnp.isfinite(self._low)  # such a number is a coordinate by itself
        low = jnp.where(bounded, (self._low - origin) / jnp.where(bounded, jnp.diag(basis), 1.0), -jnp.inf)

        def loss(x, shift, softness):
            u = farfield.shifted(self._points, shift)
            lens = self._unravel(origin + basis @ x)
            return merit_of.augmented(lens, self.problem, u, softness, multipliers, stiffness)

        def body(carry, i):
            x, moments, key = carry
            done = (step + i) / total
            softness = soft0 * (soft1 / soft0) ** done
            key, draw = jax.random.split(key)
            shift = jax.random.uniform(draw, (3,))
            (value, figures), slope = jax.value_and_grad(loss, has_aux=True)(x, shift, softness)
            with jax.numpy_dtype_promotion("standard"):
                update, moments = self._optimiser.update(slope, moments, x)
            pace = rate * (floor + (1.0 - floor) * 0.5 * (1.0 + jnp.cos(jnp.pi * done)))
            pace = pace * jnp.minimum(1.0, (step + i + 1.0) / WARM)
            fine = jnp.isfinite(value) & jnp.all(jnp.isfinite(slope))
            new = (jnp.maximum(x - pace * update, low), moments)
            x, moments = jax.tree_util.tree_map(lambda a, b: jnp.where(fine, a, b), new, (x, carry[1]))
            return (x, moments, key), (figures, jnp.linalg.norm(slope), fine)

        (x, moments, key), (figures, norms, fine) = jax.lax.scan(body, (x, moments, key), jnp.arange(CHUNK))
        first = jnp.argmax(fine)  # stands in for the steps not taken
        taken = lambda a: jnp.where(fine.reshape(-1, *[1] * (a.ndim - 1)), a, a[first])
        figures, norms = jax.tree_util.tree_map(taken, (figures, norms))
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
                state.origin,
                state.basis,
                jnp.asarray(float(state.step)),
                float(method.steps),
                method.rate,
                0.0 if method.settle else 0.5,
                *method.softness,
                method.stiffness,
            )
            if not np.isfinite(float(figures.merit)):  # not one step of the chunk could be taken
                return Result(self.lens(state), state, Stop.NOT_FINITE, figures)
            state = State(x, moments, key, multipliers, state.origin, state.basis, state.step + CHUNK)
            history.append(float(figures.merit))
            if record is not None:
                record(self._row(stage, state, figures, norm, time.monotonic() - begun), state)
        settled = len(history) < 8 or history[-1 - len(history) // 8] - history[-1] < STILL_FALLING
        return Result(self.lens(state), state, Stop.CONVERGED if settled else Stop.STEPS_EXHAUSTED, figures)

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
