"""The lens as numbers and as a chain of curves: what holds by construction, for lenses drawn at random."""

import math
from dataclasses import replace

import jax.numpy as jnp
import numpy as np
import pytest

from inverse.profile import bspline
from inverse.profile.envelope import Envelope
from inverse.profile.lens import RIM_MARGIN, Lens, section, shape
from traced import BOX, random_lens

FLANGED = replace(BOX, flange=1.5)
STEEP = replace(BOX, draft=0.05, rim=0.9)
CASES = [(box, drop, seed) for box in (BOX, FLANGED, STEEP) for drop in (None, -0.6, 0.6) for seed in (1, 2)]
SINGLE = ["centre lens", "pocket wall", "foot", "flank", "rim", "exit face"]


@pytest.fixture(params=CASES, ids=lambda c: f"flange {c[0].flange} draft {c[0].draft:.3f} drop {c[1]} #{c[2]}")
def part(request):
    box, drop, seed = request.param
    lens = random_lens(seed, drop, box)
    return box, lens, section(lens, box)


def test_the_chain_is_closed_on_the_axis(part):
    """Neighbours share end points exactly, first and last point have r = 0 exactly."""
    _, _, body = part
    for a, b in zip(body.curves, body.curves[1:]):
        assert np.array_equal(a.points[-1], b.points[0])
        np.testing.assert_array_equal(a.at(1.0), a.points[-1])
    assert body.curves[0].points[0][0] == 0.0 and body.curves[-1].points[-1][0] == 0.0


def test_every_curve_has_its_trade_name(part):
    """Single or stepped, with a rim or with a flange: the names and their order along the chain."""
    box, lens, body = part
    names = SINGLE[:4] + (["flange underside", "flange edge", "flange top"] if box.flange else ["rim"])
    names += ["exit ring", "step", "exit disc"] if lens.stepped else ["exit face"]
    assert body.names == names


def test_roles_say_what_light_does(part):
    """Entrances and exits refract, the flank reflects, the rest is mechanical."""
    refracting = {"centre lens", "pocket wall", "exit face", "exit ring", "exit disc"}
    for curve in part[2].curves:
        wanted = "reflecting" if curve.name == "flank" else "refracting" if curve.name in refracting else "mechanical"
        assert curve.role == wanted


def test_the_material_lies_on_the_left(part):
    """The volume, 2π ∮ r dr dz taken along the chain, is positive and less than the box it stands in."""
    box, lens, body = part
    outer = box.radius + box.flange
    top = max(c.points[:, 1].max() for c in body.curves)
    assert 0.2 < body.volume / (math.pi * outer**2 * (top - box.foot)) < 1.0


def lean(curve):
    """Least angle of a curve from the axis, rad."""
    t = curve.tangent(np.linspace(0.0, 1.0, 500))
    return float(np.arctan2(np.abs(t[:, 0]), np.abs(t[:, 1])).min())


def test_wall_rim_and_step_have_their_draft_by_construction(part):
    """Every mechanical wall leans by the draft, the pocket wall by at least the least tangent it was given."""
    box, lens, body = part
    for name in {"rim", "flange edge"} & set(body.names):
        assert lean(body.curve(name)) == pytest.approx(box.draft, abs=1e-9)
    if lens.stepped:  # the step is a micron wide even where it vanishes, so it leans a little more
        assert box.draft - 1e-9 < lean(body.curve("step")) < box.draft + 1e-5
    assert lean(body.curve("pocket wall")) >= math.atan(float(lens.wall.min())) - 1e-9


def test_the_pocket_opens_towards_the_foot(part):
    """The wall's radius falls with z all the way, so a pin can be pulled out, and it never hides itself."""
    points = part[2].curve("pocket wall").at(np.linspace(0.0, 1.0, 500))  # from the corner down
    assert np.all(np.diff(points[:, 0]) > 0.0) and np.all(np.diff(points[:, 1]) < 0.0)


def test_outer_walls_lean_towards_the_parting_line(part):
    """Rim and flange edge are widest at the top, where the flank has opened all the way up."""
    body = part[2]
    for name in {"rim", "flange edge"} & set(body.names):
        low, high = body.curve(name).points[[0, -1]]
        assert high[1] > low[1] and high[0] > low[0]


