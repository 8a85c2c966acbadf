"""Photometric files: what is written is read back, and files written by hand to the layout are understood."""

import math
import re

import numpy as np
import pytest

from inverse.formats import eulumdat, lm63, source
from inverse.formats.nameplate import Nameplate, ascii_line
from inverse.formats.thinning import thin
from inverse.photometry import FarField

BOTH = pytest.mark.parametrize("format", [lm63, eulumdat])


def plate(flux, **changes):
    facts = dict(name="Lantern 7", date="2026-03-01", lamp="LED 1 mm", lamp_flux=flux, aperture_radius=12.5)
    return Nameplate(**(facts | changes))


def beam(kind):
    """Smooth, ringed, noisy, wavy, cut and spherical far fields: rotational tables in steps of 0.05°."""
    degrees = np.arange(0.0, 90.01, 0.05) + 0.0
    if kind == "cut":
        degrees = degrees[degrees <= 15.0]
    if kind == "sphere":
        degrees = np.arange(0.0, 180.01, 0.1)
    theta = np.minimum(np.radians(degrees), math.pi)
    candela = 8000.0 / (1.0 + np.exp(np.minimum(np.abs(degrees) - 4.0, 60.0) / 0.2)) + 2.0 * np.cos(theta / 2)
    if kind == "ringed":
        candela = candela * (1.0 + 0.2 * np.cos(2.0 * degrees))
    if kind == "noisy":
        candela = candela * (1.0 + 0.02 * np.random.default_rng(5).standard_normal(len(theta)))
    if kind == "wavy":
        candela = 100.0 * np.cos(theta / 2) * (1.0 + 0.01 * np.cos(4.0 * np.pi * degrees))
    if kind == "sphere":
        candela = 100.0 * np.cos(theta / 2) ** 2
    return FarField(theta, candela, np.zeros(len(theta)))


BEAMS = pytest.mark.parametrize("kind", ["smooth", "ringed", "noisy", "wavy", "cut", "sphere"])


@BOTH
@BEAMS
def test_reading_back_is_within_half_a_percent_of_the_peak(format, kind):
    """Linear interpolation of the file misses no row of the fine table by 0.5 % of the peak."""
    fine = beam(kind)
    back = format.parse(format.text(fine, plate(400.0))).far_field()
    assert np.abs(back.at(fine.theta) - fine.candela).max() < 0.005 * fine.candela.max()


@BOTH
@BEAMS
def test_reading_back_keeps_the_flux(format, kind):
    """The flux of the re-read table is that of the fine table to a thousandth, far beam or hemisphere."""
    fine = beam(kind)
    back = format.parse(format.text(fine, plate(400.0))).far_field()
    assert back.flux == pytest.approx(fine.flux, rel=1e-3)  # 5e-4 for thinning, the rest for printed digits


@BEAMS
def test_lm63_states_the_flux_it_holds(kind):
    """The flux named in the file is the flux integrated from its table, within the six printed digits."""
    content = lm63.text(beam(kind), plate(400.0))
    stated = float(re.search(r"Flux of this table ([\d.]+) lm", content).group(1))
    assert lm63.parse(content).far_field().flux == pytest.approx(stated, rel=5e-6)


@BEAMS
def test_eulumdat_output_ratio_is_the_flux_it_holds(kind):
    """Line 23, flux over lamp flux in percent, is what the table integrates to, within its printed digits."""
    content = eulumdat.text(beam(kind), plate(400.0))
    stated = float(content.split("\r\n")[22])
    assert 100 * eulumdat.parse(content).far_field().flux / 400.0 == pytest.approx(stated, abs=0.0051)


def test_eulumdat_downward_share():
    """An isotropic source sends half its flux below the horizon (closed form): line 22 says 50.0 %."""
    isotropic = FarField([0.0, 0.5 * math.pi, math.pi], np.full(3, 10.0), np.zeros(3))
    assert eulumdat.text(isotropic, plate(200.0)).split("\r\n")[21] == "50.0"


@BOTH
def test_files_are_ascii_with_short_lines(format):
    """Non-ASCII names are spelt out; lines end in CR LF and have at most 132 characters with them (LM-63)."""
    content = format.text(beam("noisy"), plate(400.0, name="Größe Ω " + "x" * 300, maker="Łódź\r\nTILT=NONE"))
    assert content.isascii() and content.endswith("\r\n")
    lines = content.split("\r\n")
    assert not any("\n" in line or "\r" in line for line in lines)
    assert max(map(len, lines)) + 2 <= 132


def test_long_words_are_continued():
    """A keyword too long for its line goes on under [MORE] and comes back whole."""
    name = " ".join(f"word{k}" for k in range(60))
    words = lm63.parse(lm63.text(beam("cut"), plate(400.0, name=name))).words
    assert re.sub(r"\s", "", words["LUMCAT"]) == name.replace(" ", "")


