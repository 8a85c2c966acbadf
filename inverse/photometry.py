"""Photometric words, defined: flux, peak, beam angle, beam distance, encircled flux, ring contrast.

A rotational far field is a table of intensity I (cd) over the angle θ (rad) from the axis.
Between the angles I is linear in θ; below the first angle the first value holds; beyond the last
angle there is no light.  The flux inside a cone θ is

    Φ(θ) = 2π ∫₀^θ I(t) sin t dt ,

exact for the table: on an interval with centre c, half width h, mean intensity m and slope s the
integral of I sin t is  2 m sin c sin h + 2 s cos c (sin h − h cos h).

Words of the trade (common practice, no source): the *beam angle* is the full angle between the
directions of half the peak intensity, the *field angle* that of a tenth.  Where the profile has a
dip in the middle or rings, the outermost crossing counts.  Illuminance at distance d on the axis is
I/d² (lx = cd/m²); the *beam distance* is where it has fallen to 0.25 lx, 2√I metres (definition of
ANSI/PLATO FL 1, from memory).
"""

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from inverse.units import deg

MM_PER_M = 1000.0
BEAM_DISTANCE_LUX = 0.25  # lx, about full moonlight; ANSI/PLATO FL 1, from memory


@dataclass(frozen=True)
class FarField:
    """A rotational intensity table. Raises ValueError when it is not one."""

    theta: np.ndarray  # (k,) rad, increasing, within [0, π]
    candela: np.ndarray  # (k,) cd
    candela_se: np.ndarray  # (k,) cd, standard error of each entry, zero where exact

    def __post_init__(self):
        for field in ("theta", "candela", "candela_se"):
            object.__setattr__(self, field, np.asarray(getattr(self, field), float))
        t, i, s = self.theta, self.candela, self.candela_se
        if t.ndim != 1 or len(t) < 2 or i.shape != t.shape or s.shape != t.shape:
            raise ValueError(
                f"far field: three equal columns of two or more entries are wanted, "
                f"got shapes {t.shape}, {i.shape}, {s.shape}"
            )
        if not (np.all(np.isfinite(t)) and np.all(np.isfinite(i)) and np.all(np.isfinite(s))):
            raise ValueError("far field: an entry is not a finite number")
        if t[0] < 0.0 or t[-1] > math.pi or np.any(np.diff(t) <= 0.0):
            raise ValueError(f"far field: angles must increase within 0 and π rad, got {t[0]} to {t[-1]}")
        if np.any(i < 0.0) or np.any(s < 0.0):
            raise ValueError("far field: intensities and their errors cannot be negative")

    def at(self, theta):
        """Intensity in cd at ``theta`` (rad), any shape."""
        return np.interp(theta, self.theta, self.candela, right=0.0)

    @cached_property
    def _nodes(self):
        """Angles and intensities of the pieces, starting on the axis."""
        if self.theta[0] == 0.0:
            return self.theta, self.candela
        return np.append(0.0, self.theta), np.append(self.candela[0], self.candela)

    @cached_property
    def _cumulative(self):
        """Flux in lm inside each node."""
        t, i = self._nodes
        return np.append(0.0, np.cumsum(flux_between(t[:-1], t[1:], i[:-1], i[1:])))

    @property
    def flux(self):
        """Luminous flux of the whole table, lm."""
        return float(self._cumulative[-1])

    @property
    def flux_se(self):
        """Standard error of the flux in lm, taking the entries as independent."""
        t = self.theta
        rising = flux_between(t[:-1], t[1:], np.zeros(len(t) - 1), np.ones(len(t) - 1))
        falling = flux_between(t[:-1], t[1:], np.ones(len(t) - 1), np.zeros(len(t) - 1))
        weight = np.append(falling, 0.0) + np.append(0.0, rising)
        weight[0] += 2.0 * math.pi * 2.0 * math.sin(0.5 * t[0]) ** 2
        return float(np.linalg.norm(weight * self.candela_se))

    def flux_inside(self, theta):
        """Flux in lm inside the cone of half-angle ``theta`` (rad), any shape."""
        t, i = self._nodes
        theta = np.clip(np.asarray(theta, float), 0.0, t[-1])
        k = np.clip(np.searchsorted(t, theta, side="right") - 1, 0, len(t) - 2)
        return self._cumulative[k] + flux_between(t[k], theta, i[k], np.interp(theta, t, i))


def flux_between(start, end, first, last):
    """Flux (lm) between the cones ``start`` and ``end`` (rad), intensity linear, ``first`` to ``last``."""
    c, h = 0.5 * (start + end), 0.5 * (end - start)
    mean = 0.5 * (first + last)
    # 2 s = (last − first)/h; the division is moved here, where an empty piece can be guarded
    lever = np.where(h > 0.0, (np.sin(h) - h * np.cos(h)) / np.where(h > 0.0, h, 1.0), 0.0)
    return 2.0 * math.pi * (2.0 * mean * np.sin(c) * np.sin(h) + (last - first) * np.cos(c) * lever)


def peak(field):
    """Greatest intensity of the table in cd, and the angle (rad) where it stands."""
    k = int(np.argmax(field.candela))
    return float(field.candela[k]), float(field.theta[k])


