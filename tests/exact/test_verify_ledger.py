"""Roads in words, and the verdicts on agreement and limit."""

from types import SimpleNamespace

import numpy as np
import pytest

from inverse.verify import check_limit, compare
from inverse.verify.ledger import DESIGNED, KEPT, MISSED, PART, THROUGH, TOTAL, Road, road_words

NAMES = ("centre lens", "pocket wall", "foot", "flank", "rim", "exit ring", "step", "exit disc")
IN, OUT = ("pocket wall", THROUGH), ("exit disc", THROUGH)


@pytest.mark.parametrize("events, words", [
    ([("centre lens", THROUGH), ("exit ring", THROUGH)], "centre lens → exit"),
    ([IN, ("flank", TOTAL), OUT], "pocket wall → flank → exit"),
    ([IN, ("flank", PART), OUT], "pocket wall → flank → exit"),
    ([IN, ("exit face", THROUGH)], "pocket wall → exit"),
])
def test_designed_roads_are_known_by_name(events, words):
    """The three roads a collimator is made for, by any exit curve."""
    assert road_words(events) == words and words in DESIGNED


@pytest.mark.parametrize("events, words", [
    ([], MISSED),
    ([("centre lens", PART)], "reflected off the centre lens"),
    ([("flank", THROUGH)], "in through the flank"),
    ([IN, ("flank", THROUGH)], "pocket wall → flank leak"),
    ([IN, ("flank", TOTAL), ("flank", TOTAL), OUT], "pocket wall → flank → flank again"),
    ([IN, ("flank", TOTAL), ("exit ring", PART), IN], "pocket wall → flank → reflection at the exit"),
    ([IN, ("exit ring", TOTAL)], "pocket wall → total reflection at the exit"),
    ([IN, ("step", THROUGH)], "pocket wall → through the step"),
    ([IN, ("rim", TOTAL)], "pocket wall → reflection at the rim"),
    ([IN, ("flank", TOTAL), ("centre lens", THROUGH)], "pocket wall → flank → back to the centre lens"),
    ([("centre lens", THROUGH), ("flank", TOTAL), OUT], "centre lens → flank → exit"),
    ([IN, OUT, ("step", THROUGH)], "pocket wall → exit → back in"),
])
def test_stray_roads_are_named_by_their_first_departure(events, words):
    """Each is told apart from the designed ones and says where it left them."""
    assert road_words(events) == words and words not in DESIGNED


def test_a_road_survives_being_one_integer():
    """Any sequence written down while flying is read back, up to the events kept."""
    road, rng = Road(NAMES), np.random.default_rng(1)
    curves, happenings = rng.integers(0, len(NAMES), (KEPT + 3, 400)), rng.integers(0, 3, (KEPT + 3, 400))
    code = np.zeros(400, np.int64)
    for event in range(KEPT + 3):
        code = road.after(code, event, curves[event], happenings[event])
    for k in range(400):
        wanted = [(NAMES[c], h) for c, h in zip(curves[:KEPT, k], happenings[:KEPT, k])]
        assert road.events(code[k]) == wanted


def test_too_many_curves_are_refused():
    """78 curves no longer fit the integer."""
    with pytest.raises(ValueError, match="too many"):
        Road([f"curve {i}" for i in range(78)])


def landing(share, share_se, designed=0.0, designed_se=0.0):
    return SimpleNamespace(
        share=share, share_se=share_se, designed_paths_share=designed, designed_paths_share_se=designed_se
    )


def test_agreement_counts_in_combined_standard_errors():
    """0.7000 ± 0.0003 against 0.7018 ± 0.0004: σ = 0.0005, 3.6 of them, agrees; 0.7021 does not."""
    good = compare(0.7, 3e-4, landing(0.9, 0.0, 0.7018, 4e-4))
    assert good.difference == pytest.approx(-0.0018)
    assert (good.sigma, good.deviations) == pytest.approx((5e-4, 3.6), rel=1e-4) and good.agrees
    assert not compare(0.7, 3e-4, landing(0.9, 0.0, 0.7021, 4e-4)).agrees


def test_figures_without_scatter_must_be_equal():
    """Zero standard errors: rounding is forgiven, 1e-6 is not."""
    assert compare(0.7, 0.0, landing(0.7, 0.0, 0.7 + 1e-12)).agrees
    off = compare(0.7, 0.0, landing(0.7, 0.0, 0.7 + 1e-6))
    assert not off.agrees and np.isinf(off.deviations)


def test_a_share_above_the_ceiling_is_a_failure_beyond_four_sigma():
    """Ceiling 0.8, σ = 0.001: 0.8039 may be chance, 0.8041 may not, 0.5 is far below and fine."""
    assert check_limit(landing(0.8039, 1e-3), 0.8).holds
    over = check_limit(landing(0.8041, 1e-3), 0.8)
    assert not over.holds and over.excess == pytest.approx(0.0041)
    assert check_limit(landing(0.5, 1e-3), 0.8).holds


@pytest.mark.parametrize("share, se", [(np.nan, 1e-3), (0.5, np.nan), (0.5, -1e-3)])
def test_a_figure_that_is_no_number_cannot_agree(share, se):
    """NaN must not pass as agreement."""
    with pytest.raises(ValueError, match="finite"):
        compare(share, se, landing(0.5, 1e-3, 0.5, 1e-3))