@pytest.mark.parametrize(
    "given, spelt",
    [
        ("Öl & Fön", "Oel & Foen"),
        ("café 5°", "cafe 5 deg"),
        ("1×1 µm", "1x1 um"),
        ("光", "?"),
        ("a\nb\x00", "a b?"),
    ],
)
def test_transliteration(given, spelt):
    """Umlauts, accents and signs become plain letters, the unknown a question mark, line breaks blanks."""
    assert ascii_line(given) == spelt


@BOTH
def test_equal_input_gives_equal_bytes(format):
    """The date is an argument: two writings of one beam are the same file, and another date is seen."""
    fine = beam("cut")
    assert format.text(fine, plate(400.0)) == format.text(fine, plate(400.0))
    assert format.text(fine, plate(400.0, date="2026-03-02")) != format.text(fine, plate(400.0))


def test_lm63_head_follows_the_layout():
    """Type C, absolute, metres, one plane, a round opening of −diameter (LM-63-2002, from memory)."""
    lines = lm63.text(beam("cut"), plate(400.0)).split("\r\n")
    assert lines[0] == "IESNA:LM-63-2002"
    assert {"[TEST]", "[TESTLAB]", "[ISSUEDATE]", "[MANUFAC]"} <= {
        line.split()[0] for line in lines[1:] if line
    }
    numbers = lines[lines.index("TILT=NONE") + 1].split()
    assert numbers[:3] == ["1", "-1", "1"] and numbers[4:7] == ["1", "1", "2"]
    assert [float(x) for x in numbers[7:]] == [-0.025, -0.025, 0.0]


def test_lm63_angles_reach_the_horizon():
    """A table that ends at 15° is written to 90° with the dark written out (type C ends at 90 or 180)."""
    back = lm63.parse(lm63.text(beam("cut"), plate(400.0))).far_field()
    assert math.degrees(back.theta[-1]) == pytest.approx(90.0)
    assert back.at(math.radians(15.001)) == 0.0 and back.at(math.radians(14.9)) > 1.0


def test_eulumdat_counts_lines():
    """Symmetry 1: 26 head lines, 6 of the lamp, 10 ratios, 1 plane, then Ng angles and Ng intensities."""
    lines = eulumdat.text(beam("ringed"), plate(400.0)).split("\r\n")
    assert lines[2] == "1" and lines[13] == "0"
    assert len(lines) - 1 == 26 + 6 + 10 + 1 + 2 * int(lines[5])
    assert max(len(word) for word in lines[42:]) <= 6


def test_eulumdat_refuses_what_its_field_cannot_hold():
    """More than 999 999 cd per 1000 lm do not fit six characters: an error, not a wrong file."""
    narrow = FarField([0.0, 1e-3, 2e-3], [3e5, 3e5, 0.0], np.zeros(3))
    with pytest.raises(ValueError, match="3000000 does not fit the 6 characters"):
        eulumdat.text(narrow, plate(100.0))


def test_a_level_table_needs_two_rows():
    """Rows between equal intensities carry nothing: the ends remain."""
    assert list(thin(np.linspace(0.0, 1.5, 200), np.full(200, 70.0), 0.005)) == [0, 199]


def test_a_slope_keeps_rows_for_zonal_readers():
    """One straight fall from the axis to 1.5 rad would do for exact readers; zones need more rows of it."""
    theta = np.linspace(0.0, 1.5, 400)
    kept = thin(theta, 100.0 - 60.0 * theta, 0.5, flux_tolerance=1e-3)
    rows = FarField(theta, 100.0 - 60.0 * theta, 0 * theta)
    candela = rows.candela[kept]
    zones = np.pi * (candela[1:] + candela[:-1]) @ -np.diff(np.cos(theta[kept]))
    assert zones == pytest.approx(rows.flux, rel=1e-3)


@pytest.mark.parametrize("seed", range(10))
def test_thinning_keeps_both_promises(seed):
    """Whatever the curve: no row off by more than the tolerance, flux right to its own, also by zones."""
    rng = np.random.default_rng(seed)
    theta = np.sort(rng.uniform(0.0, 1.5, 500))
    candela = np.abs(np.cumsum(rng.standard_normal(500)))
    kept = thin(theta, candela, 0.02, flux_tolerance=1e-3)
    straight = np.interp(theta, theta[kept], candela[kept])
    assert np.abs(straight - candela).max() <= 0.02 * candela.max()
    fine, rough = FarField(theta, candela, 0 * theta), FarField(theta[kept], candela[kept], 0 * theta[kept])
    assert rough.flux == pytest.approx(fine.flux, rel=1e-3)
    zones = np.pi * (rough.candela[1:] + rough.candela[:-1]) @ -np.diff(np.cos(rough.theta))
    cap = fine.flux_inside(theta[0])  # no zone counts it
    assert zones + cap == pytest.approx(fine.flux, rel=1e-3)
    assert len(kept) < 500


