"""The whole job through the command line, on every config: exit code, files, agreement, limits, constraints.

Quick effort, to keep the default run short; the full effort and the reference ladder carry the
marker `slow`.
"""

import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from inverse.export import lens_json
from inverse.profile import gauge

ROOT = Path(__file__).parents[2]
CONFIGS = ("inspection_spot", "vehicle_lamp", "wide_beam")
FILES = (
    "brief.toml log.csv lens.json profile.csv lens.dxf beam.ies beam.ldt result.json report.html "
    "section.png beam.png encircled.png spot.png convergence.png"
).split()


def command(*words, folder):
    """`python -m inverse …`, as a person would run it, with the compile cache shared by this test run."""
    env = os.environ | {"JAX_PLATFORMS": "cpu"}
    return subprocess.run(
        [sys.executable, "-m", "inverse", *map(str, words)], cwd=folder, env=env, capture_output=True, text=True
    )


@pytest.fixture(scope="module")
def runs(tmp_path_factory):
    """{name: (completed process, folder)}; each config is designed once."""
    made, out = {}, tmp_path_factory.mktemp("outputs")

    def run(name, effort="quick"):
        key = (name, effort)
        if key not in made:
            place = out / effort
            done = command("design", ROOT / "configs" / f"{name}.toml", "--out", place, "--effort", effort, folder=out)
            made[key] = done, place / Path(name).name
        return made[key]

    return run


def result(folder):
    return json.loads((folder / "result.json").read_text("utf-8"))


@pytest.mark.parametrize("name", CONFIGS)
def test_a_config_runs_to_a_verified_lens(runs, name):
    """Exit 0, every file there, tracer and verifier agree, nothing above the limit, no constraint violated."""
    done, folder = runs(name)
    assert done.returncode == 0, done.stdout + done.stderr
    assert [f for f in FILES if not (folder / f).is_file()] == []
    found = result(folder)
    assert found["agreement"]["agrees"]
    assert found["got"]["share"] <= found["limit"]["ceiling"] + 4 * found["got"]["share_se"]
    assert found["got"]["share"] >= found["asked"]["share"]
    assert [c["name"] for c in found["constraints"] if not c["met"]] == []
    assert abs(sum(found["ledger"].values()) - 1.0) < 1e-9  # rounding of a million weights
    assert found["ledger"]["lost numerically"] <= 1e-5


@pytest.mark.parametrize("name", CONFIGS)
def test_the_log_shows_every_constraint_and_a_closed_ledger(runs, name):
    """Each row of log.csv has a column a constraint, and the ledger closes at every logged step."""
    from inverse.run import read_log

    _, folder = runs(name)
    rows = read_log(folder / "log.csv")
    assert len(rows) >= 10
    named = {c["name"] for c in result(folder)["constraints"]} - {"rim draft", "step draft", "flange draft"}
    assert named - set(rows[0]) <= {"greatest thickness"}  # only a column when the brief limits it
    assert max(abs(r["ledger_error"]) for r in rows) < 1e-9  # rounding
    best = result(folder)["limit"]["ceiling_with_losses"]
    assert max(r["share"] for r in rows) <= best * 1.01  # a soft edge lets in 1 % at most


def test_verify_reads_the_files_back_and_agrees(runs):
    """`inverse verify` traces the written lens again and finds the same share within error bars."""
    _, folder = runs("inspection_spot")
    before = result(folder)["got"]
    done = command("verify", folder, "--rays", "300000", "--json", folder=folder)
    assert done.returncode == 0, done.stdout + done.stderr
    after = json.loads(done.stdout)["got"]
    error = np.hypot(before["share_se"], after["share_se"])
    assert abs(before["share"] - after["share"]) < 4 * error


def test_the_wrong_index_is_found_out(runs, tmp_path):
    """The control: the verifier with a 1 % wrong index must disagree with the tracer of the run."""
    from inverse import brief
    from inverse.verify import Points, compare, fly

    _, folder = runs("vehicle_lamp")
    wanted, found = brief.read(folder / "brief.toml"), result(folder)
    points = Points.read(folder / "profile.csv")
    tracer = found["got"]["tracer_share"], found["got"]["tracer_share_se"]
    args = points, wanted.emitter
    rest = wanted.absorption, wanted.surroundings, wanted.target, 100_000, 7
    assert compare(*tracer, fly(*args, wanted.index, *rest)).agrees
    assert not compare(*tracer, fly(*args, 1.01 * wanted.index, *rest)).agrees


@pytest.mark.parametrize("name", CONFIGS)
def test_the_constraints_hold_on_the_lens_read_back(runs, name):
    """Measured again on lens.json, every moulding rule of the brief holds."""
    from inverse import brief

    _, folder = runs(name)
    wanted = brief.read(folder / "brief.toml")
    section, extra = lens_json.read(folder / "lens.json")
    from dataclasses import replace

    box = replace(wanted.envelope, radius=extra["run"]["radius_mm"])
    assert [r.name for r in gauge.readings(section, box, wanted.emitter) if not r.met] == []


def test_an_impossible_brief_is_refused_before_any_work(tmp_path):
    """Exit 3, with the smallest lens and the narrowest beam in the message, and no folder left behind."""
    text = (ROOT / "configs" / "reference" / "k070.toml").read_text("utf-8")
    brief = tmp_path / "tight.toml"
    brief.write_text(text.replace("[target]", "[target]\nshare = 0.9"), "utf-8")
    done = command("design", brief, "--out", tmp_path / "out", folder=tmp_path)
    assert done.returncode == 3
    assert "mm clear diameter" in done.stderr and "half-angle" in done.stderr
    assert not list((tmp_path / "out").glob("*/*"))


@pytest.mark.external
def test_the_solid_is_one_valid_body_with_a_face_a_curve(runs):
    """lens.step re-read: one valid solid, as many faces as curves, volume of the profile to 1e-6."""
    pytest.importorskip("OCP")
    from inverse.export import step

    _, folder = runs("inspection_spot")
    section, _ = lens_json.read(folder / "lens.json")
    facts = step.read(folder / "lens.step")
    assert facts.solids == 1 and facts.valid
    assert len(facts.faces) == len(section.curves)
    assert abs(facts.volume / section.volume - 1) < 1e-6


@pytest.mark.slow
@pytest.mark.parametrize(("k", "least"), [(0.7, 0.94), (1.0, 0.85), (1.25, 0.978), (1.5, 0.995), (2.0, 0.997)])
def test_the_reference_lenses_come_near_the_limit(runs, k, least):
    """Share over min(1, k²)(1 − R0)² at full effort; R0 by Fresnel's formula for n = 1.4918 at normal incidence."""
    done, folder = runs(f"reference/k{100 * k:03.0f}", "normal")
    assert done.returncode == 0, done.stdout + done.stderr
    r0 = ((1.4918 - 1) / (1.4918 + 1)) ** 2
    assert result(folder)["got"]["share"] / (min(1.0, k * k) * (1 - r0) ** 2) >= least
