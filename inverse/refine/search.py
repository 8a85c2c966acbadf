"""Many cheap starts, the best few refined a little, the best of those to the end (successive halving).

Lens families differ in pocket size, foot width, edge-ray parameter, orientation of the flank's
map and exit face (one curve, or disc and ring above or below each other).  All are scored by
the tracer; the best enter a race, each in both kinds of coordinates, and in each round the better
ones go on with a narrower edge (Jamieson & Talwalkar, AISTATS 2016, for the idea).  Nothing is
tuned to a case.
"""

from dataclasses import dataclass, replace
from itertools import product

import jax
import jax.numpy as jnp
import numpy as np

from inverse.outcome import BriefError, Stop
from inverse.profile.lens import Lens
from inverse.refine import coordinates
from inverse.refine import merit as merit_of
from inverse.refine.descent import Adam, Descent
from inverse.refine.plan import Plan
from inverse.seed import flux_map
from inverse.trace import farfield

SCORE_RAYS = 4096
ROOM_FOR_ONE = 1.8  # étendue ratio from which a single exit face comes within 1 % of the limit (measured: k = 1.5)
STEP_PAYS = 0.01  # a step in the exit face must earn this much of the ceiling: it is one more edge to mould


# First step, in units of the coordinates.  Heights, on reference k = 1: a third of it ends 1.5 % lower after as
# many steps.  Tangents, on k = 1.25: 3e-3 ends alike from a good start, 6e-3 tears the lens apart.
RATES = {"heights": 3e-3, "tangents": 2e-3}


@dataclass(frozen=True)
class Round:
    keep: int  # lenses that enter
    steps: int
    softness: tuple


ROUNDS = {
    "quick": (Round(8, 100, (0.25, 0.12)), Round(2, 200, (0.12, 0.06)), Round(1, 400, (0.06, 0.03))),
    "normal": (
        Round(20, 150, (0.25, 0.12)),
        Round(6, 300, (0.12, 0.06)),
        Round(2, 600, (0.06, 0.03)),
        Round(1, 1500, (0.06, 0.02)),
    ),
    "thorough": (
        Round(48, 200, (0.25, 0.12)),
        Round(12, 500, (0.12, 0.06)),
        Round(4, 1000, (0.06, 0.03)),
        Round(2, 4000, (0.06, 0.015)),
    ),
}
RAYS = {"quick": 2048, "normal": 2048, "thorough": 4096}


@dataclass(frozen=True)
class Trial:
    """One start and how it ended."""

    recipe: flux_map.Recipe
    lens: Lens
    start: float  # score of the seed
    score: float  # score now: share over best, less violations
    rounds: int = 0
    kind: str = "heights"  # coordinates of its descent

    @property
    def words(self):
        """The family, for the table of what was tried."""
        return f"{self.recipe.words}, by {self.kind}"


@dataclass(frozen=True)
class Found:
    lens: Lens
    trials: list  # every Trial that entered a round; the chosen one first, then by score
    screened: int
    stop: Stop
    score: "Scorer"


