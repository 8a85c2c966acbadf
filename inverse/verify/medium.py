"""From the lens to where the beam is wanted: straight through air, or through a flat port into water.

Across flat faces the tangential part of n·d is conserved: (d_x, d_y) in air become
(d_x, d_y)/n_p in the port and (d_x, d_y)/n in the outer medium.  Of the light, T = (1 − R₁)(1 − R₂)
passes; the rest is booked as reflected by the port and not followed.  So the multiple reflections
inside the port are left out: they would add the part R₁R₂ of T (2e-4 for a clear port into
water, 2e-3 into air), and what they add would leave slightly sideways.

The coordinate of a landing is the angle θ of the ray in the outer medium (far field), or
atan(r / distance) where it crosses z = distance measured from the emitter plane.
"""

from dataclasses import dataclass

import numpy as np

from inverse.verify.optics import reflectance


@dataclass(frozen=True)
class Arrival:
    """Where forward light lands."""

    theta: np.ndarray  # (k,) rad, coordinate of the target
    place: np.ndarray  # (k, 2) x, y in mm in the plane; far field: θ cos φ, θ sin φ in rad
    direction: np.ndarray  # (k, 3) unit, in the outer medium
    passed: np.ndarray  # (k,) fraction that gets through the port
    skewness: np.ndarray  # (k,) mm, n (x d_y − y d_x) in the outer medium


def check(surroundings, target, top):
    """ValueError where the request makes no sense; ``top`` is the largest z of the lens (or LED), mm."""
    port = surroundings.port
    if port is None and surroundings.index != 1.0:
        raise ValueError(
            f"{surroundings.name} of index {surroundings.index} needs a port, since the lens stands in air: "
            "give its index, thickness and gap"
        )
    if port is not None and (port.gap < 0.0 or port.thickness < 0.0 or port.index < 1.0):
        raise ValueError(f"wanted a port with gap and thickness >= 0 and index >= 1, got {port}")
    edge = top + (port.gap + port.thickness if port else 0.0)
    if target.distance is not None and target.distance <= edge:
        raise ValueError(f"target plane at {target.distance} mm lies inside lens or port (to {edge:.4g} mm)")


def arrive(surroundings, target, top, origin, direction):
    """Landings of rays (k, 3) in air with d_z > 0 that start at or below ``top``."""
    port, outer = surroundings.port, surroundings.index
    sideways, cosine = direction[:, :2], direction[:, 2]
    place, z, passed = origin[:, :2], origin[:, 2], np.ones(len(cosine))
    out = direction
    if port is not None:
        first, in_port = reflectance(cosine, 1.0, port.index)
        second, in_outer = reflectance(in_port, port.index, outer)
        passed = (1.0 - first) * (1.0 - second)
        out = np.column_stack([sideways / outer, in_outer])
        place = place + sideways * ((top + port.gap - z) / cosine)[:, None]
        place = place + sideways / port.index * (port.thickness / in_port)[:, None]
        z = np.full(len(cosine), top + port.gap + port.thickness)
    skewness = outer * (place[:, 0] * out[:, 1] - place[:, 1] * out[:, 0])
    if target.distance is None:
        sine = np.hypot(out[:, 0], out[:, 1])
        theta = np.arctan2(sine, out[:, 2])
        place = out[:, :2] * (theta / np.maximum(sine, np.finfo(float).tiny))[:, None]
        return Arrival(theta, place, out, passed, skewness)
    place = place + out[:, :2] * ((target.distance - z) / out[:, 2])[:, None]
    return Arrival(np.arctan2(np.hypot(*place.T), target.distance), place, out, passed, skewness)
