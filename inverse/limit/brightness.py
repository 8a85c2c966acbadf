"""Brightness: no lens makes anything look brighter than the emitter.

With the radiance L of the emitter's brightest light, taken per squared index (lm per mm² sr of étendue)
and as a fraction of the emitted flux (``brightest``, 1/(mm² sr)), a clear aperture of radius R that shines in
every point towards θ gives, in an outer medium of index n_w,

    I(θ) ≤ L π R² n_w² cos θ          as long as n_w sin θ ≤ 1, otherwise nothing,

and a point of a plane at a finite distance, r off the axis, is lit from the part of the aperture its rays
come from (each p shifts them by g(p), see `inverse.limit.etendue`):

    E(r) ≤ L ∫ 2 arccos((r² + g² − R²)/(2 r g)) p dp          (arccos taken as π or 0 outside ±1)

On the axis E(0) = L π p_R² with g(p_R) = R.  The intensity that goes with an illuminance is
I(θ) = E D²/cos³ θ, with tan θ = r/D.

A wanted shape f(θ), normalised to ∫ 2π f sin θ dθ = 1, can hold the share q only where q f ≤ the bound, so
q ≤ min over θ.  A spot asks for no shape; there q ≤ brightest · E_tgt.
"""

import numpy as np

from inverse.limit.etendue import largest_slant, layers, shift

RIM_HEIGHTS = 5  # places of the exit face's rim, from the emitter plane to the top of the lens


def _angles(target, count):
    """Even steps up to the edge of a shape, and the corners of its table between them."""
    own = target.angles[target.angles <= target.half_angle]
    return np.union1d(np.linspace(0.0, target.half_angle, count), own)


def normalised(target, theta):
    """The wanted intensity per unit flux (1/sr) at ``theta`` (rad, any shape) of a shaped target."""
    grid = _angles(target, 4001)
    density = 2 * np.pi * np.interp(grid, target.angles, target.intensity, right=0.0) * np.sin(grid)
    return np.interp(theta, target.angles, target.intensity, right=0.0) / np.trapezoid(density, grid)


def intensity_per_radiance(theta, radius, surroundings):
    """I/L in mm² of a shining aperture of ``radius`` (mm) at ``theta`` (rad, outer medium), far field."""
    n = surroundings.index
    leaves = n * np.sin(theta) <= 1.0 + 1e-12  # rounding of the very edge
    return np.where(leaves, np.pi * radius**2 * n**2 * np.cos(theta), 0.0)


def illuminance_per_radiance(off_axis, radius, path, *, steps=400):
    """E/L (k,) in sr at points ``off_axis`` mm of a plane lit by a disk of ``radius`` mm along ``path``."""
    r = np.asarray(off_axis, float)[:, None]
    whole, last = largest_slant(path, np.abs(radius - r)), largest_slant(path, radius + r)
    x = (np.arange(steps) + 0.5) / steps
    p = whole + (last - whole) * np.sin(0.5 * np.pi * x) ** 2
    step = (last - whole) * np.pi * np.sin(0.5 * np.pi * x) * np.cos(0.5 * np.pi * x) / steps
    g = shift(path, p)
    across = np.where(r * g > 0, 2 * r * g, 1.0)
    angle = 2 * np.arccos(np.clip((r**2 + g**2 - radius**2) / across, -1.0, 1.0))
    # Up to the first edge a point behind the aperture is lit from all sides, one beside it from none.
    return np.sum(angle * p * step, -1) + np.where(r < radius, np.pi * whole**2, 0.0).ravel()


def _rims(target, surroundings, height):
    """The paths from every place where the rim of the exit face may be."""
    for drop in np.linspace(0.0, height, RIM_HEIGHTS):
        first, *others = layers(target, surroundings, height)
        # What lies below the top of the lens is air, whatever is wanted beyond.
        yield (first, *others, (drop, 1.0))


def shape_share(brightest, radius, height, target, surroundings):
    """Largest share that the wanted shape leaves room for, at every angle of it; at most 1."""
    if not np.isfinite(brightest):
        return 1.0
    theta = _angles(target, 401 if target.distance is None else 81)
    wanted = normalised(target, theta)
    theta, wanted = theta[wanted > 0], wanted[wanted > 0]
    if target.distance is None:
        limits = [intensity_per_radiance(theta, radius, surroundings)]
    else:
        r, scale = target.distance * np.tan(theta), target.distance**2 / np.cos(theta) ** 3
        paths = _rims(target, surroundings, height)
        limits = [scale * illuminance_per_radiance(r, radius, path, steps=100) for path in paths]
    return float(min(1.0, max(np.min(brightest * limit / wanted) for limit in limits)))


def axial(brightest, radius, height, target, surroundings):
    """Largest intensity on the axis as a fraction of the emitted flux (1/sr), E D² at a finite distance."""
    if target.distance is None:
        return brightest * float(intensity_per_radiance(0.0, radius, surroundings))
    path = layers(target, surroundings, height)
    return float(brightest * np.pi * largest_slant(path, radius) ** 2 * target.distance**2)
