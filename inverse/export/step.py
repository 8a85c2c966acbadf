"""lens.step: the exact solid with names, colours and material (ISO 10303, AP242 or AP214), and back again.

Every face carries the name of its curve and a colour for its role; the part its name, the material with
its density.  The header holds the stamp of the run and a date that is given, so equal input gives equal
bytes.  Nothing about the machine or the user goes in.

    Facts         what a STEP file holds: solids, validity, volume, face names, bounding box
    read_section  the exact meridional curves, found again from the faces
"""

import io
import re
from dataclasses import dataclass

import numpy as np

from inverse.export import cad, meridian, solid
from inverse.export.atomic import write_bytes
from inverse.export.cad import SolidError
from inverse.formats.nameplate import ascii_line
from inverse.profile.section import MECHANICAL, REFLECTING, REFRACTING

SCHEMAS = {"AP242": "AP242DIS", "AP214": "AP214IS"}
COLOURS = {
    REFRACTING: (0.55, 0.78, 0.98),
    REFLECTING: (0.98, 0.72, 0.35),
    MECHANICAL: (0.72, 0.74, 0.76),
}  # sRGB
SAME_COLOUR = 0.01  # distance in linear RGB, far below that of any two roles
UNDATED = "2000-01-01"
MM3_PER_CM3 = 1000.0


def write(path, section, *, name, material, density, stamp, schema="AP242", date=UNDATED):
    """Check the solid and write it. ``density`` in g/mm³ or None, ``stamp`` word → value, ``date`` ISO.

    Raises CadMissing without the kernel, SolidError when the section makes no sound solid, OSError.
    """
    if schema not in SCHEMAS:
        raise ValueError(f"a schema of {', '.join(SCHEMAS)} is wanted, got {schema!r}")
    cad.load()
    with cad.quiet():
        body, faces = solid.build(section)
        solid.check(body, section)
        roles = {c.name: c.role for c in section.curves}
        document = _document(body, faces, roles, ascii_line(name), ascii_line(material), density)
        content = _serialised(document, SCHEMAS[schema], ascii_line(name), stamp, date)
    write_bytes(path, _density_unit_mended(content))


def _document(body, faces, roles, name, material, density):
    """The kernel's document with the solid and everything said about it."""
    from OCP.TCollection import TCollection_ExtendedString, TCollection_HAsciiString
    from OCP.TDataStd import TDataStd_Name
    from OCP.TDocStd import TDocStd_Document
    from OCP.XCAFDoc import XCAFDoc_ColorType, XCAFDoc_DocumentTool

    document = TDocStd_Document(TCollection_ExtendedString("MDTV-XCAF"))
    XCAFDoc_DocumentTool.SetLengthUnit_s(document, 1e-3)  # m: the document counts in mm
    shapes = XCAFDoc_DocumentTool.ShapeTool_s(document.Main())
    colours = XCAFDoc_DocumentTool.ColorTool_s(document.Main())
    part = shapes.AddShape(body, False)
    TDataStd_Name.Set_s(part, TCollection_ExtendedString(name))
    for curve, face in faces.items():
        label = shapes.AddSubShape(part, face)
        TDataStd_Name.Set_s(label, TCollection_ExtendedString(curve))
        colours.SetColor(label, _colour(roles[curve]), XCAFDoc_ColorType.XCAFDoc_ColorSurf)
    words = [
        TCollection_HAsciiString(w) for w in (material, "lens material", "g/cm3", "POSITIVE_RATIO_MEASURE")
    ]
    materials = XCAFDoc_DocumentTool.MaterialTool_s(document.Main())
    per_cm3 = 0.0 if density is None else density * MM3_PER_CM3
    materials.SetMaterial(part, words[0], words[1], per_cm3, words[2], words[3])
    return document


def _colour(role):
    from OCP.Quantity import Quantity_Color, Quantity_TypeOfColor

    return Quantity_Color(*COLOURS[role], Quantity_TypeOfColor.Quantity_TOC_sRGB)


def _serialised(document, schema, name, stamp, date):
    """The bytes of the file, header filled in."""
    from OCP.APIHeaderSection import APIHeaderSection_MakeHeader
    from OCP.IFSelect import IFSelect_ReturnStatus
    from OCP.Interface import Interface_Static
    from OCP.STEPCAFControl import STEPCAFControl_Writer
    from OCP.STEPControl import STEPControl_StepModelType
    from OCP.TCollection import TCollection_HAsciiString

    STEPCAFControl_Writer()  # the settings below exist only after a first writer
    settings = [
        Interface_Static.SetCVal_s("write.step.schema", schema),
        Interface_Static.SetCVal_s("write.step.unit", "MM"),
        Interface_Static.SetIVal_s("write.stepcaf.subshapes.name", 1),
    ]
    if not all(settings):
        raise SolidError("the CAD kernel refuses its own settings for STEP; is this another version of it?")
    writer = STEPCAFControl_Writer()
    writer.SetNameMode(True)
    writer.SetColorMode(True)
    writer.SetMaterialMode(True)
    if not writer.Transfer(document, STEPControl_StepModelType.STEPControl_AsIs):
        raise SolidError("the CAD kernel cannot translate the solid to STEP")
    header = APIHeaderSection_MakeHeader(writer.ChangeWriter().Model())
    said = "; ".join(f"{word} {value}" for word, value in stamp.items())
    header.SetDescriptionValue(1, TCollection_HAsciiString(ascii_line(said) or "lens"))
    header.SetName(TCollection_HAsciiString(name))
    header.SetTimeStamp(TCollection_HAsciiString(f"{ascii_line(date)}T00:00:00"))
    header.SetOriginatingSystem(TCollection_HAsciiString("inverse"))
    for set_one in (header.SetAuthorValue, header.SetOrganizationValue):
        set_one(1, TCollection_HAsciiString(""))
    header.SetAuthorisation(TCollection_HAsciiString(""))
    stream = io.BytesIO()
    if writer.WriteStream(stream) != IFSelect_ReturnStatus.IFSelect_RetDone:
        raise SolidError("the CAD kernel cannot write the STEP file")
    return stream.getvalue()


