"""Reading and writing intensity tables in the open LM-63 format (ANSI/IESNA LM-63-2002; layout from memory).

    IESNA:LM-63-2002
    [KEYWORD] text …                      TEST, TESTLAB, ISSUEDATE and MANUFAC are obligatory
    TILT=NONE
    lamps  lumens-per-lamp  multiplier  n-vertical  n-horizontal  type  units  width  length  height
    ballast-factor  future-use  input-watts
    vertical angles (deg, 0 = nadir)      for type C they start at 0 or 90 and end at 90 or 180
    horizontal angles (deg)               one angle, 0: symmetric about the vertical axis
    candela, one row of vertical angles for each horizontal angle

Written here: type C (1), lumens −1 (absolute: candela are what the lens with this LED gives), metres (2),
a round luminous opening (width = length = −diameter), lines of at most 132 characters with their CR LF.
"""

import math

import numpy as np

from inverse.formats.distribution import Distribution, once_round
from inverse.formats.nameplate import ascii_line
from inverse.formats.source import MOST_VALUES, Source
from inverse.formats.thinning import printable, printed, thin
from inverse.units import rad

LINE = 130  # characters before CR LF
TOLERANCE = 0.004  # of the peak, for leaving out rows; with the printed digits below 0.5 %
DECIMALS = 4  # of a degree
DIGITS = 6  # of the peak; every value has as many decimals as the peak
TYPE_C, METRES = 1, 2
SINCE_2002 = ("IESNA:LM-63-2002", "IES:LM-63-2019")


def text(field, plate):
    """The whole file for a `FarField` and a `Nameplate`, as a str of ASCII with CR LF."""
    degrees, candela = printable(field, DECIMALS)
    kept = thin(rad(degrees), candela, TOLERANCE)
    angles = [f"{x:.{DECIMALS}f}".rstrip("0").rstrip(".") for x in degrees[kept]]
    digits = max(
        0, DIGITS - 1 - math.floor(math.log10(max(candela.max(), 1e-9)))
    )  # a dark table prints zeros
    values = [f"{x:.{digits}f}" for x in candela[kept]]
    flux = printed(angles, values).flux
    size = f"{-2e-3 * plate.aperture_radius:.5f}"
    head = [
        SINCE_2002[0],
        *_keyword("TEST", f"{plate.name}, computed by ray tracing, not measured"),
        *_keyword("TESTLAB", "none: simulation"),
        *_keyword("ISSUEDATE", plate.date),
        *_keyword("MANUFAC", plate.maker or "not stated"),
        *_keyword("LUMCAT", plate.name),
        *_keyword("LUMINAIRE", f"Total-reflection lens {plate.name}"),
        *_keyword("LAMP", f"{plate.lamp}, {plate.lamp_flux:.6g} lm"),
        *_keyword(
            "OTHER", f"Flux of this table {flux:.6g} lm, {100 * flux / plate.lamp_flux:.2f} % of the LED's"
        ),
    ]
    for word, value in plate.stamp.items():
        head += _keyword("OTHER", f"{word} {value}")
    head += [
        "TILT=NONE",
        f"1 -1 1 {len(angles)} 1 {TYPE_C} {METRES} {size} {size} 0",
        f"1 1 {plate.watts:g}",
    ]
    return "\r\n".join([*head, *_wrapped(angles), "0", *_wrapped(values)]) + "\r\n"


def _keyword(word, value):
    """One keyword line, continued with [MORE] where it is too long."""
    rest, lines, lead = ascii_line(value), [], f"[{word}] "
    while True:
        room = LINE - len(lead)
        lines.append((lead + rest[:room]).rstrip())
        rest, lead = rest[room:], "[MORE] "
        if not rest:
            return lines


def _wrapped(words):
    """Words separated by blanks in lines that fit."""
    lines = [words[0]]
    for word in words[1:]:
        if len(lines[-1]) + 1 + len(word) > LINE:
            lines.append(word)
        else:
            lines[-1] += " " + word
    return lines


def read(path):
    """The `Distribution` in a file. Raises ValueError naming the line; also reads older issues of LM-63."""
    return _parse(Source.read(path))


def parse(content, name="LM-63 text"):
    """The same from a str."""
    return _parse(Source(content, name))


