"""The pictures show what they are given, in true proportion, the same byte for byte."""

import re

import matplotlib
import numpy as np
import pytest
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure
from matplotlib.patches import Polygon, Rectangle
from mpl_toolkits.axes_grid1.anchored_artists import AnchoredSizeBar

from inverse import report
from inverse.profile.section import MECHANICAL, REFLECTING, REFRACTING, Section, line
from inverse.report import digits
from inverse.report.beam_figure import draw_beam, draw_encircled
from inverse.report.canvas import inline, picture
from inverse.report.convergence_figure import column, draw_convergence, groups, slack, timeline
from inverse.report.grain import without_grain
from inverse.report.ledger_figure import draw_ledger
from inverse.report.section_figure import picture_size, spread
from inverse.report.spot_figure import draw_spot, grey

EMITTER = {"reach_mm": 0.7, "dome_radius_mm": 1.2, "above_board_mm": 0.5}


def block():
    """A cylinder of radius 5 and height 6 mm with a pocket of radius 2 and depth 3."""
    corners = [(0, 2), (2, 2), (2, -1), (5, -1), (5, 5), (0, 5)]
    names = ["centre lens", "pocket wall", "foot", "flank", "exit face"]
    roles = [REFRACTING, REFRACTING, MECHANICAL, REFLECTING, REFRACTING]
    return Section(tuple(line(n, r, a, b) for n, r, a, b in zip(names, roles, corners, corners[1:])))


def drawn(rays=None, emitter=EMITTER, **options):
    ax = Figure().subplots()
    report.draw_section(ax, block(), rays, emitter, **options)
    return ax


def texts(figure):
    return [t.get_text() for ax in figure.axes for t in ax.texts]


@pytest.mark.parametrize(
    ("value", "error", "shown"),
    [
        (84.318, 0.0431, "84.32 ± 0.04"),
        (84.318, 0.0149, "84.318 ± 0.015"),
        (12346.0, 67.0, "12 350 ± 70"),
        (0.5, 0.0096, "0.500 ± 0.010"),
        (-3.21, 0.3, "−3.2 ± 0.3"),
        (84.318, None, "84.3"),
        (84.318, 0.0, "84.3"),
    ],
)
def test_a_value_is_rounded_to_its_error(value, error, shown):
    """σ keeps one digit, two when it leads with 1 (common practice, no source); worked by hand."""
    assert digits.with_error(value, error).replace("\u202f", " ").replace("\u00a0", " ") == shown


@pytest.mark.parametrize(
    ("value", "shown"),
    [(9.996, "10.0"), (0.0, "0"), (99.96, "100"), (123456.0, "123 000"), (2e-7, "2.00 × 10⁻⁷")],
)
def test_three_significant_digits_survive_a_carry(value, shown):
    """Rounding up into the next power of ten adds no digit; worked by hand."""
    assert digits.significant(value).replace("\u202f", " ") == shown


def test_an_error_too_small_to_matter_is_not_printed():
    """0.86165 ± 0.00016 % is shown as 0.862 %: nobody measures the fifth digit of a loss."""
    assert digits.percent(0.0086165, 1.6e-6) == "0.862\u00a0%"
    assert "±" in digits.percent(0.0086165, 1.6e-5)


def test_nothing_is_printed_as_minus_zero():
    """A small negative number that rounds to zero carries no sign, except where a sign is asked for."""
    assert digits.decimals(-0.0001, 3) == "0.000"
    assert digits.signed(digits.decimals(-0.0004, 3)) == "+0.000"
    assert digits.signed(digits.decimals(-0.0006, 3)) == "−0.001"


def test_grey_values_follow_the_srgb_curve():
    """Linear 0.5 is grey 187.5 of 255 and linear 0.214041 is grey 0.5 (IEC 61966-2-1, from memory)."""
    assert grey(0.5) == pytest.approx(187.5 / 255, abs=2e-4)  # the remembered digits
    assert grey(0.214041) == pytest.approx(0.5, abs=1e-6)
    assert grey(np.array([-1.0, 0.0, 1.0, 7.0])) == pytest.approx([0, 0, 1, 1], abs=1e-12)


