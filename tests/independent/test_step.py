"""lens.step against closed forms, against the text of the file, and read back by the kernel."""

import re

import numpy as np
import pytest
from hand_built import cone_pocket, lens, polygon, spline

from inverse.export import cad, step
from inverse.profile.section import MECHANICAL, Section, line

pytest.importorskip("OCP", reason="needs the [cad] extra")
pytestmark = pytest.mark.external

BOTH = pytest.mark.parametrize("stepped", [False, True])


def written(path, section, **changes):
    facts = dict(name="Lantern 7", material="PMMA", density=1.19e-3, stamp={"version": "0.1.0"})
    step.write(path, section, **(facts | changes))
    return path


@BOTH
def test_one_valid_solid_with_a_named_face_for_every_curve(tmp_path, stepped):
    """The file holds one valid solid; its faces are the curves, by name."""
    facts = step.read(written(tmp_path / "lens.step", lens(stepped)))
    assert facts.solids == 1 and facts.valid
    assert sorted(facts.faces) == sorted(lens(stepped).names)


def test_volume_of_a_known_body(tmp_path):
    """A cylinder with a conical pocket: π R² H − π r² h / 3 (closed form), by kernel and section."""
    section, wanted = cone_pocket()
    assert section.volume == pytest.approx(wanted, rel=1e-14)
    assert step.read(written(tmp_path / "body.step", section)).volume == pytest.approx(wanted, rel=1e-12)


@BOTH
def test_volume_of_a_lens_by_two_roads(tmp_path, stepped):
    """Gauss–Kronrod over the faces of the file, and the section's own line integral, agree."""
    section = lens(stepped)
    # the kernel was asked for 1e-8
    assert step.read(written(tmp_path / "lens.step", section)).volume == pytest.approx(
        section.volume, rel=1e-8
    )


def test_frame_and_unit(tmp_path):
    """The solid stands in mm about the z axis: radius 5 and z from 0 to 7 (the kernel's box adds 1e-7)."""
    facts = step.read(written(tmp_path / "body.step", cone_pocket()[0]))
    np.testing.assert_allclose(facts.low, [-5, -5, 0], atol=2e-7)
    np.testing.assert_allclose(facts.high, [5, 5, 7], atol=2e-7)


def test_straight_curves_become_elementary_surfaces(tmp_path):
    """Cone, plane, cylinder and plane stay what they are; only true splines become surfaces of revolution."""
    body = written(tmp_path / "body.step", cone_pocket()[0]).read_text()
    kinds = [
        len(re.findall(rf"= {kind}\(", body)) for kind in ("CONICAL_SURFACE", "CYLINDRICAL_SURFACE", "PLANE")
    ]
    assert kinds == [1, 1, 2] and "SURFACE_OF_REVOLUTION" not in body
    assert (
        len(re.findall(r"= SURFACE_OF_REVOLUTION\(", written(tmp_path / "l.step", lens()).read_text())) == 3
    )


def test_control_points_stand_in_the_text(tmp_path):
    """Read by a regular expression, without the kernel: each swept spline has our degree and points."""
    text = written(tmp_path / "lens.step", lens()).read_text().replace("\n", "")
    points = {
        n: np.array(p.split(","), float)
        for n, p in re.findall(r"#(\d+) = CARTESIAN_POINT\('',\(([^)]*)\)\)", text)
    }
    for curve in [c for c in lens().curves if not c.straight]:
        face = re.search(rf"ADVANCED_FACE\('{curve.name}',\([^)]*\),#(\d+)", text).group(1)
        turned = re.search(rf"#{face} = SURFACE_OF_REVOLUTION\('',#(\d+),", text).group(1)
        degree, poles = re.search(
            rf"#{turned} = B_SPLINE_CURVE_WITH_KNOTS\('',(\d+),\(([^)]*)\)", text
        ).groups()
        got = np.array([points[p.strip()[1:]] for p in poles.split(",")])
        assert int(degree) == curve.degree
        # the file has twelve decimals
        np.testing.assert_allclose(got[:, [0, 2]], curve.points, rtol=0, atol=1e-12)
        assert np.all(got[:, 1] == 0.0)


@BOTH
def test_section_comes_back(tmp_path, stepped):
    """The curves found again from the faces are those written: order, names, roles, degree, points, knots."""
    section = lens(stepped)
    back = step.read_section(written(tmp_path / "lens.step", section))
    assert back.names == section.names
    for a, b in zip(section.curves, back.curves):
        assert (a.role, a.degree) == (b.role, b.degree)
        np.testing.assert_allclose(b.points, a.points, rtol=0, atol=1e-12)
        np.testing.assert_allclose(b.knots, a.knots, rtol=0, atol=1e-12)


