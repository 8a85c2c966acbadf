"""Numbers from outside, one by one: ``values.toml`` says what, from whom, and how near we must come.

``quantity`` names a function below, ``input`` its arguments.  A value may be a list when the function
returns one.  "from memory" in a source means remembered, not looked up; a source that is a formula was
evaluated apart from this package.
"""

import math
import tomllib
from pathlib import Path

import numpy as np
import pytest

from inverse import limit, material
from inverse.emitter import CosinePower, Disk, Dome, Emitter, Rectangle
from inverse.limit import etendue, skewness, transmission
from inverse.target import Port, Surroundings, Target
from inverse.units import deg, rad

AIR = Surroundings()
CHECKS = tomllib.loads((Path(__file__).parent / "values.toml").read_text(encoding="utf-8"))["check"]
QUANTITIES = {}


def quantity(name, unit):
    """Registers the function that answers for ``name`` in ``unit``."""

    def keep(function):
        QUANTITIES[name] = (function, unit)
        return function

    return keep


@quantity("material.index", "1")
def _index(name, wavelength_um):
    return material.by_name(name).index(wavelength_um)


@quantity("material.abbe", "1")
def _abbe(name):
    return material.by_name(name).abbe


@quantity("material.constant", "as stored")
def _constant(name, constant):
    return getattr(material.by_name(name), constant)


@quantity("material.bulk_loss", "1")
def _bulk_loss(name, path_mm):
    return 1 - math.exp(-material.by_name(name).absorption * path_mm)


@quantity("material.slab_transmittance", "1")
def _slab_transmittance(name, thickness_mm, wavelength_um):
    m = material.by_name(name)
    clear = transmission.faces_with_returns(m.index(wavelength_um), AIR)
    return clear * math.exp(-m.absorption * thickness_mm)


@quantity("transmission.normal_reflectance", "1")
def _normal_reflectance(index):
    return transmission.normal_reflectance(1.0, index)


@quantity("transmission.critical_angle", "deg")
def _critical_angle(index, outside=1.0):
    return deg(transmission.critical_angle(index, outside))


@quantity("transmission.brewster_angle", "deg")
def _brewster_angle(index):
    return deg(transmission.brewster_angle(index))


@quantity("transmission.faces", "1")
def _faces(index):
    return transmission.faces(index, AIR)


@quantity("transmission.faces_with_returns", "1")
def _faces_with_returns(index):
    return transmission.faces_with_returns(index, AIR)


@quantity("transmission.unpolarised_reflectance", "1")
def _unpolarised_reflectance(index, incidence_deg):
    return 1 - float(transmission.unpolarised(1.0, index, math.sin(rad(incidence_deg))))


@quantity("transmission.flank_margin", "deg")
def _flank_margin(index):
    return deg(transmission.flank_margin(index))


@quantity("etendue.angle_before_port", "deg")
def _angle_before_port(in_water_deg, index):
    water = Surroundings("water", index, Port(1.49, 5.0, 1.0))
    return deg(math.asin(etendue.reach_of_cone(rad(in_water_deg), water)))


@quantity("etendue.view_factor_of_coaxial_disks", "1")
def _view_factor(radius, other, apart):
    return etendue.of_pair(radius, other, ((apart, 1.0),)) / (math.pi * math.pi * radius**2)


@quantity("etendue.narrowest_half_angle", "deg")
def _narrowest(side_mm, aperture_mm, dome_index=None):
    dome = Dome(3.0, dome_index) if dome_index else None
    emitter = Emitter((Rectangle(side_mm, side_mm),), dome=dome)
    return deg(etendue.narrowest_half_angle(emitter, aperture_mm / 2, AIR))


SOURCES = {
    "disk": Emitter((Disk(1.0),)),
    "square": Emitter((Rectangle(1.0, 1.0),)),
    "rectangle 2:1": Emitter((Rectangle(2.0, 1.0),)),
    "rectangle 4:1": Emitter((Rectangle(4.0, 1.0),)),
    "2x2 dice of 1 mm, gap 0.2 mm": Emitter(
        tuple(Rectangle(1.0, 1.0, x, y) for x in (-0.6, 0.6) for y in (-0.6, 0.6))
    ),
    "square off centre by 0.2 side": Emitter((Rectangle(1.0, 1.0, 0.2, 0.0),)),
}


@quantity("limit.largest_share", "1")
def _largest_share(source, ratios):
    emitter, target = SOURCES[source], Target("spot", 0.1)
    radii = [math.sqrt(r * emitter.area / math.pi) / math.sin(0.1) for r in ratios]
    return [limit.bound(emitter, radius, 10.0, target, AIR, 1.49).ceiling for radius in radii]


@quantity("limit.largest_share_of_hemisphere", "1")
def _largest_share_of_hemisphere(ratios):
    """A hemisphere of radius 1 has dE/ds = 2π²(1 − |s|), E = 2π²; only the target's density is ours."""
    s = (np.arange(20_000) + 0.5) / 20_000
    source = 2 * math.pi**2 * (1 - s)
    reach = [math.sqrt(2 * r) for r in ratios]  # π² (RP)² = r · 2π²
    return [float(np.mean(np.minimum(source, skewness.disk_density(s, x, 1.0))) / math.pi**2) for x in reach]


@quantity("limit.largest_candela", "kcd")
def _largest_candela(flux_lm, side_mm, aperture_mm, transmitted):
    emitter = Emitter((Rectangle(side_mm, side_mm),), flux=flux_lm)
    found = limit.bound(emitter, aperture_mm / 2, 10.0, Target("spot", 0.1), AIR, 1.49)
    return found.largest_candela / found.transmission * transmitted / 1e3


@quantity("emitter.flux_inside", "1")
def _flux_inside(half_angle_deg):
    return CosinePower().cumulative(rad(half_angle_deg))


def _name(check):
    return f"{check.get('quantity')}-{'-'.join(str(v) for v in check.get('input', {}).values())}"


@pytest.mark.parametrize("check", CHECKS, ids=_name)
def test_published_value(check):
    """The package comes as near to a number from outside as that number deserves."""
    function, unit = QUANTITIES[check["quantity"]]
    assert check["unit"] == unit
    found = np.asarray(function(**check["input"]), float)
    wanted = np.asarray(check["value"], float)
    assert found.shape == wanted.shape
    assert np.all(np.abs(found - wanted) <= check["within"]), f"{found} against {wanted}: {check['source']}"


@pytest.mark.parametrize("check", CHECKS, ids=_name)
def test_entry_is_complete(check):
    """No entry without quantity, input, value, unit, a tolerance above zero and a source of some length."""
    assert check["quantity"] in QUANTITIES
    assert isinstance(check["input"], dict)
    assert check["within"] > 0
    assert {"value", "unit", "source"} <= set(check)
    assert len(check["source"].strip()) >= 10


def test_every_quantity_is_checked():
    """A function of this file that no entry asks for would be dead."""
    assert {c["quantity"] for c in CHECKS} == set(QUANTITIES)


def test_no_entry_stands_twice():
    """Two entries with the same question and source are one."""
    keys = [(c["quantity"], str(c["input"]), c["source"]) for c in CHECKS]
    assert len(keys) == len(set(keys))
