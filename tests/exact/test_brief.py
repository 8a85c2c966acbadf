"""A good brief arrives as it was meant: units converted, defaults in place, nothing lost on re-reading."""

import dataclasses
import hashlib
import math
from pathlib import Path

import numpy as np
import pytest

from inverse.brief import parse, read
from inverse.brief import beam_shape
from inverse.brief.lines import line_of, positions
from inverse.brief.schema import NESTED, SECTIONS
from inverse.emitter import CosinePower, Disk, Dome, Rectangle, Table

CONFIGS = Path(__file__).parents[2] / "configs"
SHIPPED = sorted(CONFIGS.glob("**/*.toml"))

LEAST = """\
name = "least"
[emitter]
shape = "disk"
diameter_mm = 2.0
[lens]
aperture_mm = 20.0
[target]
half_angle_deg = 6.0
"""
DICE = LEAST.replace('shape = "disk"\ndiameter_mm = 2.0\n', """\
[[emitter.die]]
shape = "square"
side_mm = 0.5
x_mm = -0.4
y_mm = 0.1
[[emitter.die]]
shape = "rectangle"
width_mm = 0.5
height_mm = 0.25
x_mm = 0.4
""").replace("[emitter]\n", "[emitter]\nlaw_table = [[0, 2], [60, 1], [90, 0]]\n")
WATER = LEAST + '[surroundings]\nmedium = "water"\nport = { index = 1.52, thickness_mm = 3, gap_mm = 0.5 }\n'
BEAM = LEAST.replace(
    "half_angle_deg = 6.0", "beam_angle_deg = 12\nfield_angle_deg = 30\nshare = 0.5\ndistance_mm = 900"
)
TABLE = LEAST.replace("half_angle_deg = 6.0", "table = [[0, 5], [10, 10], [20, 0], [30, 0]]")
SPOT = LEAST.replace("half_angle_deg = 6.0", "spot_diameter_mm = 500\ndistance_mm = 2000")
VARIANTS = {"least": LEAST, "dice": DICE, "water": WATER, "beam": BEAM, "table": TABLE, "spot": SPOT}


def same(a, b):
    """Deep equality of nested dataclasses with arrays."""
    if dataclasses.is_dataclass(a):
        names = [f.name for f in dataclasses.fields(a)]
        return type(a) is type(b) and all(same(getattr(a, name), getattr(b, name)) for name in names)
    if isinstance(a, tuple):
        return type(b) is tuple and len(a) == len(b) and all(map(same, a, b))
    if isinstance(a, np.ndarray):
        return np.array_equal(a, b)
    return type(a) is type(b) and a == b


@pytest.mark.parametrize("text", VARIANTS.values(), ids=VARIANTS)
def test_the_resolved_brief_reads_back_to_the_same_brief(text):
    """Every field, array and digit survives, and resolving again gives the same bytes."""
    first = parse(text)
    again = parse(first.resolved)
    assert again.resolved == first.resolved
    assert same(first, again)


@pytest.mark.parametrize("path", SHIPPED, ids=[p.stem for p in SHIPPED])
def test_shipped_briefs_are_good_and_read_back(path, tmp_path):
    """Each brief of configs/ reads without fault; its resolved text stands alone, away from tables."""
    first = read(path)
    (tmp_path / "brief.toml").write_text(first.resolved)
    assert same(first, read(tmp_path / "brief.toml"))
    assert first.notes == ()


def test_two_different_briefs_are_not_equal():
    """Equality looks at what is wanted, not at the name only."""
    assert parse(LEAST) == parse(LEAST)
    assert parse(LEAST) != parse(LEAST.replace("20.0", "20.5"))


def test_the_digest_is_the_hash_of_the_resolved_text():
    """SHA-256 of the UTF-8 bytes, so anyone can check it with a standard tool."""
    brief = parse(LEAST)
    assert brief.digest == hashlib.sha256(brief.resolved.encode("utf-8")).hexdigest()


@pytest.mark.parametrize("old, new", [
    ("[lens]", "# a remark\n\n[lens]"),
    ("aperture_mm = 20.0", "aperture_mm = 20"),
    ("aperture_mm = 20.0", "aperture_mm = 20.0\nwavelength_um = 0.55"),
    ("aperture_mm = 20.0", 'aperture_mm = 20.0\nmaterial = "pmma"'),
    ("\n", "\r\n"),
    ('name = "least"', '\ufeffname = "least"'),
])
def test_the_digest_ignores_how_a_brief_is_written(old, new, tmp_path):
    """Remarks, whole numbers, other units, defaults spelt out, line ends and BOM change nothing."""
    (tmp_path / "brief.toml").write_bytes(LEAST.replace(old, new).encode("utf-8"))
    assert read(tmp_path / "brief.toml").digest == parse(LEAST).digest


