"""Every default put in its place, so that a settled section says all there is to say.

A settled section uses one way of saying each thing (nanometres, an inline table, an explicit law),
and settling it again changes nothing: that is what lets the resolved brief re-read to itself.
"""

from inverse.brief import beam_shape, table
from inverse.brief.rules import LAW_KEYS
from inverse.brief.schema import NARROWEST, Port

WAVELENGTH = 550.0  # nm, near the peak of the eye's sensitivity
LEAST_LAW = 1.0  # deg; an emission law narrower than this belongs to a laser, not to an LED
LENS_MATERIAL = "PMMA"  # the usual moulding resin for such lenses (common practice, no source)
PORT_MATERIAL = "PMMA"


def emitter(section, folder, complaints):
    """Settled [emitter]; its law table is loaded and checked."""
    given = [key for key in LAW_KEYS if getattr(section, key) is not None]
    law = section.law or (LAW_KEYS[given[0]] if given else "lambertian")
    change = {"law": law, "law_table_file": None}
    if section.die is None:
        change |= {"rows": section.rows or 1, "columns": section.columns or 1}
        change["gap_mm"] = section.gap_mm or 0.0
    change["law_table"] = table.settled(
        "emitter", "law_table", section, folder, complaints, least_width=LEAST_LAW, sampled=90.0
    )
    return section.model_copy(update=change)


def lens(section, emitter, material):
    """Settled [lens]; ``emitter`` is settled, ``material`` is the lens's."""
    aperture = section.aperture_mm or section.aperture_max_mm
    wavelength = section.wavelength_nm or WAVELENGTH
    if section.wavelength_um is not None:
        wavelength = 1000.0 * section.wavelength_um
    change = {"wavelength_nm": wavelength, "wavelength_um": None}
    if section.index is None:
        change["material"] = material.name
    if section.absorption_per_mm is None:
        change["absorption_per_mm"] = float(material.absorption)
    if section.height_max_mm is None:
        change["height_max_mm"] = aperture
    if section.foot_mm is None:
        change["foot_mm"] = 0.0 - emitter.above_board_mm
    return section.model_copy(update=change)


def target(section, folder, complaints):
    """Settled [target]; its table is loaded and checked."""
    change = {"table_file": None}
    change["table"] = table.settled(
        "target", "table", section, folder, complaints, least_width=NARROWEST, end_below=90.0
    )
    if section.beam_angle_deg is not None and section.field_angle_deg is None:
        change["field_angle_deg"] = section.beam_angle_deg * beam_shape.GAUSSIAN_RATIO
    return section.model_copy(update=change)


def surroundings(section):
    """Settled [surroundings]: water always stands behind a port."""
    if section.medium == "air":
        return section
    port = section.port or Port()
    if port.material is None and port.index is None:
        port = port.model_copy(update={"material": PORT_MATERIAL})
    return section.model_copy(update={"port": port})
