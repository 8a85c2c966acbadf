"""Light that leaves the LED package, drawn for the verifier alone.

A die is picked in proportion to its area, a point on it uniformly, a direction by its law: with
F(θ) = ∫₀^θ I sin dθ, θ = F⁻¹(u F(90°)), azimuth uniform.  For I = cosᵐ θ that is
cos θ = (1 − u)^{1/(m+1)}; for a table, linear between its angles, F is known in closed form on
every interval, ∫ (a + b θ) sin θ dθ = −(a + b θ) cos θ + b sin θ, and is inverted by bisection.

Under a dome (hemisphere of radius R and index n centred on the origin) the law holds inside the
dome.  The ray runs to |p| = R, refracts into air and carries the weight T = 1 − R_Fresnel; where it is
totally reflected it is left out.  Flux means what leaves the package, so all fractions are of the
sum of these weights.  Light that the dome's surface throws back is not followed: what it becomes
inside the package is already in the flux on the data sheet, only its direction is not.
"""

from dataclasses import dataclass

import numpy as np

from inverse.emitter import CosinePower, Disk, Rectangle, Table
from inverse.verify.optics import reflectance, transmitted

DIMENSIONS = 4  # uniform numbers a ray needs


@dataclass(frozen=True)
class Light:
    """Rays in air at the emitter plane or on the dome; the emitted flux is the sum of the weights."""

    origin: np.ndarray  # (k, 3) mm
    direction: np.ndarray  # (k, 3) unit
    weight: np.ndarray  # (k,) in (0, 1]
    row: np.ndarray  # (k,) the row of uniform numbers each came from


def emit(emitter, uniform):
    """One ray for each row of ``uniform`` (k, 4) in [0, 1); totally reflected ones are left out.

    Raises ValueError for a die that reaches outside its dome or an unknown shape or law.
    """
    x, y = _points(emitter.dies, uniform[:, 0], uniform[:, 1])
    cosine = _cosines(emitter.law, uniform[:, 2])
    sine, azimuth = np.sqrt(np.maximum(1.0 - cosine**2, 0.0)), 2.0 * np.pi * uniform[:, 3]
    direction = np.column_stack([sine * np.cos(azimuth), sine * np.sin(azimuth), cosine])
    origin = np.column_stack([x, y, np.zeros_like(x)])
    if emitter.dome is None:
        return Light(origin, direction, np.ones(len(x)), np.arange(len(x)))
    return _through_dome(emitter.dome, origin, direction)


def _points(dies, u, v):
    areas = np.cumsum([d.area for d in dies])
    edge = np.concatenate([[0.0], areas / areas[-1]])
    pick = np.minimum(np.searchsorted(edge, u, side="right") - 1, len(dies) - 1)
    u = (u - edge[pick]) / (edge[pick + 1] - edge[pick])  # uniform again within the die
    x, y = np.empty_like(u), np.empty_like(u)
    for i, die in enumerate(dies):
        k = pick == i
        if isinstance(die, Disk):
            r, turn = die.radius * np.sqrt(u[k]), 2.0 * np.pi * v[k]
            x[k], y[k] = die.x + r * np.cos(turn), die.y + r * np.sin(turn)
        elif isinstance(die, Rectangle):
            x[k], y[k] = die.x + die.width * (u[k] - 0.5), die.y + die.height * (v[k] - 0.5)
        else:
            raise ValueError(f"a die must be a Disk or a Rectangle, got {type(die).__name__}")
    return x, y


def _cosines(law, u):
    if isinstance(law, CosinePower):
        return (1.0 - u) ** (1.0 / (1.0 + law.power))
    if isinstance(law, Table):
        return np.cos(_table_angles(np.asarray(law.angles, float), np.asarray(law.values, float), u))
    raise ValueError(f"a law must be a CosinePower or a Table, got {type(law).__name__}")


def _table_angles(angles, values, u):
    if angles[-1] > np.pi / 2:
        values = np.append(values[angles < np.pi / 2], np.interp(np.pi / 2, angles, values))
        angles = np.append(angles[angles < np.pi / 2], np.pi / 2)
    slope = np.diff(values) / np.diff(angles)
    level = values[:-1] - slope * angles[:-1]

    def primitive(k, theta):
        return slope[k] * np.sin(theta) - (level[k] + slope[k] * theta) * np.cos(theta)

    k = np.arange(len(slope))
    flux = np.concatenate([[0.0], np.cumsum(primitive(k, angles[1:]) - primitive(k, angles[:-1]))])
    if not flux[-1] > 0.0:
        raise ValueError("the emission table holds no light below 90°; give at least one positive value")
    wanted = u * flux[-1]
    k = np.minimum(np.searchsorted(flux, wanted, side="right") - 1, len(slope) - 1)
    low, high, offset = angles[k].copy(), angles[k + 1].copy(), primitive(k, angles[k]) - flux[k]
    for _ in range(48):  # halves an interval of at most π/2 down to rounding
        middle = 0.5 * (low + high)
        below = primitive(k, middle) - offset < wanted
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    return 0.5 * (low + high)


def _through_dome(dome, origin, direction):
    reach = np.sqrt(np.max(np.sum(origin**2, 1)))
    if reach >= dome.radius:
        raise ValueError(f"a die reaches {reach:.4g} mm from the axis, outside its dome of {dome.radius} mm")
    along = np.sum(origin * direction, 1)
    path = np.sqrt(along**2 + dome.radius**2 - np.sum(origin**2, 1)) - along
    surface = origin + path[:, None] * direction
    normal = -surface / dome.radius  # towards the incoming side
    cosine = -np.sum(direction * normal, 1)
    lost, cosine_behind = reflectance(cosine, dome.index, 1.0)
    keep = lost < 1.0
    out = transmitted(direction, normal, cosine, cosine_behind, dome.index, 1.0)
    return Light(surface[keep], out[keep], 1.0 - lost[keep], np.flatnonzero(keep))


def swallowed(emitter, origin, direction):
    """Distance (k,) in mm at which light in air that comes back meets the LED, infinite if it does not.

    Dies take what crosses them from above; a dome takes what touches it from outside.
    """
    dz = direction[:, 2]
    if emitter.dome is not None:
        along = np.sum(origin * direction, 1)
        root = along**2 + emitter.dome.radius**2 - np.sum(origin**2, 1)
        t = -along - np.sqrt(np.maximum(root, 0.0))
        meets = (root > 0.0) & (t > 0.0) & (origin[:, 2] + t * dz >= 0.0)
        return np.where(meets, t, np.inf)
    falling = (dz < 0.0) & (origin[:, 2] > 0.0)
    t = np.where(falling, -origin[:, 2] / np.where(falling, dz, -1.0), np.inf)
    x, y = (origin[:, :2] + np.where(falling, t, 0.0)[:, None] * direction[:, :2]).T
    lit = np.zeros(len(dz), bool)
    for die in emitter.dies:
        if isinstance(die, Disk):
            lit |= (x - die.x) ** 2 + (y - die.y) ** 2 <= die.radius**2
        else:
            lit |= (np.abs(x - die.x) <= die.width / 2) & (np.abs(y - die.y) <= die.height / 2)
    return np.where(lit, t, np.inf)
