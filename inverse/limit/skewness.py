"""Skewness: what a body of revolution cannot change about a ray, and the largest share that follows.

The skewness of a ray, s = x p_y − y p_x (mm), is kept by every surface of revolution, whatever it does.
With p = |p| the ray passes the axis, in projection, at the offset b = s/p.  Light may therefore be moved
about only among rays of equal s, and what fits into the target is counted skewness by skewness
(Ries, Shatz, Bortz, Spirkl, J. Opt. Soc. Am. A 14, 2855, 1997):

    share ≤ (1/E_src) ∫ min(dE_src/ds, dE_tgt/ds) ds         for a source of even radiance.

**Chord function.** For a flat set of points with arc density a(r),

    C(b) = ∫ 2 a(r) / √(r² − b²) dr  (r > |b|)          (2π times the mean chord at offset b)

is all that matters: d²E/(ds dp) = C(s/p).  A disk of radius R has C = 4π √(R² − b²), hence, with p ≤ P,

    dE/ds = 4π [√(R²P² − s²) − |s| arccos(|s|/(RP))] ,    |s| ≤ RP.

For a spot of radius ρ at a finite distance the chord is the part common to the two disks' chords, one
shifted by g(p) (see `inverse.limit.etendue`):

    dE/ds = 2π ∫ max(0, min(c, c' − g) + min(c, c' + g)) dp ,  c = √(R² − b²), c' = √(ρ² − b²).

**Uneven radiance.** The radiance in direction θ is w = I(θ)/cos θ, with p = n sin θ.  At each skewness the
target's étendue is filled with the brightest light first; no lens does better.  For w = 1 this is the
formula above.  A **dome** of index n_d and radius R_d lets a ray through with the unpolarised Fresnel
transmittance T at sin i = d/R_d, d the ray's distance from the centre: d² = b² + u² cos² θ at a place
u along the chord.  The radiance outside is then w T, slightly uneven (a few parts in a thousand for
an ordinary dome; zero for trapped rays), and is filled brightest first as well.  Since the flux of an emitter
is what leaves its package, all shares refer to ∫ w T dE.

Shares are good to ±1e-4; the numerical rule is a midpoint rule in s = s_max x³, θ and u.
"""

from dataclasses import dataclass

import numpy as np

from inverse.limit.etendue import largest_slant, of_emitter, shift
from inverse.limit.transmission import unpolarised

SKEW, SLANT, PLACE = 400, 128, 12  # steps in s, θ and (domes only) u
# Twice as many steps moved the shares of 18 emitters by up to 3e-5, with trapped light by 1e-4.


def _midpoints(count):
    return (np.arange(count) + 0.5) / count


def chord(emitter, offset):
    """C(b) in mm for offsets ``offset`` (any shape, mm, >= 0); zero beyond the emitter's reach.

    The mean of a(r)/r over each small step in r times the exact integral of r/√(r² − b²).
    """
    r = emitter.radial_nodes(64)
    middle = 0.5 * (r[1:] + r[:-1])
    density = emitter.arc_density(middle) / middle
    tilt = 1.0 - _midpoints(600) ** 2  # b/reach; √(1 − b/reach), the end's own scale, is even
    b = np.concatenate([[0.0], (tilt * emitter.reach)[::-1], [emitter.reach]])
    along = np.sqrt(np.maximum(r**2 - b[:, None] ** 2, 0.0))
    found = 2.0 * np.diff(along) @ density
    scale = [-np.sqrt(np.maximum(1.0 - x / emitter.reach, 0.0)) for x in (offset, b)]
    return np.interp(scale[0], scale[1], found)


def disk_density(skewness, radius, cone):
    """dE/ds (mm sr) of an aperture of ``radius`` mm and a cone |p| <= ``cone`` at ``skewness`` (mm)."""
    most = radius * cone
    ratio = np.minimum(np.abs(skewness) / most, 1.0) if most > 0 else np.ones_like(skewness)
    return 4 * np.pi * most * (np.sqrt(1 - ratio**2) - ratio * np.arccos(ratio))


def pair_density(skewness, radius, spot, path, *, steps=96):
    """dE/ds (k,) in mm sr of the rays through an aperture and a coaxial spot (radii in mm) along ``path``."""
    s = np.abs(np.asarray(skewness, float))[:, None]
    high = largest_slant(path, radius + spot)
    low = np.minimum(s / min(radius, spot), high)
    x = _midpoints(steps)
    p = low + (high - low) * np.sin(0.5 * np.pi * x) ** 2  # square-root ends on both sides
    step = (high - low) * np.pi * np.sin(0.5 * np.pi * x) * np.cos(0.5 * np.pi * x) / steps
    b2 = (s / p) ** 2
    c, other, g = np.sqrt(np.maximum(radius**2 - b2, 0)), np.sqrt(np.maximum(spot**2 - b2, 0)), shift(path, p)
    common = np.minimum(c, other - g) + np.minimum(c, other + g)
    return 2 * np.pi * np.sum(np.maximum(common, 0.0) * step, axis=-1)