def test_only_what_is_compulsory_is_needed_and_the_rest_has_its_default():
    """The defaults the schema promises: lens as high as wide, foot on the board, PMMA at 550 nm."""
    brief = parse(LEAST)
    assert brief.material.name == "PMMA" and brief.wavelength == 0.55
    assert brief.index == brief.material.index(0.55) and brief.absorption == brief.material.absorption
    box = brief.envelope
    assert (box.radius, box.height, box.foot, box.clearance) == (10.0, 20.0, -0.4, 0.4)
    assert (box.wall, box.rim, box.thickest, box.corner_radius, box.flange) == (0.8, 0.5, None, 0.0, 0.0)
    assert math.degrees(box.draft) == pytest.approx(1.5, rel=1e-15)
    assert brief.emitter.dies == (Disk(1.0),) and brief.emitter.law == CosinePower(1.0)
    assert brief.emitter.dome is None and (brief.emitter.flux, brief.emitter.above_board) == (100.0, 0.4)
    assert not brief.aperture_is_maximum and brief.surroundings.port is None
    plan = brief.plan
    assert (plan.effort, plan.seed, plan.exit_face, plan.verify_rays) == ("normal", 1, "auto", 1_000_000)


@pytest.mark.parametrize("text", VARIANTS.values(), ids=VARIANTS)
def test_every_default_is_written_out(text):
    """A key with a default of its own stands in the resolved text of every brief that has its section."""
    resolved = parse(text).resolved
    for title, section in SECTIONS.items():
        body = resolved.split(f"[{title}]\n")[1]
        keys = [key for key, field in section.model_fields.items() if field.default is not None]
        assert [key for key in keys if f"\n{key} = " not in "\n" + body] == []


def test_every_number_has_its_unit_beside_it():
    """Each line key = value of the resolved text ends in a comment; lengths say mm, angles deg."""
    for text in VARIANTS.values():
        for line in parse(text).resolved.splitlines():
            key, equals, rest = line.partition(" = ")
            if equals and not line.startswith(("#", "name")):
                comment = rest.partition("  # ")[2]
                assert comment, line
                assert not key.endswith("_mm") or "mm" in comment, line
                assert not key.endswith("_deg") or "deg" in comment, line


def test_a_spot_at_a_distance_is_the_angle_from_the_emitter():
    """Half-angle = atan(radius / distance): 250 mm at 2000 mm."""
    target = parse(SPOT).target
    assert (target.kind, target.distance, target.share) == ("spot", 2000.0, None)
    assert math.tan(target.half_angle) == pytest.approx(250 / 2000, rel=1e-15)


def test_a_table_keeps_its_light_and_drops_its_dark_end():
    """Angles in rad up to the first dark row, peak scaled to 1."""
    target = parse(TABLE).target
    assert target.kind == "shape"
    assert np.degrees(target.angles) == pytest.approx([0, 10, 20], abs=1e-12)
    assert target.intensity == pytest.approx([0.5, 1.0, 0.0], abs=0)
    assert target.half_angle == target.angles[-1]


def test_beam_and_field_angle_are_met_by_the_shape():
    """Half the peak at 6°, a tenth at 15°, 1/1000 at the end: the two angles defined (common practice)."""
    target = parse(BEAM).target
    level = np.interp(np.radians([0.0, 6.0, 15.0]), target.angles, target.intensity)
    # linear interpolation between rows: h²/8 of the curvature, below 2e-3 with 161 rows on a smooth shape
    assert level == pytest.approx([1.0, 0.5, 0.1], abs=2e-3)
    assert target.intensity[-1] == pytest.approx(1e-3, rel=1e-9)
    assert target.half_angle == target.angles[-1]


@pytest.mark.parametrize("ratio", [1.02, 1.1, 1.5, 1.82, 3.0, 6.0])
def test_the_table_of_a_beam_follows_its_formula_between_rows(ratio):
    """Linear between its rows, the table is within 1 % of the peak of exp(−ln2 (θ/θ50)^p)."""
    beam = 0.2
    angles, values = beam_shape.table(beam, beam * ratio)
    p = math.log(math.log(10) / math.log(2)) / math.log(ratio)
    theta = np.linspace(0, angles[-1], 20_001)
    formula = np.exp(-math.log(2) * (theta / (beam / 2)) ** p)
    assert np.abs(np.interp(theta, angles, values) - formula).max() < 0.01
    assert np.all(np.diff(angles) > 0)


