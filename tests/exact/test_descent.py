"""Descent and search: bounds kept, nothing left to chance, a stopped run carries on to the same lens."""

from dataclasses import replace

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from jax.flatten_util import ravel_pytree
from scipy.interpolate import BSpline

from inverse.outcome import Stop
from inverse.profile import bspline, moulding
from inverse.profile.lens import section, shape
from inverse.progress import Watcher
from inverse.refine import coordinates, search
from inverse.refine.descent import Adam, Descent
from inverse.refine.plan import Plan
from inverse.refine.search import Memory, Trial
from inverse.seed import flux_map
from traced import BARE, BOX, PMMA, problem, random_lens, seed_lens

METHOD = Adam(100, rate=1e-3, softness=(0.25, 0.1))


class Kept(Memory):
    """Remembers in a dictionary."""

    def __init__(self, jobs=None):
        self.jobs = jobs or {}

    def recall(self, job):
        return self.jobs.get(job)

    def keep(self, job, leaves, step, finished):
        self.jobs[job] = ([np.array(a) for a in leaves], step, finished)


@pytest.fixture(scope="module")
def engine():
    """One compiled descent for all tests below: few rays, they need not find a good lens."""
    return Descent(problem(), seed_lens(), 256, seed=3)


@pytest.fixture(scope="module")
def finished(engine):
    """A whole short run, its rows and its states."""
    rows, states = [], []
    result = engine.run(engine.start(seed_lens()), METHOD, record=lambda row, s: (rows.append(row), states.append(s)))
    return result, rows, states


def same(a, b):
    leaves = [jax.tree_util.tree_leaves(x) for x in (a, b)]
    return all(np.array_equal(x, y) for x, y in zip(*leaves, strict=True))


def test_a_short_run_improves_the_lens(finished):
    """The merit falls from the first chunk to the last, and every logged figure is finite."""
    _, rows, _ = finished
    assert [r["step"] for r in rows] == [50, 100]
    assert rows[-1]["merit"] < rows[0]["merit"]
    assert all(np.isfinite(v) for r in rows for v in r.values() if isinstance(v, float))


def test_every_chunk_draws_new_shifts(engine, finished):
    """The key moves on with the state: no step meets the points of an earlier one."""
    keys = [engine.start(seed_lens()).key, *(s.key for s in finished[2])]
    assert len({tuple(np.asarray(k).tolist()) for k in keys}) == 3


def test_the_log_shows_every_limit(finished):
    """One column a constraint, named as the moulder names it."""
    assert {r.name for r in moulding.limits(BOX, BARE)} <= set(finished[1][0])


def test_simple_bounds_hold_whatever_the_step(engine):
    """Steps five times too large throw every number about; drafts and foot still end inside the envelope's."""
    state = engine.start(seed_lens())
    result = engine.run(state, Adam(50, rate=0.005, settle=False))
    assert result.state.step == 50 and not same(result.lens, seed_lens())
    assert float(result.lens.wall.min()) >= np.tan(BOX.draft) and float(result.lens.foot) >= BOX.wall
    start = engine.start(replace(seed_lens(), foot=jnp.asarray(0.1), wall=0.0 * seed_lens().wall))
    lens = engine.lens(start)
    assert float(lens.wall.min()) >= np.tan(BOX.draft) and float(lens.foot) >= BOX.wall


def test_the_same_seed_gives_the_same_lens_bit_for_bit(engine, finished):
    """Twice the same run."""
    again = engine.run(engine.start(seed_lens()), METHOD)
    assert same(again.lens, finished[0].lens)


def test_a_resumed_run_ends_at_the_same_lens_bit_for_bit(engine, finished):
    """Stopped after one chunk, saved as plain arrays, restored, carried on."""
    middle = finished[2][0]
    saved = [np.array(a) for a in engine.leaves(middle)]
    state = engine.restore(engine.start(seed_lens()), saved, middle.step)
    assert state.step == 50
    assert same(engine.run(state, METHOD).lens, finished[0].lens)


def test_arrays_of_another_lens_are_refused(engine):
    """A saved state with other shapes: a ValueError, no guess."""
    state = engine.start(seed_lens())
    leaves = engine.leaves(state)
    with pytest.raises(ValueError, match="another lens"):
        engine.restore(state, [leaves[0][:-1], *leaves[1:]], 50)


def test_a_value_that_is_no_number_stops_the_run_at_the_last_good_lens(engine):
    """A NaN in the lens: NOT_FINITE, and the state is the one before."""
    bad = replace(seed_lens(), flank=seed_lens().flank.at[3].set(np.nan))
    state = engine.start(bad)
    result = engine.run(state, METHOD)
    assert result.stop is Stop.NOT_FINITE and result.state is state


