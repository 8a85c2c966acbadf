"""profile.csv: dense points and slopes of the section as plain text.

Lines that start with '#' are remarks; then one header row ``curve,r_mm,z_mm,tangent_r,tangent_z``; then
rows in the order of the chain.  The tangent is the unit vector along the chain, so the material lies on
its left.  Floats have all their digits.  Neighbouring curves both carry their common point.
"""

from inverse.export.atomic import write_text

HEADER = "curve,r_mm,z_mm,tangent_r,tangent_z"


def write_profile(path, section, per_curve=400, *, stamp=None):
    """Write ``per_curve`` points of every curve; ``stamp`` (word → value) becomes remarks. Raises OSError."""
    rows, number = section.dense(per_curve)
    remarks = ["# meridional section: r and z in mm, unit tangent along the chain, material on its left"]
    remarks += [f"# {word} {value}" for word, value in (stamp or {}).items()]
    lines = [" ".join(remark.split()) for remark in remarks] + [HEADER]
    lines += [",".join([section.curves[n].name, *map(repr, map(float, row))]) for row, n in zip(rows, number)]
    write_text(path, "\n".join(lines) + "\n")
