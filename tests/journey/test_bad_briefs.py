"""Briefs nobody can build from: each gets a message with file, line, key, what came, what was wanted.

A case edits a good brief, names the line the message must point to (by a piece of that line's text,
found by plain search, or by number) and pieces the message must hold.
"""

import os
from random import Random

import pytest

from inverse.brief import parse, read
from inverse.outcome import BriefError

GOOD = """\
name = "good"

[emitter]
shape = "square"
side_mm = 1.0
flux_lm = 250.0
above_board_mm = 0.6

[emitter.dome]
index = 1.41
radius_mm = 1.3

[lens]
material = "PMMA"
wavelength_nm = 550.0
aperture_mm = 22.0
height_max_mm = 20.0
foot_mm = -0.5
clearance_mm = 0.4

[target]
half_angle_deg = 7.0
share = 0.75

[surroundings]
medium = "air"

[mould]
draft_deg = 1.5
wall_mm = 0.8
corner_radius_mm = 0.1
rim_mm = 0.5
flange_mm = 1.0

[search]
effort = "quick"
seed = 3
exit_face = "auto"
verify_rays = 100000
"""

SQUARE = 'shape = "square"\nside_mm = 1.0\n'
DOME = "[emitter.dome]\nindex = 1.41\nradius_mm = 1.3\n"
BEAM = "half_angle_deg = 7.0\nshare = 0.75\n"
AIR = 'medium = "air"\n'
LAW = "flux_lm = 250.0\n"
TWO_DICE = """\
[[emitter.die]]
shape = "square"
side_mm = 0.5
x_mm = -0.4
[[emitter.die]]
shape = "disk"
diameter_mm = 0.5
x_mm = 0.4
"""


def wrong_value(line, value, *pieces):
    """The key of ``line`` gets ``value``; the message must name the key and hold the pieces."""
    key = line.split(" =")[0]
    return (line, f"{key} = {value}"), f"{key} = {value}".split("\n")[0], (key, *pieces)


NUMBERS = {  # line of the good brief: its unit, a value too low, a value too high
    "side_mm = 1.0": ("mm", "0.0005", "101"),
    "flux_lm = 250.0": ("lm", "0", "2e6"),
    "above_board_mm = 0.6": ("mm", "-0.1", "21"),
    "index = 1.41": ("", "1.0", "2.6"),
    "radius_mm = 1.3": ("mm", "0.0", "1e9"),
    "wavelength_nm = 550.0": ("nm", "0.55", "1e5"),
    "aperture_mm = 22.0": ("mm", "0.5", "501"),
    "height_max_mm = 20.0": ("mm", "-20", "1000.0"),
    "foot_mm = -0.5": ("mm", "-51", "0.1"),
    "clearance_mm = 0.4": ("mm", "0", "51"),
    "half_angle_deg = 7.0": ("deg", "0.01", "90.0"),
    "share = 0.75": ("", "0.0", "1.01"),
    "draft_deg = 1.5": ("deg", "0.0", "45"),
    "wall_mm = 0.8": ("mm", "-0.8", "80"),
    "corner_radius_mm = 0.1": ("mm", "-1e-9", "11"),
    "rim_mm = 0.5": ("mm", "0", "51"),
    "flange_mm = 1.0": ("mm", "-1", "101"),
}
WHOLES = {"seed = 3": ("-1", "99999999999"), "verify_rays = 100000": ("10", "10_000_000_000")}

CASES = []
for line, (unit, low, high) in NUMBERS.items():
    wanted = "wanted a number"
    CASES += [
        wrong_value(line, low, "got", wanted, unit),
        wrong_value(line, high, "got", wanted, unit),
        wrong_value(line, "true", "got true", wanted),
        wrong_value(line, "nan", "got nan", wanted),
        wrong_value(line, '"1.0"', 'got "1.0"', wanted, "without quotes"),
    ]
CASES += [wrong_value(line, value, f"got {value}", "wanted a number") for line, value in (
    ("side_mm = 1.0", "inf"), ("aperture_mm = 22.0", "-inf"), ("share = 0.75", "false"))]
CASES += [
    wrong_value("side_mm = 1.0", "[1.0, 1.0]", "got a list of 2 values", "wanted a number"),
    wrong_value("side_mm = 1.0", "{ x = 1.0 }", "got a table", "wanted a number"),
    wrong_value("side_mm = 1.0", "2031-05-27", "got the date or time 2031-05-27", "wanted a number"),
    wrong_value("side_mm = 1.0", "07:32:00", "got the date or time", "wanted a number"),
    wrong_value("side_mm = 1.0", '""', "got an empty text", "wanted a number"),
    wrong_value("side_mm = 1.0", '"one"', 'got "one"', "wanted a number"),
    wrong_value("side_mm = 1.0", "0x" + "f" * 5000, "got a whole number of more than 18 digits", "wanted"),
    wrong_value("side_mm = 1.0", "1" * 4000, "got a whole number of more than 18 digits", "wanted"),
    wrong_value("side_mm = 1.0", '"' + "x" * 500 + '"', 'got "xxx', "...", "wanted a number"),
    wrong_value("side_mm = 1.0", r'"\u001b[31m"', r"\x1b[31m", "wanted a number"),
]
for line, values in WHOLES.items():
    CASES += [wrong_value(line, value, "got", "wanted a whole number") for value in
              (*values, "1.5", "2.0", "true", '"3"', "nan", "[1]")]
