"""From the faces of a solid of revolution back to its meridional section.

A plane across the axis, a cylinder or a cone is a straight curve between the (r, z) of its boundary
points (a plane disc and a full cone end on the axis); a surface of revolution gives its own B-spline.
The curves are chained by their ends, material on the left, and joined exactly: ends less than 1e-7 mm
apart, the kernel's own confusion distance, are set equal, anything wider is refused.
"""

import numpy as np

from inverse.export.cad import items
from inverse.profile.section import Curve, Section, line

JOIN = 1e-7  # mm
SQUARE = 1e-6  # rad; 10 nm over 10 mm, well under any mould


def section(faces):
    """The `Section` of ``faces``: (face, name, role) each. Raises ValueError naming the misfit."""
    curves = []
    for face, name, role in faces:
        curve = _curve(face, name, role)
        if not any(_same(curve, other) for other in curves):  # other programs cut a round face in halves
            curves.append(curve)
    names = [c.name for c in curves]
    curves = [
        _renamed(c, f"{c.name} {k}") if names.count(c.name) > 1 else c for k, c in enumerate(curves, start=1)
    ]
    found = Section(_joined(_chain(curves)))
    if found.volume < 0.0:
        found = Section(tuple(_turned(c) for c in reversed(found.curves)))
    return found


def _curve(face, name, role):
    """The meridional curve of one face."""
    from OCP.BRepAdaptor import BRepAdaptor_Surface
    from OCP.GeomAbs import GeomAbs_SurfaceType as kind

    surface = BRepAdaptor_Surface(face)
    if surface.GetType() == kind.GeomAbs_SurfaceOfRevolution:
        _on_axis(surface.AxeOfRevolution(), name)
        return _spline(face, surface.FirstVParameter(), surface.LastVParameter(), name, role)
    if surface.GetType() == kind.GeomAbs_Plane:
        plane = surface.Plane()
        if _slant(plane.Axis().Direction()) > SQUARE:
            raise ValueError(f"{name}: a plane that is not square to the z axis")
        tip = plane.Location().Z()
    elif surface.GetType() == kind.GeomAbs_Cone:
        _on_axis(surface.Cone().Axis(), name)
        tip = surface.Cone().Apex().Z()
    elif surface.GetType() == kind.GeomAbs_Cylinder:
        _on_axis(surface.Cylinder().Axis(), name)
        tip = None
    else:
        word = str(surface.GetType()).rsplit("_", 1)[-1]
        raise ValueError(
            f"{name}: a face of the kind {word} is none of plane, cone, cylinder, spline of revolution"
        )
    ends = _boundary(face)
    if len(ends) == 1 and tip is not None:
        ends.append(np.array([0.0, tip]))
    if len(ends) != 2:
        raise ValueError(f"{name}: a ring or disc with one or two edges is wanted, got {len(ends)} edges")
    return line(name, role, *ends)


def _slant(direction):
    """Sine of the angle between a direction of the kernel and the z axis."""
    return np.hypot(direction.X(), direction.Y())


def _on_axis(axis, name):
    """Raises ValueError unless the kernel's axis is the z axis."""
    place, along = axis.Location(), axis.Direction()
    if np.hypot(place.X(), place.Y()) > JOIN or _slant(along) > SQUARE:
        raise ValueError(f"{name}: turned about another axis than z")


def _boundary(face):
    """The different (r, z) among the vertices of a face."""
    from OCP.BRep import BRep_Tool

    found = []
    for vertex in items(face, "Vertex"):
        p = BRep_Tool.Pnt_s(vertex)
        end = np.array([np.hypot(p.X(), p.Y()), p.Z()])
        if all(np.linalg.norm(end - other) > JOIN for other in found):
            found.append(end)
    return found


def _spline(face, first, last, name, role):
    """The exact B-spline that a surface of revolution turns, over the part that the face uses."""
    from OCP.BRep import BRep_Tool
    from OCP.Geom import Geom_BSplineCurve, Geom_SurfaceOfRevolution, Geom_TrimmedCurve

    surface = BRep_Tool.Surface_s(face)
    basis = surface.BasisCurve() if isinstance(surface, Geom_SurfaceOfRevolution) else None
    if isinstance(basis, Geom_TrimmedCurve):
        basis = basis.BasisCurve()
    if not isinstance(basis, Geom_BSplineCurve) or basis.IsRational() or basis.IsPeriodic():
        raise ValueError(
            f"{name}: a plain B-spline is wanted as the curve that is turned, got {type(basis).__name__}"
        )
    if (first, last) != (basis.FirstParameter(), basis.LastParameter()):
        basis = basis.Copy()
        basis.Segment(first, last)
    poles = [basis.Pole(k) for k in range(1, basis.NbPoles() + 1)]
    space = np.array([[p.X(), p.Y(), p.Z()] for p in poles])
    radius = np.hypot(space[:, 0], space[:, 1])
    outward = space[np.argmax(radius), :2] / radius.max() if radius.max() > 0.0 else np.array([1.0, 0.0])
    if np.abs(space[:, 0] * outward[1] - space[:, 1] * outward[0]).max() > JOIN:
        raise ValueError(f"{name}: the curve that is turned does not lie in a plane through the axis")
    knots = np.array([basis.Knot(k) for k in range(1, basis.NbKnots() + 1)])
    counts = [basis.Multiplicity(k) for k in range(1, basis.NbKnots() + 1)]
    knots = np.repeat((knots - knots[0]) / (knots[-1] - knots[0]), counts)
    return Curve(name, role, basis.Degree(), knots, np.column_stack([space[:, :2] @ outward, space[:, 2]]))


def _same(a, b):
    """Whether two curves are one, the same way round or not."""
    u = np.linspace(0.0, 1.0, 9)
    here, there = a.at(u), b.at(u)
    return min(np.abs(here - there).max(), np.abs(here - there[::-1]).max()) < JOIN


def _renamed(curve, name):
    return Curve(name, curve.role, curve.degree, curve.knots, curve.points)


def _turned(curve):
    """The same curve run the other way."""
    return Curve(curve.name, curve.role, curve.degree, 1.0 - curve.knots[::-1], curve.points[::-1])


def _chain(curves):
    """The curves in order from the axis back to the axis."""
    left, chain, at = list(curves), [], None
    while left:
        candidates = [(c, way) for c in left for way in (False, True)]
        here = [(c, way) for c, way in candidates if _starts(c, way, at)]
        if not here:
            where = "on the axis" if at is None else f"at r = {at[0]:.6f}, z = {at[1]:.6f} mm"
            raise ValueError(
                f"the faces do not close: none of {', '.join(c.name for c in left)} starts {where}"
            )
        curve, backwards = here[0]
        left = [c for c in left if c is not curve]
        chain.append(_turned(curve) if backwards else curve)
        at = chain[-1].points[-1]
    if abs(at[0]) > JOIN:
        raise ValueError(f"the faces do not close: the last, {chain[-1].name}, ends at r = {at[0]:.6f} mm")
    return chain


def _starts(curve, backwards, at):
    start = curve.points[-1 if backwards else 0]
    return abs(start[0]) <= JOIN if at is None else np.linalg.norm(start - at) <= JOIN


def _joined(chain):
    """Common ends set equal, ends of the chain set on the axis."""
    points = [c.points.copy() for c in chain]
    for a, b in zip(points, points[1:]):
        b[0] = a[-1]
    points[0][0, 0] = points[-1][-1, 0] = 0.0
    return tuple(Curve(c.name, c.role, c.degree, c.knots, p) for c, p in zip(chain, points))