# Written by hand to the layouts; the intensities are invented.
IES = """IESNA:LM-63-2002
[TEST] none
[MANUFAC] Nobody
[MORE] and sons
TILT=NONE
2 500 0.5 3 {columns} 1 2 0.1 0.1 0
0.9 1 12
0 45 90
{planes}
{table}
"""


@pytest.mark.parametrize(
    "planes, rows, full",
    [
        ("0", [[10, 6, 2]], {0: 10}),
        ("0 90", [[10, 6, 2], [20, 6, 2]], {0: 10, 90: 20, 180: 10, 270: 20}),
        ("0 45 180", [[10, 6, 2], [20, 6, 2], [30, 6, 2]], {0: 10, 45: 20, 180: 30, 315: 20}),
        ("90 180 270", [[10, 6, 2], [20, 6, 2], [30, 6, 2]], {0: 20, 90: 10, 180: 20, 270: 30}),
        ("0 90 180 360", [[10, 6, 2], [20, 6, 2], [30, 6, 2], [10, 6, 2]], {0: 10, 90: 20, 180: 30}),
    ],
)
def test_lm63_symmetries(planes, rows, full):
    """Quarter, half and whole rounds are completed; multiplier and ballast factor apply, 0.5 × 0.9."""
    table = "\n".join(" ".join(map(str, row)) for row in rows)
    got = lm63.parse(IES.format(columns=len(planes.split()), planes=planes, table=table))
    assert np.degrees(got.planes) == pytest.approx(list(full))
    np.testing.assert_allclose(got.candela[:, 0], 0.45 * np.array(list(full.values())), rtol=1e-12)
    assert got.lamp_flux == 1000.0 and got.words["MANUFAC"] == "Nobody and sons"


def test_lm63_older_issue_with_tilt_table():
    """An issue of 1991 with TILT=INCLUDE: its table is passed over, the ballast-lamp factor multiplies."""
    old = (
        "IESNA91\n[TEST] x\nTILT=INCLUDE\n1\n2\n0 90\n1 0.9\n1 -1 1 2 1 1 1 0 0 0\n1.0 0.5 10\n0 90\n0\n8 4\n"
    )
    assert lm63.parse(old).candela.tolist() == [[4.0, 2.0]]


def ldt(symmetry, planes, rows):
    """A EULUMDAT text written by hand: 3 angles, 2000 lm, conversion factor 0.5 → cd = given value."""
    lines = [
        "Nobody",
        "1",
        symmetry,
        len(planes),
        0,
        3,
        0,
        "r",
        "n",
        "1",
        "f",
        "d",
        90,
        0,
        5,
        80,
        0,
        0,
        0,
        0,
        0,
    ]
    lines += [100, 80, 0.5, 0, 1, 1, "LED", 2000, "4000 K", "1B", 20, *[0.5] * 10, *planes, 0, 45, 90]
    return "\r\n".join(map(str, lines + [x for row in rows for x in row])) + "\r\n"


@pytest.mark.parametrize(
    "symmetry, rows, full",
    [
        (0, [[1, 0, 0], [2, 0, 0], [3, 0, 0], [4, 0, 0]], [1, 2, 3, 4]),
        (1, [[7, 0, 0]], [7]),
        (2, [[1, 0, 0], [2, 0, 0], [3, 0, 0]], [1, 2, 3, 2]),
        (3, [[4, 0, 0], [1, 0, 0], [2, 0, 0]], [1, 2, 1, 4]),
        (4, [[1, 0, 0], [2, 0, 0]], [1, 2, 1, 2]),
    ],
)
def test_eulumdat_symmetries(symmetry, rows, full):
    """Each symmetry lists its own planes; the rest is their mirror image (layout from memory)."""
    got = eulumdat.parse(ldt(symmetry, [0, 90, 180, 270], rows))
    np.testing.assert_allclose(got.candela[:, 0], full, rtol=1e-12)
    assert got.lamp_flux == 2000.0


def test_mean_over_uneven_planes():
    """Planes at 0°, 90°, 180° of a whole round stand for 135°, 90° and 135° of arc."""
    table = "8 8 8\n4 4 4\n0 0 0\n8 8 8"
    got = lm63.parse(IES.format(columns=4, planes="0 90 180 360", table=table)).far_field()
    np.testing.assert_allclose(got.candela, 0.45 * (8 * 135 + 4 * 90) / 360, rtol=1e-12)


