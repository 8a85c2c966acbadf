"""One exact solid of revolution out of a section, and the checks it must pass before it is written.

Every curve becomes one edge (a straight curve a line, any other its own B-spline, control point by
control point), all edges and the axis one planar face, the face turned by 2π about z one solid with one
face for every curve: planes, cones, cylinders and surfaces of revolution, nothing approximated.
Neighbouring edges share one vertex.

A validity check passes profiles that cross themselves, so crossing is looked for apart; the volume is
compared with the one integrated from the section by another rule and by other code.
"""

import numpy as np

from inverse.export.cad import SolidError, items

VOLUME_TOLERANCE = 1e-6  # relative; the kernel's Gauss–Kronrod rule is asked for a hundredth of it
GAUSS_KRONROD = 1e-8  # relative
ON_FACE = 1e-7  # mm, the kernel's own confusion distance


def build(section):
    """(solid, {curve name: its face}). Raises SolidError when the kernel refuses a curve or the turn."""
    from OCP.BRepBuilderAPI import BRepBuilderAPI_MakeFace, BRepBuilderAPI_MakeVertex, BRepBuilderAPI_MakeWire
    from OCP.BRepPrimAPI import BRepPrimAPI_MakeRevol
    from OCP.gp import gp_Ax1, gp_Dir, gp_Pnt

    starts = [c.points[0] for c in section.curves] + [section.curves[-1].points[-1]]
    vertices = [BRepBuilderAPI_MakeVertex(gp_Pnt(float(r), 0.0, float(z))).Vertex() for r, z in starts]
    edges = [_edge(c, a, b) for c, a, b in zip(section.curves, vertices, vertices[1:])]
    wire = BRepBuilderAPI_MakeWire()
    for edge in [*edges, _line_edge("axis", vertices[-1], vertices[0])]:
        wire.Add(edge)
        if not wire.IsDone():
            raise SolidError(f"the curves do not join to a wire: {_word(wire.Error())}")
    face = BRepBuilderAPI_MakeFace(wire.Wire(), True)
    if not face.IsDone():
        raise SolidError(f"the section is no planar face: {_word(face.Error())}")
    turn = BRepPrimAPI_MakeRevol(
        face.Face(), gp_Ax1(gp_Pnt(0.0, 0.0, 0.0), gp_Dir(0.0, 0.0, 1.0)), 2.0 * np.pi, False
    )
    turn.Build()
    if not turn.IsDone():
        raise SolidError("the section cannot be turned about the axis")
    solids = items(turn.Shape(), "Solid")
    if len(solids) != 1:
        raise SolidError(f"one solid is wanted, the kernel made {len(solids)}")
    faces = items(solids[0], "Face")
    return solids[0], {c.name: _face_through(c, faces) for c in section.curves}


def _edge(curve, start, end):
    """The exact edge of one curve between two vertices."""
    from OCP.BRepBuilderAPI import BRepBuilderAPI_MakeEdge
    from OCP.collections import Array1_double, Array1_gp_Pnt, Array1_int
    from OCP.Geom import Geom_BSplineCurve
    from OCP.gp import gp_Pnt

    if curve.straight:
        return _line_edge(curve.name, start, end)
    values, counts = np.unique(curve.knots, return_counts=True)
    poles = Array1_gp_Pnt(1, len(curve.points))
    for k, (r, z) in enumerate(curve.points, start=1):
        poles.SetValue(k, gp_Pnt(float(r), 0.0, float(z)))
    knots, multiplicities = Array1_double(1, len(values)), Array1_int(1, len(values))
    for k, (value, count) in enumerate(zip(values, counts), start=1):
        knots.SetValue(k, float(value))
        multiplicities.SetValue(k, int(count))
    spline = Geom_BSplineCurve(poles, knots, multiplicities, int(curve.degree), False)
    made = BRepBuilderAPI_MakeEdge(spline, start, end, float(values[0]), float(values[-1]))
    if not made.IsDone():
        raise SolidError(f"{curve.name}: no edge: {_word(made.Error())}")
    return made.Edge()


def _line_edge(name, start, end):
    from OCP.BRepBuilderAPI import BRepBuilderAPI_MakeEdge

    made = BRepBuilderAPI_MakeEdge(start, end)
    if not made.IsDone():
        raise SolidError(f"{name}: no straight edge: {_word(made.Error())}")
    return made.Edge()