for line, near in (
    ('shape = "square"', ("squar", "square")),
    ('medium = "air"', ("Air", "air")),
    ('effort = "quick"', ("quik", "quick")),
    ('exit_face = "auto"', ("steped", "stepped")),
):
    CASES += [
        wrong_value(line, f'"{near[0]}"', f'got "{near[0]}"', "wanted one of", f'did you mean "{near[1]}"?'),
        wrong_value(line, "3", "got 3", "wanted one of"),
        wrong_value(line, "true", "got true", "wanted one of"),
        wrong_value(line, '"zzzzzz"', "wanted one of"),
    ]
for bad in ("../up", "a/b", r"a\\b", "", " ", ".hidden", "-dash", "ends.", "con", "NUL.txt",
     "x" * 65, "grün", "a b",
            r"a\u0000b", "C:"):
    CASES.append(wrong_value('name = "good"', f'"{bad}"', "wanted a folder name"))
CASES += [wrong_value('name = "good"', value, f"got {words}", "wanted a folder name") for value, words in
          (("7", "7"), ("true", "true"), ('["a"]', "a list of 1 value"))]
for line, misspelt, near in (
    ("side_mm = 1.0", "sde_mm = 1.0", "side_mm"),
    ("side_mm = 1.0", "side = 1.0", "side_mm"),
    ("flux_lm = 250.0", "flux_ml = 250.0", "flux_lm"),
    ("aperture_mm = 22.0", "apperture_mm = 22.0", "aperture_mm"),
    ("half_angle_deg = 7.0", "half_angle = 7.0", "half_angle_deg"),
    ("draft_deg = 1.5", "Draft_deg = 1.5", "draft_deg"),
    ("effort = ", "efort = ", "effort"),
    ("radius_mm = 1.3", "radius = 1.3", "radius_mm"),
    ("[mould]", "[mold]", "mould"),
    ("[surroundings]", "[surrounding]", "surroundings"),
    ("[emitter.dome]", "[emitter.dom]", "dome"),
    ('name = "good"', 'nam = "good"', "name"),
):
    CASES.append(((line, misspelt), misspelt, ("unknown key", f"did you mean {near}?")))