def test_the_rim_is_as_thick_as_asked_and_the_aperture_as_wide(part):
    """Edge height = the envelope's rim and its margin, edge radius = the clear radius, exactly by construction."""
    box, _, body = part
    edge = body.curve("exit ring" if "step" in body.names else "exit face").points[0]
    assert edge[0] == box.radius
    assert edge[1] - body.curve("flank").points[-1][1] == pytest.approx(RIM_MARGIN * box.rim, abs=1e-12)


def test_the_part_stands_on_its_foot(part):
    """Foot ring flat, at the envelope's height, as wide as its number says."""
    box, lens, body = part
    foot = body.curve("foot").points
    assert set(foot[:, 1]) == {box.foot}
    assert foot[1, 0] - foot[0, 0] == pytest.approx(float(lens.foot), abs=1e-12)


def test_faces_are_level_on_the_axis(part):
    """A body of revolution without a dimple: dz/dr = 0 at r = 0 for centre lens and exit."""
    body = part[2]
    first, last = body.curves[0].tangent(0.0), body.curves[-1].tangent(1.0)
    assert abs(first[1] / first[0]) < 1e-12 and abs(last[1] / last[0]) < 1e-12


@pytest.mark.parametrize("drop", [-0.6, 0.6])
def test_a_step_lies_between_disc_and_ring(drop):
    """The step's middle has the radius asked for, its ends are the edges of ring and disc, up or down."""
    lens = random_lens(3, drop)
    body = section(lens, BOX)
    ring, disc = body.curve("step").points
    assert 0.5 * (ring[0] + disc[0]) == pytest.approx(float(lens.step), abs=1e-12)
    assert disc[0] < ring[0] and np.sign(disc[1] - ring[1]) == np.sign(drop)
    assert ring[1] == pytest.approx(float(lens.exit[0])) and disc[1] == pytest.approx(float(lens.disc[-1]))


def test_the_cad_curve_is_the_traced_graph(part):
    """Points of every spline of the section satisfy its graph to 1e-12 mm (Greville abscissae make it exact)."""
    box, lens, body = part
    s = shape(lens, box)
    pairs = [("centre lens", s.centre, 0), ("pocket wall", s.wall, 1), ("flank", s.flank, 1)]
    pairs += [("exit ring", s.exit, 0), ("exit disc", s.disc, 0)] if lens.stepped else [("exit face", s.exit, 0)]
    for name, graph, axis in pairs:
        points = body.curve(name).at(np.linspace(0.0, 1.0, 301))
        value, slope = graph.at(jnp.asarray(points[:, axis]))
        # The abscissa itself is rounded, to 2e-15 mm: a steep curve passes that on times its slope.
        rounding = 1e-12 * np.maximum(1.0, np.abs(slope))
        assert np.all(np.abs(points[:, 1 - axis] - value) < rounding), name


def test_a_plain_cone_has_its_closed_form_volume():
    """Straight wall, flat roof, conical flank, flat face: frusta, π h (a² + ab + b²)/3."""
    box = Envelope(radius=10.0, height=12.0, foot=0.0, draft=0.03, rim=1.0)
    tan, roof, top, foot = math.tan(0.03), 4.0, 11.0, 1.5
    corner = 2.0
    mouth = corner + roof * tan
    rim = RIM_MARGIN  # of 1 mm
    start, end = mouth + foot, 10.0 - rim * tan
    lens = Lens(
        corner=jnp.array([corner, roof]),
        foot=jnp.asarray(foot),
        wall=jnp.full(4, tan),
        centre=jnp.zeros(5),
        flank=jnp.asarray((start + (end - start) * bspline.greville(6))[1:-1]),
        exit=jnp.full(6, top),
    )
    frustum = lambda a, b, h: math.pi * h * (a * a + a * b + b * b) / 3.0  # noqa: E731
    expected = frustum(start, end, top - rim) + frustum(end, 10.0, rim) - frustum(mouth, corner, roof)
    assert section(lens, box).volume == pytest.approx(expected, rel=1e-12)