@dataclass(frozen=True)
class Source:
    """The emitter's light laid out by skewness (k rows), in each row brightest first (j cells)."""

    skewness: np.ndarray  # (k,) mm, positive half
    step: np.ndarray  # (k,) mm
    etendue: np.ndarray  # (k,) mm sr, dE/ds
    place: np.ndarray  # (k (j + 1),) row number + fraction of the row's étendue, rising throughout
    flux: np.ndarray  # (k (j + 1),) 1/mm, flux of the row up to that place, as a fraction of all per mm
    brightest: float  # largest radiance, as a fraction of the emitted flux, 1/(mm² sr); may be infinite

    def share(self, capacity):
        """Largest fraction of the flux that fits into the target étendue ``capacity`` (k,) in mm sr."""
        filled = np.minimum(capacity / self.etendue, 1.0)
        rows = np.arange(len(filled))
        full = self.flux.reshape(len(filled), -1)[:, -1]
        partial = np.interp(rows + filled, self.place, self.flux)
        # At the very end of a row the next one begins, from 0.
        return float(min(2.0 * np.where(filled < 1.0 - 1e-12, partial, full) @ self.step, 1.0))


def lay_out(emitter):
    """The `Source` of an emitter: flux and étendue in every cell of (s, θ, u), sorted by radiance."""
    n, reach = emitter.index, emitter.reach
    x = _midpoints(SKEW)
    s, step = n * reach * x**3, 3 * n * reach * x**2 / SKEW
    y = _midpoints(SLANT)
    least = np.arcsin(s / (n * reach))[:, None]
    theta = least + (np.pi / 2 - least) * y**2
    d_theta = 2 * (np.pi / 2 - least) * y / SLANT
    b = s[:, None] / (n * np.sin(theta))
    intensity, cosine = emitter.law.intensity(theta), np.cos(theta)
    cells = (chord(emitter, b) * n * d_theta)[..., None]
    radiance = (intensity / cosine)[..., None]
    if emitter.dome:
        share, passed = _through_dome(emitter, b, cosine)
        cells, radiance = cells * share, radiance * passed
    etendue = (cells * cosine[..., None]).reshape(SKEW, -1)
    etendue *= of_emitter(emitter) / (2.0 * etendue.sum(-1) @ step)  # takes out the rule's own few 1e-5
    radiance = radiance.reshape(SKEW, -1)
    order = np.argsort(-radiance, axis=-1, kind="stable")
    etendue = np.take_along_axis(etendue, order, -1)
    flux = etendue * np.take_along_axis(radiance, order, -1)
    total = 2.0 * flux.sum(-1) @ step
    best = float(unpolarised(n, 1.0, 0.0)) if emitter.dome else 1.0  # a dome passes most straight on
    start, rows = np.zeros((SKEW, 1)), np.arange(SKEW)[:, None]
    filled = np.concatenate([start, np.cumsum(etendue, -1)], -1)
    return Source(
        skewness=s,
        step=step,
        etendue=filled[:, -1],
        place=(filled / filled[:, -1:] + rows).ravel(),
        flux=np.concatenate([start, np.cumsum(flux, -1)], -1).ravel() / total,
        brightest=float(emitter.law.brightest * best / total),
    )


def _through_dome(emitter, offset, cosine):
    """How light at (b, θ) spreads along its chord and what the dome passes of it, both (k, j, u)."""
    half = np.sqrt(np.maximum(emitter.reach**2 - offset**2, 0.0))[..., None]
    u = half * _midpoints(PLACE)
    b = offset[..., None]
    r = emitter.radial_nodes(64)[1:]
    density = np.interp(np.hypot(b, u), r, emitter.arc_density(r) / r)
    whole = density.sum(-1, keepdims=True)
    # A chord that misses every node's die carries next to nothing; spread it evenly.
    share = np.where(whole > 0, density / np.where(whole > 0, whole, 1.0), 1.0 / PLACE)
    sine = np.minimum(np.sqrt(b**2 + (u * cosine[..., None]) ** 2) / emitter.dome.radius, 1.0)
    return share, unpolarised(emitter.index, 1.0, sine)