CASES += [
    # keys nobody knows, or in the wrong place
    (("[lens]\n", "[lens]\nwall_mm = 0.8\n"), 14, ("lens.wall_mm", "belongs in [mould]")),
    (("[lens]\n", "[lens]\nseed = 1\n"), 14, ("lens.seed", "belongs in [search]")),
    (('name = "good"', 'aperture_mm = 22.0\nname = "good"'), 1, ("belongs in [lens]",)),
    (("[lens]\n", "[lens]\nzzzzz = 1\n"), "zzzzz",
     ("lens.zzzzz", "unknown key, known here: material, index")),
    (("[search]", "[zzzzz]\na = 1\n[search]"), "[zzzzz]", ("zzzzz", "known here: name, emitter, lens")),
    (("[lens]\n", '[lens]\n"ap\\u001berture" = 1\n'), '"ap', (r"ap\x1berture", "unknown key")),
    (("[lens]\n", "[lens]\na.b.c = 1\n"), "a.b.c", ("lens.a: unknown key",)),
    (("[lens]\n", "[lens]\n'' = 1\n"), "'' = 1", ("unknown key",)),
    # sections
    (("[emitter]\n" + SQUARE + "flux_lm = 250.0\nabove_board_mm = 0.6\n\n" + DOME, ""), 1,
     ("missing section [emitter]",)),
    (("[target]\n" + BEAM, ""), 1, ("missing section [target]",)),
    (('name = "good"', ""), 1, ("missing name", "folder name")),
    (('name = "good"', 'name = "good"\nlens = 3'), "[lens]", ("not valid TOML",)),
    ((GOOD[GOOD.index("[lens]"):GOOD.index("[target]")], "", 'name = "good"', 'name = "good"\nlens = 3'),
     "lens = 3", ("lens: got 3, wanted a section [lens]",)),
    (("[mould]\n", "[[mould]]\n"), "[[mould]]",
     ("mould", "got a list of 1 value", "wanted a section [mould]")),
    (("[search]\n", "[[search]]\n"), "[[search]]", ("wanted a section [search]",)),
    ((DOME, "dome = 1.3\n"), "dome = 1.3", ("emitter.dome", "got 1.3", "wanted a table [emitter.dome]")),
    ((DOME, "die = 1\n"), "die = 1", ("emitter.die", "got 1", "wanted a list of 1 to 100 tables")),
    ((SQUARE, "die = []\n"), "die = []", ("emitter.die", "got a list of 0 values")),
    ((SQUARE, "die = [1]\n"), "die = [1]", ("emitter.die #1", "got 1", "wanted a table")),
    # the emitter's outline
    (('shape = "square"\n', ""), "[emitter]", ("emitter: missing shape",)),
    (("side_mm = 1.0\n", ""), "[emitter]", ("emitter: missing side_mm, wanted the size of the square",)),
    (("side_mm = 1.0", "diameter_mm = 1.0"), "diameter_mm", ("a square has no diameter_mm, wanted side_mm",)),
    ((SQUARE, 'shape = "disk"\nside_mm = 1.0\n'), "side_mm", ("a disk has no side_mm, wanted diameter_mm",)),
    ((SQUARE, 'shape = "disk"\n'), "[emitter]", ("missing diameter_mm",)),
    ((SQUARE, 'shape = "rectangle"\nwidth_mm = 1.0\n'), "[emitter]", ("missing height_mm",)),
    ((SQUARE, SQUARE + "rows = 2\n"), "[emitter]", ("missing gap_mm",)),
    ((SQUARE, SQUARE + "gap_mm = 0.2\n"), "gap_mm", ("a gap for a single die", "wanted rows or columns")),
    ((SQUARE, SQUARE + "rows = 20\ncolumns = 20\ngap_mm = 0\n"), "rows = 20",
     ("got 400 dice, wanted at most 100",)),
    ((SQUARE, SQUARE + "rows = 0\n"), "rows = 0", ("got 0, wanted a whole number from 1 to 20",)),
    ((SQUARE, SQUARE + "rows = 2.0\ngap_mm = 0\n"), "rows = 2.0", ("got 2.0, wanted a whole number",)),
    ((SQUARE, SQUARE + "rows = 2\ngap_mm = -0.1\n"), "gap_mm", ("got -0.1, wanted a number from 0",)),
    ((DOME, TWO_DICE), 4, ("got shape and [[emitter.die]], wanted only one",)),
    ((SQUARE, "", DOME, TWO_DICE.replace("x_mm = 0.4", "x_mm = -0.3")), 11,
     ("emitter.die #2: overlaps die #1",)),
    ((SQUARE, "", DOME, TWO_DICE.replace("diameter_mm", "side_mm")), 13, ("a disk has no side_mm",)),
    ((SQUARE, "", DOME, TWO_DICE.replace('shape = "disk"\n', "")), 11, ("emitter.die #2: missing shape",)),
    ((SQUARE, "", DOME, TWO_DICE.replace("x_mm = 0.4", "z_mm = 0.4")), "z_mm",
     ("emitter.die #2.z_mm: unknown key",)),
    ((SQUARE, "", DOME, TWO_DICE.replace("x_mm = 0.4", "x_mm = 400")), "x_mm = 400",
     ("wanted a number from -100 to 100 mm",)),
    # its law
    ((LAW, LAW + 'law = "lambert"\n'), 'law = "lambert"', ('did you mean "lambertian"?',)),
    ((LAW, LAW + 'law = "cosine_power"\n'), "law =", ("missing law_power",)),
    ((LAW, LAW + 'law = "table"\n'), "law =", ("missing law_table or law_table_file",)),
    ((LAW, LAW + 'law = "lambertian"\nlaw_power = 2\n'), "law_power",
     ('law = "lambertian", wanted law = "cosine_power"',)),
    ((LAW, LAW + "law_power = -1\n"), "law_power", ("got -1, wanted a number from 0",)),
    ((LAW, LAW + "law_power = 2\nlaw_table = [[0, 1], [90, 0]]\n"), "law_table",
     ("got both law_power and law_table",)),
    ((LAW, LAW + "law_table = [[0, 1]]\n"), "law_table",
     ("got a list of 1 value, wanted a list of 2 to 2000 rows",)),
    ((LAW, LAW + "law_table = [0, 1]\n"), "law_table", ("law_table #1", "got 0, wanted a row")),
    ((LAW, LAW + "law_table = [\n[0, 1],\n[45, 1, 2],\n]\n"), "[45",
     ("law_table #2", "a list of 3 values, wanted a row")),
    ((LAW, LAW + "law_table = [\n[0, 1],\n[91, 1],\n]\n"), "[91",
     ("got 91, wanted a number from 0 to 90 deg",)),
    ((LAW, LAW + "law_table = [\n[0, 1],\n[45, -1],\n]\n"), "[45", ("got -1, wanted a number from 0",)),
    ((LAW, LAW + "law_table = [\n[0, 1],\n[45, nan],\n]\n"), "[45", ("got nan",)),
    ((LAW, LAW + "law_table = [\n[0, 1],\n[45, true],\n]\n"), "[45", ("got true",)),
    ((LAW, LAW + "law_table = [\n[0, 0],\n[45, 0],\n]\n"), "[0, 0]", ("every intensity is zero",)),
    ((LAW, LAW + "law_table = [\n[5, 1],\n[45, 0],\n]\n"), "[5, 1]", ("the first angle is 5 deg, wanted 0",)),
    ((LAW, LAW + "law_table = [\n[0, 1],\n[45, 1],\n[45, 0],\n]\n"), "[45, 0]",
     ("angle 45 deg after 45 deg",)),
    ((LAW, LAW + "law_table = [\n[0, 1],\n[45, 1],\n[30, 0],\n]\n"), "[30, 0]",
     ("wanted increasing angles",)),
    ((LAW, LAW + "law_table = [\n[0, 0],\n[45, 1],\n[45.001, 0],\n]\n"), "[45.001",
     ("steps of 0.045 deg or more",)),
    ((LAW, LAW + "law_table = [\n[0, 1],\n[0.5, 0],\n]\n"), "[0, 1]", ("wanted at least 1 deg",)),
    ((LAW, LAW + 'law_table_file = "none.csv"\n'), "law_table_file", ('"none.csv" does not exist',)),
    ((LAW, LAW + 'law_table_file = "../x.csv"\n'), "law_table_file", ("outside the folder of the brief",)),
    ((LAW, LAW + 'law_table_file = "/dev/zero"\n'), "law_table_file", ("outside the folder of the brief",)),
    ((LAW, LAW + "law_table_file = 3\n"), "law_table_file", ("got 3, wanted the name of a CSV file",)),
    # its dome
    (("index = 1.41\n", ""), "[emitter.dome]", ("emitter.dome: missing index",)),
    (("radius_mm = 1.3\n", ""), "[emitter.dome]", ("emitter.dome: missing radius_mm",)),
    (("radius_mm = 1.3", "radius_mm = 0.7"), "radius_mm = 0.7",
     ("the dice reach 0.70711 mm", "wanted a radius of 0.997")),
    (("radius_mm = 1.3", "radius_mm = 0.9"), "radius_mm = 0.9",
     ("total reflection inside the dome", "0.6383 mm")),
    # the lens
    (('material = "PMMA"', 'material = "PMMB"'), "material", ("unknown material", "PMMA")),
    (('material = "PMMA"', "material = 7"), "material", ("got 7, wanted the name of a material",)),
    (('material = "PMMA"', 'material = ""'), "material", ("got an empty text",)),
    (('material = "PMMA"', 'material = "' + "x" * 300 + '"'), "material", ("up to 200 characters",)),
    (('material = "PMMA"', 'material = "water"'), "material", ('got "water", wanted a solid',)),
    (('material = "PMMA"', 'material = "PMMA"\nindex = 1.49'), "index = 1.49",
     ("got both material and index",)),
    (("wavelength_nm = 550.0", "wavelength_nm = 550.0\nwavelength_um = 0.55"), "wavelength_um",
     ("got both",)),
    (("wavelength_nm = 550.0", "wavelength_um = 550.0"), "wavelength_um",
     ("got 550.0, wanted a number from 0.3 to 2",)),
    (("wavelength_nm = 550.0", "wavelength_nm = 1900.0"), "wavelength_nm", ("PMMA", "measured from")),
    (("aperture_mm = 22.0\n", ""), "[lens]", ("lens: missing aperture_mm or aperture_max_mm",)),
    (("aperture_mm = 22.0", "aperture_mm = 22.0\naperture_max_mm = 25.0"), "aperture_max_mm", ("got both",)),
    (("aperture_mm = 22.0", "aperture_mm = 1.2"), "aperture_mm", ("the emitter is wider than the aperture",)),
    (("aperture_mm = 22.0", "aperture_max_mm = 1.2"), "aperture_max_mm",
     ("the emitter is wider than the aperture",)),
    (("aperture_mm = 22.0", "aperture_mm = 5.0"), "aperture_mm",
     ("dome 1.3 mm, clearance 0.4 mm and wall 0.8 mm do not fit",
                                                                  "wanted more than 5 mm")),
    (("clearance_mm = 0.4", "clearance_mm = 9.5"), "aperture_mm", ("clearance 9.5 mm", "do not fit")),
    (("height_max_mm = 20.0", "height_max_mm = 3.0"), "height_max_mm", ("wanted more than 3 mm",)),
    (("foot_mm = -0.5", "foot_mm = -0.7"), "foot_mm", ("the board is at -0.6 mm",)),
    (("clearance_mm = 0.4", "clearance_mm = 0.4\nabsorption_per_mm = 2"), "absorption",
     ("wanted a number from 0 to 1",)),
    # the beam
    (("half_angle_deg = 7.0\n", ""), "[target]", ("target: missing spot_diameter_mm or half_angle_deg or",)),
    (("half_angle_deg = 7.0", "half_angle_deg = 7.0\nbeam_angle_deg = 10"), "beam_angle_deg",
     ("got both half_angle_deg",)),
    (("half_angle_deg = 7.0", "half_angle_deg = 7.0\ntable = [[0, 1], [9, 0]]"), "table", ("got both",)),
    (("half_angle_deg = 7.0", 'table = [[0, 1], [9, 0]]\ntable_file = "a.csv"'), "table_file", ("got both",)),
    (("half_angle_deg = 7.0", "spot_diameter_mm = 500"), "spot_diameter_mm", ("missing distance_mm",)),
    (("half_angle_deg = 7.0", "spot_diameter_mm = 0\ndistance_mm = 9"), "spot_diameter_mm",
     ("got 0, wanted",)),
    (("half_angle_deg = 7.0", "spot_diameter_mm = 1\ndistance_mm = 9e6"), "spot_diameter_mm",
     ("half-angle of", "0.05 deg")),
    (("half_angle_deg = 7.0", "spot_diameter_mm = 500\ndistance_mm = 19"), "distance_mm",
     ("the lens may reach 19.5 mm",)),
    (("half_angle_deg = 7.0", "half_angle_deg = 7.0\ndistance_mm = 19"), "distance_mm",
     ("the lens may reach 19.5 mm",)),
    (("half_angle_deg = 7.0", "field_angle_deg = 20"), "field_angle_deg", ("missing beam_angle_deg",)),
    (("half_angle_deg = 7.0", "beam_angle_deg = 20\nfield_angle_deg = 20"), "field_angle_deg",
     ("1.02 to 6 times",)),
    (("half_angle_deg = 7.0", "beam_angle_deg = 20\nfield_angle_deg = 15"), "field_angle_deg",
     ("1.02 to 6 times",)),
    (("half_angle_deg = 7.0", "beam_angle_deg = 10\nfield_angle_deg = 170"), "field_angle_deg",
     ("1.02 to 6 times",)),
    (("half_angle_deg = 7.0", "beam_angle_deg = 100"), "beam_angle_deg", ("below 90 deg: narrow the beam",)),
    (("half_angle_deg = 7.0", "beam_angle_deg = 180"), "beam_angle_deg", ("to below 180 deg",)),
    (("half_angle_deg = 7.0", "table = [[0, 1], [89, 1], [90, 1]]"), "table", ("still light up to 90 deg",)),
    (("half_angle_deg = 7.0", "table = [[0, 1], [89, 1], [90, 0]]"), "table", ("still light up to 90 deg",)),
    (("half_angle_deg = 7.0", "table = [[0, 1], [95, 0]]"), "table",
     ("got 95, wanted a number from 0 to 90",)),
    (("half_angle_deg = 7.0", "table = [[0, 0], [9, 0]]"), "table", ("every intensity is zero",)),
    (("half_angle_deg = 7.0", "table = [[0, 1], [9, -0.5]]"), "table", ("target.table #2: got -0.5",)),
    (("half_angle_deg = 7.0", "table = [[0, 1], [9, 1], [8, 0]]"), "table", ("angle 8 deg after 9 deg",)),
    (("half_angle_deg = 7.0", "table = [[1, 1], [9, 1]]"), "table", ("the first angle is 1 deg",)),
    (("half_angle_deg = 7.0", "table = [[0, 1], [0.01, 0]]"), "table", ("at least 0.05 deg",)),
    (("half_angle_deg = 7.0", "table = [[0, 1], [20, 1], [20.001, 0]]"), "table",
     ("wanted steps of 0.01 deg",)),
    (("half_angle_deg = 7.0", "table = 3"), "table", ("got 3, wanted a list of 2 to 2000 rows",)),
    (("half_angle_deg = 7.0", "table = " + str([[0, 1]] * 2001)), "table", ("got a list of 2001 values",)),
    (("half_angle_deg = 7.0", 'table_file = "none.csv"'), "table_file", ("does not exist",)),
    # the surroundings
    ((AIR, AIR + "port = { thickness_mm = 3 }\n"), "port", ("got a port in air",)),
    ((AIR, 'medium = "water"\nport = 3\n'), "port", ("got 3, wanted a table [surroundings.port]",)),
    ((AIR, 'medium = "water"\nport = { thickness_mm = 0 }\n'), "port",
     ("port.thickness_mm", "got 0, wanted")),
    ((AIR, 'medium = "water"\nport = { gap_mm = -1 }\n'), "port", ("port.gap_mm", "got -1, wanted")),
    ((AIR, 'medium = "water"\nport = { material = "glas" }\n'), "port",
     ("port.material", "unknown material")),
    ((AIR, 'medium = "water"\nport = { material = "water" }\n'), "port", ("wanted a solid material",)),
    ((AIR, 'medium = "water"\nport = { index = 1.5, material = "PC" }\n'), "port",
     ("got both material and index",)),
    ((AIR, 'medium = "water"\nport = { thick_mm = 3 }\n'), "port",
     ("port.thick_mm: unknown key, did you mean thickness_mm?",)),
    ((AIR, 'medium = "water"\n', 'material = "PMMA"', "index = 1.334"), "index = 1.334",
     ("about that of water",)),
    ((AIR, 'medium = "water"\n', BEAM, "table = [[0, 1], [50, 0]]\n"), "table", ("wider than 48.5 deg",)),
    ((AIR, 'medium = "water"\n', BEAM, "beam_angle_deg = 80\nfield_angle_deg = 99\n"), "beam_angle",
     ("wider than 48.5 deg",)),
    ((AIR, 'medium = "water"\n', BEAM, BEAM + "distance_mm = 25\n"), "distance_mm",
     ("the port may reach 25.5 mm",)),
    ((AIR, 'medium = "water"\n', "nm = 550.0", "nm = 1150.0"), "wavelength_nm", ("water", "measured from")),
    # the mould
    (("[mould]", "[mould]\nthickest_mm = 0.7"), "thickest_mm", ("wanted more than the least wall 0.8 mm",)),
    (("[mould]", "[mould]\nthickest_mm = 2.0", "rim_mm = 0.5", "rim_mm = 3.0"), "thickest_mm",
     ("and the rim 3 mm",)),
    (("rim_mm = 0.5", "rim_mm = 19.5"), "rim_mm", ("nothing is left of the height 20 mm",)),
    (("corner_radius_mm = 0.1", "corner_radius_mm = 1.75"), "corner_radius_mm",
     ("the pocket's radius 1.7 mm",)),
    # not TOML at all
    (("aperture_mm = 22.0", "aperture_mm = "), "aperture_mm = ", ("not valid TOML",)),
    (("aperture_mm = 22.0", "aperture_mm 22.0"), "aperture_mm 22.0", ("not valid TOML", "Expected '='")),
    (("aperture_mm = 22.0", "aperture_mm = 22,0"), "aperture_mm = 22,0", ("not valid TOML",)),
    (("aperture_mm = 22.0", "aperture_mm = 22 mm"), "aperture_mm = 22 mm", ("not valid TOML",)),
    (("aperture_mm = 22.0", "aperture_mm = 22.0\naperture_mm = 23.0"), "aperture_mm = 23.0",
     ("not valid TOML", "overwrite")),
    (("[search]", "[lens]"), "[lens]", ("not valid TOML", "Cannot declare")),
    (('name = "good"', 'name = "good'), 'name = "good', ("not valid TOML",)),
    (("[lens]", "[lens"), "[lens", ("not valid TOML",)),
    (('name = "good"', "name = good"), "name = good", ("not valid TOML",)),
    (('name = "good"', 'name = "a\\qb"'), "name =", ("not valid TOML",)),
    (("seed = 3", "seed = 03"), "seed = 03", ("not valid TOML",)),
    (("seed = 3", "seed = " + "3" * 5000), 1, ("not valid TOML",)),
    (("seed = 3", "seed = " + "[" * 3000), 1, ("nested too deeply",)),
    (("seed = 3", "a" + ".a" * 300 + " = 3"), 1, ("more than 200 dots in one key",)),
    (("seed = 3", "seed = 3\x00"), "seed = 3", ("not valid TOML",)),
]


