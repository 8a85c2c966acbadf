"""What no lens can beat: the largest share, the smallest lens, the narrowest beam, the brightest axis.

The ceiling on the share of the emitted flux inside the target is the lower of two bounds,

    skewness     what fits into the target's étendue, skewness by skewness, brightest light first
                 (`inverse.limit.skewness`); never above the étendue ratio when the emitter is Lambertian
    brightness   what the emitter's radiance allows at every angle of a wanted shape
                 (`inverse.limit.brightness`)

A shaped target must also fit in all its inner cones: with the cumulative c(θ) of the wanted shape,
share · c(θ) ≤ the largest share inside θ.

Both hold for any lens that is a body of revolution and shines from a clear aperture of the given radius
(conditions in `inverse.limit.etendue`).  Losses come on top: ``ceiling_with_losses`` counts uncoated faces
passed straight on; light returning after two reflections can add a few parts in a thousand to a real lens.

Where a question asks for "nearly all" the light, `NEARLY_ALL` of what the faces let through is meant:
the last per cent of a square die's light takes far more room than its étendue.
"""

import math
from dataclasses import dataclass, replace

import numpy as np

from inverse.limit import brightness, etendue, skewness, transmission
from inverse.outcome import BeyondLimit
from inverse.target import Target
from inverse.units import deg

NARROW = math.radians(20.0)  # where returning light misses the target (measured on finished lenses)
NEARLY_ALL = 0.99  # convention of this package
HALVINGS = 24  # of a logarithmic interval of six decades: the answer is good to 1e-6 of itself
CONES = 16  # inner cones at which a shaped target is checked


@dataclass(frozen=True)
class Bound:
    """Ceilings are fractions of the emitted flux; all but the last two say nothing of surface losses."""

    ceiling: float  # largest possible share
    etendue_ratio: float  # target étendue / source étendue, may exceed 1
    skewness_ceiling: float
    brightness_ceiling: float
    source_etendue: float  # mm² sr
    target_etendue: float  # mm² sr
    transmission: float  # (1 − R0)² of the lens, times the faces of a port
    ceiling_with_losses: float  # ceiling · transmission
    largest_candela: float  # cd, on the axis in the outer medium, after these losses


def _capacity(source, radius, height, target, surroundings, half_angle):
    """Target étendue (k,) in mm sr at each skewness of ``source`` for the cone or spot of this half-angle."""
    if target.distance is None:
        cone = float(etendue.reach_of_cone(half_angle, surroundings))
        return skewness.disk_density(source.skewness, radius, cone)
    path = etendue.layers(target, surroundings, height)
    return skewness.pair_density(source.skewness, radius, _spot(target, half_angle), path)


def _spot(target, half_angle):
    return target.distance * math.tan(min(half_angle, 1.57))  # mm; 90° would be an infinite plane


def _target_etendue(radius, height, target, surroundings):
    if target.distance is None:
        return float(etendue.of_aperture(radius, etendue.reach_of_cone(target.half_angle, surroundings)))
    path = etendue.layers(target, surroundings, height)
    return etendue.of_pair(radius, _spot(target, target.half_angle), path)


def _ceilings(source, radius, height, target, surroundings):
    """(by skewness, by brightness)."""
    geometry = (radius, height, target, surroundings)
    if target.kind == "spot":
        by_skewness = source.share(_capacity(source, *geometry, target.half_angle))
        return by_skewness, min(1.0, source.brightest * _target_etendue(*geometry))
    cones = target.half_angle * np.arange(1, CONES + 1) / CONES
    wanted = target.cumulative(cones)
    found = np.array([source.share(_capacity(source, *geometry, cone)) for cone in cones])
    by_skewness = np.min(found[wanted > 0] / wanted[wanted > 0])
    return float(min(by_skewness, 1.0)), brightness.shape_share(source.brightest, *geometry)


def _check(radius, height):
    for name, value in (("radius", radius), ("height", height)):
        if not (math.isfinite(value) and value >= 0 and (value > 0 or name == "height")):
            raise ValueError(f"{name} of the lens must be a positive length in mm, got {value}")