def test_grey_has_no_jump_where_the_two_pieces_meet():
    """The straight toe and the power law agree at 0.0031308 to half a step of 8 bits and better."""
    below, above = grey(0.0031308), grey(np.nextafter(0.0031308, 1.0))
    assert abs(above - below) < 1e-6  # the published constants meet to about 3e-8


def test_names_keep_their_distance():
    """Crowded labels are moved apart to the gap, in order, and stay inside while they fit."""
    heights = spread([1.0, 1.1, 1.2, 8.0, 9.9], 0.6, 0.5, 10.0)
    assert np.diff(heights).min() >= 0.6 - 1e-12  # rounding of sums near 10
    assert heights[0] >= 0.5 and heights[-1] <= 10.0
    assert heights[3:] == pytest.approx([8.0, 9.9])
    assert spread([1.0, 1.1, 1.2], 0.6, 0.5, 10.0) == pytest.approx([1.0, 1.6, 2.2])


def test_the_lens_is_drawn_full_and_mirrored():
    """The filled outline of a 5 × 6 mm half section with a 2 × 3 mm pocket has twice (30 - 6) mm²."""
    polygons = [p.get_xy() for p in drawn().patches if isinstance(p, Polygon)]
    r, z = max(polygons, key=len).T
    area = 0.5 * abs(np.sum(r * np.roll(z, 1) - z * np.roll(r, 1)))
    assert area == pytest.approx(2 * (5 * 6 - 2 * 3), rel=1e-12)
    assert r.min() == pytest.approx(-r.max())


def test_both_axes_of_the_section_have_one_scale():
    """A millimetre is as long across as along, and the drawing's own size leaves no room to waste."""
    ax = drawn()
    assert ax.get_aspect() == 1.0
    width, height = picture_size(block())
    left, right = ax.get_xlim()
    low, high = ax.get_ylim()
    below = 0.55  # inch, for the scale
    assert (height - below) / width == pytest.approx((high - low) / (right - left))


def test_every_curve_is_named_once():
    """Each curve of the section, the LED and the board stand beside the drawing."""
    named = [t.get_text() for t in drawn({"centre": [], "edge": []}).texts]
    assert sorted(named) == sorted([*block().names, "LED", "board"])


def test_labels_can_be_left_out():
    """A picture without labels carries no text but the key."""
    assert [t.get_text() for t in drawn(labels=False).texts] == []


def test_the_die_is_as_wide_as_the_led():
    """The die lies in the emitter plane from -reach to reach; without a reach it follows the edge rays."""
    edge = {"edge": [np.array([(0.4, 0.0), (1.0, 3.0)])]}
    for emitter, rays, reach in ((EMITTER, {}, 0.7), (None, edge, 0.4)):
        flat = [c.get_xdata() for c in drawn(rays, emitter).lines if np.array_equal(c.get_ydata(), [0, 0])]
        assert [-reach, reach] in [list(x) for x in flat]


def test_the_board_lies_below_the_emitter_plane_by_the_given_height():
    """above_board_mm = 0.5 puts the board's top at z = -0.5 mm."""
    tops = [p.get_y() + p.get_height() for p in drawn().patches if isinstance(p, Rectangle)]
    assert any(top == pytest.approx(-0.5) for top in tops)


def test_rays_are_drawn_as_given():
    """Neither mirrored nor cut: the polylines on the paper are the ones handed over, by colour."""
    rays = {"centre": [[(0, 0), (1, 2), (3, 20)], [(0, 0), (-1, 2)]], "edge": [[(0.7, 0), (0.2, 2)]]}
    found = [a for a in drawn(rays).collections if isinstance(a, LineCollection)]
    paths = {tuple(c.get_color()[0]): [p.tolist() for p in c.get_segments()] for c in found}
    assert len(paths) == 2  # two colours
    for given in rays.values():
        assert [[list(p) for p in path] for path in given] in paths.values()


def test_rays_that_leave_reach_the_edge_of_the_drawing():
    """A last leg that ends above the lens goes straight on to the upper edge; one below does not."""
    rays = {"centre": [[(0, 0), (1, 5), (1.1, 5.5)], [(0, 0), (1, 4)]]}
    ax = drawn(rays)
    found = [a.get_segments() for a in ax.collections if isinstance(a, LineCollection)]
    out, stays = max(found, key=len)
    high = ax.get_ylim()[1]
    assert out[-1] == pytest.approx([1.1 + 0.2 * (high - 5.5), high])
    assert stays[-1].tolist() == [1, 4]