def edited(*edits):
    """GOOD with each (old, new) replaced once; fails when an old piece is not there."""
    text = GOOD
    for old, new in zip(edits[::2], edits[1::2]):
        assert old in text
        text = text.replace(old, new, 1)
    return text


def line_with(text, piece):
    """Number of the last line holding ``piece`` (an edited line may repeat an earlier one)."""
    return max(i for i, line in enumerate(text.split("\n"), 1) if piece in line)


def problems(text):
    with pytest.raises(BriefError) as caught:
        parse(text, "good.toml")
    return caught.value.problems


def test_the_brief_all_cases_start_from_is_good():
    """Without an edit nothing is wrong, so each message below is about the edit."""
    assert parse(GOOD).name == "good"


def test_there_are_enough_cases():
    """The table is generated: an empty loop would pass every case below."""
    assert len(CASES) >= 150


@pytest.mark.parametrize("number", range(len(CASES)))
def test_a_bad_brief_is_answered_with_place_and_reason(number):
    """Some problem names the file and the line, what came and what was wanted, on one printable line."""
    edits, at, pieces = CASES[number]
    text = edited(*edits)
    found = problems(text)
    place = f"good.toml:{at if isinstance(at, int) else line_with(text, at)}: "
    hits = [p for p in found if p.startswith(place) and all(piece in p for piece in pieces)]
    assert hits, (place, pieces, found)
    assert all(p.isprintable() for p in found)


