"""The verifier's body from plain points: how exact it is, and what it refuses."""

import numpy as np
import pytest

from inverse.verify.surface import HEADER, Points
from lens_samples import ball, collimator, moulded


def ellipse(count, a=6.0, b=4.0):
    """Points of a spheroid from its formula, lower pole to upper: one curve, closed on the axis."""
    angle = np.linspace(-0.5 * np.pi, 0.5 * np.pi, count)
    rows = np.column_stack([a * np.cos(angle), b * np.sin(angle), -a * np.sin(angle), b * np.cos(angle)])
    rows[:, 2:] /= np.hypot(rows[:, 2], rows[:, 3])[:, None]
    rows[[0, -1], 0] = 0.0
    return Points(("exit face",), (rows,))


def off_ellipse(count, a=6.0, b=4.0):
    """Largest distance (mm) and slope error (rad) of the interpolated curve between the points."""
    chain = ellipse(count).chain
    u = np.linspace(0.0, chain.last[0], 20 * count + 3)
    r, z, dr, dz = chain.at(u, np.zeros(len(u), int))
    gradient = np.column_stack([r / a**2, z / b**2])
    size = np.hypot(*gradient.T)
    distance = np.abs((r / a) ** 2 + (z / b) ** 2 - 1.0) / (2.0 * size)
    slope = np.abs(dr * gradient[:, 0] + dz * gradient[:, 1]) / (size * np.hypot(dr, dz))
    return distance.max(), slope.max()


def test_400_points_a_curve_hold_a_micron_thousandth_and_a_microradian():
    """An ellipse 12 mm wide is met to 1e-6 mm and 1e-6 rad between its 400 points (closed form)."""
    distance, slope = off_ellipse(400)
    assert distance < 1e-6 and slope < 1e-6


def test_the_interpolation_is_of_fourth_order():
    """Twice the points divide the error by 2⁴ in place and 2³ in slope (de Boor, chapter IV, from memory)."""
    coarse, fine = off_ellipse(51), off_ellipse(101)
    orders = np.log2(np.array(coarse) / np.array(fine))
    # Fitted on one doubling: the next term of the error shifts the order by about the step, 1/50.
    np.testing.assert_allclose(orders, [4.0, 3.0], atol=0.1)


def test_a_straight_curve_is_one_exact_piece():
    """400 points on a line become a single piece, so cones and planes carry no interpolation error."""
    points = Points.of(moulded())
    chain = points.chain
    for name in ("pocket wall", "foot", "rim"):
        i = points.names.index(name)
        assert chain.last[i] - chain.first[i] == 1
        piece = chain.table[chain.first[i]].reshape(2, 4)
        np.testing.assert_array_equal(piece[:, 2:], 0.0)
        np.testing.assert_allclose(piece.sum(1), points.curves[i][-1, :2], rtol=1e-15)


def test_a_bent_curve_of_two_points_stays_bent():
    """Straightness is judged by the tangents too: a quarter circle given by its ends is no chord."""
    lower = np.array([[0.0, -2.0, 1.0, 0.0], [2.0, 0.0, 0.0, 1.0]])
    upper = np.array([[2.0, 0.0, 0.0, 1.0], [0.0, 2.0, -1.0, 0.0]])
    chain = Points(("centre lens", "exit face"), (lower, upper)).chain
    r, z, _, _ = chain.at(np.array([0.5, 1.5]), np.array([0, 1]))
    assert np.all(np.hypot(r, z) > 0.95 * 2.0)  # the chords would be at 0.71 of the radius


def test_the_file_and_the_section_in_memory_give_the_same_points(tmp_path):
    """profile.csv written with all digits, remarks included, is read back to the same numbers."""
    section = moulded(stepped=True)
    table, number = section.dense()
    lines = ["# a remark", ",".join(HEADER)]
    lines += [",".join([section.names[n], *map(repr, map(float, row))]) for row, n in zip(table, number)]
    path = tmp_path / "profile.csv"
    path.write_text("\n".join(lines) + "\n")
    read, made = Points.read(path), Points.of(section)
    assert read.names == made.names
    for a, b in zip(read.curves, made.curves):
        np.testing.assert_array_equal(a, b)


def test_joints_are_closed_after_printing_with_few_digits():
    """Curves whose ends miss each other by 1e-8 mm are given one common end point; the far ends stay."""
    points = Points.of(moulded())
    loose = tuple(c + [0.0, 1e-8 * (-1) ** i, 0.0, 0.0] for i, c in enumerate(points.curves))
    chain = Points(points.names, loose).chain
    ends = np.array([chain.at(np.array([float(u)]), np.array([i]))[:2] for i, u in enumerate(chain.last)])
    starts = np.array([chain.at(np.array([float(u)]), np.array([i]))[:2] for i, u in enumerate(chain.first)])
    np.testing.assert_allclose(ends[:-1], starts[1:], rtol=0.0, atol=1e-14)
    np.testing.assert_allclose(ends[:, :, 0], [c[-1, :2] for c in loose], atol=1e-13)


@pytest.mark.parametrize("spoil, complaint", [
    (lambda n, c: (n[:-1], c[:-1]), "start and end at r = 0"),
    (lambda n, c: (n, (c[0] + [0.0, 0.01, 0.0, 0.0], *c[1:])), "between the end of centre lens"),
    (lambda n, c: (n[::-1], tuple(x[::-1] * [1, 1, -1, -1] for x in c[::-1])), "wrong way round"),
    (lambda n, c: (n, (c[0] * [1, np.nan, 1, 1], *c[1:])), "centre lens: row 0 is not finite"),
    (lambda n, c: (n, (c[0] * [-1, 1, 1, 1], *c[1:])), "is negative"),
    (lambda n, c: (n, c[:-1]), "6 names, 5 curves"),
])
def test_a_chain_that_cannot_be_used_is_refused_by_name(spoil, complaint):
    """Open, gaping, reversed, not finite, beyond the axis or miscounted: one sentence says which."""
    points = Points.of(collimator())
    with pytest.raises(ValueError, match=complaint):
        Points(*spoil(points.names, points.curves))


def test_tangents_against_the_chain_are_refused():
    """A tangent that points backwards would make the cubic loop; the curve is named."""
    points = Points.of(ball(3.0))
    rows = points.curves[0] * [1, 1, -1, -1]
    with pytest.raises(ValueError, match="exit face: tangents must point along the chain"):
        Points(points.names, (rows,)).chain  # noqa: B018


@pytest.mark.parametrize("text, complaint", [
    ("curve,r_mm,z_mm,tangent_r\na,0,0,1\n", "column tangent_z is missing"),
    (",".join(HEADER) + "\na,0,zero,1,0\n", ":2: wanted a name and 4 numbers"),
    (",".join(HEADER) + "\na,0,1\n", ":2: wanted a name and 4 numbers"),
    ("# nothing else\n", "no points in it"),
])
def test_a_file_that_cannot_be_read_is_refused_by_line(tmp_path, text, complaint):
    """The message names file and line."""
    path = tmp_path / "profile.csv"
    path.write_text(text)
    with pytest.raises(ValueError, match=complaint):
        Points.read(path)