def beam():
    angle = np.linspace(0.5, 89.5, 90)
    return {"angle_deg": angle, "candela": 1e4 * np.exp(-angle), "candela_se": 50 * np.exp(-angle / 2)}


def test_the_beam_is_drawn_in_candela():
    """The curve on the paper is the given one, on both scales."""
    figure = Figure()
    draw_beam(figure, beam(), {"half_angle_deg": 3.0}, {"beam_angle_deg": 1.2})
    for ax in figure.axes:
        assert any(np.array_equal(c.get_ydata(), beam()["candela"]) for c in ax.lines)
    assert [ax.get_yscale() for ax in figure.axes] == ["linear", "log"]


def test_the_band_is_two_standard_errors_wide():
    """The shaded band of the beam reaches 2 σ above and below the curve."""
    figure = Figure()
    draw_beam(figure, beam(), {"half_angle_deg": 3.0}, {})
    band = figure.axes[0].collections[0].get_paths()[0].vertices
    first = band[band[:, 0] == 0.5][:, 1]
    spread_there = 4 * beam()["candela_se"][0]
    assert first.max() - first.min() == pytest.approx(spread_there)


def test_a_beam_without_target_or_error_is_drawn():
    """Only angle and candela are needed; the close view then ends with the light."""
    figure = Figure()
    draw_beam(figure, {"angle_deg": beam()["angle_deg"], "candela": beam()["candela"]}, {}, {})
    assert 4.0 < figure.axes[0].get_xlim()[1] < 8.0  # exp(-θ) falls to 1 % at 4.6° past its first value


def test_the_share_found_is_marked_at_the_target_edge():
    """A dot stands at (half-angle, share) and its value with error is written beside it."""
    figure = Figure()
    curve = {"angle_deg": [0, 3, 6, 9], "share": [0, 0.4, 0.7, 0.8], "ceiling": [0, 0.6, 0.9, 0.9]}
    asked, got = {"half_angle_deg": 6.0, "share": 0.75}, {"share": 0.7, "share_se": 0.002}
    draw_encircled(figure, curve, asked, got, {"ceiling": 0.9})
    dots = [(c.get_xdata()[0], c.get_ydata()[0]) for c in figure.axes[0].lines if c.get_marker() == "o"]
    assert dots == [(6.0, 0.7)]
    words = "\n".join(texts(figure)).replace("\u00a0", " ")
    assert "found: 70.0 ± 0.2 %" in words and "asked: 75 %" in words and "possible: 90.0 %" in words


@pytest.mark.parametrize(
    ("spot", "length", "words"),
    [
        ({"extent_deg": 20.0, "distance_mm": None}, np.degrees(0.1), "100 mm at 1 m"),
        ({"extent_mm": 150.0, "distance_mm": 500.0}, 50.0, "50 mm"),
    ],
)
def test_the_scale_bar_is_true(spot, length, words):
    """The bar covers the stated millimetres: on this wall, or at 1 m, where 0.1 rad is 100 mm."""
    figure = Figure()
    draw_spot(figure, {"grid": np.ones((5, 5)), **spot}, {"half_angle_deg": 5.0}, {})
    bars = [a for ax in figure.axes for a in ax.artists if isinstance(a, AnchoredSizeBar)]
    assert len(bars) == 2
    assert bars[0].size_bar.get_children()[0].get_width() == pytest.approx(length)
    assert bars[0].txt_label.get_text() == words


def test_the_second_exposure_is_four_stops_longer():
    """What is a sixteenth of the peak is white in the second picture, and its lux are a sixteenth."""
    r, _, _ = radius(61)
    grid = np.where(r < 8, 1.0, np.where(r < 20, 1 / 16, 1 / 32))
    figure = Figure()
    draw_spot(figure, {"grid": grid, "extent_deg": 10.0}, {}, {"peak_cd": 16000.0})
    first, second = (ax.images[0].get_array() for ax in figure.axes)
    centre, middle, outer = (30, 30), (30, 44), (30, 55)
    assert first[centre] == second[centre] == second[middle] == pytest.approx(1.0)
    assert first[middle] == pytest.approx(grey(1 / 16)) and second[outer] == pytest.approx(grey(1 / 2))
    titles = [ax.get_title(loc="left") + ax.get_title() for ax in figure.axes]
    assert "16\u202f000 lx at 1 m" in titles[0] and "1000 lx at 1 m" in titles[1]


