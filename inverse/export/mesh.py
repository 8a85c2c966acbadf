"""lens.stl: a closed triangle mesh for viewing and printing, with a stated chordal error. Not for the mould.

Every curve is cut into chords no farther than half the error from it, and turned in equal steps Δφ whose
sagitta R (1 − cos Δφ/2) at the largest radius R is the other half; so no point of a facet is farther than
the error from the true surface.  Rings share their points, and the axis is one point, so the mesh is
watertight; facets are ordered anticlockwise seen from outside.  Binary STL: 80 bytes of remark, the
number of facets, then normal and corners in single precision.
"""

import math

import numpy as np

from inverse.export.atomic import write_bytes
from inverse.formats.nameplate import ascii_line

FINEST = 2000  # steps round the axis, chords a curve: a finer mesh is a mistake, or work for the STEP file
FACET = np.dtype([("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("attribute", "<u2")])


def write(path, section, *, error=0.01, stamp=None):
    """Write the mesh; returns the number of facets. ``error`` in mm, ``stamp`` word → value.

    Raises ValueError when the error is not positive or needs a finer mesh than FINEST, OSError.
    """
    corners = facets(section, error)
    normal = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    table = np.zeros(len(corners), FACET)
    table["normal"] = normal / np.linalg.norm(normal, axis=1)[:, None]
    table["corners"] = corners
    said = "; ".join(["mm", f"chordal error {error:g}", *(f"{w} {v}" for w, v in (stamp or {}).items())])
    head = ascii_line(f"lens mesh, {said}").encode("ascii")[:80].ljust(80)
    write_bytes(path, head + len(table).to_bytes(4, "little") + table.tobytes())
    return len(table)


def facets(section, error):
    """Corners (n, 3, 3) in mm of all facets, anticlockwise from outside."""
    if not error > 0.0:
        raise ValueError(f"a positive chordal error is wanted, got {error} mm")
    meridian = np.concatenate([_chords(c, 0.5 * error)[:-1] for c in section.curves] + [[_end(section)]])
    turn = 2.0 * np.pi * np.arange(_steps(meridian[:, 0].max(), 0.5 * error))
    turn = turn / len(turn)
    around = np.column_stack([np.cos(turn), np.sin(turn), np.zeros(len(turn))])
    up = np.array([0.0, 0.0, 1.0])
    rings = [r * around + z * up for r, z in meridian]
    parts = []
    for inner, outer, (a, _), (b, _) in zip(rings, rings[1:], meridian, meridian[1:]):
        next_inner, next_outer = np.roll(inner, -1, axis=0), np.roll(outer, -1, axis=0)
        if b > 0.0:  # on the axis a ring is a point, and one of the two triangles is empty
            parts.append(np.stack([inner, next_outer, outer], axis=1))
        if a > 0.0:
            parts.append(np.stack([inner, next_inner, next_outer], axis=1))
    return np.concatenate(parts)


def _end(section):
    return section.curves[-1].points[-1]


def _steps(radius, sagitta):
    """Steps round the axis, at least three dozen, for a sagitta in mm."""
    if sagitta >= radius:
        return 36
    count = max(36, math.ceil(math.pi / math.acos(1.0 - sagitta / radius)))
    if count > FINEST:
        raise ValueError(
            f"a chordal error of {2.0 * sagitta:g} mm needs {count} steps round, at most {FINEST} are made"
        )
    return count


def _chords(curve, error):
    """Points (k, 2) on the curve, evenly spaced in its parameter, no chord farther off than ``error``."""
    if curve.straight:
        return curve.points
    count = 8
    while count <= FINEST:
        # four points inside each chord: on a smooth curve the largest distance lies near the middle
        fine = curve.at(np.linspace(0.0, 1.0, 5 * count + 1))
        start, end = fine[:-1:5], fine[5::5]
        along = (end - start) / np.hypot(*(end - start).T)[:, None]
        to = fine[:-1].reshape(count, 5, 2) - start[:, None]
        away = np.abs(to[..., 0] * along[:, None, 1] - to[..., 1] * along[:, None, 0]).max()
        if away <= 0.9 * error:  # the middle lies a tenth of a chord from the points looked at
            return fine[::5]
        count = math.ceil(count * 1.5)
    raise ValueError(f"{curve.name}: a chordal error of {2.0 * error:g} mm needs more than {FINEST} chords")