def _parse(source):
    words, tilt_at = _head(source)
    tokens = _tokens(source, tilt_at)
    take = iter(tokens)

    def number(what):
        word, line = next(take, (None, len(source.lines)))
        if word is None:
            raise source.fault(line, f"the file ends where {what} should stand")
        return source.number(word, line, what), line

    def count(what, least, most):
        value, line = number(what)
        return source.count(repr(value), line, what, least, most)

    if source.lines[tilt_at].split("=", 1)[1].strip().upper() == "INCLUDE":
        number("the lamp-to-luminaire geometry")
        for _ in range(2 * count("the number of tilt angles", 1, 1000)):
            number("a tilt angle or factor")  # they apply to a tilted luminaire only

    lamps = count("the number of lamps", 1, 100_000)
    lumens, _ = number("the lumens per lamp")
    multiplier, line = number("the candela multiplier")
    if multiplier <= 0.0:
        raise source.fault(line, f"the candela multiplier must be positive, got {multiplier:g}")
    n_vertical = count("the number of vertical angles", 2, MOST_VALUES)
    n_horizontal = count("the number of horizontal angles", 1, MOST_VALUES // n_vertical)
    kind, line = number("the photometric type")
    if kind != TYPE_C:
        raise source.fault(line, f"photometric type {kind:g} cannot be used; only type C (1) is read here")
    for what in ("the units", "the width", "the length", "the height"):
        number(what)
    factor, _ = number("the ballast factor")
    future, _ = number("the future-use factor")
    if source.lines[0].strip().upper() not in SINCE_2002:
        factor *= future  # the ballast-lamp photometric factor of the older issues
    number("the input watts")

    vertical, _ = _angles(source, number, n_vertical, "vertical angle", 180.0)
    horizontal, line_of_planes = _angles(source, number, n_horizontal, "horizontal angle", 360.0)
    table = np.empty((n_horizontal, n_vertical))
    for row in table:
        for k in range(n_vertical):
            row[k], line = number("a candela value")
            if row[k] < 0.0:
                raise source.fault(line, f"a candela value is negative: {row[k]:g}")
    extra = next(take, None)
    if extra is not None:
        raise source.fault(extra[1], f"{extra[0]!r} stands after the last candela value; is a count wrong?")
    planes, table = _planes(source, horizontal, line_of_planes, table * (multiplier * factor))
    lamp_flux = None if lumens < 0.0 else lamps * lumens
    return Distribution(planes, rad(np.array(vertical)), table, lamp_flux, words)


def _head(source):
    """Keywords with their text, and the index of the TILT line."""
    words, last = {}, None
    for k, line in enumerate(source.lines):
        bare = line.strip()
        if bare.upper().startswith("TILT"):
            kind = bare.split("=", 1)[1].strip().upper() if "=" in bare else ""
            if kind not in ("NONE", "INCLUDE"):
                raise source.fault(k + 1, f"TILT=NONE or TILT=INCLUDE is wanted, got {bare[:40]!r}")
            return words, k
        if bare.startswith("[") and "]" in bare:
            word, value = bare[1:].split("]", 1)
            word = last if word == "MORE" and last else word
            words[word] = f"{words[word]} {value.strip()}" if word in words else value.strip()
            last = word
    raise source.fault(len(source.lines), "no TILT= line: this is not an LM-63 file")


def _tokens(source, tilt_at):
    """(word, line number) after the TILT line; blanks or commas separate."""
    for k, line in enumerate(source.lines[tilt_at + 1 :], start=tilt_at + 2):
        for word in line.replace(",", " ").split():
            yield word, k


def _angles(source, number, count, what, most):
    """Increasing angles in degrees, and the line of the last."""
    angles = []
    for _ in range(count):
        angle, line = number(f"a {what}")
        if not 0.0 <= angle <= most:
            raise source.fault(line, f"a {what} between 0 and {most:g} is wanted, got {angle:g}")
        if angles and angle <= angles[-1]:
            raise source.fault(line, f"{what}s must increase, got {angle:g} after {angles[-1]:g}")
        angles.append(angle)
    return angles, line


def _planes(source, horizontal, line, table):
    """Planes once round, by the symmetry that the first and last horizontal angle mean."""
    c, ends = rad(np.array(horizontal)), (horizontal[0], horizontal[-1])
    if len(horizontal) == 1:
        return np.zeros(1), table
    if ends == (0.0, 90.0):
        return once_round(c, table, [0.0, 0.5 * math.pi])
    if ends == (0.0, 180.0):
        return once_round(c, table, [0.0])
    if ends == (90.0, 270.0):
        return once_round(c, table, [0.5 * math.pi])
    if ends[0] == 0.0 and 180.0 < ends[1] <= 360.0:
        return once_round(c, table, [])
    raise source.fault(line, f"horizontal angles from {ends[0]:g} to {ends[1]:g} fit no symmetry")
