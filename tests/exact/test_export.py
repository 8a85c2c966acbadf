"""Files of the lens that need no CAD: whole or absent, exact, and read back with clear complaints."""

import csv
import importlib
import json
import sys

import numpy as np
import pytest
from hand_built import cone_pocket, lens, polygon

from inverse.export import atomic, cad, folder, lens_json, solid, table
from inverse.photometry import FarField
from inverse.verify.surface import Points


def test_a_failed_writing_leaves_the_old_file(tmp_path):
    """When writing breaks off, the old file stands as it was and no half file lies about."""
    path = tmp_path / "lens.json"
    atomic.write_text(path, "old")
    with pytest.raises(RuntimeError):
        with atomic.replacing(path) as part:
            part.write_text("half a f")
            raise RuntimeError
    assert path.read_text() == "old" and list(tmp_path.iterdir()) == [path]


def test_the_temporary_file_lies_beside_the_real_one(tmp_path):
    """Renaming is only safe within one folder."""
    with atomic.replacing(tmp_path / "a.txt") as part:
        assert part.parent == tmp_path and part.name != "a.txt"
        part.write_text("new")
        assert not (tmp_path / "a.txt").exists()
    assert (tmp_path / "a.txt").read_text() == "new"


@pytest.mark.parametrize("stepped", [False, True])
def test_lens_json_comes_back_bit_for_bit(tmp_path, stepped):
    """Every float, name, role and degree, and the extra words, are those written."""
    section, extra = lens(stepped), {"material": "PMMA", "weights": [0.1, 1 / 3]}
    lens_json.write(tmp_path / "lens.json", section, extra)
    back, words = lens_json.read(tmp_path / "lens.json")
    assert words == extra and back.names == section.names
    for a, b in zip(section.curves, back.curves):
        assert (a.role, a.degree) == (b.role, b.degree)
        np.testing.assert_array_equal(a.points, b.points)
        np.testing.assert_array_equal(a.knots, b.knots)


def test_lens_json_refuses_what_is_no_number(tmp_path):
    """A NaN in the extra words is an error, not a file that other programs cannot read."""
    with pytest.raises(ValueError):
        lens_json.write(tmp_path / "lens.json", lens(), {"share": float("nan")})
    assert list(tmp_path.iterdir()) == []


def change(whole, path, value):
    *way, last = path
    for key in way:
        whole = whole[key]
    if value is None:
        del whole[last]
    else:
        whole[last] = value


@pytest.mark.parametrize(
    "path, value, words",
    [
        (["schema"], 2, "schema 1 is wanted, got 2"),
        (["unit"], "inch", "unit 'mm'"),
        (["curves"], None, "no `curves`"),
        (["curves"], [], "at least one curve"),
        (["extra"], 3, "`extra`"),
        (["curves", 1, "name"], "foot", "two curves are named 'foot'"),
        (["curves", 1, "name"], 7, "curve 2 .*name"),
        (["curves", 1, "role"], "shiny", "curve 2 .'pocket wall'.: role must be one of refracting"),
        (["curves", 3, "degree"], None, "curve 4 .'flank'.: `degree` is missing"),
        (["curves", 3, "degree"], 0, "degree must be"),
        (["curves", 3, "degree"], True, "degree must be"),
        (["curves", 3, "degree"], 3, "degree 3 and 7 points need 11 knots"),
        (["curves", 3, "knots", 0], 0.1, "rise from 5 zeros"),
        (["curves", 3, "knots", 5], 0.9, "rise from 5 zeros"),
        (["curves", 3, "knots", 11], 1.5, "rise from 5 zeros"),
        (["curves", 3, "knots", 5], "x", "finite numbers"),
        (["curves", 3, "points", 2], [1.0], "pairs"),
        (["curves", 3, "points", 2, 0], 10**400, "finite numbers"),
        (["curves", 3, "points", 0, 0], 3.2, "gap between foot and flank"),
        (["curves", 0, "points", 0, 0], 0.5, "start and end on the axis"),
    ],
)
def test_lens_json_faults_are_named(tmp_path, path, value, words):
    """Each fault gives one ValueError with the file, the curve and what is wrong."""
    file = tmp_path / "lens.json"
    lens_json.write(file, lens(), {})
    whole = json.loads(file.read_text())
    change(whole, path, value)
    file.write_text(json.dumps(whole))
    with pytest.raises(ValueError, match=rf"lens\.json: .*{words}"):
        lens_json.read(file)