GOOD_IES = IES.format(columns=1, planes="0", table="10 6 2")
GOOD_LDT = ldt(1, [0], [[10, 6, 2]])


@pytest.mark.parametrize(
    "old, new, line, words",
    [
        ("TILT=NONE", "TILT=other.tlt", 5, "TILT"),
        ("TILT=NONE\n", "", 10, "no TILT"),
        ("10 6 2", "10 6", 11, "ends where a candela"),
        ("10 6 2", "10 6 2 5", 10, "after the last"),
        ("10 6 2", "10 nan 2", 10, "'nan'"),
        ("10 6 2", "10 -6 2", 10, "negative"),
        ("10 6 2", "10 1e999 2", 10, "too large"),
        ("0 45 90", "0 45 45", 8, "must increase"),
        ("0 45 90", "0 45 190", 8, "between 0 and 180"),
        ("0.5 3 1 1 2", "0.5 3 1 2 2", 6, "type C"),
        ("0.5 3 1 1 2", "0.5 3.5 1 1 2", 6, "whole number"),
        ("0.5 3 1 1 2", "0.5 3 900000000 1 2", 6, "whole number from 1"),
        ("0.5 3 1 1 2", "-0.5 3 1 1 2", 6, "multiplier"),
        ("0.5 3 1 1 2", "1_0 3 1 1 2", 6, "'1_0'"),
        (
            "3 1 1 2 0.1 0.1 0\n0.9 1 12\n0 45 90\n0\n",
            "3 2 1 2 0 0 0\n1 1 1\n0 45 90\n0 60\n1 1 1\n",
            9,
            "symmetry",
        ),
    ],
)
def test_lm63_faults_name_their_line(old, new, line, words):
    """A malformed file gives one ValueError with file name, line and what was wanted."""
    assert old in GOOD_IES
    with pytest.raises(ValueError, match=rf"^lamp.ies:{line}: .*{words}"):
        lm63.parse(GOOD_IES.replace(old, new, 1), "lamp.ies")


@pytest.mark.parametrize(
    "at, new, words",
    [
        (3, "9", "symmetry"),
        (3, "1,5", "decimal point"),
        (4, "0", "planes"),
        (6, "1", "angles Ng"),
        (24, "0", "factor"),
        (29, "-5", "flux of the lamps"),
        (44, "-3", "between"),
        (45, "0", "must increase"),
        (48, "x", "'x'"),
        (47, "-1", "negative"),
        (49, None, "ends where"),
        (50, "7", "after the last"),
    ],
)
def test_eulumdat_faults_name_their_line(at, new, words):
    """A malformed file gives one ValueError with file name, line and what was wanted."""
    lines = GOOD_LDT.split("\r\n")
    if new is None:
        del lines[at - 1]
    else:
        lines[at - 1] = new
    with pytest.raises(ValueError, match=rf"^lamp.ldt:{at}: .*{words}"):
        eulumdat.parse("\r\n".join(lines), "lamp.ldt")


def test_eulumdat_planes_must_divide():
    """A quarter symmetry over six planes has no plane at 90°: refused at the line of the count."""
    with pytest.raises(ValueError, match=r":4: 6 planes"):
        eulumdat.parse(ldt(4, [0, 60, 120, 180, 240, 300], [[1, 0, 0]] * 2))


@BOTH
@pytest.mark.parametrize("seed", range(60))
def test_damaged_files_fail_in_words(format, seed):
    """Whatever is cut out of or put into a file, reading it works or raises ValueError, nothing else."""
    rng = np.random.default_rng(seed)
    content = GOOD_IES if format is lm63 else GOOD_LDT
    for _ in range(rng.integers(1, 4)):
        a, b = sorted(rng.integers(0, len(content), 2))
        b = min(b, a + int(rng.integers(0, 12)))
        content = (
            content[:a] + "".join(rng.choice(list(" 0159-.eE\n[]=é\x00"), rng.integers(0, 4))) + content[b:]
        )
    try:
        got = format.parse(content)
    except ValueError:
        return  # refused, as it should be
    assert np.all(np.isfinite(got.candela))


def test_huge_file_is_refused_unread(tmp_path, monkeypatch):
    """A file above the size limit is not read at all."""
    monkeypatch.setattr(source, "MOST_BYTES", 100)
    path = tmp_path / "big.ies"
    path.write_text(GOOD_IES)
    with pytest.raises(ValueError, match="too large"):
        lm63.read(path)


@BOTH
def test_reading_from_disk(format, tmp_path):
    """`read` gives what `parse` gives."""
    path = tmp_path / "beam"
    path.write_bytes(format.text(beam("cut"), plate(400.0)).encode("ascii"))
    got = format.read(path)
    np.testing.assert_array_equal(got.candela, format.parse(path.read_bytes().decode()).candela)
