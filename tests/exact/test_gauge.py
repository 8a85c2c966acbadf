"""The gauge on bodies whose measures are plain geometry."""

import math

import numpy as np
import pytest

from hand_built import cone_pocket
from inverse.emitter import Disk, Dome, Emitter
from inverse.profile import gauge
from inverse.profile.envelope import Envelope
from inverse.profile.section import MECHANICAL, REFLECTING, REFRACTING, Section, line
from lens_samples import arc, cylinder

BARE = Emitter((Disk(0.5),))


def frustum(corner=(2.0, 4.0), mouth=2.2, foot=3.4, shoulder=(9.9, 10.0), edge=(10.0, 11.0)):
    """Straight lines only: flat roof, conical wall and flank, rim, flat face."""
    return Section((
        line("centre lens", REFRACTING, (0.0, corner[1]), corner),
        line("pocket wall", REFRACTING, corner, (mouth, -0.4)),
        line("foot", MECHANICAL, (mouth, -0.4), (foot, -0.4)),
        line("flank", REFLECTING, (foot, -0.4), shoulder),
        line("rim", MECHANICAL, shoulder, edge),
        line("exit face", REFRACTING, edge, (0.0, edge[1])),
    ))  # fmt: skip


def read(section, emitter=BARE, **box):
    given = Envelope(**{**dict(radius=10.0, height=12.0, thickest=9.0, corner_radius=0.1), **box})
    return {r.name: r for r in gauge.readings(section, given, emitter)}


def test_lengths_of_a_frustum():
    """Rim, foot and height are differences of corners."""
    found = read(frustum())
    assert found["rim thickness"].measured == pytest.approx(1.0, abs=1e-12)
    assert found["foot width"].measured == pytest.approx(1.2, abs=1e-12)
    assert found["part height"].measured == pytest.approx(11.4, abs=1e-12)


def test_gaps_of_a_frustum():
    """Roof to face 7 mm; pocket and flank are nearest across the foot, as both lean away from it: 1.2 mm."""
    found = read(frustum())
    assert found["pocket to exit wall"].measured == pytest.approx(7.0, abs=1e-6)
    assert found["pocket to flank wall"].measured == pytest.approx(1.2, abs=1e-9)
    assert "z = -0.40" in found["pocket to flank wall"].where


def test_drafts_of_a_frustum():
    """Each wall leans by the arctangent of its run over its rise; flat faces lie at 90°."""
    found = read(frustum())
    assert found["pocket draft"].measured == pytest.approx(math.atan2(0.2, 4.4), abs=1e-12)
    assert found["flank draft"].measured == pytest.approx(math.atan2(6.5, 10.4), abs=1e-12)
    assert found["rim draft"].measured == pytest.approx(math.atan2(0.1, 1.0), abs=1e-12)
    assert found["face draft"].measured == pytest.approx(math.pi / 2, abs=1e-12)


def test_clearance_of_a_flat_die_and_of_a_dome():
    """A die of 0.5 mm under a mouth of 2.2 mm and wall leaning in; a dome to the nearest wall point."""
    wall_at = lambda z: 2.2 - 0.2 * (z + 0.4) / 4.4  # noqa: E731
    lean = math.atan2(0.2, 4.4)
    expected = (wall_at(0.0) - 0.5) * math.cos(lean)
    assert read(frustum())["pocket clearance"].measured == pytest.approx(expected, abs=1e-5)
    domed = Emitter((Disk(0.5),), dome=Dome(1.3, 1.41))
    expected = wall_at(0.0) * math.cos(lean) - 1.3
    assert read(frustum(), domed)["pocket clearance"].measured == pytest.approx(expected, abs=1e-5)


@pytest.mark.parametrize("section, diameter, tolerance", [
    (cylinder(10.0, 0.0, 6.0), 6.0, 0.01),  # a plate: its thickness
    (Section((line("foot", MECHANICAL, (0.0, 0.0), (3.0, 0.0)), line("rim", MECHANICAL, (3.0, 0.0), (3.0, 20.0)),
              line("exit face", REFRACTING, (3.0, 20.0), (0.0, 20.0)))), 6.0, 0.02),  # a rod: its diameter
    (Section((arc("exit face", REFRACTING, 4.0, np.pi, 0.0),)), 8.0, 0.01),  # a ball
], ids=["plate", "rod", "ball"])  # fmt: skip
def test_the_largest_inscribed_circle(section, diameter, tolerance):
    """Plate: its height; rod: its diameter, mirror half included; ball: itself."""
    assert gauge.inscribed_circle(section)[0] == pytest.approx(diameter, abs=tolerance)


def test_a_circle_beside_a_pocket():
    """A cylinder with a conical pocket: the circle between cone, rim, foot or face by bisection of its four distances."""
    section, _ = cone_pocket(radius=5.0, height=7.0, mouth=3.0, depth=2.0)
    # On the axis the circle touches the cone's tip (0, 2) and the face z = 7: diameter 5; off the axis it may
    # sink beside the cone: maximise the least distance over a grid, 5 µm fine at the end.
    r, z = np.meshgrid(np.linspace(0.0, 5.0, 501), np.linspace(0.0, 7.0, 701))
    side = np.abs(2.0 * r + 3.0 * z - 6.0) / math.sqrt(13.0)
    along = np.clip(((r - 3.0) * -3.0 + z * 2.0) / 13.0, 0.0, 1.0)
    side = np.hypot(r - (3.0 - 3.0 * along), z - 2.0 * along)
    inside = 2.0 * r + 3.0 * z > 6.0
    expected = 2.0 * np.where(inside, np.minimum.reduce([side, 5.0 - r, 7.0 - z, z]), 0.0).max()
    assert gauge.inscribed_circle(section)[0] == pytest.approx(expected, abs=0.03)


def test_the_least_radius_of_curvature_is_that_of_an_arc():
    """A spherical face of 4 mm: 4 mm, to a part in a thousand; straight lines count as flat."""
    half = 0.5 * np.pi
    inner, outer = arc("centre lens", REFRACTING, 4.0, 0.0, half), arc("exit face", REFRACTING, 9.0, half, 0.0)
    foot = line("foot", MECHANICAL, inner.points[-1], outer.points[0])
    value, where = gauge._least_radius(Section((inner, foot, outer)))
    assert value == pytest.approx(4.0, rel=1e-3) and where.startswith("centre lens")


@pytest.mark.parametrize("measured, lower, upper, slack", [
    (1.2, 1.0, None, 0.2), (0.9, 1.0, None, -0.1), (3.0, None, 2.5, -0.5), (2.0, 1.0, 2.5, 0.5), (2.0, None, None, np.inf),
])  # fmt: skip
def test_slack_is_the_room_left(measured, lower, upper, slack):
    """Positive inside the interval, negative outside by how much, infinite without bounds."""
    row = gauge.Reading("wall", "mm", measured, lower, upper, "here")
    assert row.slack == pytest.approx(slack) and row.met == (slack > 0)


def test_rounding_does_not_break_a_limit_but_a_micron_does():
    """A measure 1e-9 short is met; 1e-6 short is not."""
    assert gauge.Reading("rim", "mm", 1.0 - 1e-9, 1.0, None, "rim").met
    assert not gauge.Reading("rim", "mm", 1.0 - 1e-6, 1.0, None, "rim").met
