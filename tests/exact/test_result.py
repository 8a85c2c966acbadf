"""The verdict: which exit code, which word, which sentences, from what was found."""

from types import SimpleNamespace
import copy
import math

import numpy as np
import pytest

from inverse import result
from inverse.outcome import Exit, Stop
from inverse.target import Target
from inverse.verify import Beam

GOOD = {
    "got": {"share": 0.81, "share_se": 0.001},
    "asked": {"share": 0.8},
    "agreement": {"agrees": True, "difference": 1e-4, "deviations": 0.3},
    "constraints": [
        {"name": "rim thickness", "unit": "mm", "measured": 0.6, "lower": 0.5, "upper": None, "slack": 0.1, "met": True,
         "where": "rim"},
    ],
    "files": ["lens.json", "lens.step"],
    "notes": [],
}  # fmt: skip


def found(**changes):
    """The good result with nested changes, as in got__share=0.7."""
    block = copy.deepcopy(GOOD)
    for key, value in changes.items():
        *path, last = key.split("__")
        place = block
        for part in path:
            place = place[part]
        place[last] = value
    return block


def verdict(stop=Stop.CONVERGED, holds=True, **changes):
    answer = result.verdict(found(**changes), stop, holds)
    return answer["exit_code"], answer["missing"]


@pytest.mark.parametrize("stop", [Stop.CONVERGED, Stop.STEPS_EXHAUSTED])
def test_all_met_is_done(stop):
    """Share reached, limits met, roads agree: 0, nothing missing; running out of steps is no failure by itself."""
    assert verdict(stop) == (Exit.DONE, [])
    assert verdict(stop, asked__share=None, got__share=0.1) == (Exit.DONE, [])


def test_a_share_within_its_error_is_met():
    """Two standard errors short still counts; more does not."""
    assert verdict(got__share=0.7985)[0] == Exit.DONE
    code, missing = verdict(got__share=0.7975)
    assert code == Exit.MISSED and len(missing) == 1 and "79.75%" in missing[0] and "0.8" in missing[0]


def test_a_broken_limit_is_missed_and_named():
    """Name, value, bound, by how much and where."""
    row = GOOD["constraints"][0] | {"measured": 0.45, "slack": -0.05, "met": False}
    code, (sentence,) = verdict(constraints=[row])
    assert code == Exit.MISSED
    for part in ("rim thickness", "0.450 mm", "0.500", "off by 0.050 mm", "rim"):
        assert part in sentence


def test_a_broken_upper_limit_names_the_upper_bound():
    """A height with no lower bound."""
    row = {"name": "part height", "unit": "mm", "measured": 14.2, "lower": None, "upper": 14.0, "slack": -0.2,
           "met": False, "where": "top"}  # fmt: skip
    code, (sentence,) = verdict(constraints=[row])
    assert code == Exit.MISSED and "wanted 14.000" in sentence


@pytest.mark.parametrize("changes", [
    {"asked__original": {"half_angle_deg": 3.0, "share": 0.9}},
    {"got__shape_deviation": 0.2},
    {"notes": ["lens.step was not written: no sound solid"]},
], ids=["nearest possible", "wrong shape", "no solid"])  # fmt: skip
def test_other_things_that_are_missed(changes):
    """The nearest possible beam, a beam of another shape, a section that is no solid: 4, one sentence."""
    code, missing = verdict(**changes)
    assert code == Exit.MISSED and len(missing) == 1


def test_a_shape_that_fits_is_met():
    """A small deviation is no fault."""
    assert verdict(got__shape_deviation=0.05) == (Exit.DONE, [])


def test_roads_that_disagree_end_it():
    """5 comes before everything else, and its sentence first."""
    code, missing = verdict(agreement={"agrees": False, "difference": 0.012, "deviations": 9.1}, got__share=0.5)
    assert code == Exit.DISAGREEMENT and len(missing) == 2
    assert "+0.01200" in missing[0] and "9.1 standard errors" in missing[0]


def test_a_share_above_the_limit_is_a_defect():
    """5 as well, even when the roads agree."""
    code, missing = verdict(holds=False)
    assert code == Exit.DISAGREEMENT and "exceeds" in missing[0]


@pytest.mark.parametrize("changes, code", [
    ({}, Exit.INTERRUPTED), ({"got__share": 0.5}, Exit.INTERRUPTED),
    ({"agreement": {"agrees": False, "difference": 0.1, "deviations": 9.0}}, Exit.DISAGREEMENT),
], ids=["met", "missed", "disagreeing"])  # fmt: skip
def test_an_interrupted_run_says_so_unless_it_is_worse(changes, code):
    """130 for a lens written early, met or not; a disagreement outweighs it."""
    assert verdict(Stop.INTERRUPTED, **changes)[0] == code


def beam(candela, half_angle=0.2, rings=40):
    edges = np.linspace(0.0, 2.0 * half_angle, rings + 1)
    middle = Beam(edges, np.zeros(rings), np.zeros(rings)).angle
    return Beam(edges, candela(middle), np.zeros(rings))


CONE = Target("shape", 0.2, angles=np.array([0.0, 0.2]), intensity=np.array([1.0, 1.0]))


def test_wanted_candela_of_a_uniform_cone():
    """I = Φ/(2π (1 − cos a)) inside, nothing outside."""
    inside, outside = result.wanted_candela(CONE, np.array([0.1, 0.3]), 50.0)
    assert inside == pytest.approx(50.0 / (2 * math.pi * (1 - math.cos(0.2))), rel=1e-6)
    assert outside == 0.0


def test_the_deviation_of_a_beam_from_itself_is_zero_and_of_a_dim_one_known():
    """Uniformly 20 % short inside the cone: rms 0.2 of the peak, whatever happens outside."""
    peak = 50.0 / (2 * math.pi * (1 - math.cos(0.2)))
    same = beam(lambda a: np.where(a < 0.2, peak, 7.0))
    dim = beam(lambda a: np.where(a < 0.2, 0.8 * peak, 0.0))
    assert result.deviation(same, CONE, 50.0) == pytest.approx(0.0, abs=1e-5)
    assert result.deviation(dim, CONE, 50.0) == pytest.approx(0.2, abs=1e-5)


def test_the_far_field_table_starts_on_the_axis():
    """One more angle, 0, with the value of the first ring; the whole carries the flux of the ledger."""
    ledger = {"in target": 0.5, "forward outside target": 0.1}
    landing = SimpleNamespace(far_field=beam(lambda a: 100.0 - a), ledger=ledger)
    field = result.far_field(landing, 50.0)
    assert field.flux == pytest.approx(0.6 * 50.0, rel=1e-12)
    assert field.theta[0] == 0.0 and len(field.theta) == 41
    assert field.candela[0] == field.candela[1] != field.candela[2]
