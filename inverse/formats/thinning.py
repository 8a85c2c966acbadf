"""Fewer angles for the same curve.

A photometric file is read by linear interpolation.  Out of a fine table the fewest rows are kept
such that between neighbours kept

- the straight line misses no row by more than a tolerance times the peak, and
- the flux between them, ∫ I sin θ dθ, is right to a tolerance times the flux of the whole table,
  each stretch getting the part of the allowance that its rows are of all rows; and it stays right
  for readers that count zone by zone, mean intensity times solid angle.

The second rule matters for narrow beams: half a percent of the peak over a whole hemisphere can be
more light than the beam holds.
"""

import numpy as np

from inverse.photometry import FarField, flux_between
from inverse.units import deg, rad

FLUX_TOLERANCE = 5e-4  # share of the flux; a tenth of the step between neighbouring 0.5 % figures
PATIENCE = 20  # rows in a row that may break a rule: noise breaks it for a few, a bend for good


def thin(theta, candela, tolerance, flux_tolerance=FLUX_TOLERANCE):
    """Indices of the rows to keep, first and last always among them.

    ``theta`` (k,) rad, ``candela`` (k,) cd, ``tolerance`` as a fraction of the peak.  Greedy: from
    each row kept, as far as both rules allow.  O(rows kept × longest stretch).
    """
    theta, candela = np.asarray(theta, float), np.asarray(candela, float)
    allowed = tolerance * candela.max()
    fine = FarField(theta, candela, np.zeros(len(theta)))
    inside = fine.flux_inside(theta)
    flux_each = flux_tolerance * fine.flux / (len(theta) - 1)
    kept = [0]
    while kept[-1] < len(theta) - 1:
        kept.append(_reach(theta, candela, inside, kept[-1], allowed, flux_each))
    return np.array(kept)


def _reach(theta, candela, inside, start, allowed, flux_each):
    """The farthest row to which one straight piece from ``start`` obeys both rules."""
    best = start + 1
    for end in range(start + 2, len(theta)):
        rows = slice(start, end + 1)
        chord = np.interp(theta[rows], theta[[start, end]], candela[[start, end]])
        straight = flux_between(theta[start], theta[end], candela[start], candela[end])
        solid_angle = 2.0 * np.pi * (np.cos(theta[start]) - np.cos(theta[end]))
        zone = 0.5 * (candela[start] + candela[end]) * solid_angle
        off = max(abs(flux - (inside[end] - inside[start])) for flux in (straight, zone))
        if np.abs(chord - candela[rows]).max() <= allowed and off <= flux_each * (end - start):
            best = end
        elif end - best > PATIENCE:
            break
    return best


def printable(field, decimals):
    """The same curve at angles that print exactly with ``decimals`` decimals of a degree.

    The table is closed as files want it: from 0° to 90° or 180°, with the fall to zero that a
    `FarField` implies after its last angle written out.  Returns (degrees (k,), candela (k,)).
    """
    step = 10.0**-decimals
    end = 90.0 if deg(field.theta[-1]) < 90.0 + 0.5 * step else 180.0
    degrees = np.unique(np.round(np.append(0.0, deg(field.theta)), decimals))
    degrees = degrees[degrees <= end]
    candela = np.interp(rad(degrees), field.theta, field.candela)  # the last value holds to its rounded angle
    if degrees[-1] < end:
        after = round(degrees[-1] + step, decimals)
        tail = [after, end] if after < end else [end]
        degrees, candela = np.append(degrees, tail), np.append(candela, np.zeros(len(tail)))
    return degrees, candela


def printed(degrees, candela):
    """The `FarField` of a table as printed: words or numbers, degrees and cd."""
    theta = rad(np.array(degrees, float))
    return FarField(theta, np.array(candela, float), np.zeros(len(theta)))