def unreadable(path):
    with pytest.raises(BriefError) as caught:
        read(path)
    assert len(caught.value.problems) == 1
    return caught.value.problems[0]


def test_all_faults_of_all_sections_are_reported_at_once():
    """A wrong name and one wrong key in each of six sections: seven problems, in the order of the file."""
    text = edited('name = "good"', "name = 1", "side_mm = 1.0", "side_mm = -1", "aperture_mm = 22.0",
                  "aperture_mm = 0", "share = 0.75", "share = 2", 'medium = "air"', 'medium = "gas"',
                  "rim_mm = 0.5", "rim_mm = true", "seed = 3", "sead = 3")
    keys = ["name", "emitter.side_mm", "lens.aperture_mm", "target.share", "surroundings.medium",
            "mould.rim_mm", "search.sead"]
    assert [p.split(": ")[1] for p in problems(text)] == keys


def test_sound_sections_are_cross_checked_beside_faulty_ones():
    """A wrong number in [search] does not hide that the lens does not fit the dome."""
    found = problems(edited("seed = 3", "seed = -3", "aperture_mm = 22.0", "aperture_mm = 5.0"))
    assert len(found) == 2 and "do not fit in its radius" in found[0] and "search.seed" in found[1]


def test_thousands_of_faults_are_counted_not_listed():
    """A megabyte of unknown keys is answered in a moment with 50 problems and a count."""
    text = GOOD + "".join(f"k{i} = {i}\n" for i in range(20_000))
    found = problems(text)
    assert len(found) == 51 and found[-1] == "good.toml: and 19950 more faults"


