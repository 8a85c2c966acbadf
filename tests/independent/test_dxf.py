"""lens.dxf read back with ezdxf: exact curves, sound file, right figures."""

import ezdxf
import numpy as np
import pytest
from hand_built import cone_pocket, lens, spline

from inverse.export import dxf
from inverse.profile.section import MECHANICAL, Section, line

BOTH = pytest.mark.parametrize("stepped", [False, True])


def written(path, section, **changes):
    facts = dict(
        title="Lantern 7", material="PMMA", index=1.4925, wavelength=0.55, stamp={"version": "0.1.0"}
    )
    dxf.write(path, section, **(facts | changes))
    return path


def curves(path, layers):
    """(start, middle, end) by the drawing library's own evaluation, of every curve on the layers."""
    found = []
    for entity in ezdxf.readfile(path).modelspace():
        if entity.dxf.layer not in layers:
            continue
        if entity.dxftype() == "LINE":
            a, b = np.array(entity.dxf.start), np.array(entity.dxf.end)
            found.append(np.array([a, 0.5 * (a + b), b])[:, :2])
        else:
            tool = entity.construction_tool()
            found.append(np.array([tool.point(t) for t in (0.0, 0.5, 1.0)])[:, :2])
    return found


@BOTH
def test_curves_read_back(tmp_path, stepped):
    """Evaluated by another library after reading, every curve passes within 1e-9 mm of ours, in order."""
    section = lens(stepped)
    got = curves(written(tmp_path / "lens.dxf", section), ("OPTICAL", "MECHANICAL"))
    wanted = [c.at(np.array([0.0, 0.5, 1.0])) for c in section.curves]
    np.testing.assert_allclose(got, wanted, rtol=0, atol=1e-9)


def test_splines_keep_degree_knots_and_points(tmp_path):
    """A SPLINE has the degree, knots and control points of its curve: nothing is refitted."""
    path = written(tmp_path / "lens.dxf", lens())
    splines = [e for e in ezdxf.readfile(path).modelspace().query("SPLINE") if e.dxf.layer == "OPTICAL"]
    bent = [c for c in lens().curves if not c.straight]
    assert [e.dxf.degree for e in splines] == [c.degree for c in bent] == [3, 4, 3]
    for entity, curve in zip(splines, bent):
        np.testing.assert_allclose(np.array(entity.control_points)[:, :2], curve.points, rtol=0, atol=1e-9)
        np.testing.assert_allclose(entity.knots, curve.knots, rtol=0, atol=1e-12)
        assert len(entity.fit_points) == 0


@BOTH
def test_left_half_is_the_mirror_image(tmp_path, stepped):
    """Layer MIRRORED holds every curve once more with x turned round."""
    path = written(tmp_path / "lens.dxf", lens(stepped))
    right, left = curves(path, ("OPTICAL", "MECHANICAL")), curves(path, ("MIRRORED",))
    np.testing.assert_allclose(left, np.array(right) * [-1, 1], rtol=0, atol=1e-12)


def test_optical_and_mechanical_curves_are_told_apart(tmp_path):
    """Foot and rim lie on MECHANICAL, the four optical curves on OPTICAL."""
    path = written(tmp_path / "lens.dxf", lens())
    assert len(curves(path, ("MECHANICAL",))) == 2 and len(curves(path, ("OPTICAL",))) == 4


@BOTH
def test_audit_finds_nothing(tmp_path, stepped):
    """The drawing library's audit of the file is clean; unit mm, version R2010."""
    document = ezdxf.readfile(written(tmp_path / "lens.dxf", lens(stepped)))
    audit = document.audit()
    assert not audit.errors and not audit.fixes
    assert document.units == ezdxf.units.MM and document.acad_release == "R2010"


def test_dimensions_measure_the_part(tmp_path):
    """Diameters 6, 10, 10 and heights 7, 0, 2, 5 of the known body stand in its dimensions."""
    space = ezdxf.readfile(written(tmp_path / "body.dxf", cone_pocket()[0])).modelspace()
    measured = sorted(round(d.get_measurement(), 9) for d in space.query("DIMENSION"))
    assert measured == [0.0, 2.0, 5.0, 6.0, 7.0, 10.0, 10.0]


def test_title_says_what_it_is(tmp_path):
    """Name, material, index with its wavelength and the size stand in the title, in ASCII."""
    space = ezdxf.readfile(written(tmp_path / "lens.dxf", lens(), title="Größe 7")).modelspace()
    words = "\n".join(t.dxf.text for t in space.query("TEXT") if t.dxf.layer == "TITLE")
    assert "Groesse 7" in words and "PMMA, n = 1.49250 at 550.0 nm" in words and "diameter 20.000 mm" in words


def test_stamp_is_kept_in_the_properties(tmp_path):
    """The stamp comes back from the drawing's custom properties."""
    document = ezdxf.readfile(written(tmp_path / "lens.dxf", lens(), stamp={"brief_sha256": "ab12"}))
    assert ("brief_sha256", "ab12") in document.header.custom_vars.properties


def test_equal_input_gives_equal_bytes(tmp_path):
    """Two writings are the same file, and the library's own switch is left as it was."""
    first = written(tmp_path / "a.dxf", lens()).read_bytes()
    written(tmp_path / "b.dxf", lens(True))
    assert written(tmp_path / "c.dxf", lens()).read_bytes() == first
    assert ezdxf.options.write_fixed_meta_data_for_testing is False


def test_hatch_follows_the_section(tmp_path):
    """Each half is hatched along the same exact curves: one edge a curve and one on the axis."""
    hatches = ezdxf.readfile(written(tmp_path / "lens.dxf", lens())).modelspace().query("HATCH")
    assert [len(h.paths.paths[0].edges) for h in hatches] == [7, 7]


def test_too_high_a_degree_is_refused(tmp_path):
    """Degree 12 fits no SPLINE: a ValueError that names the curve, and no file."""
    points = [(5 - 5 * k / 12, 3 + 0.1 * k) for k in range(12)] + [(0, 4)]
    roof = spline("roof", MECHANICAL, 12, points)
    section = Section((line("a", MECHANICAL, (0, 0), (5, 0)), line("b", MECHANICAL, (5, 0), (5, 3)), roof))
    with pytest.raises(ValueError, match="roof: degree 12"):
        written(tmp_path / "lens.dxf", section)
    assert list(tmp_path.iterdir()) == []
