"""Spline graphs: what a cubic spline must reproduce exactly, and the curve that CAD receives."""

import jax.numpy as jnp
import numpy as np
import pytest

from inverse.profile import bspline

CUBIC = np.polynomial.Polynomial([0.7, -1.3, 2.1, -0.9])
START, END = -0.4, 11.3  # mm, an interval like a flank's
SPANS = [1, 2, 5, 12]


def graph(coefficients, x):
    """Value and slope over [START, END]."""
    return bspline.evaluate(bspline.pieces(jnp.asarray(coefficients)), START, END, jnp.asarray(x))


@pytest.mark.parametrize("spans", SPANS)
def test_a_cubic_is_reproduced_exactly(spans):
    """Splines of degree 3 contain every cubic, so the fit meets it everywhere, slope included."""
    c = bspline.fit(CUBIC, spans)
    x = np.linspace(START, END, 301)
    value, slope = graph(c, x)
    t = (x - START) / (END - START)
    np.testing.assert_allclose(value, CUBIC(t), atol=1e-13)
    np.testing.assert_allclose(slope, CUBIC.deriv()(t) / (END - START), atol=1e-13)


@pytest.mark.parametrize("spans", SPANS)
def test_a_straight_line_has_its_greville_heights(spans):
    """Linear precision (de Boor, A Practical Guide to Splines, ch. IX): coefficients of f(x) = x are the abscissae."""
    np.testing.assert_allclose(bspline.fit(lambda x: x, spans), bspline.greville(spans), atol=1e-13)


def test_greville_abscissae_are_knot_averages():
    """Two spans by hand: knots 0 0 0 0 ½ 1 1 1 1, means of three inner neighbours 0, 1/6, 1/2, 5/6, 1."""
    np.testing.assert_allclose(bspline.greville(2), [0.0, 1 / 6, 0.5, 5 / 6, 1.0], atol=1e-15)


def test_one_span_is_a_bezier_curve():
    """Bernstein's polynomials: at the middle the weights are 1/8, 3/8, 3/8, 1/8."""
    value, _ = graph([1.0, 5.0, -2.0, 4.0], 0.5 * (START + END))
    assert float(value) == pytest.approx((1.0 + 3 * 5.0 - 3 * 2.0 + 4.0) / 8, abs=1e-14)


@pytest.mark.parametrize("spans, finer", [(2, 4), (2, 6), (5, 15), (12, 24)])
def test_a_refined_graph_is_the_same_graph(spans, finer):
    """More knots among the old ones change nothing, slope included."""
    c = np.random.default_rng(spans).uniform(-1.0, 1.0, spans + 3)
    x = np.linspace(START, END, 401)
    old, new = graph(c, x), graph(bspline.refiner(len(c) - 3, finer) @ c, x)
    np.testing.assert_allclose(new[0], old[0], atol=1e-12)
    np.testing.assert_allclose(new[1], old[1], atol=1e-12)


def test_refining_to_other_knots_is_not_exact():
    """Control for the test above: when the old knots are not among the new ones, the graph changes."""
    c = np.random.default_rng(0).uniform(-1.0, 1.0, 5)
    x = np.linspace(START, END, 401)
    old, new = graph(c, x)[0], graph(bspline.refiner(len(c) - 3, 3) @ c, x)[0]
    assert float(np.abs(old - new).max()) > 1e-3


@pytest.mark.parametrize("end, beyond", [(START, -3.0), (END, 2.5)])
def test_beyond_its_ends_a_graph_goes_on_straight(end, beyond):
    """Outside the interval: the tangent at the end."""
    c = np.random.default_rng(3).uniform(-1.0, 1.0, 9)
    value, slope = graph(c, end)
    outside, same = graph(c, end + beyond)
    assert float(outside) == pytest.approx(float(value + beyond * slope), abs=1e-12)
    assert float(same) == pytest.approx(float(slope), abs=1e-12)


def test_pieces_are_linear_in_the_coefficients():
    """M (a + 2 b) = M a + 2 M b, and constants give constants."""
    a, b = np.random.default_rng(4).uniform(-1.0, 1.0, (2, 8))
    of = lambda c: np.asarray(bspline.pieces(jnp.asarray(c)))  # noqa: E731
    np.testing.assert_allclose(of(a + 2 * b), of(a) + 2 * of(b), atol=1e-12)
    np.testing.assert_allclose(of(np.full(8, 3.0)), [[3.0, 0.0, 0.0, 0.0]] * 5, atol=1e-12)


def test_value_and_slope_are_continuous_at_the_knots():
    """Left and right of every inner knot, 1e-9 apart, value and slope agree (a cubic spline is C²)."""
    c = np.random.default_rng(5).uniform(-1.0, 1.0, 10)
    knots = START + (END - START) * np.arange(1, 7) / 7
    left, right = graph(c, knots - 1e-9), graph(c, knots + 1e-9)
    np.testing.assert_allclose(left[0], right[0], atol=1e-8)
    np.testing.assert_allclose(left[1], right[1], atol=1e-8)