@pytest.mark.parametrize("content", [b"", b"{", b"[]", b"\xff\xfe", b"[" * 100_000, b'{"curves": NaN}'])
def test_lens_json_refuses_other_files(tmp_path, content):
    """What is no lens file at all is refused with its name."""
    file = tmp_path / "lens.json"
    file.write_bytes(content)
    with pytest.raises(ValueError, match="lens.json"):
        lens_json.read(file)


def test_lens_json_refuses_huge_files_unread(tmp_path, monkeypatch):
    """A file above the size limit is not read."""
    lens_json.write(tmp_path / "lens.json", lens(), {})
    monkeypatch.setattr(lens_json, "MOST_BYTES", 100)
    with pytest.raises(ValueError, match="too large"):
        lens_json.read(tmp_path / "lens.json")


def rows_of(path):
    lines = [line for line in path.read_text().splitlines() if not line.startswith("#")]
    return list(csv.DictReader(lines))


def test_profile_table_has_every_digit(tmp_path):
    """The table read by the csv module is the dense section bit for bit, in chain order."""
    section = lens()
    table.write_profile(tmp_path / "profile.csv", section, 50)
    rows = rows_of(tmp_path / "profile.csv")
    numbers = np.array([[float(r[k]) for k in ("r_mm", "z_mm", "tangent_r", "tangent_z")] for r in rows])
    np.testing.assert_array_equal(numbers, section.dense(50)[0])
    assert [r["curve"] for r in rows[::50]] == section.names


def test_profile_table_of_a_known_body(tmp_path):
    """On the conical pocket of slope 2 : 3 the tangent is (3, −2)/√13 (closed form)."""
    table.write_profile(tmp_path / "profile.csv", cone_pocket()[0], 3)
    middle = rows_of(tmp_path / "profile.csv")[1]
    assert (float(middle["r_mm"]), float(middle["z_mm"])) == pytest.approx((1.5, 1.0))
    assert float(middle["tangent_r"]) == pytest.approx(3 / 13**0.5)
    assert float(middle["tangent_z"]) == pytest.approx(-2 / 13**0.5)


def test_profile_table_carries_the_stamp(tmp_path):
    """The stamp stands in remarks before the header row, one line each."""
    table.write_profile(tmp_path / "profile.csv", lens(), 2, stamp={"version": "0.1.0", "note": "two\nlines"})
    lines = (tmp_path / "profile.csv").read_text().splitlines()
    assert lines[1:4] == ["# version 0.1.0", "# note two lines", "curve,r_mm,z_mm,tangent_r,tangent_z"]


def test_the_verifier_reads_the_profile_table(tmp_path):
    """What the verifier reads from the file is what it would take from the section in memory, bit for bit."""
    table.write_profile(tmp_path / "profile.csv", lens(True), stamp={"version": "0.1.0"})
    read, taken = Points.read(tmp_path / "profile.csv"), Points.of(lens(True))
    assert read.names == taken.names
    for a, b in zip(read.curves, taken.curves):
        np.testing.assert_array_equal(a, b)


@pytest.mark.parametrize(
    "section, words",
    [
        (polygon((0, 0), (5, 0), (5, 3), (1, 3), (6, 2), (6, 5), (0, 5)), "b and d cross"),
        (polygon((0, 3), (5, 3), (5, 0), (0, 0)), "wrong way round"),
        (polygon((0, 0), (5, 0), (-1, 2), (5, 3), (0, 4)), "b: reaches the axis"),
        (lens(), None),
        (lens(True), None),
    ],
)
def test_unsound_sections_are_found_without_cad(section, words):
    """Crossing curves, the wrong way round and r < 0 are named; sound lenses pass."""
    fault = solid.section_fault(section)
    assert fault is None if words is None else words in fault


