"""Étendue: how much room light takes up, which no lens can shrink.

A ray crossing a plane at (x, y) in a medium of index n has the optical direction cosines
p = n (kₓ, k_y); |p| = n sin θ is kept by every flat interface across the axis.  The étendue of a beam is
its volume in (x, y, pₓ, p_y), in mm² sr.

    flat Lambertian emitter of area A in index n        E = n² π A
    clear aperture of radius R, cone |p| ≤ P            E = π² R² P²

A beam of half-angle θ wanted in a medium of index n_w has P = n_w sin θ; the lens stands in air, so
P ≤ 1 whatever is asked (a flat port turns no light further than arcsin(1/n_w)).

**A spot on a plane at a finite distance** takes the rays that cross both the aperture (radius R) and the
spot (radius ρ).  Between them lie plane layers of thickness tᵢ and index nᵢ, which shift a ray sideways by

    g(p) = Σ tᵢ p / √(nᵢ² − p²)          so that          E = 2π ∫ A(R, ρ, g(p)) p dp

where A is the area common to two circles whose centres are g apart.  In air alone this is Hottel's
view factor of two coaxial disks, E = (π²/2) [S − √(S² − 4R²ρ²)], S = R² + ρ² + D² (from memory).

**What "aperture" means.** The exit face may be curved and lie anywhere between the emitter plane and the
top of the lens: as long as each point of it faces every direction of the beam (no slope steeper than
90° − θ), it takes part exactly like the flat disk at its rim.  For the finite distance the disk is put
at the top of the lens, where the étendue is largest, so the figure stays an upper bound.  Light that
leaks out beside the exit face, through flank or rim, is not counted.
"""

import numpy as np

HALVINGS = 60  # interval halvings that exhaust double precision


def of_emitter(emitter):
    """n² π A in mm² sr: all the room the dies' light takes up inside the dome, or in air."""
    return emitter.index**2 * np.pi * emitter.area


def reach_of_cone(half_angle, surroundings):
    """P = min(1, n_w sin θ) of a cone of ``half_angle`` (rad, any shape) in the outer medium."""
    return np.minimum(1.0, surroundings.index * np.sin(np.minimum(half_angle, np.pi / 2)))


def of_aperture(radius, cone):
    """π² R² P² in mm² sr of a clear aperture (radius in mm) and a cone |p| ≤ ``cone``."""
    return (np.pi * radius * cone) ** 2


def narrowest_half_angle(emitter, radius, surroundings):
    """Half-angle (rad) whose étendue through ``radius`` (mm) equals the emitter's; π/2 if none is as large.

    Below it no lens of any kind can hold all the light of a Lambertian emitter; a body of revolution
    may need more room, see `inverse.limit.skewness`.
    """
    sine = np.sqrt(of_emitter(emitter)) / (np.pi * radius * surroundings.index)
    return float(np.arcsin(sine)) if sine * surroundings.index <= 1.0 and sine <= 1.0 else np.pi / 2


def layers(target, surroundings, height):
    """What lies between the top of the lens and the target plane: pairs (thickness in mm, index).

    Raises ValueError when the plane is not clear of the lens and the port.
    """
    rest = target.distance - height
    port = surroundings.port
    found = ((port.gap, 1.0), (port.thickness, port.index)) if port else ()
    rest -= sum(t for t, _ in found)
    if rest < 0:
        inside = "lens or the port" if port else "lens"
        raise ValueError(
            f"target plane at {target.distance:g} mm lies inside the {inside} (lens up to {height:g} mm). "
            f"Move it at least {-rest:g} mm further out."
        )
    return (*found, (rest, surroundings.index))


def shift(path, p):
    """g(p) in mm for ``path`` as from `layers`, shape of ``p`` (0 <= p < 1)."""
    return sum(t * p / np.sqrt(n**2 - p**2) for t, n in path)


def largest_slant(path, sideways):
    """The largest p <= 1 whose shift is at most ``sideways`` (mm, any shape), same shape."""
    low, high = np.zeros(np.shape(sideways)), np.ones(np.shape(sideways))
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        # Between 1 and its neighbour the middle rounds to 1, where the shift has no value.
        near = (middle < 1.0) & (shift(path, np.minimum(middle, 1.0 - 2**-53)) <= sideways)
        low, high = np.where(near, middle, low), np.where(near, high, middle)
    return high


def common_area(radius_a, radius_b, apart):
    """Area (mm²) common to two circles whose centres are ``apart`` (mm, any shape)."""
    small, large = min(radius_a, radius_b), max(radius_a, radius_b)
    d = np.clip(apart, large - small, large + small)
    d = np.where(d > 0, d, 1.0)  # only with equal circles at no distance, handled below

    def segment(radius, other):
        cosine = np.clip((d**2 + radius**2 - other**2) / (2 * d * radius), -1.0, 1.0)
        return radius**2 * (np.arccos(cosine) - cosine * np.sqrt(1 - cosine**2))

    return np.where(apart <= large - small, np.pi * small**2, segment(small, large) + segment(large, small))


def of_pair(radius, spot, path):
    """Étendue (mm² sr) of the rays through an aperture and a coaxial spot (radii in mm) along ``path``."""
    nodes, weights = np.polynomial.legendre.leggauss(64)
    stops = [largest_slant(path, sideways) for sideways in (abs(radius - spot), radius + spot)]
    total = 0.0
    for low, high in zip([0.0, stops[0]], stops):  # nothing is cut off in the first part, some in the second
        # The sine takes the square-root ends of the second part away.
        p = low + (high - low) * (0.5 + 0.5 * np.sin(0.5 * np.pi * nodes))
        step = (high - low) * 0.25 * np.pi * np.cos(0.5 * np.pi * nodes) * weights
        total += 2 * np.pi * np.sum(common_area(radius, spot, shift(path, p)) * p * step)
    return float(total)
