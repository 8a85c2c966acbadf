"""The door to the CAD kernel (OpenCascade through OCP), which is an optional extra.

Nothing of it is imported before `load` is called.  The kernel talks on the console; `quiet` stops that
for as long as it is needed.
"""

import importlib
from contextlib import contextmanager


class CadMissing(RuntimeError):
    """The CAD kernel cannot be loaded; the message says how to get it."""


class SolidError(RuntimeError):
    """The section does not make one sound solid, or a STEP file holds none; the message says why."""


def load():
    """Make sure that the kernel can be imported. Raises CadMissing with the remedy."""
    try:
        for module in ("OCP.gp", "OCP.BRepPrimAPI", "OCP.STEPCAFControl"):
            importlib.import_module(module)
    except ModuleNotFoundError as fault:
        raise CadMissing(
            f'STEP files need the CAD extra ({fault}). Install it with `pip install "inverse[cad]"`, '
            f'or in the source folder `pip install ".[cad]"`.'
        ) from fault
    except ImportError as fault:
        raise CadMissing(
            f"The CAD extra is there but does not load ({fault}). It needs the system libraries "
            f"libGL and libX11; on Debian or Ubuntu: `apt-get install libgl1 libx11-6`."
        ) from fault


@contextmanager
def quiet():
    """Only failures reach the kernel's console printers inside the block."""
    from OCP.Message import Message, Message_Gravity

    printers = list(Message.DefaultMessenger_s().Printers())
    before = [p.GetTraceLevel() for p in printers]
    for p in printers:
        p.SetTraceLevel(Message_Gravity.Message_Fail)
    try:
        yield
    finally:
        for p, level in zip(printers, before):
            p.SetTraceLevel(level)


def items(shape, kind):
    """The faces, edges, vertices or solids of a shape, each once, cast to their own class.

    ``kind`` is "Face", "Edge", "Vertex" or "Solid".
    """
    from OCP.TopAbs import TopAbs_ShapeEnum
    from OCP.TopExp import TopExp_Explorer
    from OCP.TopoDS import TopoDS

    cast = getattr(TopoDS, f"{kind}_s", None) or getattr(TopoDS, kind)
    walk, found = TopExp_Explorer(shape, getattr(TopAbs_ShapeEnum, f"TopAbs_{kind.upper()}")), []
    while walk.More():
        if not any(walk.Current().IsSame(other) for other in found):
            found.append(cast(walk.Current()))
        walk.Next()
    return found
