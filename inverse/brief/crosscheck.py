"""What the sections of a brief owe each other: geometry that cannot exist, light that cannot leave.

Symbols (mm): R clear radius, c clearance, w least wall, h greatest height, f = −foot, K radius the
pocket must stay clear of (dome, or farthest corner of the dice), D dome radius (0 without), n index.

    pocket      K + c + w < R          beside the LED there is room for gap and wall
    height      f + D + c + w < h      and above it
    dome        reach <= D / n         a ray from radius r meets the sphere at sin i <= r/D, so beyond
                                       D/n total reflection traps part of the light
    water       asin(1/n_water)        the widest angle beyond a flat port (Snell's law)

``led`` is the Emitter, ``emitter``, ``lens``, ``target``, ``surroundings`` and ``mould`` are settled
sections.  Each check hands ``complaints`` the key to change, what came, and what was wanted.
"""

import math

from inverse.brief import beam_shape
from inverse.brief.schema import NARROWEST
from inverse.brief.table import end_of_light
from inverse.emitter import Disk
from inverse.units import deg

TOUCHING = 1e-9  # mm; decimal positions of touching dice overlap by rounding, far less than this
LIKE_WATER = 0.02  # no solid lens material comes so near the index of water (common practice)


def dice(led, complaints):
    """No two dice overlap."""
    for j, two in enumerate(led.dies):
        for i, one in enumerate(led.dies[:j]):
            if _overlap(one, two):
                problem = f"overlaps die #{i + 1}, wanted a gap or touching edges"
                complaints.add(("emitter", "die", j), problem)


def _overlap(one, two):
    dx, dy = abs(one.x - two.x), abs(one.y - two.y)
    if isinstance(one, Disk) and isinstance(two, Disk):
        return math.hypot(dx, dy) < one.radius + two.radius - TOUCHING
    if isinstance(one, Disk) or isinstance(two, Disk):
        disk, box = (one, two) if isinstance(one, Disk) else (two, one)
        outside = math.hypot(max(dx - box.width / 2, 0.0), max(dy - box.height / 2, 0.0))
        return outside < disk.radius - TOUCHING
    across, along = (one.width + two.width) / 2, (one.height + two.height) / 2
    return dx < across - TOUCHING and dy < along - TOUCHING


def dome(led, complaints):
    """The dome covers the dice and lets all their light out."""
    if led.dome is None:
        return
    radius, free = led.dome.radius, led.dome.radius / led.dome.index
    wanted = f"wanted a radius of {led.reach * led.dome.index:.5g} mm or more"
    if led.reach >= radius:
        problem = f"got {radius:g} mm, but the dice reach {led.reach:.5g} mm from the axis"
    elif led.reach > free:
        problem = (
            f"got {radius:g} mm, but the dice reach {led.reach:.5g} mm from the axis, and total reflection "
            f"inside the dome traps light from beyond radius/index = {free:.5g} mm"
        )
    else:
        return
    complaints.add(("emitter", "dome", "radius_mm"), f"{problem}; {wanted}")


def foot(emitter, lens, complaints):
    """The foot does not sink into the board."""
    board = 0.0 - emitter.above_board_mm
    if lens.foot_mm < board:
        problem = f"got {lens.foot_mm:g} mm, but the board is at {board:g} mm, wanted the foot at or above it"
        complaints.add(("lens", "foot_mm"), problem)


def pocket(led, lens, mould, complaints):
    """Beside and above the LED there is room for the gap and the wall."""
    key = "aperture_mm" if lens.aperture_mm is not None else "aperture_max_mm"
    aperture, clear = getattr(lens, key), led.keep_out + lens.clearance_mm
    wanted = f"wanted more than {2 * (clear + mould.wall_mm):.5g} mm"
    if led.reach >= aperture / 2:
        problem = (
            f"got {aperture:g} mm, but the emitter is wider than the aperture, it reaches {led.reach:.5g} mm "
            f"from the axis; {wanted}"
        )
        complaints.add(("lens", key), problem)
    elif clear + mould.wall_mm >= aperture / 2:
        problem = (
            f"got {aperture:g} mm, but {'dome' if led.dome else 'emitter'} {led.keep_out:.5g} mm, clearance "
            f"{lens.clearance_mm:g} mm and wall {mould.wall_mm:g} mm do not fit in its radius; {wanted}"
        )
        complaints.add(("lens", key), problem)
    above = led.dome.radius if led.dome else 0.0
    need = above + lens.clearance_mm + mould.wall_mm - lens.foot_mm
    if need >= lens.height_max_mm:
        problem = (
            f"got {lens.height_max_mm:g} mm, but foot {lens.foot_mm:g} mm, dome {above:g} mm, clearance "
            f"{lens.clearance_mm:g} mm, wall {mould.wall_mm:g} mm take it up; wanted more than {need:.5g} mm"
        )
        complaints.add(("lens", "height_max_mm"), problem)
    if mould.corner_radius_mm >= clear:
        problem = f"got {mould.corner_radius_mm:g} mm, wanted less than the pocket's radius {clear:.5g} mm"
        complaints.add(("mould", "corner_radius_mm"), problem)