def _face_through(curve, faces):
    """The face that a curve has swept: the one its middle lies on.

    The kernel's own history of the turn is silent about planes across the axis (found by trying).
    """
    from OCP.BRepBuilderAPI import BRepBuilderAPI_MakeVertex
    from OCP.BRepExtrema import BRepExtrema_DistShapeShape
    from OCP.gp import gp_Pnt

    r, z = curve.at(0.5)
    middle = BRepBuilderAPI_MakeVertex(gp_Pnt(float(r), 0.0, float(z))).Vertex()
    away = [BRepExtrema_DistShapeShape(middle, face).Value() for face in faces]
    nearest = int(np.argmin(away))
    if not away[nearest] <= ON_FACE:
        raise SolidError(f"{curve.name}: no face was made for it; the nearest is {away[nearest]:.3g} mm off")
    return faces[nearest]


def _word(error):
    """The kernel's error word without its prefix."""
    return str(error).rsplit(".", 1)[-1].rsplit("_", 1)[-1]


def volume(solid):
    """Volume in mm³ by adaptive Gauss–Kronrod quadrature over the faces."""
    from OCP.BRepGProp import BRepGProp
    from OCP.GProp import GProp_GProps

    properties = GProp_GProps()
    BRepGProp.VolumePropertiesGK_s(solid, properties, GAUSS_KRONROD)
    return properties.Mass()


def valid(solid):
    """Whether the kernel finds topology and geometry consistent."""
    from OCP.BRepCheck import BRepCheck_Analyzer

    return BRepCheck_Analyzer(solid).IsValid()


def crosses_itself(solid):
    """Whether faces or edges of the solid cut each other where they do not meet."""
    from OCP.BOPAlgo import BOPAlgo_ArgumentAnalyzer

    search = BOPAlgo_ArgumentAnalyzer()
    search.SetShape1(solid)
    search.ArgumentTypeMode = search.SelfInterMode = search.SmallEdgeMode = True
    search.Perform()
    return search.HasFaulty()


def section_fault(section, per_curve=150):
    """What makes the section no border of a body, in words, or None; found on chords of the curves.

    The kernel looks for cuts between faces but not within one, and does not mind r < 0 (found by trying).
    """
    if section.volume <= 0.0:
        return "the chain of curves runs the wrong way round: the material must lie on its left"
    pieces, owner = [], []
    for k, c in enumerate(section.curves):
        points = c.points if c.straight else c.at(np.linspace(0.0, 1.0, per_curve))
        inner = points[(1 if k == 0 else 0) : (-1 if k == len(section.curves) - 1 else None)]
        if np.any(inner[:, 0] <= 0.0):
            return f"{c.name}: reaches the axis or beyond, r = {inner[:, 0].min():.6f} mm"
        pieces.append(np.hstack([points[:-1], points[1:]]))
        owner += [c.name] * (len(points) - 1)
    a, b = _crossing(np.concatenate(pieces))
    return (
        None
        if a is None
        else f"{owner[a]} and {owner[b]} cross"
        if owner[a] != owner[b]
        else f"{owner[a]} loops"
    )


def _crossing(chords):
    """The first two of the chords (n, 4) that cut each other inside both, or (None, None)."""
    start, end = chords[:, :2], chords[:, 2:]

    def side(points):  # [i, j]: on which side of chord i the point j lies
        along, to = end - start, points[None] - start[:, None]
        return along[:, None, 0] * to[..., 1] - along[:, None, 1] * to[..., 0]

    apart = side(start) * side(end) < 0.0  # chord j has its ends on both sides of chord i
    found = np.argwhere(apart & apart.T)
    return tuple(found[0]) if len(found) else (None, None)


def check(solid, section):
    """Raises SolidError unless the section can be turned, and the solid is valid, has a face for every curve,
    does not cross itself and holds the section's volume to a millionth."""
    fault = section_fault(section)
    if fault:
        raise SolidError(fault)
    if not valid(solid):
        raise SolidError("the solid is not valid: do all curves join, and stay at r ≥ 0?")
    faces = len(items(solid, "Face"))
    if faces != len(section.curves):
        raise SolidError(f"{len(section.curves)} faces are wanted, one for each curve, got {faces}")
    got, wanted = volume(solid), section.volume
    if not abs(got - wanted) <= VOLUME_TOLERANCE * abs(wanted):
        raise SolidError(f"the solid holds {got:.9g} mm³, the section {wanted:.9g} mm³")
    if crosses_itself(solid):
        raise SolidError("the solid crosses itself: two curves of the section cut each other, or touch")