def full_angle(field, fraction):
    """Full angle (rad) between the outermost directions with ``fraction`` of the peak intensity.

    None when the intensity is zero everywhere, or still above the fraction at the last angle of the table.
    """
    level = fraction * peak(field)[0]
    inside = np.nonzero(field.candela >= level)[0]
    if level == 0.0 or inside[-1] == len(field.theta) - 1:
        return None
    k = inside[-1]
    t, i = field.theta, field.candela
    return float(2.0 * (t[k] + (t[k + 1] - t[k]) * (i[k] - level) / (i[k] - i[k + 1])))


def beam_angle(field):
    """Full angle (rad) at 50 % of the peak, or None."""
    return full_angle(field, 0.5)


def field_angle(field):
    """Full angle (rad) at 10 % of the peak, or None."""
    return full_angle(field, 0.1)


def candela_per_lumen(field, emitted):
    """Peak intensity over the flux (lm) the LED emits, as lens data sheets state it (common practice)."""
    return peak(field)[0] / emitted


def beam_distance(candela):
    """Distance in mm at which ``candela`` gives 0.25 lx."""
    return MM_PER_M * math.sqrt(candela / BEAM_DISTANCE_LUX)


def illuminance(field, distance, radius=0.0):
    """Illuminance in lx on the plane across the axis at ``distance`` (mm), ``radius`` (mm) from the axis.

    Far-field rule I(θ) cos³θ / d²: good once the beam is formed, well beyond the size of the lens.
    """
    theta = np.arctan2(radius, distance)
    return field.at(theta) * np.cos(theta) ** 3 / (distance / MM_PER_M) ** 2


def angle_holding(field, fraction):
    """Half-angle (rad) of the cone that holds ``fraction`` of the table's flux; None when there is none."""
    if not 0.0 < fraction <= 1.0:
        raise ValueError(f"a fraction above 0, at most 1 is wanted, got {fraction}")
    if field.flux == 0.0:
        return None
    wanted, low, high = fraction * field.flux, 0.0, float(field.theta[-1])
    while True:
        middle = 0.5 * (low + high)
        if middle in (low, high):  # neighbouring floats: the bisection is done
            return high
        if field.flux_inside(middle) < wanted:
            low = middle
        else:
            high = middle


def spot_diameter(field, fraction, distance):
    """Diameter in mm, at ``distance`` (mm), of the disc that holds ``fraction`` of the table's flux.

    None when that cone reaches 90° from the axis (or there is no light).
    """
    theta = angle_holding(field, fraction)
    if theta is None or theta >= 0.5 * math.pi:
        return None
    return 2.0 * distance * math.tan(theta)


def encircled(field, theta, emitted):
    """Share of the ``emitted`` flux (lm) inside each half-angle ``theta`` (rad)."""
    return field.flux_inside(theta) / emitted


def ring_contrast(field):
    """How ringed the beam is: (contrast, its standard error).

    The Michelson contrast (I₂ − I₁)/(I₂ + I₁) of the worst pair of a dip I₁ and a brighter ring I₂
    further out, within the field angle; 0 for a beam that never brightens outwards.  Noise in the
    table also looks like rings: a contrast of a few standard errors is none.
    """
    edge = field_angle(field)
    inside = field.theta <= (0.5 * edge if edge is not None else field.theta[-1])
    i, se = field.candela[inside], field.candela_se[inside]
    dip = np.minimum.accumulate(i)
    total = i + dip
    contrast = np.where(total > 0.0, (i - dip) / np.where(total > 0.0, total, 1.0), 0.0)
    ring = int(np.argmax(contrast))
    if contrast[ring] == 0.0:
        return 0.0, 0.0
    low = int(np.argmin(i[: ring + 1]))
    # d/dI₂ = 2 I₁/(I₁+I₂)², d/dI₁ = −2 I₂/(I₁+I₂)²
    error = 2.0 * math.hypot(i[low] * se[ring], i[ring] * se[low]) / total[ring] ** 2
    return float(contrast[ring]), float(error)


def figures(field, emitted, distances=(1000.0, 3000.0, 10000.0)):
    """The ``photometry`` block of result.json: plain numbers, units in the keys, None where undefined.

    ``emitted`` is the LED's flux in lm, ``distances`` in mm from the lens.
    """
    candela, where = peak(field)
    contrast, contrast_se = ring_contrast(field)
    beam, tenth = beam_angle(field), field_angle(field)
    return {
        "flux_lm": field.flux,
        "flux_se_lm": field.flux_se,
        "efficiency": field.flux / emitted,
        "peak_cd": candela,
        "peak_at_deg": deg(where),
        "peak_cd_per_lm": candela_per_lumen(field, emitted),
        "beam_angle_deg": None if beam is None else deg(beam),
        "field_angle_deg": None if tenth is None else deg(tenth),
        "beam_distance_m": beam_distance(candela) / MM_PER_M,
        "ring_contrast": contrast,
        "ring_contrast_se": contrast_se,
        "spots": [
            {
                "distance_m": d / MM_PER_M,
                "illuminance_lx": float(illuminance(field, d)),
                "diameter_half_flux_mm": spot_diameter(field, 0.5, d),
                "diameter_nine_tenths_flux_mm": spot_diameter(field, 0.9, d),
            }
            for d in distances
        ],
    }