@pytest.mark.parametrize("content, line, pieces", [
    (b"", 1, ("the brief is empty",)),
    (b"\n \n# only a remark\n", 1, ("the brief is empty",)),
    (b'name = "a"\nx = "gr\xfcn"\n', 2, ("byte 0xfc is not UTF-8", "wanted a file saved as UTF-8")),
    ("\ufeff".encode("utf-16-le") + GOOD.encode("utf-16-le"), 1, ("is not UTF-8",)),
    (b"\x89PNG\r\n\x1a\n\x00\x00", 1, ("is not UTF-8",)),
    (b"#" * 1_000_001, None, ("is larger than 1000000 bytes",)),
])
def test_a_file_that_is_no_brief_is_refused(tmp_path, content, line, pieces):
    """Empty, wrongly encoded, binary and oversized files each get one sentence."""
    file = tmp_path / "brief.toml"
    file.write_bytes(content)
    problem = unreadable(file)
    assert problem.startswith(f"{file}:{line}: " if line else f"{file}: ")
    assert all(p in problem for p in pieces)


def test_a_missing_brief_is_refused(tmp_path):
    """No file: the message says so."""
    assert unreadable(tmp_path / "none.toml") == f"{tmp_path / 'none.toml'}: does not exist"


def test_a_folder_is_not_a_brief(tmp_path):
    """A folder: the message says so."""
    assert unreadable(tmp_path) == f"{tmp_path}: is a folder, wanted a file"


