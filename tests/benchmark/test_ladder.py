"""How near designs come to the limit: the reference ladder, seeds by kind, and the aperture a point seed would need.

Printed and written to outputs/benchmark.json; nothing is judged.  Score = share ÷ [min(1, k²)(1 − R0)²], R0 by
Fresnel's formula for n = 1.4918 at normal incidence; the share is the verifier's, from lens.step where the [cad]
extra is installed.
"""

import json
import subprocess
import sys
import time

import pytest

from bench import BOOK, note
from inverse.refine import search
from inverse.refine.plan import Plan
from test_speed import problem

pytestmark = pytest.mark.benchmark
FACES = (1 - ((1.4918 - 1) / (1.4918 + 1)) ** 2) ** 2
LADDER = {"k070": 0.7, "k100": 1.0, "k125": 1.25, "k150": 1.5, "k200": 2.0}


@pytest.mark.parametrize("name", LADDER)
def test_the_ladder(name, tmp_path):
    """One reference case at normal effort, from command to files."""
    root, k, begun = BOOK.parents[1], LADDER[name], time.perf_counter()
    words = [sys.executable, "-m", "inverse", "design", f"configs/reference/{name}.toml", "--out", str(tmp_path), "-q"]
    done = subprocess.run(words, cwd=root, capture_output=True, text=True)
    assert done.returncode == 0, done.stdout + done.stderr
    got = json.loads((tmp_path / name / "result.json").read_text())["got"]
    best = min(1.0, k * k) * FACES
    note(
        f"ladder, k = {k:g}",
        score=got["share"] / best,
        score_se=got["share_se"] / best,
        seconds=time.perf_counter() - begun,
    )


def best_seeds(k):
    """Largest share of the unrefined single-face seeds, of points and of edge rays, over the best possible."""
    given = problem(k)
    trials = search.screen(given, Plan(exit_face="single"), 1.4918, search.Scorer(given))
    share = lambda kind: max(t.score for t in trials if (t.recipe.edge != 0.0) == (kind == "edge"))  # noqa: E731
    return share("point") / FACES, share("edge") / FACES


@pytest.mark.parametrize("k", [0.7, 1.0, 1.25, 1.5])
def test_seeds_by_kind(k):
    """Score of the best seed of each kind before any refinement, constraints counted."""
    point, edge = best_seeds(k)
    note(f"seeds, k = {k:g}", point=point, edge_ray=edge)


def test_the_aperture_a_point_seed_needs():
    """Area saved by the refined k = 1 lens against the smallest point seed with the same share (needs the ladder)."""
    book = json.loads(BOOK.read_text()) if BOOK.exists() else {}
    if "ladder, k = 1" not in book:
        pytest.skip("run the ladder first")
    wanted, low, high = book["ladder, k = 1"]["score"], 1.0, 4.0
    for _ in range(6):
        middle = 0.5 * (low + high)
        low, high = (low, middle) if best_seeds(middle)[0] >= wanted else (middle, high)
    note("footprint", point_seed_k=high, area_saved=1.0 - 1.0 / high**2)
