"""What the refinement measures on its graphs against what the gauge finds on the finished section.

Graphs and jnp minima on one side, dense CAD curves, k-d tree and Voronoi on the other.
"""

from dataclasses import replace

import numpy as np
import pytest

from inverse.emitter import Disk, Dome, Emitter
from inverse.profile import gauge, moulding
from inverse.profile.lens import section
from traced import BARE, BOX, random_lens

DOMED = Emitter((Disk(0.6),), dome=Dome(0.7, 1.41))
FULL = replace(BOX, thickest=9.0, corner_radius=0.2)
# mm (or rad): samples every 30 µm see a distance too large by (15 µm)²/2d; the circle's centre lies on a
# grid of 25 heights (0.4 mm apart here; 0.31 mm short at worst when written), the least radius is a difference quotient; the flank counts up to a radius that falls
# between two samples, 30 µm apart.
TOLERANCE = {"greatest thickness": 0.35, "least curve radius": 0.02, "flank to exit wall": 0.03}


@pytest.mark.parametrize("emitter", [BARE, DOMED], ids=["bare", "dome"])
@pytest.mark.parametrize("box", [FULL, replace(FULL, flange=1.5)], ids=["rim", "flange"])
@pytest.mark.parametrize("drop", [None, -0.6, 0.6])
def test_every_limit_is_measured_alike(emitter, box, drop):
    """Each limit of the refinement has its reading, with the same interval and the same value."""
    lens = random_lens(6, drop, box)
    rows = moulding.limits(box, emitter)
    values = np.asarray(moulding.measured(lens, box, rows, moulding.DENSE))
    found = {r.name: r for r in gauge.readings(section(lens, box), box, emitter)}
    for row, value in zip(rows, values):
        if row.name == "line of sight":  # a condition of the tracer, not of the mould
            continue
        reading = found[row.name]
        assert reading.unit == row.unit
        assert (-np.inf if reading.lower is None else reading.lower) == row.lower
        assert (np.inf if reading.upper is None else reading.upper) == row.upper
        assert reading.measured == pytest.approx(float(value), abs=TOLERANCE.get(row.name, 2e-3)), row.name


def test_the_gauge_sees_a_wall_too_thin():
    """Control: a foot 0.3 mm narrower is found narrower by 0.3 mm, and no longer met."""
    lens = random_lens(6)
    narrow = replace(lens, foot=lens.foot - 0.3)
    box = replace(BOX, wall=float(lens.foot) - 0.1)
    wide, thin = (
        {r.name: r for r in gauge.readings(section(part, box), box, BARE)}["foot width"] for part in (lens, narrow)
    )
    assert wide.measured - thin.measured == pytest.approx(0.3, abs=1e-9)
    assert wide.met and not thin.met