def _density_unit_mended(content):
    """The kernel (8.0) writes the unit of density as gram³ centimetre²; this makes it gram¹ centimetre⁻³."""
    gram = re.search(rb"#(\d+) = \( MASS_UNIT\(\)[^;]*\.GRAM\.\)", content)
    centimetre = re.search(rb"#(\d+) = \( LENGTH_UNIT\(\)[^;]*\.CENTI\.,\.METRE\.\)", content)
    for unit, power in ((gram, b"1."), (centimetre, b"-3.")):
        if unit:
            element = rb"(DERIVED_UNIT_ELEMENT\(#" + unit.group(1) + rb",)[-\d.]+\)"
            content = re.sub(element, rb"\g<1>" + power + b")", content)
    return content


@dataclass(frozen=True)
class Facts:
    """What a STEP file holds."""

    solids: int
    valid: bool
    volume: float  # mm³, of all solids
    faces: tuple[str, ...]  # names, in the file's order
    low: np.ndarray  # (3,) mm, corner of the bounding box, to the kernel's 1e-7 mm
    high: np.ndarray  # (3,) mm


def read(path):
    """The `Facts` of a file. Raises CadMissing, ValueError when it is no STEP file, OSError."""
    from_file = _loaded(path)
    from OCP.Bnd import Bnd_Box
    from OCP.BRepBndLib import BRepBndLib

    box = Bnd_Box()
    BRepBndLib.AddOptimal_s(from_file.shape, box, False, False)
    box.SetGap(0.0)
    low, high = box.CornerMin(), box.CornerMax()
    return Facts(
        solids=len(cad.items(from_file.shape, "Solid")),
        valid=solid.valid(from_file.shape),
        volume=solid.volume(from_file.shape),
        faces=tuple(name for _, name, _ in from_file.faces),
        low=np.array([low.X(), low.Y(), low.Z()]),
        high=np.array([high.X(), high.Y(), high.Z()]),
    )


def read_section(path):
    """The `Section` whose revolution about z the one solid of a file is, curves exact, names and roles kept.

    Raises CadMissing, OSError, and ValueError naming the file when it holds anything else.
    """
    from_file = _loaded(path)
    count = len(cad.items(from_file.shape, "Solid"))
    if count != 1:
        raise ValueError(f"{path}: one solid is wanted, got {count}")
    try:
        return meridian.section(from_file.faces)
    except ValueError as fault:
        raise ValueError(f"{path}: {fault}") from None


@dataclass(frozen=True)
class _Loaded:
    shape: object
    faces: list  # (face, name, role) of every face


def _loaded(path):
    """The shape in a file, with the names and roles of its faces."""
    with open(path, "rb") as file:
        if not file.read(64).lstrip().startswith(b"ISO-10303-21"):
            raise ValueError(f"{path}: not a STEP file: it does not start with ISO-10303-21")
    cad.load()
    from OCP.IFSelect import IFSelect_ReturnStatus
    from OCP.STEPCAFControl import STEPCAFControl_Reader
    from OCP.TCollection import TCollection_ExtendedString
    from OCP.TDocStd import TDocStd_Document
    from OCP.XCAFDoc import XCAFDoc_DocumentTool

    with cad.quiet():
        reader = STEPCAFControl_Reader()
        reader.SetNameMode(True)
        reader.SetColorMode(True)
        document = TDocStd_Document(TCollection_ExtendedString("MDTV-XCAF"))
        done = reader.ReadFile(str(path)) == IFSelect_ReturnStatus.IFSelect_RetDone and reader.Transfer(
            document
        )
    shape = reader.ChangeReader().OneShape()
    if not done or shape.IsNull():
        raise ValueError(f"{path}: the CAD kernel finds no shape in it")
    colours = XCAFDoc_DocumentTool.ColorTool_s(document.Main())
    transfer = reader.Reader().WS().TransferReader()
    faces = []
    for number, face in enumerate(cad.items(shape, "Face"), start=1):
        entity = transfer.EntityFromShapeResult(face, 1)
        word = entity.Name().ToCString().strip() if entity is not None and entity.Name() is not None else ""
        faces.append((face, word or f"face {number}", _role(colours, face)))
    return _Loaded(shape, faces)


def _role(colours, face):
    """The role whose colour a face wears; mechanical when it wears none of them."""
    from OCP.Quantity import Quantity_Color
    from OCP.XCAFDoc import XCAFDoc_ColorType

    worn = Quantity_Color()
    if colours.GetColor(face, XCAFDoc_ColorType.XCAFDoc_ColorSurf, worn):
        for role in COLOURS:
            if worn.Distance(_colour(role)) < SAME_COLOUR:
                return role
    return MECHANICAL
