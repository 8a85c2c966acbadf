"""What uncoated faces let through, and when a face reflects everything.

At normal incidence between indices n₁ and n₂ the reflectance is R₀ = ((n₁ − n₂)/(n₁ + n₂))².  At an
angle i, with n₁ sin i = n₂ sin t (Fresnel),

    Rₛ = ((n₁ cos i − n₂ cos t)/(n₁ cos i + n₂ cos t))²
    Rₚ = ((n₁ cos t − n₂ cos i)/(n₁ cos t + n₂ cos i))²

and unpolarised light passes T = 1 − (Rₛ + Rₚ)/2, nothing at all when n₁ sin i ≥ n₂ (total reflection).

Light meets two refracting faces of the lens, and two more of a port.  `faces` counts what passes all of
them straight on, (1 − R₀)² for the lens.  Light thrown back twice inside one slab and then passing adds
a little: a slab lets 2n/(n² + 1) through in all, 0.15 % more for acrylic; `faces_with_returns` counts it
and is the figure no uncoated lens can beat.
"""

import numpy as np


def normal_reflectance(index_a, index_b):
    """R₀ between two media, dimensionless."""
    return ((index_a - index_b) / (index_a + index_b)) ** 2


def unpolarised(index_in, index_out, sine):
    """T at an incidence of this ``sine`` (any shape) for unpolarised light; 0 under total reflection."""
    out = index_in / index_out * np.asarray(sine, float)
    passes = out < 1.0
    cos_in = np.sqrt(np.where(passes, 1.0 - np.asarray(sine, float) ** 2, 1.0))
    cos_out = np.sqrt(np.where(passes, 1.0 - np.where(passes, out, 0.0) ** 2, 1.0))
    r_s = (index_in * cos_in - index_out * cos_out) / (index_in * cos_in + index_out * cos_out)
    r_p = (index_in * cos_out - index_out * cos_in) / (index_in * cos_out + index_out * cos_in)
    return np.where(passes, 1.0 - 0.5 * (r_s**2 + r_p**2), 0.0)


def critical_angle(index, outside=1.0):
    """Incidence (rad) in ``index`` beyond which light is totally reflected; ValueError if it never is."""
    if outside >= index:
        raise ValueError(f"total reflection needs the denser medium inside; got {index} towards {outside}")
    return float(np.arcsin(outside / index))


def brewster_angle(index, outside=1.0):
    """Incidence (rad) in ``outside`` at which light polarised in the plane of incidence is not reflected."""
    return float(np.arctan2(index, outside))


def flank_margin(index, outside=1.0):
    """How far (rad) the least incidence on a collimating flank is above the critical angle.

    Behind a cylindrical pocket wall the flank turns light that has the inclination i' in the lens to the
    axis; its incidence is 45° + i'/2, least for light leaving the die sideways.  Negative when that light
    leaks: below n = √2 in air, and for every plastic in water.
    """
    return np.pi / 4 - critical_angle(index, outside)


def _slabs(index, surroundings):
    """The pairs of faces in order: (index before, index of the slab, index behind)."""
    yield 1.0, index, 1.0  # the lens itself always stands in air
    if surroundings.port:
        yield 1.0, surroundings.port.index, surroundings.index


def faces(index, surroundings):
    """Fraction passing straight through the two faces of the lens and, if there is one, of the port."""
    passed = 1.0
    for before, slab, behind in _slabs(index, surroundings):
        passed *= (1 - normal_reflectance(before, slab)) * (1 - normal_reflectance(slab, behind))
    return passed


def faces_with_returns(index, surroundings):
    """The same, with light that comes back after two, four, … reflections inside one slab."""
    passed = 1.0
    for before, slab, behind in _slabs(index, surroundings):
        first, second = normal_reflectance(before, slab), normal_reflectance(slab, behind)
        passed *= (1 - first) * (1 - second) / (1 - first * second)
    return passed
