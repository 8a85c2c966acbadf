"""The keys of a brief, section by section: what each may be, what it means, what it is when left out.

Every length key ends in ``_mm``, every angle in ``_deg``.  A section is a frozen pydantic model that
knows no other section; what two sections owe each other is in ``crosscheck.py``.  Sections::

    name            compulsory; the folder of the run
    [emitter]       compulsory: shape and size, or a list of [[emitter.die]]
    [lens]          compulsory: aperture_mm (fixed) or aperture_max_mm (the largest allowed)
    [target]        compulsory: one of spot, half-angle, beam angle, table
    [surroundings] [mould] [search]     optional
"""

from typing import Annotated

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field

from inverse.brief.wanted import Choice, FolderName, Number, Row, Several, Text, Whole
from inverse.refine.plan import EFFORTS

LARGEST_TABLE = 2000  # rows
MOST_DICE = 100
NARROWEST = 0.05  # deg; a narrower half-angle is a laser's

SHAPE_SIZES = {"disk": ("diameter_mm",), "square": ("side_mm",), "rectangle": ("width_mm", "height_mm")}


def _number(kind, *limits, **ends):
    return Annotated[kind, BeforeValidator(Number(*limits, **ends))]


def _key(meaning, default=None):
    return Field(default=default, description=meaning)


# 0.001 mm = 1 µm: below it, geometric optics no longer describes an LED or a lens (common practice).
DieSize = _number(float, 0.001, 100.0, "mm")
Offset = _number(float, -100.0, 100.0, "mm")
Aperture = _number(float, 1.0, 500.0, "mm")
# n < 1.3: no transparent solid; n > 2.5: no optical polymer or glass (common practice).
Index = _number(float, 1.3, 2.5)
HalfAngle = _number(float, NARROWEST, 90.0, "deg", open_high=True)
FullAngle = _number(float, 0.1, 180.0, "deg", open_high=True)
Shape = Annotated[str, BeforeValidator(Choice(tuple(SHAPE_SIZES)))]
MaterialName = Annotated[str, BeforeValidator(Text("the name of a material"))]
FileName = Annotated[str, BeforeValidator(Text("the name of a CSV file beside the brief"))]
Table = Annotated[
    tuple[Annotated[tuple[float, float], BeforeValidator(Row())], ...],
    BeforeValidator(Several(2, LARGEST_TABLE, "rows [angle_deg, relative intensity]")),
]