def test_full_cone_and_disc_come_back(tmp_path):
    """A cone up to its tip and a disc without a hole are found with their end on the axis."""
    section, _ = cone_pocket()
    back = step.read_section(written(tmp_path / "body.step", section))
    for a, b in zip(section.curves, back.curves):
        np.testing.assert_allclose(b.points, a.points, rtol=0, atol=1e-12)


def test_faces_cut_in_halves_are_one_curve(tmp_path):
    """A body made by another program of two half turns gives each curve once."""
    from OCP.BRepAlgoAPI import BRepAlgoAPI_Cut, BRepAlgoAPI_Fuse
    from OCP.BRepPrimAPI import BRepPrimAPI_MakeBox, BRepPrimAPI_MakeCone, BRepPrimAPI_MakeCylinder
    from OCP.gp import gp_Pnt

    def half(y):
        whole = BRepAlgoAPI_Cut(
            BRepPrimAPI_MakeCylinder(5, 7).Shape(), BRepPrimAPI_MakeCone(3, 1, 2).Shape()
        ).Shape()
        return BRepAlgoAPI_Cut(whole, BRepPrimAPI_MakeBox(gp_Pnt(-9, y, -9), 18, 9, 18).Shape()).Shape()

    fused = BRepAlgoAPI_Fuse(half(0), half(-9)).Shape()
    assert len(cad.items(fused, "Face")) > 5  # really cut
    back = step.read_section(_foreign(tmp_path / "halves.step", fused))
    corners = [tuple(np.round(c.points[0], 9)) for c in back.curves]
    assert corners == [(0, 2), (1, 2), (3, 0), (5, 0), (5, 7)]
    assert back.volume == pytest.approx(np.pi * (25 * 7 - 2 / 3 * (1 + 3 + 9)), rel=1e-12)


def _foreign(path, shape):
    """A STEP file as any program might write it: no names, no colours."""
    from OCP.STEPControl import STEPControl_StepModelType, STEPControl_Writer

    with cad.quiet():
        writer = STEPControl_Writer()
        writer.Transfer(shape, STEPControl_StepModelType.STEPControl_AsIs)
        writer.Write(str(path))
    return path


def test_foreign_bodies_are_refused_in_words(tmp_path):
    """A box, a ball, a tube beside the axis, two solids: a ValueError names the file and the fault."""
    from OCP.BRep import BRep_Builder
    from OCP.BRepPrimAPI import BRepPrimAPI_MakeBox, BRepPrimAPI_MakeCylinder, BRepPrimAPI_MakeSphere
    from OCP.gp import gp_Ax2, gp_Dir, gp_Pnt
    from OCP.TopoDS import TopoDS_Compound

    aside = gp_Ax2(gp_Pnt(1, 0, 0), gp_Dir(0, 0, 1))
    pair, builder = TopoDS_Compound(), BRep_Builder()
    builder.MakeCompound(pair)
    for z in (0, 9):
        builder.Add(pair, BRepPrimAPI_MakeCylinder(gp_Ax2(gp_Pnt(0, 0, z), gp_Dir(0, 0, 1)), 2, 3).Shape())
    for shape, words in [
        (BRepPrimAPI_MakeBox(1, 2, 3).Shape(), "not square to the z axis"),
        (BRepPrimAPI_MakeSphere(4).Shape(), "Sphere"),
        (BRepPrimAPI_MakeCylinder(aside, 2, 3).Shape(), "another axis"),
        (pair, "one solid is wanted, got 2"),
    ]:
        with pytest.raises(ValueError, match=rf"foreign\.step: .*{words}"):
            step.read_section(_foreign(tmp_path / "foreign.step", shape))


@pytest.mark.parametrize(
    "content, words",
    [
        ("", "not a STEP file"),
        ("solid ascii", "not a STEP file"),
        ("ISO-10303-21;\nHEADER;\nrubbish", "no shape"),
    ],
)
def test_broken_files_are_refused(tmp_path, content, words):
    """What is no STEP file, or half of one, gives a ValueError with the file's name."""
    path = tmp_path / "broken.step"
    path.write_text(content)
    with pytest.raises(ValueError, match=f"broken.step: .*{words}"):
        step.read(path)


def test_equal_input_gives_equal_bytes(tmp_path):
    """Two writings are the same file, also with another lens written between."""
    first = written(tmp_path / "a.step", lens()).read_bytes()
    written(tmp_path / "b.step", lens(True))
    assert written(tmp_path / "c.step", lens()).read_bytes() == first