def test_a_beam_without_field_angle_is_a_gaussian():
    """I = exp(−θ²/2σ²) with σ = half width / √(2 ln 2) (FWHM of a Gaussian, closed form)."""
    target = parse(LEAST.replace("half_angle_deg = 6.0", "beam_angle_deg = 12")).target
    sigma = math.radians(6.0) / math.sqrt(2 * math.log(2))
    assert target.intensity == pytest.approx(np.exp(-(target.angles**2) / (2 * sigma**2)), rel=1e-12)


def test_a_grid_of_dice_is_centred_with_its_gap():
    """2 rows × 3 columns of 1.0 × 0.5 mm with 0.2 mm gaps: pitch 1.2 and 0.7 mm."""
    text = LEAST.replace('shape = "disk"\ndiameter_mm = 2.0', """\
shape = "rectangle"
width_mm = 1.0
height_mm = 0.5
rows = 2
columns = 3
gap_mm = 0.2""")
    dies = parse(text).emitter.dies
    assert sorted((round(d.x, 12), round(d.y, 12)) for d in dies) == [
        (x, y) for x in (-1.2, 0.0, 1.2) for y in (-0.35, 0.35)
    ]
    assert {(d.width, d.height) for d in dies} == {(1.0, 0.5)}


def test_touching_dice_are_allowed():
    """0.1 + 0.2 is not 0.3 in binary: dice that share an edge are no overlap."""
    text = LEAST.replace('shape = "disk"\ndiameter_mm = 2.0', """\
[[emitter.die]]
shape = "square"
side_mm = 0.2
x_mm = 0.1
[[emitter.die]]
shape = "square"
side_mm = 0.2
x_mm = 0.3
[[emitter.die]]
shape = "disk"
diameter_mm = 0.2
x_mm = 0.3
y_mm = 0.2""")
    assert len(parse(text).emitter.dies) == 3


def test_a_list_of_dice_keeps_places_and_law():
    """Sides and centres in mm as written; the law's table in rad with peak 1."""
    emitter = parse(DICE).emitter
    assert emitter.dies == (Rectangle(0.5, 0.5, -0.4, 0.1), Rectangle(0.5, 0.25, 0.4, 0.0))
    assert isinstance(emitter.law, Table)
    assert np.degrees(emitter.law.angles) == pytest.approx([0, 60, 90], rel=1e-14)
    assert emitter.law.values == pytest.approx([1.0, 0.5, 0.0], abs=0)


@pytest.mark.parametrize("keys, law", [
    ("law_power = 1.5", CosinePower(1.5)),
    ('law = "cosine_power"\nlaw_power = 1.5', CosinePower(1.5)),
    ('law = "lambertian"', CosinePower(1.0)),
])
def test_the_law_follows_from_its_keys(keys, law):
    """law may be left out when its number is given."""
    assert parse(LEAST.replace("diameter_mm", keys + "\ndiameter_mm")).emitter.law == law


def test_a_dome_has_its_radius_and_index():
    """[emitter.dome] becomes a Dome."""
    brief = parse(LEAST.replace("[lens]", "[emitter.dome]\nindex = 1.5\nradius_mm = 1.6\n[lens]"))
    assert brief.emitter.dome == Dome(1.6, 1.5)


def test_a_port_is_as_given_and_water_has_its_published_index():
    """n_d of water at 20 °C is 1.3334 (Daimon and Masumura 2007); the port keeps its plain index."""
    around = parse(WATER.replace("aperture_mm", "wavelength_nm = 587.6\naperture_mm")).surroundings
    assert around.name == "water" and around.index == pytest.approx(1.33340, abs=2e-5)
    assert (around.port.index, around.port.thickness, around.port.gap) == (1.52, 3.0, 0.5)


def test_water_without_a_port_gets_the_default_one():
    """The lens stands in air, so water always begins behind a window."""
    around = parse(LEAST + '[surroundings]\nmedium = "water"\n').surroundings
    assert (around.port.thickness, around.port.gap) == (5.0, 1.0)


def test_a_plain_index_and_an_absorption_replace_the_material():
    """index and absorption_per_mm reach both the brief and its material."""
    brief = parse(LEAST.replace("aperture_mm", "index = 1.6\nabsorption_per_mm = 0.01\naperture_mm"))
    assert brief.index == 1.6 == brief.material.index(0.4)
    assert brief.absorption == 0.01 == brief.material.absorption