@pytest.fixture(scope="module")
def scorer():
    """One compiled score, on few points."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(search, "SCORE_RAYS", 256)
        return search.Scorer(problem())


@pytest.fixture
def find(monkeypatch, engine, scorer):
    """A whole search cut down to three seeds, one start in both coordinates of 50 steps and one of 100, with 256 rays."""
    rounds = (search.Round(2, 50, (0.25, 0.2)), search.Round(1, 100, (0.2, 0.1)))
    seeds = [flux_map.Recipe(1.6, 1.6, 0.5), flux_map.Recipe(1.6, 2.6, 0.0), flux_map.Recipe(1.25, 1.6, 0.0)]
    monkeypatch.setattr(search, "ROUNDS", {"quick": rounds})
    monkeypatch.setattr(search, "recipes", lambda *_: seeds)
    monkeypatch.setattr(search, "Descent", lambda *_: engine)  # they are all of one shape: compile it once
    monkeypatch.setattr(search, "Scorer", lambda _: scorer)

    def run(memory, record=lambda row: None):
        return search.find(problem(), Plan("quick"), PMMA, record=record, watch=Watcher(), memory=memory)

    return run


def test_an_interrupted_search_resumed_finds_the_same_lens_bit_for_bit(find):
    """Ctrl-C in the second round; the memory of what was done leads to the lens of the whole run."""
    whole = find(Kept())
    assert whole.stop is not Stop.INTERRUPTED and whole.screened == 3
    jobs, rows = Kept(), []

    def interrupt(row):
        rows.append(row)
        if len(rows) == 3:  # the second start has run, the last round is half done
            raise KeyboardInterrupt

    cut = find(jobs, interrupt)
    assert cut.stop is Stop.INTERRUPTED
    assert np.isfinite(cut.trials[0].score) and section(cut.lens, BOX).volume > 0.0
    more = []
    resumed = find(Kept(jobs.jobs), more.append)
    assert len(more) == 1  # only what was left: the last 50 steps
    assert same(resumed.lens, whole.lens)


def trial(score, stepped=False):
    return Trial(None, seed_lens(drop=-0.5 if stepped else 0.0), score, score, 1)


def test_settling_asks_a_step_to_pay():
    """A stepped lens must lead by STEP_PAYS to come first."""
    near, far, plain = trial(0.909, True), trial(0.911, True), trial(0.9)
    assert search._settle([near, plain])[0] is plain
    assert search._settle([plain, far])[0] is far


def test_both_kinds_of_exit_face_stay_in_the_race():
    """While more than one goes on, half are of the kind that is behind; the last place is settled."""
    trials = [trial(0.9 - i / 100, stepped=True) for i in range(4)] + [trial(0.5), trial(0.4)]
    chosen = search._choose(trials, 4)
    assert [t.lens.stepped for t in chosen] == [True, True, False, False]
    assert [t.score for t in chosen] == sorted((t.score for t in chosen), reverse=True)
    assert search._choose(trials, 1) == trials[:1]
    assert search._choose(trials[:4], 2) == trials[:2]


@pytest.mark.parametrize("kind", coordinates.KINDS)
@pytest.mark.parametrize("drop", [None, -0.6])
def test_the_descent_begins_at_its_lens(drop, kind):
    """origin + basis · 0 is the lens; walls, foot and corner are coordinates by themselves."""
    lens = random_lens(8, drop)
    basis = coordinates.KINDS[kind](lens, BOX.radius)
    numbers, unravel = ravel_pytree(lens)
    assert basis.shape == (numbers.size, numbers.size)
    assert same(unravel(numbers + basis @ np.zeros(numbers.size)), lens)
    alone = unravel(jnp.asarray(np.count_nonzero(basis, axis=1)))
    assert np.all(alone.corner == 1) and alone.foot == 1 and np.all(alone.wall == 1)


# the axis is level: its two control points are one number, so number 2 is control point 3
@pytest.mark.parametrize("number, points", [(0, [0, 1]), (2, [3])])
@pytest.mark.parametrize("drop", [None, -0.6])
def test_heights_move_the_curve_of_the_coarse_knots(drop, number, points):
    """A step along a coarse height changes the centre lens by that coarse spline, the rest of the lens not."""
    lens = random_lens(8, drop)
    basis = coordinates.heights(lens, 1.0)
    numbers, unravel = ravel_pytree(lens)
    first = 2 + 1 + lens.wall.size  # corner, foot, wall come before the centre lens
    moved = unravel(numbers + basis[:, first + number])
    r = np.linspace(0.0, float(lens.corner[0]), 101)
    change = np.asarray(shape(moved, BOX).centre.at(r)[0] - shape(lens, BOX).centre.at(r)[0])
    coarse = np.zeros(coordinates.COARSE["centre"] + 3)
    coarse[points] = 1.0
    wanted = BSpline(bspline.knots(coordinates.COARSE["centre"]), coarse, 3)(np.clip(r / r[-1], 0.0, 1.0))
    np.testing.assert_allclose(change, wanted, atol=1e-9)
    assert same(replace(moved, centre=lens.centre), lens)


@pytest.mark.parametrize("drop", [None, -0.6])
def test_tangents_tilt_one_piece_and_span_everything(drop):
    """The matrix is regular, and a tangent of the exit face tilts its control polygon in one place only."""
    lens = random_lens(8, drop)
    basis = coordinates.tangents(lens, BOX.radius)
    assert np.linalg.matrix_rank(basis) == len(basis)
    numbers, unravel = ravel_pytree(lens)
    first = 2 + 1 + lens.wall.size + lens.centre.size + lens.flank.size
    change = np.asarray(unravel(numbers + basis[:, first + 4]).exit - lens.exit)
    assert np.count_nonzero(np.abs(np.diff(change)) > 1e-12) == 1 and change[-1] == 0.0


def test_seeds_are_scored_best_first(monkeypatch):
    """Every family member that exists in the box, sorted by score."""
    score = lambda lens: (float(jnp.sum(lens.flank)), None)  # noqa: E731
    found = search.screen(problem(), Plan("quick", exit_face="single"), PMMA, score)
    scores = [t.score for t in found]
    assert len(found) > 10 and scores == sorted(scores, reverse=True)
    assert not any(t.lens.stepped for t in found)


def test_with_room_half_of_the_starts_will_do():
    """Below ROOM_FOR_ONE every round; above it half of each, never none, and no round for the only one left but the last."""
    full = search.schedule("normal", 1.0)
    assert full == search.ROUNDS["normal"]
    fewer = search.schedule("normal", search.ROOM_FOR_ONE)
    assert [r.keep for r in fewer] == [r.keep // 2 for r in full if r.keep // 2 > 1] + [1]
    assert fewer[-1].steps == full[-1].steps
