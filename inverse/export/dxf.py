"""lens.dxf: the section as a drawing (DXF R2010, mm, x = r, y = z), curves exact.

A straight curve is a LINE, any other a SPLINE with its own degree, knots and control points; the left
half is the mirror image, also exact, on a layer of its own, so that switching it off leaves the profile
to turn.  Layers: OPTICAL, MECHANICAL, MIRRORED, CENTER, DIM, HATCH, TITLE.
"""

import io
from contextlib import contextmanager

import numpy as np

from inverse.export.atomic import write_bytes
from inverse.formats.nameplate import ascii_line
from inverse.profile.section import MECHANICAL

LAYERS = {  # name: (colour number, line type, line weight in 1/100 mm)
    "OPTICAL": (1, "CONTINUOUS", 50),
    "MECHANICAL": (7, "CONTINUOUS", 35),
    "MIRRORED": (7, "CONTINUOUS", 35),
    "CENTER": (5, "CENTER", 18),
    "DIM": (3, "CONTINUOUS", 18),
    "HATCH": (8, "CONTINUOUS", 13),
    "TITLE": (7, "CONTINUOUS", 25),
}
HIGHEST_DEGREE = 11  # of a SPLINE that drawing programs accept (ezdxf documentation)


def write(path, section, *, title, material, index, wavelength, stamp=None):
    """Write the drawing. ``index`` at ``wavelength`` (µm) goes into the title, ``stamp`` into the properties.

    Raises ValueError when a curve's degree is beyond what drawings can hold, OSError.
    """
    for c in section.curves:
        if c.degree > HIGHEST_DEGREE:
            raise ValueError(f"{c.name}: degree {c.degree} is beyond the {HIGHEST_DEGREE} of a DXF spline")
    with _fixed_dates():
        import ezdxf
        from ezdxf import zoom

        document = ezdxf.new("R2010", setup=["linetypes"], units=ezdxf.units.MM)
        document.header["$MEASUREMENT"] = 1
        for name, (colour, line_type, weight) in LAYERS.items():
            document.layers.add(name, color=colour, linetype=line_type, lineweight=weight)
        for word, value in (stamp or {}).items():
            document.header.custom_vars.append(ascii_line(word), ascii_line(value))
        space = document.modelspace()
        box = _Box(section)
        _curves(space, section)
        _hatch(space, section, box)
        _axis(space, box)
        _dimensions(document, space, section, box)
        _title(space, box, title, material, index, wavelength)
        around = 10.0 * box.text
        zoom.window(
            space, (-box.radius - around, box.low - 3.0 * around), (box.radius + around, box.high + around)
        )
        stream = io.StringIO()
        document.write(stream)
        content = document.encode(stream.getvalue())
    write_bytes(path, content)


@contextmanager
def _fixed_dates():
    """The library's switch for fixed dates and identifiers, put back afterwards."""
    import ezdxf

    before = ezdxf.options.write_fixed_meta_data_for_testing
    ezdxf.options.write_fixed_meta_data_for_testing = True
    try:
        yield
    finally:
        ezdxf.options.write_fixed_meta_data_for_testing = before


class _Box:
    """Extent of the section in mm, and the sizes that follow from it."""

    def __init__(self, section):
        points = section.dense(200)[0][:, :2]
        self.radius = float(points[:, 0].max())
        self.low, self.high = float(points[:, 1].min()), float(points[:, 1].max())
        self.widest = float(points[np.argmax(points[:, 0]), 1])  # z of the largest radius
        self.text = self.radius / 18.0  # a letter height that reads well beside a part of this size


def _mirrored(points):
    return points * np.array([-1.0, 1.0])


def _curves(space, section):
    for c in section.curves:
        layer = "MECHANICAL" if c.role == MECHANICAL else "OPTICAL"
        for points, on in ((c.points, layer), (_mirrored(c.points), "MIRRORED")):
            if c.straight:
                space.add_line(*map(tuple, points.tolist()), dxfattribs={"layer": on})
                continue
            spline = space.add_spline(degree=int(c.degree), dxfattribs={"layer": on})
            spline.control_points = [(r, z, 0.0) for r, z in points.tolist()]
            spline.knots = c.knots.tolist()


def _hatch(space, section, box):
    for mirror in (False, True):
        hatch = space.add_hatch(dxfattribs={"layer": "HATCH"})
        hatch.set_pattern_fill("ANSI31", scale=box.radius / 25.0)
        boundary = hatch.paths.add_edge_path()
        for c in section.curves:
            points = (_mirrored(c.points) if mirror else c.points).tolist()
            if c.straight:
                boundary.add_line(*points)
            else:
                boundary.add_spline(control_points=points, degree=int(c.degree), knot_values=c.knots.tolist())
        boundary.add_line(section.curves[-1].points[-1].tolist(), section.curves[0].points[0].tolist())


def _axis(space, box):
    over = 1.2 * box.text  # ends before the first dimension
    space.add_line((0.0, box.low - over), (0.0, box.high + over), dxfattribs={"layer": "CENTER"})
    space.add_line((-box.radius - over, 0.0), (box.radius + over, 0.0), dxfattribs={"layer": "CENTER"})


def _dimensions(document, space, section, box):
    """Diameter and height of the part, the foot ring, and the heights above the emitter plane y = 0."""
    style = document.dimstyles.new("LENS")
    style.dxf.dimtxt, style.dxf.dimasz = box.text, 0.8 * box.text
    style.dxf.dimexe = style.dxf.dimexo = style.dxf.dimgap = 0.4 * box.text
    style.dxf.dimdec, style.dxf.dimzin, style.dxf.dimdsep = 3, 8, ord(".")
    style.dxf.dimtad, style.dxf.dimlunit, style.dxf.dimtxsty = 1, 2, "Standard"

    def dimension(a, b, base, angle, text):
        made = space.add_linear_dim(
            base, a, b, angle=angle, text=text, dimstyle="LENS", dxfattribs={"layer": "DIM"}
        )
        made.render()

    step = 3.0 * box.text
    below = box.low - step
    for r, z in [*_foot(section), (box.radius, box.widest)]:
        dimension((-r, z), (r, z), (0.0, below), 0.0, "%%c<>")
        below -= step
    right, left = box.radius + step, -box.radius - step
    dimension((box.radius, box.low), (0.0, box.high), (right, 0.0), 90.0, "<>")
    dimension((-box.radius, box.low), (-box.radius, 0.0), (left, 0.0), 90.0, "<>")
    top, roof = section.curves[-1].points[-1], section.curves[0].points[0]
    dimension((-box.radius, 0.0), tuple(roof), (left - step, 0.0), 90.0, "<>")
    dimension(tuple(roof), tuple(top), (right + step, 0.0), 90.0, "<>")


def _foot(section):
    """The ends of the foot ring, inner first; nothing when the part has none."""
    if "foot" not in section.names:
        return []
    return sorted(map(tuple, section.curve("foot").points.tolist()))


def _title(space, box, title, material, index, wavelength):
    lines = [
        title,
        f"{material}, n = {index:.5f} at {1000.0 * wavelength:.1f} nm",
        f"diameter {2.0 * box.radius:.3f} mm, height {box.high - box.low:.3f} mm",
        "all lengths in mm; x = radius, y = height over the emitter plane; curves are exact splines",
        "turn the profile of layers OPTICAL and MECHANICAL about the y axis",
    ]
    y = box.low - 18.0 * box.text
    for k, words in enumerate(lines):
        place = {"layer": "TITLE", "insert": (-box.radius, y - 1.8 * k * box.text)}
        space.add_text(ascii_line(words), height=box.text, dxfattribs=place)
