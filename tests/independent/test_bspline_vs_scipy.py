"""The fast piecewise evaluation against SciPy's B-splines, which know nothing of power matrices."""

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from scipy.interpolate import BSpline

from inverse.profile import bspline


@pytest.mark.parametrize("spans", [1, 2, 7, 20])
def test_value_and_slope_are_those_of_scipy(spans):
    """Random coefficients, random points: value and slope to rounding."""
    rng = np.random.default_rng(spans)
    c, start, end = rng.uniform(-3.0, 3.0, spans + 3), 1.7, 9.2
    x = np.concatenate([rng.uniform(start, end, 500), [start, end]])
    value, slope = bspline.evaluate(bspline.pieces(jnp.asarray(c)), start, end, jnp.asarray(x))
    other = BSpline(bspline.knots(spans), c, 3)
    t = (x - start) / (end - start)
    np.testing.assert_allclose(value, other(t), atol=1e-12)
    np.testing.assert_allclose(slope, other.derivative()(t) / (end - start), atol=1e-11)


def test_a_fit_is_scipys_interpolant():
    """Interpolation of a sine at the Greville points: the same spline as SciPy's solver finds."""
    from scipy.interpolate import make_interp_spline

    wave = lambda x: np.sin(5.0 * x)  # noqa: E731
    other = make_interp_spline(bspline.greville(9), wave(bspline.greville(9)), t=bspline.knots(9), k=3)
    np.testing.assert_allclose(bspline.fit(wave, 9), other.c, atol=1e-12)


def test_the_slope_is_the_derivative_jax_finds():
    """df/dx by the formula equals automatic differentiation, inside and beyond the interval."""
    c = jnp.asarray(np.random.default_rng(2).uniform(-1.0, 1.0, 8))
    value = lambda x: bspline.evaluate(bspline.pieces(c), 0.5, 4.0, x)[0]  # noqa: E731
    x = jnp.asarray([0.1, 0.77, 1.9, 3.3, 4.6])
    slope = bspline.evaluate(bspline.pieces(c), 0.5, 4.0, x)[1]
    np.testing.assert_allclose(jax.vmap(jax.grad(value))(x), slope, atol=1e-12)
