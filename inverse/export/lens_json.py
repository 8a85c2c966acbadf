"""lens.json: the exact curves of the section, every float with all its digits.

    {"schema": 1, "unit": "mm",
     "curves": [{"name": …, "role": …, "degree": …, "knots": […], "points": [[r, z], …]}, …],
     "extra": {…}}

Python writes a float with the fewest digits that read back to the same float, so a section comes back
bit for bit.  ``extra`` is whatever the caller wants to keep beside it, as plain JSON.
"""

import json
import math
import os

import numpy as np

from inverse.export.atomic import write_text
from inverse.profile.section import MECHANICAL, REFLECTING, REFRACTING, Curve, Section

SCHEMA = 1
ROLES = (REFRACTING, REFLECTING, MECHANICAL)
MOST_BYTES = 50_000_000  # a lens needs some 50 kB; keeps a wrong file from filling memory
HIGHEST_DEGREE = 25  # what CAD kernels accept in a B-spline


def write(path, section, extra):
    """Write ``section`` and the JSON-ready dict ``extra``. Raises ValueError for a NaN in it, OSError."""
    curves = [
        {
            "name": c.name,
            "role": c.role,
            "degree": int(c.degree),
            "knots": [float(k) for k in c.knots],
            "points": [[float(r), float(z)] for r, z in c.points],
        }
        for c in section.curves
    ]
    whole = {"schema": SCHEMA, "unit": "mm", "curves": curves, "extra": extra}
    write_text(path, json.dumps(whole, indent=1, allow_nan=False, ensure_ascii=False) + "\n")


def read(path):
    """(Section, extra) of a file. Raises ValueError that names the file, the curve and what is wrong."""
    if os.path.getsize(path) > MOST_BYTES:
        raise ValueError(f"{path}: too large for a lens file (at most {MOST_BYTES} bytes)")
    with open(path, encoding="utf-8") as file:
        try:
            whole = json.load(file)
        except (ValueError, RecursionError) as fault:
            raise ValueError(f"{path}: not a JSON file: {fault}") from None
    if not isinstance(whole, dict) or "curves" not in whole:
        raise ValueError(f"{path}: not a lens file: no `curves`")
    if whole.get("schema") != SCHEMA:
        raise ValueError(f"{path}: schema {SCHEMA} is wanted, got {whole.get('schema')!r}")
    if whole.get("unit") != "mm":
        raise ValueError(f"{path}: unit 'mm' is wanted, got {whole.get('unit')!r}")
    if not isinstance(whole["curves"], list) or not whole["curves"]:
        raise ValueError(f"{path}: `curves` must be a list of at least one curve")
    curves = tuple(_curve(path, k, given) for k, given in enumerate(whole["curves"], start=1))
    names = [c.name for c in curves]
    for name in names:
        if names.count(name) > 1:
            raise ValueError(f"{path}: two curves are named {name!r}")
    extra = whole.get("extra", {})
    if not isinstance(extra, dict):
        raise ValueError(f"{path}: `extra` must be an object")
    try:
        return Section(curves), extra
    except ValueError as fault:
        raise ValueError(f"{path}: {fault}") from None


def _curve(path, number, given):
    """One curve, checked to be a clamped B-spline over [0, 1]."""

    def fault(message):
        return ValueError(f"{path}: curve {number} ({name!r}): {message}")

    name = given.get("name") if isinstance(given, dict) else None
    if not isinstance(name, str) or not name:
        raise fault("an object with a name is wanted")
    for key in ("role", "degree", "knots", "points"):
        if key not in given:
            raise fault(f"`{key}` is missing")
    if given["role"] not in ROLES:
        raise fault(f"role must be one of {', '.join(ROLES)}, got {given['role']!r}")
    degree = given["degree"]
    if isinstance(degree, bool) or not isinstance(degree, int) or not 1 <= degree <= HIGHEST_DEGREE:
        raise fault(f"degree must be a whole number from 1 to {HIGHEST_DEGREE}, got {degree!r}")
    knots = _floats(given["knots"])
    pairs = given["points"]
    whole = isinstance(pairs, list) and all(isinstance(p, list) and len(p) == 2 for p in pairs)
    flat = _floats([x for p in pairs for x in p]) if whole else None
    if knots is None or flat is None:
        raise fault("`knots` must be a list of finite numbers, `points` one of pairs [r, z]")
    points = flat.reshape(-1, 2)
    if len(points) < degree + 1 or len(knots) != len(points) + degree + 1:
        raise fault(
            f"degree {degree} and {len(points)} points need "
            f"{len(points) + degree + 1} knots and {degree + 1} points or more, got {len(knots)} knots"
        )
    ends = np.concatenate([knots[: degree + 1], 1.0 - knots[-degree - 1 :]])
    if np.any(ends != 0.0) or np.any(np.diff(knots) < 0.0):
        raise fault(f"knots must rise from {degree + 1} zeros to {degree + 1} ones")
    return Curve(name, given["role"], degree, knots, points)


def _floats(values):
    """An array of finite floats, or None."""
    if not isinstance(values, list):
        return None
    if not all(isinstance(x, (int, float)) and not isinstance(x, bool) for x in values):
        return None
    try:
        numbers = np.array(values, float)
    except OverflowError:
        return None
    return numbers if all(map(math.isfinite, numbers)) else None