def schedule(effort, room):
    """The rounds of a search; where there is room for every start to end near the limit, half of the starts will do."""
    rounds = ROUNDS[effort]
    if room < ROOM_FOR_ONE:
        return rounds
    fewer = [replace(r, keep=max(r.keep // 2, 1)) for r in rounds]
    return tuple(r for r in fewer[:-1] if r.keep > 1) + (fewer[-1],)


def recipes(plan: Plan, target, room=1.0):
    """The families, all of them. ``room`` is the étendue ratio: with plenty, a stepped face is not tried."""
    pockets, feet = (1.0, 1.25, 1.6, 2.1, 2.8), (1.0, 1.6, 2.6, 4.2, 7.0)
    edges = (0.0, 0.5, 1.0) if target.kind == "spot" else (0.0,)
    crossings = (False, True) if target.kind == "shape" else (False,)
    single = plan.exit_face == "single" or (plan.exit_face == "auto" and room >= ROOM_FOR_ONE)
    drops = (0.0,) if single else (-0.05, 0.05) if plan.exit_face == "stepped" else (0.0, -0.05, 0.05)
    return [flux_map.Recipe(*r) for r in product(pockets, feet, edges, crossings, drops)]


class Scorer:
    """Sharp-edged score of a lens: what decides between lenses, and the tracer's own final figure."""

    SOFTNESS = 0.01  # while searching; a hundredth of that for the final share

    def __init__(self, problem):
        self.problem = problem
        self._points = jnp.asarray(farfield.points(SCORE_RAYS, 12345))
        self._evaluate = jax.jit(
            lambda lens, shift, softness: merit_of.evaluate(
                lens, problem, farfield.shifted(self._points, shift), softness
            )
        )

    def __call__(self, lens):
        """(score, figures): minus the merit, minus what is violated in mm."""
        merit, figures = self._evaluate(lens, jnp.zeros(3), self.SOFTNESS)
        harm = float(jnp.sum(jnp.maximum(figures.violation - merit_of.SLACK, 0.0)))
        value = -float(merit) - harm
        return (value if np.isfinite(value) else -np.inf), figures

    def share(self, lens, seed, repeats=64):
        """Share in the target by the designed paths, and its standard error, from ``repeats`` random shifts."""
        shifts = np.random.default_rng(seed).random((repeats, 3))
        found = [float(self._evaluate(lens, jnp.asarray(s), 1e-4)[1].share) for s in shifts]
        return float(np.mean(found)), float(np.std(found, ddof=1) / np.sqrt(repeats))


def screen(problem, plan, index, score):
    """Build and score every recipe; best first."""
    scene, trials = problem.scene, []
    for recipe in recipes(plan, scene.target, problem.room):
        sized = replace(recipe, drop=recipe.drop * scene.box.radius)
        lens = flux_map.build(sized, scene.emitter, scene.box, index, scene.target, scene.surroundings.index)
        if lens is not None:
            value, _ = score(lens)
            trials.append(Trial(recipe, lens, value, value))
    return sorted(trials, key=lambda t: -t.score)


def _choose(trials, keep):
    """The best ``keep``, half of them from each kind of exit face while both are in the race."""
    single = [t for t in trials if not t.lens.stepped]
    stepped = [t for t in trials if t.lens.stepped]
    if not single or not stepped or keep == 1:
        return _settle(trials)[:keep] if keep == 1 else trials[:keep]
    half = max(keep // 2, 1)
    return sorted(stepped[: keep - half] + single[:half], key=lambda t: -t.score)


def _settle(trials):
    """Best first, where a stepped face must lead by STEP_PAYS to come before a single one."""
    return sorted(trials, key=lambda t: -(t.score - (STEP_PAYS if t.lens.stepped else 0.0)))


class Memory:
    """Forgets everything: the base for a memory on disk that lets a run be resumed."""

    def recall(self, job):
        """(leaves, step, finished) of a job, or None."""

    def keep(self, job, leaves, step, finished):
        """Remember the arrays of a job."""


class _Race:
    """The rounds of one search, with its engines, memory and audience."""

    def __init__(self, problem, plan, rounds, score, record, watch, memory):
        self.problem, self.plan, self.rounds, self.score = problem, plan, rounds, score
        self.record, self.watch, self.memory = record, watch, memory
        self.engines, self.done, self.running = {}, 0, None

    def engine(self, lens):
        key = tuple(leaf.shape for leaf in jax.tree_util.tree_leaves(lens))
        if key not in self.engines:
            self.engines[key] = Descent(self.problem, lens, RAYS[self.plan.effort], self.plan.seed)
        return self.engines[key]

    def run(self, trial, number, place, part):
        """One trial through one round; resumes from memory when the memory knows the job."""
        engine, job = self.engine(trial.lens), f"{number}.{place}"
        state = engine.start(trial.lens, trial.kind)
        saved = self.memory.recall(job)
        if saved is not None:
            state = engine.restore(state, saved[0], saved[1])
        self.running = (trial, engine, state)

        def note(row, state):
            self.running = (trial, engine, state)
            self.memory.keep(job, engine.leaves(state), state.step, state.step >= part.steps)
            done = self.done + row["step"]
            self.watch.step(done, f"share {row['share']:.3f}, {row['share_over_ceiling']:.1%} of the limit")
            self.record(row)

        last = number == len(self.rounds)
        stage = f"round {number}, start {place}: {trial.words}"
        method = Adam(part.steps, RATES[trial.kind], part.softness, settle=last)
        result = engine.run(state, method, stage=stage, record=note)
        value, _ = self.score(result.lens)
        self.done += part.steps
        self.running = None
        if number > 1 and value < trial.score:  # the round led nowhere better
            return replace(trial, rounds=number), result.stop
        return replace(trial, lens=result.lens, score=value, rounds=number), result.stop


def find(problem, plan: Plan, index, *, record, watch, memory=None) -> Found:
    """Search, refine, settle. ``record(row)`` sees every chunk; Ctrl-C ends with the best lens so far."""
    score = Scorer(problem)
    rounds = schedule(plan.effort, problem.room)
    race = _Race(problem, plan, rounds, score, record, watch, memory or Memory())
    watch.stage("scoring starts")
    trials = screen(problem, plan, index, score)
    if not trials:
        raise BriefError(
            [
                f"lens: got a clear radius of {problem.scene.box.radius:.4g} mm and a height of at most "
                f"{problem.scene.box.height:.4g} mm, in which pocket and walls leave no room for a flank; "
                "wanted more aperture or height, or less clearance or wall"
            ]
        )
    screened = len(trials)
    watch.note(f"{screened} starts scored, the best reaches {trials[0].score:.1%} of the limit")
    watch.stage("refining", sum(r.steps * min(r.keep, screened) for r in rounds))
    ended, finished, stop = [], [], Stop.CONVERGED
    try:
        for number, part in enumerate(rounds, start=1):
            if number == 1:
                best = _choose(trials, part.keep // len(coordinates.KINDS))
                entered = [replace(t, kind=kind) for t in best for kind in coordinates.KINDS]
            else:
                entered = _choose(trials, part.keep)
            ended += [t for t in trials if t.rounds and not any(t is e for e in entered)]
            trials, finished = entered, []
            for place, trial in enumerate(entered, start=1):
                trial, stop = race.run(trial, number, place, part)
                finished.append(trial)
            trials = sorted(finished, key=lambda t: -t.score)
    except KeyboardInterrupt:
        stop = Stop.INTERRUPTED
        untouched = [t for t in trials if (t.recipe, t.kind) not in [(f.recipe, f.kind) for f in finished]]
        if race.running is not None:
            trial, engine, state = race.running
            lens = engine.lens(state)
            finished.append(replace(trial, lens=lens, score=score(lens)[0], rounds=max(trial.rounds, 1)))
        trials = finished + [t for t in untouched if t.rounds or not finished]
    trials = _settle(trials)
    others = sorted([t for t in trials[1:] + ended if t.rounds], key=lambda t: -t.score)
    return Found(trials[0].lens, [trials[0], *others], screened, stop, score)


def forget_compiled():
    """Give back the memory of the compiled tracer (some hundreds of MB)."""
    jax.clear_caches()