def test_missing_cad_says_how_to_get_it(monkeypatch):
    """Without the extra the message gives the two pip lines."""
    monkeypatch.setitem(sys.modules, "OCP.gp", None)
    with pytest.raises(cad.CadMissing, match=r'pip install "inverse\[cad\]".*pip install "\.\[cad\]"'):
        cad.load()


def test_missing_system_library_is_told_apart(monkeypatch):
    """With the extra but without libGL the message names the system packages instead."""

    def refuse(name):
        raise ImportError("libGL.so.1: cannot open shared object file: No such file or directory")

    monkeypatch.setattr(importlib, "import_module", refuse)
    with pytest.raises(cad.CadMissing, match="libGL.so.1.*libgl1 libx11-6"):
        cad.load()


def handed_over(path, **changes):
    theta = np.linspace(0.0, 0.2, 400)
    facts = dict(
        name="Lantern 7",
        material_name="PMMA",
        density=1.19e-3,
        index=1.4925,
        wavelength=0.55,
        stamp={"version": "0.1.0"},
        far_field=FarField(theta, 5000 * np.exp(-((theta / 0.05) ** 2)), np.zeros(400)),
        flux=100.0,
        date="2026-03-01",
        aperture_radius=10.0,
    )
    return folder.hand_over(path, lens(), **(facts | changes))


def test_hand_over_without_cad_notes_it(tmp_path, monkeypatch):
    """All other files are written, and the note says why the solid is missing and how to get it."""
    monkeypatch.setitem(sys.modules, "OCP.gp", None)
    files, notes = handed_over(tmp_path / "run")
    assert files == ["lens.json", "profile.csv", "lens.dxf", "beam.ies", "beam.ldt"]
    assert sorted(p.name for p in (tmp_path / "run").iterdir()) == sorted(files)
    assert (
        len(notes) == 1
        and "lens.step" in notes[0]
        and "pip install" in notes[0]
        and "earlier" not in notes[0]
    )


def test_hand_over_warns_of_an_older_solid(tmp_path, monkeypatch):
    """A lens.step that was there before, and could not be replaced, is said to be an older one, and kept."""
    monkeypatch.setitem(sys.modules, "OCP.gp", None)
    (tmp_path / "lens.step").write_text("older")
    _, notes = handed_over(tmp_path)
    assert "from an earlier run" in notes[0] and (tmp_path / "lens.step").read_text() == "older"


def test_hand_over_notes_a_beam_that_fits_no_format(tmp_path, monkeypatch):
    """A beam too sharp for EULUMDAT's digits leaves that file out, says so, and writes the rest."""
    monkeypatch.setitem(sys.modules, "OCP.gp", None)
    files, notes = handed_over(tmp_path, far_field=FarField([0, 1e-4, 2e-4], [2e6, 2e6, 0], np.zeros(3)))
    assert "beam.ies" in files and "beam.ldt" not in files
    assert any(note.startswith("beam.ldt was not written.") for note in notes)


@pytest.mark.external
def test_hand_over_with_cad_is_complete_and_reproducible(tmp_path):
    """With the extra all six files are there, and a second run gives the same bytes."""
    pytest.importorskip("OCP", reason="needs the [cad] extra")
    files, notes = handed_over(tmp_path / "a")
    assert sorted(files) == ["beam.ies", "beam.ldt", "lens.dxf", "lens.json", "lens.step", "profile.csv"]
    assert notes == []
    handed_over(tmp_path / "b")
    for file in files:
        assert (tmp_path / "a" / file).read_bytes() == (tmp_path / "b" / file).read_bytes(), file