def test_a_pipe_is_not_a_brief(tmp_path):
    """A named pipe is refused instead of waited for."""
    os.mkfifo(tmp_path / "pipe")
    assert "wanted an ordinary file" in unreadable(tmp_path / "pipe")


def test_an_endless_name_is_refused(tmp_path):
    """The system's own refusal becomes a sentence."""
    assert "cannot be read" in unreadable(tmp_path / ("x" * 5000))


WITH_FILE = edited("half_angle_deg = 7.0", 'table_file = "beam.csv"')


@pytest.mark.parametrize("content, line, pieces", [
    ("angle,value\n0,1\n10,one\n", 3, ('got "one", wanted a number',)),
    ("0,1\n10,0.5,3\n", 2, ("got a list of 3 values, wanted a row",)),
    ("0,1\n10,\n", 2, ('got "", wanted a number',)),
    ("0,1\n10\n", 2, ("got a list of 1 value",)),
    ("0;1\n10;0,5\n", 2, ('got "0,5", wanted a number with a decimal point',)),
    ("0,1\n10,nan\n", 2, ('got "nan"',)),
    ("0,1\n10,1e999\n", 2, ("got inf",)),
    ("0,1\n10,-1\n", 2, ("got -1.0, wanted a number from 0",)),
    ("0,1\n91,1\n", 2, ("got 91.0, wanted a number from 0 to 90 deg",)),
    ("# a\n0,1\n\n10,1\n10,0\n", 5, ("angle 10 deg after 10 deg",)),
    ("0,0\n10,0\n", 1, ("every intensity is zero",)),
    ("angle,value\nmore,words\n0,1\n10,0\n", 2, ('got "more"',)),
    ("", 1, ("got 0 rows, wanted 2 to 2000",)),
    ("0,1\n", 1, ("got 1 rows, wanted 2 to 2000",)),
    ("".join(f"{i * 0.04:.2f},1\n" for i in range(2001)), 1, ("got 2001 rows",)),
    ("0,1\n=cmd(),1\n", 2, ('got "=cmd()"',)),
])
def test_a_bad_table_file_is_answered_with_its_own_line(tmp_path, content, line, pieces):
    """The message names the CSV file and its line, not the brief."""
    (tmp_path / "beam.csv").write_text(content)
    (tmp_path / "good.toml").write_text(WITH_FILE)
    problem = unreadable(tmp_path / "good.toml")
    assert problem.startswith(f"{tmp_path / 'beam.csv'}:{line}: target.table_file: ")
    assert all(p in problem for p in pieces), problem