def radius(count=61):
    """Distance (cells) of each cell of a picture from its middle, and the offsets along x and y."""
    y, x = np.indices((count, count)) - (count - 1) / 2
    return np.hypot(x, y), x, y


def test_pure_grain_is_averaged_out():
    """A round spot with 10 % grain comes out within 2 % of the true one, but for its innermost cells."""
    r, _, _ = radius()
    spot = np.exp(-((r / 18) ** 2))
    noisy = spot * (1 + 0.1 * np.random.default_rng(5).normal(size=spot.shape))
    outer = (r > 4) & (r < 30)  # whole rings of 25 cells and more
    assert np.std((noisy / spot - 1)[outer]) > 0.09
    assert np.std((without_grain(noisy) / spot - 1)[outer]) < 0.02


def test_structure_of_the_die_stays():
    """A square spot without grain keeps its corners; its edge, 3 cells wide, is softened by one cell only.

    The mean of each ring alone would be off by more than a quarter of the peak.
    """
    _, x, y = radius()
    square = 1 / (1 + np.exp((np.maximum(abs(x), abs(y)) - 18) / 3))
    ring = square[np.rint(np.hypot(x, y)) == 21]
    assert ring.max() - ring.mean() > 0.25
    assert np.abs(without_grain(square) - square).max() < 0.08


def test_a_round_picture_is_left_alone():
    """Without grain and without structure nothing changes beyond the smoothing over one cell.

    That is half the curvature: ½ · 2/18² = 0.0031 at the middle, and a little for rings of few cells.
    """
    r, _, _ = radius()
    spot = np.exp(-((r / 18) ** 2))
    assert np.abs(without_grain(spot) - spot).max() < 6e-3


def test_white_is_the_peak_shown_not_the_grain():
    """Lux at white follow the picture shown: one bright grain in an even field does not set them."""
    grid = np.ones((41, 41))
    grid[20, 33] = 2.0
    figure = Figure()
    draw_spot(figure, {"grid": grid, "extent_deg": 10.0, "peak_cd": 2000.0}, {}, {})
    title = figure.axes[0].get_title()
    lux = float(re.search(r"= ([\d.]+)\s*lx", title.replace("\u202f", "")).group(1))
    assert 1000 <= lux < 1200


def log():
    stages = ["a"] * 3 + ["b"] * 3
    return [{"stage": s, "step": n, "merit": "0.5", "share": "", "wall": w, "share_over_ceiling": 0.8}
            for s, n, w in zip(stages, [0, 5, 10, 0, 5, 10], [0.5, 0.6, 0.7, 0.9, 1.0, 1.3])]  # fmt: skip


def test_steps_are_counted_through_all_stages():
    """A stage that starts again at 0 carries on from the step before; worked by hand."""
    step, stages = timeline(log())
    assert step.tolist() == [0, 5, 10, 10, 15, 20]
    assert stages == [("a", 0, 2), ("b", 3, 5)]


def test_steps_already_cumulative_are_left_alone():
    """A count that only goes up is shown as it is."""
    rows = [{"stage": s, "step": n} for s, n in (("a", 0), ("a", 4), ("b", 5), ("b", 9))]
    assert timeline(rows)[0].tolist() == [0, 4, 5, 9]


def test_slack_is_the_distance_to_the_nearer_bound():
    """Between 0.6 and 1.2 the values 0.5, 0.9, 1.3 have slack -0.1, 0.3, -0.1."""
    found = slack(log(), {"name": "wall", "unit": "mm", "lower": 0.6, "upper": 1.2})
    assert found[[0, 3, 5]] == pytest.approx([-0.1, 0.3, -0.1])


