"""Materials: formulas, fits, ranges and the sources of every constant."""

import dataclasses
import math

import numpy as np
import pytest

from inverse import material
from inverse.material import MATERIALS, Material, by_name, from_abbe, plain

CONSTANTS = [
    f.name for f in dataclasses.fields(Material) if f.name not in ("name", "dispersion", "valid", "sources")
]


def test_one_sellmeier_term_is_its_formula():
    """n² − 1 = Bλ²/(λ² − C)."""
    assert material.Sellmeier(((1.0, 0.01),)).squared(0.5) == pytest.approx(1 + 0.25 / 0.24, rel=1e-15)


def test_powers_are_their_formula():
    """n² = Σ c λᵏ."""
    assert material.Powers(((0, 2.0), (-2, 0.5), (4, 0.1))).squared(0.5) == pytest.approx(4.00625, rel=1e-15)


def test_lines_pass_through_three_points_exactly():
    """Three coefficients through three lines leave no residual, whatever the weights."""
    points = ((0.45, 1.60, 1.0), (0.55, 1.59, 5.0), (0.65, 1.583, 0.2))
    squared = material.Lines(points).squared(np.array([p[0] for p in points]))
    np.testing.assert_allclose(np.sqrt(squared), [p[1] for p in points], rtol=1e-12)


@pytest.mark.parametrize("index, abbe", [(1.53, 56.0), (1.492, 59.4), (1.60, 28.0)])
def test_from_abbe_returns_what_went_in(index, abbe):
    """A material made from n_d and V_d has that n_d and V_d."""
    made = Material("made", from_abbe(index, abbe), (0.4, 0.8))
    assert made.index(material.LINE_D) == pytest.approx(index, rel=1e-12)
    assert made.abbe == pytest.approx(abbe, rel=1e-9)


@pytest.mark.parametrize("name", MATERIALS)
def test_index_falls_with_wavelength_in_the_visible(name):
    """Normal dispersion: clear materials bend blue more than red."""
    m = MATERIALS[name]
    assert np.all(np.diff(m.index(np.linspace(max(m.valid[0], 0.4), 0.7, 200))) < 0)


def test_index_keeps_the_shape_of_its_argument():
    """A number gives a number, an array an array of the same shape."""
    assert isinstance(material.PMMA.index(0.55), float)
    assert material.PMMA.index(np.full((2, 3), 0.55)).shape == (2, 3)


@pytest.mark.parametrize("name", MATERIALS)
@pytest.mark.parametrize("end", [0, 1])
def test_index_refuses_a_wavelength_outside_the_measured_range(name, end):
    """Outside the range there is an error that names the range, even for one element of an array."""
    m = MATERIALS[name]
    outside = m.valid[end] * (1.01 if end else 0.99)
    with pytest.raises(ValueError, match=f"measured from {m.valid[0]} to {m.valid[1]}"):
        m.index(np.array([m.valid[end], outside]))


def test_index_refuses_what_is_not_a_number():
    """A wavelength that is not a number is outside every range."""
    with pytest.raises(ValueError, match="PMMA"):
        material.PMMA.index(math.nan)


@pytest.mark.parametrize("name", MATERIALS)
def test_every_constant_has_a_source_and_every_source_a_constant(name):
    """No constant stands without its source; no source is left for a constant that is not there."""
    m = MATERIALS[name]
    given = {c for c in CONSTANTS if getattr(m, c) is not None} | {"dispersion"}
    assert set(m.sources) == given
    assert all(len(text) > 5 for text in m.sources.values())


@pytest.mark.parametrize("name", ["PMMA", "PC", "COP"])
def test_mould_temperatures_are_in_order(name):
    """A part is ejected warmer than the mould and cooler than the melt, or its cooling time has no value."""
    m = MATERIALS[name]
    assert m.mould < m.eject < m.melt


@pytest.mark.parametrize("asked, found", [("pmma", "PMMA"), ("Acrylic", "PMMA"), ("pdms", "silicone"),
                                          ("FUSED_SILICA", "fused silica"), ("n-bk7", "N-BK7")])
def test_by_name_takes_any_case_and_trade_names(asked, found):
    """Names are found whatever the case, and under their other names."""
    assert by_name(asked) is MATERIALS[found]


def test_by_name_suggests_the_nearest():
    """An unknown name is answered with the nearest known one and the list."""
    with pytest.raises(ValueError, match="unknown material `PMAM`.*N-BK7.*Did you mean `PMMA`"):
        by_name("PMAM")


def test_plain_index_is_the_same_everywhere_and_loses_nothing():
    """A plain index has no dispersion and no absorption."""
    m = plain(1.4918)
    assert m.index(0.3) == m.index(5.0) == pytest.approx(1.4918, rel=1e-15)
    assert m.absorption == 0.0 and m.abbe == math.inf


@pytest.mark.parametrize("index", [1.0, 0.5, math.nan, math.inf])
def test_plain_index_must_exceed_one(index):
    """Air and nonsense are refused."""
    with pytest.raises(ValueError, match="above 1"):
        plain(index)