class Section(BaseModel):
    """Unknown keys are refused; values never change after reading."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class Outline(Section):
    """The keys that say the shape and size of a die."""

    shape: Shape | None = _key("outline of the light-giving area: disk, square or rectangle")
    diameter_mm: DieSize | None = _key("mm, diameter of a disk")
    side_mm: DieSize | None = _key("mm, side of a square")
    width_mm: DieSize | None = _key("mm, along x, of a rectangle")
    height_mm: DieSize | None = _key("mm, along y, of a rectangle")


class Die(Outline):
    """[[emitter.die]]: one of several dice, each with its own place."""

    x_mm: Offset = _key("mm, centre of the die from the axis", 0.0)
    y_mm: Offset = _key("mm", 0.0)


class Dome(Section):
    """[emitter.dome]: a hemisphere on the dice, centred on the axis."""

    index: Index | None = _key("refractive index inside the dome")
    radius_mm: DieSize | None = _key("mm, radius of the hemisphere, centred on the emitter plane")


Dice = Annotated[tuple[Die, ...], BeforeValidator(Several(1, MOST_DICE, "tables [[emitter.die]]"))]


class Emitter(Outline):
    """[emitter]: one die, a grid of equal dice, or a list of dice."""

    rows: Annotated[int, BeforeValidator(Whole(1, 20))] | None = _key("equal dice along y")
    columns: Annotated[int, BeforeValidator(Whole(1, 20))] | None = _key("equal dice along x")
    gap_mm: _number(float, 0.0, 50.0, "mm") | None = _key("mm, dark gap between neighbouring dice")
    flux_lm: _number(float, 0.001, 1e6, "lm") = _key("lm leaving the package, dome included", 100.0)
    above_board_mm: _number(float, 0.0, 20.0, "mm") = _key("mm, from the board up to the emitter plane", 0.4)
    law: Annotated[str, BeforeValidator(Choice(("lambertian", "cosine_power", "table")))] | None = _key(
        "how intensity falls with the angle from the normal (inside the dome, if any)"
    )
    law_power: _number(float, 0.0, 200.0) | None = _key("m of intensity = cos^m; 1 is Lambertian")
    law_table: Table | None = _key("[angle_deg, relative intensity], linear in between")
    law_table_file: FileName | None = _key("CSV file beside the brief: angle_deg, relative intensity")
    dome: Dome | None = None
    die: Dice | None = None


class Lens(Section):
    """[lens]: material, and the box the lens must fit."""

    material: MaterialName | None = _key("lens material")
    index: Index | None = _key("refractive index of the lens, instead of a material")
    wavelength_nm: _number(float, 300.0, 2000.0, "nm") | None = _key("nm, design wavelength")
    wavelength_um: _number(float, 0.3, 2.0, "µm") | None = _key("µm, design wavelength")
    absorption_per_mm: _number(float, 0.0, 1.0, "per mm") | None = _key("per mm, bulk absorption of the lens")
    aperture_mm: Aperture | None = _key("mm, clear diameter, fixed")
    aperture_max_mm: Aperture | None = _key("mm, largest clear diameter; the search may choose less")
    height_max_mm: _number(float, 0.1, 500.0, "mm") | None = _key("mm, foot to highest point")
    foot_mm: _number(float, -50.0, 0.0, "mm") | None = _key("mm, z of the foot; the emitter plane is z = 0")
    clearance_mm: _number(float, 0.001, 50.0, "mm") = _key("mm, least gap from LED to pocket", 0.4)


class Target(Section):
    """[target]: the beam wanted, in one of four ways."""

    spot_diameter_mm: _number(float, 0.1, 1e7, "mm") | None = _key("mm, diameter of the spot")
    half_angle_deg: HalfAngle | None = _key("deg, half-angle of the cone")
    beam_angle_deg: FullAngle | None = _key("deg, full angle at 50 % of the peak intensity")
    field_angle_deg: FullAngle | None = _key("deg, full angle at 10 % of the peak intensity")
    table: Table | None = _key("[angle_deg, relative intensity], linear in between, dark beyond")
    table_file: FileName | None = _key("CSV file beside the brief: angle_deg, relative intensity")
    distance_mm: _number(float, 1.0, 1e7, "mm") | None = _key("mm, from the emitter plane to the lit plane")
    share: _number(float, 0.0, 1.0, "", open_low=True) | None = _key(
        "wanted share of the emitted flux inside the target"
    )


class Port(Section):
    """[surroundings.port]: a flat window between the lens and the water."""

    material: MaterialName | None = _key("window material")
    index: Index | None = _key("refractive index of the window, instead of a material")
    thickness_mm: _number(float, 0.1, 200.0, "mm") = _key("mm", 5.0)
    gap_mm: _number(float, 0.0, 500.0, "mm") = _key("mm, from the top of the lens to the window", 1.0)


class Surroundings(Section):
    """[surroundings]: the medium the beam is wanted in; the lens itself stands in air."""

    medium: Annotated[str, BeforeValidator(Choice(("air", "water")))] = _key(
        "air, or water behind a flat port", "air"
    )
    port: Port | None = None


class Mould(Section):
    """[mould]: what the tool maker needs."""

    draft_deg: _number(float, 0.1, 15.0, "deg") = _key("deg, least draft of every wall", 1.5)
    wall_mm: _number(float, 0.05, 50.0, "mm") = _key("mm, least wall thickness", 0.8)
    thickest_mm: _number(float, 0.1, 500.0, "mm") | None = _key("mm, greatest thickness along the axis")
    corner_radius_mm: _number(float, 0.0, 10.0, "mm") = _key("mm, least radius of curvature of the optical curves", 0.0)
    rim_mm: _number(float, 0.05, 50.0, "mm") = _key("mm, thickness of the rim edge, or of the flange", 0.5)
    flange_mm: _number(float, 0.0, 100.0, "mm") = _key("mm, flange outside the clear diameter", 0.0)


class Search(Section):
    """[search]: how hard to look; never what is wanted."""

    effort: Annotated[str, BeforeValidator(Choice(EFFORTS))] = _key("quick, normal or thorough", "normal")
    seed: Annotated[int, BeforeValidator(Whole(0, 2**31 - 1))] = _key("fixes every random choice", 1)
    exit_face: Annotated[str, BeforeValidator(Choice(("auto", "single", "stepped")))] = _key(
        "auto, single (one curve) or stepped (disc and ring)", "auto"
    )
    verify_rays: Annotated[int, BeforeValidator(Whole(10_000, 1_000_000_000))] = _key(
        "rays of the independent check", 1_000_000
    )


NAME = FolderName()
SECTIONS = {
    "emitter": Emitter,
    "lens": Lens,
    "target": Target,
    "surroundings": Surroundings,
    "mould": Mould,
    "search": Search,
}
COMPULSORY = ("emitter", "lens", "target")
NESTED = {("emitter", "die"): Die, ("emitter", "dome"): Dome, ("surroundings", "port"): Port}


def known_keys(path):
    """The keys a table at ``path`` may hold; () for a path that is no table. List indices are ignored."""
    path = tuple(part for part in path if not isinstance(part, int))
    if not path:
        return ("name", *SECTIONS)
    model = NESTED.get(path) or (SECTIONS.get(path[0]) if len(path) == 1 else None)
    return tuple(model.model_fields) if model else ()
