"""EULUMDAT (.ldt) written and read: the open format of European luminaire data (layout in part from memory).

One value a line, CR LF: 1 maker, 2 type, 3 symmetry, 4 planes Mc, 5 their distance, 6 angles Ng, 7 their
distance (0 = uneven), 8 report, 9 name, 10 number, 11 file, 12 date, 13–15 length, width, height in mm
(width 0 = round), 16–17 luminous area, 18–21 its heights, 22 downward share %, 23 output ratio %, 24
factor, 25 tilt, 26 lamp sets with number, type, flux, colour, rendering, watts of each, ten direct ratios,
Mc angles C, Ng angles γ, and the intensities in cd per 1000 lm of lamp flux, plane after plane.

Symmetry 0 none (planes 1 … Mc are given), 1 about the axis (one plane), 2 to C0–C180 (planes 1 … Mc/2 + 1),
3 to C90–C270 (planes 3Mc/4 + 1 … and on through C0 to C90), 4 to both (planes 1 … Mc/4 + 1).

Angles and intensities have fields of six characters (from memory).
"""

import math

import numpy as np

from inverse.formats.distribution import Distribution, once_round
from inverse.formats.nameplate import ascii_line
from inverse.formats.source import MOST_VALUES, Source
from inverse.formats.thinning import printable, printed, thin
from inverse.units import rad

FIELD, LENGTH = 6, 4  # characters of an angle or an intensity, of a length in mm
TOLERANCE = 0.004  # of the peak, for leaving out rows; with the printed digits below 0.5 %
DECIMALS = 3  # of a degree: 99.999 fills the field
HEAD = ("maker", "type", "symmetry", "planes", "plane distance", "angles", "angle distance", "report", "name",
        "number", "file", "date", "length", "width", "height", "luminous length", "luminous width",
        "luminous height C0", "luminous height C90", "luminous height C180", "luminous height C270",
        "downward share", "output ratio", "conversion factor", "tilt", "lamp sets")  # fmt: skip
LAMP = ("lamps", "lamp type", "lamp flux", "colour", "rendering", "watts")
DIRECT_RATIOS = 10


def text(field, plate):
    """The whole file for a `FarField` and a `Nameplate`, as a str of ASCII with CR LF.

    Raises ValueError when the intensity per 1000 lm does not fit the format's six characters.
    """
    degrees, candela = printable(field, DECIMALS)
    kept = thin(rad(degrees), candela, TOLERANCE)
    klm = plate.lamp_flux / 1000.0
    angles = [_fitted(x, DECIMALS, FIELD) for x in degrees[kept]]
    values = [_fitted(x, FIELD - 2, FIELD) for x in candela[kept] / klm]
    table = printed(angles, np.array(values, float) * klm)
    flux = table.flux
    downward = 100.0 * table.flux_inside(0.5 * math.pi) / flux if flux > 0.0 else 0.0
    diameter = _fitted(2.0 * plate.aperture_radius, 1, LENGTH)
    lines = [
        plate.maker or "not stated",
        1,  # a point source symmetric about the vertical axis
        1,
        1,
        0,
        len(angles),
        0,
        f"computed, not measured; table {flux:.6g} lm",
        plate.name,
        "",
        "",
        " ".join([plate.date, *(f"{word} {str(value)[:16]}" for word, value in plate.stamp.items())]),
        diameter,
        0,
        _fitted(plate.height, 1, LENGTH),
        diameter,
        0,
        0,
        0,
        0,
        0,
        f"{downward:.1f}",
        f"{100.0 * flux / plate.lamp_flux:.2f}",
        1,
        0,
        1,
        1,
        ascii_line(plate.lamp)[:24],
        f"{plate.lamp_flux:.6g}",
        "",
        "",
        f"{plate.watts:g}",
        *[0] * DIRECT_RATIOS,  # not computed
        0,
        *angles,
        *values,
    ]
    return "".join(ascii_line(line)[:78] + "\r\n" for line in lines)


def _fitted(value, decimals, width):
    """The value with as many decimals as fit ``width``, at most ``decimals``, without idle zeros."""
    for k in range(decimals, -1, -1):
        word = f"{value:.{k}f}"
        if len(word) <= width:
            return word.rstrip("0").rstrip(".") if "." in word else word
    raise ValueError(f"{value:.7g} does not fit the {width} characters of a EULUMDAT field")