def bound(emitter, radius, height, target, surroundings, index):
    """The `Bound` on a lens of this clear exit ``radius`` and ``height`` (mm) and refractive ``index``.

    ``height`` matters at a finite distance only.  Raises ValueError for a lens without size or a target
    plane inside the lens or the port.
    """
    _check(radius, height)
    source = skewness.lay_out(emitter)
    geometry = (radius, height, target, surroundings)
    by_skewness, by_brightness = _ceilings(source, *geometry)
    ceiling = min(by_skewness, by_brightness)
    passed = transmission.faces(index, surroundings)
    source_etendue = etendue.of_emitter(emitter)
    target_etendue = _target_etendue(*geometry)
    return Bound(
        ceiling=ceiling,
        etendue_ratio=target_etendue / source_etendue,
        skewness_ceiling=by_skewness,
        brightness_ceiling=by_brightness,
        source_etendue=source_etendue,
        target_etendue=target_etendue,
        transmission=passed,
        ceiling_with_losses=ceiling * passed,
        largest_candela=emitter.flux * passed * _axial(source, *geometry),
    )


def _axial(source, radius, height, target, surroundings):
    """Largest intensity on the axis per emitted flux, 1/sr.

    A law that leaves light at 90° has infinite radiance there, of no étendue; the largest mean over a tenth
    of the target's half-angle stands in for the peak.
    """
    if math.isfinite(source.brightest):
        return brightness.axial(source.brightest, radius, height, target, surroundings)
    inner = target.half_angle / 10
    share = source.share(_capacity(source, radius, height, target, surroundings, inner))
    return share / (2 * math.pi * (1 - math.cos(inner)))


def ceiling_at(emitter, radius, height, target, surroundings, thetas):
    """Largest share inside each half-angle ``thetas`` (k,) rad, without losses, shape (k,).

    Each entry is a spot of its own: one lens need not reach them all at once.  ``target`` gives the distance.
    """
    _check(radius, height)
    source = skewness.lay_out(emitter)
    cones = np.atleast_1d(np.asarray(thetas, float))
    geometry = (radius, height, target, surroundings)
    found = [source.share(_capacity(source, *geometry, cone)) if cone > 0 else 0.0 for cone in cones]
    return np.array(found, float)


def _wanted(share, index, surroundings):
    """The share before losses that leaves ``share`` after them; None stands for `NEARLY_ALL`."""
    passed = transmission.faces(index, surroundings)
    if share is None:
        return NEARLY_ALL
    if share > passed:
        raise BeyondLimit(
            f"share {share:.4g} asked, but uncoated faces of index {index:.4g} pass {passed:.4g} at most. "
            f"Ask for {passed:.3f} or less."
        )
    return share / passed


def _least(reaches, low, high):
    """The least value in [low, high] for which ``reaches`` holds, to `HALVINGS`; None if none does."""
    if not reaches(high):
        return None
    low, high = math.log(low), math.log(high)
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        low, high = (low, middle) if reaches(math.exp(middle)) else (middle, high)
    return math.exp(high)


def smallest_radius(emitter, target, surroundings, index, share=None, *, height=0.0):
    """Least clear radius (mm) of a lens that can bring ``share`` (losses counted) into the target.

    ``share`` None means nearly all that the faces let through.  ``height`` (mm) matters at a finite distance.
    Raises BeyondLimit when no radius is enough.
    """
    wanted = _wanted(share, index, surroundings)
    source = skewness.lay_out(emitter)

    def reaches(radius):
        return min(_ceilings(source, radius, height, target, surroundings)) >= wanted

    # Étendue alone sets the scale: emitter and cone give a radius that all the light needs at least.
    cone = float(etendue.reach_of_cone(target.half_angle, surroundings))
    scale = emitter.index * emitter.reach / cone
    found = _least(reaches, 1e-3 * scale, 1e3 * scale)
    if found is None:
        most = min(_ceilings(source, 1e3 * scale, height, target, surroundings))
        raise BeyondLimit(
            f"no lens of any size brings the share {wanted:.4g} (before losses) into this target: "
            f"at most {most:.4g}. Widen the target."
        )
    return found