def test_angles_of_the_log_become_degrees():
    """A column without suffix is in rad: 0.5 rad over a bound of 20° leaves 8.648°; _deg stays as it is."""
    draft = {"name": "flank draft", "unit": "deg", "lower": 20.0, "upper": None}
    assert slack([{"flank draft": 0.5}], draft) == pytest.approx(28.64788976 - 20)  # 0.5 · 180/π, by hand
    assert slack([{"flank_draft_deg": 21.5}], draft) == pytest.approx(1.5)


def test_stages_of_one_round_are_shaded_together():
    """Words before the first comma name the group; neighbours only."""
    stages = [("round 1, start 1: x", 0, 3), ("round 1, start 2: y", 4, 6), ("round 2, start 1: x", 7, 9)]
    assert groups([*stages, ("end", 10, 11)]) == [("round 1", 0, 6), ("round 2", 7, 9), ("end", 10, 11)]


def test_lines_are_broken_between_stages():
    """Two stages make two pieces of merit, each with its own rows only."""
    figure = Figure()
    draw_convergence(figure, log(), [])
    pieces = [c.get_xdata().tolist() for c in figure.axes[1].lines]
    assert pieces == [[0, 5, 10], [10, 15, 20]]


def test_an_empty_cell_is_a_gap():
    """A missing value is not drawn as zero."""
    assert np.isnan(column(log(), "share")).all()
    assert slack(log(), {"name": "height", "unit": "mm", "lower": 1.0, "upper": None}) is None


def test_a_log_without_shares_or_constraints_is_drawn():
    """Only what the log holds is drawn: two panels, no slack."""
    figure = Figure()
    draw_convergence(figure, log(), [])
    assert len(figure.axes) == 2
    assert texts(figure).count("share ÷ ceiling") == 1 and "share in target" not in texts(figure)


def test_the_ledger_bar_is_to_scale():
    """Each account is as long as its fraction, end to end."""
    figure = Figure()
    draw_ledger(figure, [("target", "in it", 0.8), ("back", "backward", 0.15), ("foot", "below it", 0.05)])
    pieces = [p for p in figure.axes[0].patches if isinstance(p, Rectangle)]
    assert [p.get_width() for p in pieces] == pytest.approx([0.8, 0.15, 0.05])
    assert [p.get_x() for p in pieces] == pytest.approx([0.0, 0.8, 0.95])


def sketch(figure):
    ax = figure.subplots()
    ax.plot([0, 1], [1, 0], marker="o")
    ax.imshow(np.eye(3), extent=(0, 1, 0, 1))
    ax.set_title("costs $5, not $6")


def test_pictures_are_the_same_byte_for_byte():
    """Drawing twice, also under other settings of the user's, gives equal SVG and PNG."""
    first = picture((4, 3), sketch, "a")
    with matplotlib.rc_context({"lines.linewidth": 9.0, "savefig.facecolor": "red", "svg.hashsalt": None}):
        second = picture((4, 3), sketch, "a")
    assert first == second


def test_drawing_leaves_no_setting_behind():
    """The settings of the process are the same before and after."""
    before = dict(matplotlib.rcParams)
    picture((4, 3), sketch, "a")
    assert dict(matplotlib.rcParams) == before


def test_a_dollar_sign_is_a_dollar_sign():
    """Text is never read as a formula, and stays text in the SVG."""
    assert ">costs $5, not $6</text>" in picture((4, 3), sketch, "a")[0]


def test_an_inlined_drawing_is_self_contained():
    """Ids carry the drawing's prefix, every reference finds its id, no name space or prologue is left."""
    svg = picture((4, 3), sketch, "mine")[0]
    ids = re.findall(r'\bid="([^"]*)"', svg)
    used = {a or b for a, b in re.findall(r'href="#([^"]*)"|url\(#([^)]*)\)', svg)}
    assert ids and all(i.startswith("mine-") for i in ids)
    assert used and used <= set(ids)
    assert svg.startswith("<svg viewBox") and "http" not in svg and "<style" not in svg


def test_inlining_keeps_the_drawing():
    """Size and prologue go, shapes stay."""
    head = '<?xml version="1.0"?>\n<svg width="9pt" height="9pt" viewBox="0 0 9 9" xmlns="urn:x">'
    shown = inline(head + '<path id="p" d="M 0 0"/></svg>', "q")
    assert shown == '<svg viewBox="0 0 9 9"><path id="q-p" d="M 0 0"/></svg>'