def read(path):
    """The `Distribution` in a file of any symmetry. Raises ValueError naming the line."""
    return _parse(Source.read(path))


def parse(content, name="EULUMDAT text"):
    """The same from a str."""
    return _parse(Source(content, name))


def _parse(source):
    at = 0  # lines taken so far

    def line(what):
        nonlocal at
        at += 1
        if at > len(source.lines) or (at == len(source.lines) and not source.lines[-1].strip()):
            raise source.fault(at, f"the file ends where {what} should stand")
        return source.lines[at - 1].strip()

    def number(what):
        return source.number(line(what), at, what)

    def count(what, least, most):
        return source.count(line(what), at, what, least, most)

    words = {}
    for what in HEAD[:2]:
        words[what] = line(what)
    symmetry = count("symmetry", 0, 4)
    n_planes = count("the number of planes Mc", 1, 10_000)
    number("the distance of the planes")
    n_angles = count("the number of angles Ng", 2, MOST_VALUES // n_planes)
    number("the distance of the angles")
    for what in HEAD[7:23]:
        words[what] = line(what)
    factor = number("the conversion factor")
    if factor <= 0.0:
        raise source.fault(at, f"the conversion factor must be positive, got {factor:g}")
    words["tilt"] = line("tilt")
    sets = [{what: line(what) for what in LAMP} | {"line": at} for _ in range(count("the lamp sets", 1, 20))]
    lamp_line = sets[0]["line"] - LAMP.index("watts") + LAMP.index("lamp flux")
    lamp_flux = source.number(sets[0]["lamp flux"], lamp_line, "the flux of the lamps")
    if lamp_flux <= 0.0:
        raise source.fault(lamp_line, f"the flux of the lamps must be positive, got {lamp_flux:g}")
    words |= {what: sets[0][what] for what in LAMP}
    for _ in range(DIRECT_RATIOS):
        line("a direct ratio")

    planes = _angles(source, number, n_planes, "angle C", 360.0, lambda: at)
    gamma = _angles(source, number, n_angles, "angle γ", 180.0, lambda: at)
    given, mirrors = _given(source, symmetry, planes)
    table = np.empty((len(given), n_angles))
    for row in table:
        for k in range(n_angles):
            row[k] = number("an intensity")
            if row[k] < 0.0:
                raise source.fault(at, f"an intensity is negative: {row[k]:g}")
    rest = "".join(source.lines[at:]).strip().strip("\x1a")  # an old end-of-file mark may follow
    if rest:
        raise source.fault(at + 1, f"{rest[:20]!r} stands after the last intensity; is a count wrong?")
    c, table = once_round(rad(np.array(given)), table * (factor * lamp_flux / 1000.0), mirrors)
    return Distribution(c, rad(np.array(gamma)), table, lamp_flux, words)


def _angles(source, number, count, what, most, at):
    angles = []
    for _ in range(count):
        angle = number(f"an {what}")
        if not 0.0 <= angle <= most:
            raise source.fault(at(), f"an {what} between 0 and {most:g} is wanted, got {angle:g}")
        if angles and angle <= angles[-1]:
            raise source.fault(at(), f"the {what} must increase, got {angle:g} after {angles[-1]:g}")
        angles.append(angle)
    return angles


def _given(source, symmetry, planes):
    """The planes (deg) with intensities, in the file's order, and the mirrors (rad) that complete them."""
    count = len(planes)
    if symmetry in (2, 3, 4) and count % {2: 2, 3: 4, 4: 4}[symmetry]:
        raise source.fault(4, f"{count} planes do not divide by what symmetry {symmetry} needs")
    if symmetry == 0:
        return planes, []
    if symmetry == 1:
        return [0.0], []
    if symmetry == 2:
        return planes[: count // 2 + 1], [0.0]
    if symmetry == 4:
        return planes[: count // 4 + 1], [0.0, 0.5 * math.pi]
    first = 3 * count // 4
    return [planes[(first + k) % count] for k in range(count // 2 + 1)], [0.5 * math.pi]