def mould(lens, mould, complaints):
    """The rules of the mould do not contradict each other."""
    if mould.thickest_mm is not None and mould.thickest_mm <= max(mould.wall_mm, mould.rim_mm):
        problem = (
            f"got {mould.thickest_mm:g} mm, wanted more than the least wall {mould.wall_mm:g} mm "
            f"and the rim {mould.rim_mm:g} mm"
        )
        complaints.add(("mould", "thickest_mm"), problem)
    if mould.rim_mm + mould.wall_mm >= lens.height_max_mm:
        problem = (
            f"got {mould.rim_mm:g} mm, but with the wall of {mould.wall_mm:g} mm nothing is left "
            f"of the height {lens.height_max_mm:g} mm, wanted a thinner rim"
        )
        complaints.add(("mould", "rim_mm"), problem)


def distance(lens, target, surroundings, complaints):
    """The lit plane lies beyond the lens and the port."""
    if target.distance_mm is None:
        return
    port = surroundings.port
    top = lens.foot_mm + lens.height_max_mm + (port.gap_mm + port.thickness_mm if port else 0.0)
    if target.distance_mm <= top:
        problem = (
            f"got {target.distance_mm:g} mm, but the {'port' if port else 'lens'} may reach "
            f"{top:.5g} mm from the emitter plane, wanted more"
        )
        complaints.add(("target", "distance_mm"), problem)


def beam(target, complaints):
    """Beam and field angle make a shape that ends below 90°; a spot is not a pin prick."""
    if target.spot_diameter_mm is not None:
        half = deg(math.atan2(target.spot_diameter_mm / 2, target.distance_mm))
        if half < NARROWEST:
            problem = f"got a half-angle of {half:.3g} deg, wanted at least {NARROWEST:g} deg"
            complaints.add(("target", "spot_diameter_mm"), problem)
    if target.beam_angle_deg is None:
        return
    ratio = target.field_angle_deg / target.beam_angle_deg
    least, greatest = beam_shape.LEAST_RATIO, beam_shape.GREATEST_RATIO
    if not least <= ratio <= greatest:
        problem = (
            f"got {target.field_angle_deg:g} deg, wanted {least:g} to {greatest:g} times "
            f"the beam angle of {target.beam_angle_deg:g} deg"
        )
        complaints.add(("target", "field_angle_deg"), problem)
        return
    end = beam_shape.end_angle(target.beam_angle_deg, target.field_angle_deg)
    if end >= 90.0:
        problem = (
            f"these angles leave light up to {end:.4g} deg from the axis, wanted a shape "
            "that ends below 90 deg: narrow the beam or the field angle"
        )
        complaints.add(("target", "beam_angle_deg"), problem)


def water(lens, target, water_index, complaints):
    """Behind a port: a lens is not made of water, and no shape is wider than a flat port can pass."""
    if lens.index is not None and lens.index < water_index + LIKE_WATER:
        problem = (
            f"got {lens.index:g}, about that of water ({water_index:.4f}); the lens stands in air "
            "behind the port, wanted the index of its own material"
        )
        complaints.add(("lens", "index"), problem)
    widest = deg(math.asin(1.0 / water_index))
    limit = f"but behind a flat port no light in water is wider than {widest:.1f} deg, wanted less"
    if target.table is not None and end_of_light(target.table) > widest:
        problem = f"got light up to {end_of_light(target.table):.4g} deg, {limit}"
        complaints.add(("target", "table"), problem)
    if target.beam_angle_deg is not None and target.field_angle_deg / 2 > widest:
        problem = f"got a tenth of the peak at {target.field_angle_deg / 2:.4g} deg, {limit}"
        complaints.add(("target", "beam_angle_deg"), problem)


def notes(index, half_angle, water_index):
    """Sentences worth reading that forbid nothing. ``half_angle`` in rad; ``water_index`` None in air."""
    found = []
    if index < math.sqrt(2.0):
        found.append(
            f"The lens index {index:.4f} is below √2: light that leaves the emitter sideways "
            "cannot be totally reflected by the flank and is lost."
        )
    if water_index is not None and half_angle > math.asin(1.0 / water_index):
        widest = deg(math.asin(1.0 / water_index))
        found.append(
            f"Behind a flat port no light in water is wider than {widest:.1f} deg: "
            "the whole target cannot be filled."
        )
    return tuple(found)