def test_a_table_file_that_is_not_text_is_refused(tmp_path):
    """Wrong encoding in the CSV names the CSV's line."""
    (tmp_path / "beam.csv").write_bytes(b"0,1\n\xff\xfe")
    (tmp_path / "good.toml").write_text(WITH_FILE)
    assert unreadable(tmp_path / "good.toml").startswith(f"{tmp_path / 'beam.csv'}:2: ")


OUTSIDE = ["../outside.csv", "sub/../../outside.csv", "link.csv", "linked/outside.csv"]


@pytest.mark.parametrize("name", OUTSIDE)
def test_no_table_is_read_from_outside_the_folder(tmp_path, name):
    """Neither dots nor links lead out of the folder of the brief, though the file is a good table."""
    (tmp_path / "outside.csv").write_text("0,1\n10,0\n")
    here = tmp_path / "here"
    here.mkdir()
    (here / "sub").mkdir()
    (here / "link.csv").symlink_to(tmp_path / "outside.csv")
    (here / "linked").symlink_to(tmp_path)
    (here / "good.toml").write_text(WITH_FILE.replace("beam.csv", name))
    assert "lies outside the folder of the brief" in unreadable(here / "good.toml")


def test_a_table_file_that_links_to_itself_is_refused(tmp_path):
    """A loop of links is a sentence, not a crash."""
    (tmp_path / "beam.csv").symlink_to(tmp_path / "beam.csv")
    (tmp_path / "good.toml").write_text(WITH_FILE)
    assert "target.table_file" in unreadable(tmp_path / "good.toml")


def test_a_folder_is_not_a_table(tmp_path):
    """table_file naming a folder is refused at the key in the brief."""
    (tmp_path / "beam.csv").mkdir()
    (tmp_path / "good.toml").write_text(WITH_FILE)
    assert 'target.table_file: "beam.csv" is a folder, wanted a file' in unreadable(tmp_path / "good.toml")


SCRAPS = [
    '"', "\n", "[", "]]", "{", "}", "=", ",", ".", "'''", '"""', "\\", "#", "nan", "true", "1e400", "0xff",
    "é", "\u2028", "-1", "99999999999999999999", "[emitter]\n", "[[emitter.die]]\n", "\x00", "\t", "\r\n",
    "port = {}\n", "distance_mm = 100\n", "index = 1.5\n", 'medium = "water"\n', "die = [{}]\n",
    "law_table = [[0,1],[90,0]]\n",
]


@pytest.mark.parametrize("seed", range(10))
def test_random_damage_is_always_answered_with_a_line(seed):
    """Of 100 damaged briefs each is read, or refused with lines that exist; nothing else is raised."""
    random = Random(seed)
    refused = 0
    for _ in range(100):
        text = GOOD
        for _ in range(random.randint(1, 4)):
            at = random.randrange(len(text) + 1)
            text = text[:at] + random.choice(SCRAPS) + text[at + random.randint(0, 8) :]
        try:
            parse(text, "good.toml")
        except BriefError as fault:
            refused += 1
            for problem in fault.problems:
                line = int(problem.removeprefix("good.toml:").split(":")[0])
                assert 1 <= line <= text.count("\n") + 1 and problem.isprintable(), (text, problem)
    assert refused > 50
