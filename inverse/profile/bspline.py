"""Clamped uniform cubic B-spline graphs: heights over an interval, evaluated fast.

A graph f on [a, b] with ``spans`` equal knot spans has spans + 3 coefficients.  With
u = (x − a)/(b − a) · spans, span s = ⌊u⌋ and local x̂ = u − s,

    f(x) = Σ_j A[s, j] x̂^j ,      A = M c ,

where M is a constant matrix (spans, 4, spans + 3) found once from the basis (de Boor, A
Practical Guide to Splines, ch. IX–X).  Outside [a, b] the graph continues along its end
tangent, so that searches that overshoot stay finite.  The same curve, written as control
points (Greville abscissa, coefficient), is what CAD receives: linear precision makes it exact.
"""

import functools

import jax
import jax.numpy as jnp
import numpy as np
from scipy.interpolate import BSpline, PPoly

DEGREE = 3


def knots(spans):
    """Clamped uniform knot vector on [0, 1], shape (spans + 7,)."""
    return np.concatenate([np.zeros(DEGREE), np.linspace(0.0, 1.0, spans + 1), np.ones(DEGREE)])


@functools.cache
def greville(spans):
    """Greville abscissae on [0, 1], shape (spans + 3,)."""
    t = knots(spans)
    return np.array([t[i + 1 : i + 1 + DEGREE].mean() for i in range(spans + DEGREE)])


@functools.cache
def power_matrix(spans):
    """M: coefficients to power-basis pieces in span units, shape (spans, 4, spans + 3)."""
    t, count = knots(spans), spans + DEGREE
    pieces = []
    for i in range(count):
        c = PPoly.from_spline(BSpline(t, np.eye(count)[i], DEGREE)).c[::-1, DEGREE : DEGREE + spans]
        pieces.append(c / spans ** np.arange(DEGREE + 1)[:, None])  # from [0, 1] to span units
    return np.transpose(np.array(pieces), (2, 1, 0))


def fit(function, spans):
    """Coefficients (spans + 3,) of the spline that interpolates ``function`` on [0, 1] at Greville points."""
    g = greville(spans)
    return np.linalg.solve(BSpline.design_matrix(g, knots(spans), DEGREE).toarray(), function(g))


@functools.cache
def refiner(spans, finer):
    """Matrix from the coefficients on ``spans`` to those of the same graph on ``finer`` spans, a multiple of them."""
    g = greville(finer)
    coarse = BSpline.design_matrix(g, knots(spans), DEGREE).toarray()
    return np.linalg.solve(BSpline.design_matrix(g, knots(finer), DEGREE).toarray(), coarse)


def pieces(coefficients):
    """Power-basis pieces A (spans, 4) of the coefficients (spans + 3,); linear in them."""
    return jnp.asarray(power_matrix(coefficients.shape[0] - DEGREE)) @ coefficients


def evaluate(A, start, end, x):
    """Value and slope df/dx of the graph with pieces ``A`` on [start, end] at ``x`` (any shape)."""
    spans = A.shape[0]
    scale = spans / (end - start)
    value, slope, _ = _piece(A, (x - start) * scale)
    return value, slope * scale


def _piece(A, u):
    """Value, slope and bend at ``u``, which counts spans from the start; straight beyond the ends."""
    spans = A.shape[0]
    inside = jnp.clip(u, 0.0, float(spans))
    s = jnp.clip(inside.astype(jnp.int32), 0, spans - 1)
    rows = A.at[s].get(mode="promise_in_bounds")
    a0, a1, a2, a3 = (rows[..., j] for j in range(4))
    w = inside - s
    slope = a1 + w * (2.0 * a2 + w * 3.0 * a3)
    value = a0 + w * (a1 + w * (a2 + w * a3)) + slope * (u - inside)
    # not by u == inside: the compiler may round the two differently
    bend = jnp.where((u >= 0.0) & (u <= float(spans)), 2.0 * a2 + 6.0 * w * a3, 0.0)
    return value, slope, bend


def expand(A, start, end, x):
    """Taylor series of the graph about ``x`` (N,), itself held: (X, f, f', f''), X equal to ``x`` in value.

    X, f and f' carry derivatives with respect to ``A``, ``start`` and ``end`` at a fixed place between the
    ends; f'' is a plain number.  So f + f' (y − X) and f' + f'' (y − X) at y = x are the graph and its slope
    with all their first derivatives, at the cost of one evaluation.
    """
    hold = jax.lax.stop_gradient
    scale = A.shape[0] / (end - start)
    u = hold((x - start) * scale)
    value, slope, bend = _piece(A, u)
    return start + u / scale, value, slope * scale, hold(bend * scale * scale)
