"""From settled sections (mm and deg in the keys) to the objects of the physics rooms (mm and rad)."""

import dataclasses
import math

import numpy as np

from inverse import material as materials
from inverse.brief import beam_shape
from inverse.brief.table import end_of_light
from inverse.emitter import CosinePower, Disk, Dome, Emitter, Rectangle, Table
from inverse.profile.envelope import Envelope
from inverse.refine.plan import Plan
from inverse.target import Target
from inverse.units import rad

NOT_FOR_PARTS = ("water",)  # known to the material room as a medium


def material(path, section, default, complaints):
    """Material of a lens or port section, its absorption as given; None and a complaint when unknown."""
    if section.index is not None:
        found = materials.plain(section.index)
    else:
        try:
            found = materials.by_name(section.material or default)
        except ValueError as fault:
            complaints.add((*path, "material"), str(fault))
            return None
        if found.name in NOT_FOR_PARTS:
            complaints.add((*path, "material"), f'got "{found.name}", wanted a solid material')
            return None
    if getattr(section, "absorption_per_mm", None) is not None:
        found = dataclasses.replace(found, absorption=section.absorption_per_mm)
    return found


def index(substance, wavelength, path, complaints):
    """Refractive index at ``wavelength`` (µm); None and a complaint outside the measured range."""
    try:
        return substance.index(wavelength)
    except ValueError as fault:
        complaints.add(path, str(fault))
        return None


def led(section):
    """Emitter of a settled [emitter]."""
    if section.die is not None:
        dies = tuple(_die(die, die.x_mm, die.y_mm) for die in section.die)
    else:
        width = section.diameter_mm or section.side_mm or section.width_mm
        height = section.diameter_mm or section.side_mm or section.height_mm
        columns = (np.arange(section.columns) - (section.columns - 1) / 2) * (width + section.gap_mm)
        rows = (np.arange(section.rows) - (section.rows - 1) / 2) * (height + section.gap_mm)
        dies = tuple(_die(section, float(x), float(y)) for y in rows for x in columns)
    dome = Dome(section.dome.radius_mm, section.dome.index) if section.dome else None
    return Emitter(dies, section.flux_lm, _law(section), dome, section.above_board_mm)


def _die(section, x, y):
    if section.shape == "disk":
        return Disk(section.diameter_mm / 2, x, y)
    if section.shape == "square":
        return Rectangle(section.side_mm, section.side_mm, x, y)
    return Rectangle(section.width_mm, section.height_mm, x, y)


def _law(section):
    if section.law == "table":
        angles, values = np.array(section.law_table).T
        return Table(rad(angles), values / values.max())
    return CosinePower(section.law_power if section.law == "cosine_power" else 1.0)


def target(section):
    """Target of a settled [target]."""
    distance, share = section.distance_mm, section.share
    if section.spot_diameter_mm is not None:
        return Target("spot", math.atan2(section.spot_diameter_mm / 2, distance), distance, share)
    if section.half_angle_deg is not None:
        return Target("spot", rad(section.half_angle_deg), distance, share)
    if section.beam_angle_deg is not None:
        angles, values = beam_shape.table(rad(section.beam_angle_deg), rad(section.field_angle_deg))
        return Target("shape", float(angles[-1]), distance, share, angles, values)
    rows = np.array(section.table)
    angles, values = rows[rows[:, 0] <= end_of_light(section.table)].T
    return Target("shape", float(rad(angles[-1])), distance, share, rad(angles), values / values.max())


def envelope(lens, mould):
    """Envelope of settled [lens] and [mould]."""
    return Envelope(
        radius=(lens.aperture_mm or lens.aperture_max_mm) / 2,
        height=lens.height_max_mm,
        foot=lens.foot_mm,
        clearance=lens.clearance_mm,
        draft=rad(mould.draft_deg),
        wall=mould.wall_mm,
        rim=mould.rim_mm,
        thickest=mould.thickest_mm,
        corner_radius=mould.corner_radius_mm,
        flange=mould.flange_mm,
    )


def plan(search):
    """Plan of a [search]."""
    return Plan(search.effort, search.seed, search.exit_face, search.verify_rays)
