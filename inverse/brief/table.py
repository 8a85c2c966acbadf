"""A table of angles and intensities, inline or from a CSV file that lies beside the brief.

Rows [angle in degrees, relative intensity]: angles rise from 0 to 90 at most, intensity is linear in
between.  In a CSV file the two columns are separated by commas, semicolons, tabs or blanks; one line
of headings may come first; lines starting with # are comments.  The file is data only, and is read
from the brief's own folder or below it, never from elsewhere.

Steps may not be finer than 1/2000 of the table: emission laws and targets are later sampled at 4000
angles and more, so that no row can fall between two of them.
"""

import re

from inverse.brief.schema import LARGEST_TABLE
from inverse.brief.textfile import Unreadable, read_text
from inverse.brief.wanted import Row, shown

STEPS = 2000  # finest step, as a fraction of the table
FIGURE = re.compile(r"[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?")


def cells(line):
    """The columns of one line: split at the first separator it uses, else at blanks."""
    mark = next((mark for mark in ";\t," if mark in line), None)
    return [cell.strip() for cell in line.split(mark)]


def row(columns):
    """(angle_deg, intensity) from two texts. Raises ValueError."""
    for column in columns:
        if not FIGURE.fullmatch(column):
            raise ValueError(f'got "{shown(column)}", wanted a number with a decimal point')
    return Row()([float(column) for column in columns])


def load(file, shown_name, folder, path, complaints):
    """Rows and the lines they stand on; faults go to ``complaints`` under the key ``path``."""
    rows, numbers = [], []
    try:
        if not file.resolve().is_relative_to(folder.resolve()):
            raise Unreadable("lies outside the folder of the brief, wanted a file in it")
        text = read_text(file)
    except (Unreadable, OSError, RuntimeError) as fault:  # resolve() raises the last two on link loops
        line = getattr(fault, "line", None)
        if line:
            complaints.add(path, str(fault), file=file, line=line)
        else:
            complaints.add(path, f'"{shown_name}" {fault}')
        return rows, numbers
    heading, faults = True, len(complaints.entries)
    for number, line in enumerate(text.split("\n"), 1):
        if not line.strip() or line.lstrip().startswith("#"):
            continue
        columns = cells(line)
        if not (heading and not any(FIGURE.match(column) for column in columns)):
            try:
                rows.append(row(columns))
                numbers.append(number)
            except ValueError as fault:
                complaints.add(path, str(fault), file=file, line=number)
        heading = False
    if not 2 <= len(rows) <= LARGEST_TABLE and len(complaints.entries) == faults:
        complaints.add(path, f"got {len(rows)} rows, wanted 2 to {LARGEST_TABLE}", file=file, line=1)
    return rows, numbers


def settled(title, key, section, folder, complaints, **limits):
    """The rows of ``section``'s table, loaded and checked, as a tuple; None when absent or faulty."""
    rows, name = getattr(section, key), getattr(section, f"{key}_file")
    if rows is None and name is None:
        return None
    faults, lines = len(complaints.entries), None
    if name is not None:
        rows, lines = load(folder / name, shown(name), folder, (title, f"{key}_file"), complaints)

    def say(number, message):
        if lines is None:
            complaints.add((title, key, number), message)
        else:
            complaints.add((title, f"{key}_file"), message, file=folder / name, line=lines[number])

    if len(complaints.entries) == faults:
        check(rows, say, **limits)
    return tuple(rows) if len(complaints.entries) == faults else None


def end_of_light(rows):
    """Angle (deg) of the end of the last light in a table."""
    lit = max(i for i, (_, value) in enumerate(rows) if value > 0.0)
    return rows[min(lit + 1, len(rows) - 1)][0]


def check(rows, say, *, least_width, end_below=None, sampled=None):
    """From 0, increasing, some light, no step too fine for sampling ``sampled`` deg (None: where it is lit).

    ``say(row, message)`` files a fault; all limits in deg.
    """
    if rows[0][0] != 0.0:
        say(0, f"the first angle is {rows[0][0]:g} deg, wanted 0 (the axis)")
    lit = max((i for i, (_, value) in enumerate(rows) if value > 0.0), default=None)
    if lit is None:
        say(0, "every intensity is zero, wanted light somewhere")
        return
    end = end_of_light(rows)
    if end < least_width:
        say(lit, f"all light lies within {end:g} deg, wanted at least {least_width:g} deg")
    if end_below is not None and end >= end_below:
        say(lit, f"there is still light up to {end:g} deg, wanted the last light below {end_below:g} deg")
    least = (sampled or end) / STEPS
    for i, ((before, _), (angle, _)) in enumerate(zip(rows, rows[1:]), 1):
        if angle <= before:
            say(i, f"angle {angle:g} deg after {before:g} deg, wanted increasing angles")
        elif angle - before < least:
            say(i, f"angle {angle!r} deg is only {angle - before:.2g} deg after the row before, "
                   f"wanted steps of {least:.2g} deg or more")