def narrowest_half_angle(emitter, radius, surroundings, index, share=None):
    """Least half-angle (rad, outer medium, far field) that can hold ``share`` (losses counted).

    ``share`` None means nearly all that the faces let through.  Raises BeyondLimit when even the
    whole half space is not enough.
    """
    _check(radius, 0.0)
    wanted = _wanted(share, index, surroundings)
    source = skewness.lay_out(emitter)
    spot = Target("spot", math.pi / 2)

    def reaches(half_angle):
        return source.share(_capacity(source, radius, 0.0, spot, surroundings, half_angle)) >= wanted

    found = _least(reaches, 1e-6, math.pi / 2)
    if found is None:
        raise BeyondLimit(
            f"an aperture of radius {radius:g} mm passes the share {wanted:.4g} (before losses) at no angle. "
            "Use a larger lens."
        )
    return found


def refuse_impossible(emitter, radius, height, target, surroundings, index):
    """The `Bound`, if the share that ``target`` asks for is possible; otherwise BeyondLimit.

    The message names the nearest possible beams: a smaller share, a larger lens, a wider target.
    """
    found = bound(emitter, radius, height, target, surroundings, index)
    if target.share is None or target.share <= _reachable(found, target, surroundings, index):
        return found
    advice = [f"Ask for a share of {found.ceiling_with_losses:.3f} or less"]
    try:
        larger = smallest_radius(emitter, target, surroundings, index, target.share, height=height)
        advice.append(f"or a lens of at least {2 * larger:.4g} mm clear diameter")
        if target.kind == "spot" and target.distance is None:
            wider = narrowest_half_angle(emitter, radius, surroundings, index, target.share)
            advice.append(f"or a half-angle of at least {deg(wider):.3g} deg")
    except BeyondLimit:
        pass  # the share alone is out of reach, whatever the size: the first advice stands
    raise BeyondLimit(
        f"a share of {target.share:.4g} within {deg(target.half_angle):.4g} deg is impossible: "
        f"the largest is {found.ceiling:.4g} before losses, "
        f"{found.ceiling_with_losses:.4g} through uncoated faces. "
        + ", ".join(advice) + "."
    )


def _reachable(found, target, surroundings, index):
    """The share above which a brief is refused.

    Light that a face throws back can leave elsewhere, in wide beams into the target (measured: lenses
    pass the figure of two faces from 25° on); only for narrow beams do the faces bound the share.
    """
    if target.half_angle > NARROW:
        return found.ceiling
    return found.ceiling * transmission.faces_with_returns(index, surroundings)


def nearest_target(emitter, radius, height, target, surroundings, index):
    """``target`` itself when its share is possible, else the nearest one: the narrowest beam that can hold the share.

    Where no beam can (the faces alone lose too much), or for a shaped beam, the target stays and
    the share is left open.
    """
    found = bound(emitter, radius, height, target, surroundings, index)
    if target.share is None or target.share <= _reachable(found, target, surroundings, index):
        return target
    open_share = replace(target, share=None)
    if target.kind == "shape":
        return open_share
    try:
        wider = narrowest_half_angle(emitter, radius, surroundings, index, target.share)
    except BeyondLimit:
        return open_share
    return replace(open_share, half_angle=max(wider, target.half_angle))


def answers(found, emitter, radius, height, target, surroundings, index):
    """The ``limit`` block of result.json: a ``Bound`` and the practical questions, None where nothing is enough."""

    def ask(question):
        try:
            return float(question())
        except BeyondLimit:
            return None

    lens = (emitter, target, surroundings, index, target.share)
    smallest = ask(lambda: 2 * smallest_radius(*lens, height=height))
    narrowest = ask(lambda: deg(narrowest_half_angle(emitter, radius, surroundings, index, target.share)))
    return {
        "ceiling": found.ceiling,
        "ceiling_with_losses": found.ceiling_with_losses,
        "etendue_ratio": found.etendue_ratio,
        "skewness_ceiling": found.skewness_ceiling,
        "brightness_ceiling": found.brightness_ceiling,
        "transmission": found.transmission,
        "smallest_aperture_mm": smallest,
        "narrowest_half_angle_deg": narrowest,
        "largest_candela": found.largest_candela,
        "source_etendue_mm2sr": found.source_etendue,
        "target_etendue_mm2sr": found.target_etendue,
    }