def test_a_largest_aperture_is_told_from_a_fixed_one():
    """aperture_max_mm sets the radius and leaves the search free below it."""
    brief = parse(LEAST.replace("aperture_mm", "aperture_max_mm"))
    assert brief.aperture_is_maximum and brief.envelope.radius == 10.0


def test_an_effort_from_the_command_line_wins_and_is_recorded():
    """It stands in the resolved text, so the run says how it was made."""
    brief = parse(LEAST, effort="thorough")
    assert brief.plan.effort == "thorough" and 'effort = "thorough"' in brief.resolved
    assert parse(LEAST + '[search]\neffort = "quick"\n', effort="normal").plan.effort == "normal"


@pytest.mark.parametrize("index, count", [(1.41, 1), (1.4143, 0)])
def test_an_index_below_root_two_is_noted(index, count):
    """The flank meets sideways light at 45° + i'/2 and reflects it totally only for n >= √2."""
    assert len(parse(LEAST.replace("aperture_mm", f"index = {index}\naperture_mm")).notes) == count


def test_a_spot_wider_than_the_port_can_fill_is_noted():
    """asin(1/1.334) is 48.6° (Snell): a 60° cone in water is allowed and noted."""
    notes = parse(WATER.replace("half_angle_deg = 6.0", "half_angle_deg = 60")).notes
    assert len(notes) == 1 and "48.5 deg" in notes[0]


REFERENCES = {"k070": 0.7, "k100": 1.0, "k125": 1.25, "k150": 1.5, "k200": 2.0}


@pytest.mark.parametrize("name, k", REFERENCES.items())
def test_reference_briefs_have_their_etendue_ratio(name, k):
    """(R sinθ / r)² = k² with r = 1 mm: étendue of aperture and cone over that of the disk."""
    brief = read(CONFIGS / "reference" / f"{name}.toml")
    assert brief.name == name and brief.emitter.dies == (Disk(1.0),) and brief.target.share is None
    ratio = (brief.envelope.radius * math.sin(brief.target.half_angle)) ** 2
    assert ratio == pytest.approx(k**2, rel=1e-12)  # 16 digits in the file, doubled by the square
    box = brief.envelope
    assert (box.foot, box.clearance, box.rim, box.wall) == (-0.4, 0.4, 0.5, 0.8) and brief.index == 1.4918


def test_the_wide_beam_table_is_the_formula_in_its_heading():
    """1/cos³ up to 28°, then times (1 + cos(π(θ − 28°)/12°))/2, peak 1."""
    target = read(CONFIGS / "wide_beam.toml").target
    theta = np.degrees(target.angles)
    edge = np.where(theta <= 28, 1.0, 0.5 + 0.5 * np.cos(np.pi * (theta - 28) / 12))
    shape = edge / np.cos(target.angles) ** 3
    assert target.intensity == pytest.approx(shape / shape.max(), abs=2e-6)  # six decimals in the file


LINED = '''\
name = "a # b"  # [c]

[emitter]
a.b . "c d" = [1, # [
  [2, "]"],
  {x = 1, y.z = [3,
4]},
]
text = """
[lens]
x = 1 \\"""
"""
raw = \'\'\'
y = 2\'\'\'
[[emitter.die]]
when = 1979-05-27 07:32:00
[[emitter.die]]
sub = {}
[emitter.die.deep]
k = 1
[lens]
'''


@pytest.mark.parametrize("path, line", [
    (("name",), 1),
    (("emitter",), 3),
    (("emitter", "a"), 4),
    (("emitter", "a", "b", "c d"), 4),
    (("emitter", "a", "b", "c d", 0), 4),
    (("emitter", "a", "b", "c d", 1), 5),
    (("emitter", "a", "b", "c d", 1, 1), 5),
    (("emitter", "a", "b", "c d", 2, "y", "z", 1), 7),
    (("emitter", "text"), 9),
    (("emitter", "raw"), 13),
    (("emitter", "die", 0, "when"), 16),
    (("emitter", "die", 1), 17),
    (("emitter", "die", 1, "sub"), 18),
    (("emitter", "die", 1, "deep", "k"), 20),
    (("lens",), 21),
    (("lens", "unknown", 3), 21),
    (("nowhere",), 1),
])
def test_every_key_is_found_on_its_line(path, line):
    """Long strings, comments, nested lists, inline and repeated tables do not confuse the count."""
    assert line_of(positions(LINED), path) == line


def test_every_nested_section_belongs_to_a_section():
    """The table of nested sections used for hints names real fields."""
    for (title, key), model in NESTED.items():
        assert model.__name__ in str(SECTIONS[title].model_fields[key].annotation)