def test_header_says_what_it_should_and_no_more(tmp_path):
    """Stamp, name and date stand in the header, no author, no path; names are ASCII."""
    path = written(
        tmp_path / "lens.step", lens(), name="Größe 7", date="2026-03-01", stamp={"brief_sha256": "ab12"}
    )
    head = path.read_text().split("ENDSEC")[0]
    assert "'brief_sha256 ab12'" in head and "'Groesse 7','2026-03-01T00:00:00',(''),('')" in head
    assert str(tmp_path) not in path.read_text()


@pytest.mark.parametrize("schema, word", [("AP242", "AP242_MANAGED_MODEL"), ("AP214", "AUTOMOTIVE_DESIGN")])
def test_schema(tmp_path, schema, word):
    """The schema in the header is the one asked for (schema names of ISO 10303-242 and -214)."""
    path = written(tmp_path / "lens.step", lens(), schema=schema)
    assert word in path.read_text().split("ENDSEC")[0]
    assert step.read(path).valid


def test_unknown_schema(tmp_path):
    """Any other schema is refused."""
    with pytest.raises(ValueError, match="AP242, AP214"):
        written(tmp_path / "lens.step", lens(), schema="AP203")


def test_material_with_its_density_and_unit(tmp_path):
    """1.19e-3 g/mm³ stands as 1.19 in gram¹ centimetre⁻³ beside the material's name."""
    text = written(tmp_path / "lens.step", lens()).read_text().replace("\n", "")
    assert "DESCRIPTIVE_REPRESENTATION_ITEM('PMMA'" in text
    value, unit = re.search(r"POSITIVE_RATIO_MEASURE\(([\d.]+)\),\s*#(\d+)\)", text).groups()
    assert float(value) == 1.19
    elements = re.search(rf"#{unit} = DERIVED_UNIT\(\(([^)]*)\)\)", text).group(1).split(",")
    powers = {}
    for element in elements:
        of, power = re.search(rf"{element} = DERIVED_UNIT_ELEMENT\((#\d+),([-\d.]+)\)", text).groups()
        powers[re.search(rf"{of} = \(.*?SI_UNIT\(([^)]*)\)", text).group(1)] = float(power)
    assert powers == {"$,.GRAM.": 1.0, ".CENTI.,.METRE.": -3.0}


def test_the_console_stays_silent(tmp_path, capfd):
    """Neither writing nor reading says anything."""
    step.read_section(written(tmp_path / "lens.step", lens()))
    out, err = capfd.readouterr()
    assert out == "" and err == ""


def bulging():
    """A roof whose bulge passes through the pocket wall."""
    roof = spline("roof", MECHANICAL, 3, [(0, 2), (1, 2), (9, 2.2), (3, 2.5)])
    rest = [(3, 2.5), (3.5, 0), (5, 0), (5, 6), (0, 6)]
    return Section(
        (roof, *(line(f"line {k}", MECHANICAL, a, b) for k, (a, b) in enumerate(zip(rest, rest[1:]))))
    )


def beyond_the_axis():
    """A roof that dips to r < 0."""
    roof = spline("roof", MECHANICAL, 3, [(0, 2), (-3, 2), (1, 2.2), (3, 2.5)])
    return Section((roof, *bulging().curves[1:]))


@pytest.mark.parametrize(
    "section, words",
    [
        (bulging(), "roof and line 0 cross"),
        (beyond_the_axis(), "roof: reaches the axis"),
        (polygon((0, 3), (5, 3), (5, 0), (0, 0)), "wrong way round"),
        (polygon((0, 0), (5, 0), (0, 3), (5, 6), (0, 6)), "b: reaches the axis"),
        (polygon((0, 0), (5, 0), (5, 3), (2, 3), (2, 0), (0, 3)), "crosses itself"),  # d touches a
    ],
)
def test_unsound_sections_are_refused(tmp_path, section, words):
    """A section that crosses, leaves r > 0, runs backwards or touches itself: SolidError, and no file."""
    with pytest.raises(cad.SolidError, match=words):
        written(tmp_path / "lens.step", section)
    assert list(tmp_path.iterdir()) == []


def test_looser_volume_is_noticed(tmp_path, monkeypatch):
    """A solid whose volume differs from the section's by two millionths is not written."""
    true = Section.volume.fget
    monkeypatch.setattr(Section, "volume", property(lambda self: true(self) * (1 + 2e-6)))
    with pytest.raises(cad.SolidError, match="mm³"):
        written(tmp_path / "lens.step", lens())
