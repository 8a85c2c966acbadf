"""From the exit rays to the landing: the port, the plane or the far field, and the flux inside angles.

The landing coordinate is q = tan²θ, θ being the angle in the outer medium (far field) or
atan(r/distance) on the plane.  Squares keep the derivative finite on the axis.
"""

from dataclasses import dataclass

import jax
import jax.numpy as jnp
import numpy as np

from inverse.emitter import Emitter
from inverse.profile.envelope import Envelope
from inverse.profile.lens import Lens, shape as shape_of
from inverse.target import Surroundings, Target
from inverse.trace import interface, intersect, route
from inverse.trace.launch import Launcher, bracketed_root, launcher


@dataclass(frozen=True)
class Scene:
    """Everything a trace needs besides the lens."""

    launcher: Launcher
    box: Envelope
    glass: route.Glass
    surroundings: Surroundings
    target: Target

    @property
    def emitter(self):
        return self.launcher.emitter


def scene(emitter: Emitter, box: Envelope, index, absorption, surroundings: Surroundings, target: Target):
    return Scene(launcher(emitter), box, route.Glass(float(index), float(absorption)), surroundings, target)


def points(count, seed):
    """Scrambled Sobol points (count, 3) in [0, 1); ``count`` a power of two."""
    from scipy.stats import qmc

    return qmc.Sobol(3, scramble=True, seed=np.random.default_rng(seed)).random(count)


def shifted(u, shift):
    """A random shift of one point set, wrapped to [0, 1) (Cranley & Patterson, 1976)."""
    v = u + shift
    return v - jnp.floor(v)


def trace(lens: Lens, scene: Scene, u, blur):
    """All designed paths. Returns (beams, lost): beams with weights as fractions of the emitted flux.

    ``u`` (N, 3) uniform numbers; every part of the pocket uses all of them.  ``lost`` maps a
    name to a fraction of the emitted flux; beams and lost sum to the launched flux.
    """
    source, box, glass = scene.launcher, scene.box, scene.glass
    shape = shape_of(lens, box)
    rho, phi = source.radius(u[:, 0]), np.pi * u[:, 1]
    corner = source.split(rho, phi, lens.corner[0], lens.corner[1])
    floor = jnp.full_like(rho, np.pi / 2)
    if box.foot > 0.0:
        floor = source.split(rho, phi, shape.mouth_radius, jnp.asarray(box.foot))

    def over_rim(theta):
        p, d, _ = source.ray(rho, phi, theta)
        return route.height_at_rim(p, d, shape, glass) - shape.rim_height

    nudge = 1e-7  # rad; keeps both ends of the bracket on the wall's side of the corner
    over = bracketed_root(over_rim, corner + nudge, floor - nudge)
    split = [jnp.zeros_like(rho), *map(source.cumulative, (corner, over, floor))]
    beams, lost, count = [], {}, u.shape[0]
    for follow, low, high in zip((route.centre, route.direct, route.flank), split[:-1], split[1:]):
        share = high - low
        theta = source.angle(low + u[:, 2] * share)
        p, d, weight = source.ray(rho, phi, theta)
        weight = weight * share / count
        for beam in follow(p, d, weight, shape, glass, blur):
            beams.append(beam)
            for name, value in beam.lost.items():
                lost[name] = lost.get(name, 0.0) + jnp.sum(value)
    lost["under the foot"] = jnp.sum(1.0 - split[-1]) / count
    return beams, lost


def land(beam, scene: Scene, top):
    """Landing coordinate q = tan²θ (N,) and transmittance of the port of one exit beam."""
    p, d = beam.point, beam.direction
    outer, port = scene.surroundings.index, scene.surroundings.port
    passed = 1.0
    climbs = d[2] > 1e-3
    d = (d[0], d[1], jnp.where(climbs, d[2], 1e-3))
    sine2 = d[0] * d[0] + d[1] * d[1]
    cosine = lambda n: jnp.sqrt(jnp.maximum(1.0 - sine2 / n**2, 1e-12))
    if port is not None:
        inside = cosine(port.index)
        passed = 1.0 - interface.reflectance(d[2], 1.0, port.index)
        passed = passed * (1.0 - interface.reflectance(inside, port.index, outer))
    if scene.target.distance is None:
        q = sine2 / (outer**2 * cosine(outer) ** 2) if outer != 1.0 else sine2 / d[2] ** 2
    else:
        left = scene.target.distance
        if port is None:
            run = (left - p[2]) / d[2]
        else:  # lengths along the in-plane direction, per unit sine in air
            gap = top + port.gap
            run = (gap - p[2]) / d[2] + port.thickness / (port.index * inside)
            run = run + (left - gap - port.thickness) / (outer * cosine(outer))
        x, y = p[0] + run * d[0], p[1] + run * d[1]
        q = (x * x + y * y) / left**2
    return q, beam.weight * passed * climbs, beam.weight * (1.0 - passed * climbs)


def highest(lens: Lens, box: Envelope):
    """Largest z of the exit face, mm (from samples; exact at the axis, the rim and the step)."""
    s = shape_of(lens, box)
    top = jnp.max(s.exit.sample(65)[1])
    return top if s.disc is None else jnp.maximum(top, jnp.max(s.disc.sample(65)[1]))


def flux_inside(lens: Lens, scene: Scene, u, angles, softness, blur):
    """Share inside each half-angle (rad) with an edge of relative width ``softness`` in tan²θ.

    Returns (shares (k,), facts): facts holds the total, the losses and the largest residual.
    """
    beams, lost = trace(lens, scene, u, blur)
    top = jax.lax.stop_gradient(highest(lens, scene.box))
    edge = jnp.tan(jnp.asarray(angles)) ** 2
    shares, total, turned = jnp.zeros_like(edge), 0.0, 0.0
    for beam in beams:
        q, weight, back = land(beam, scene, top)
        inside = jax.nn.sigmoid((1.0 - q[:, None] / edge[None, :]) / softness)
        shares = shares + weight @ inside
        total, turned = total + jnp.sum(weight), turned + jnp.sum(back)
    lost["reflected by the port"] = turned
    residual = jnp.max(jnp.stack([jnp.max(b.residual * (b.weight > 1e-9)) for b in beams]))
    return shares, {"forward": total, "lost": lost, "residual": residual}
