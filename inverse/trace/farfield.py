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
from inverse.trace import interface, route
from inverse.trace.launch import Launcher, bracketed_root, launcher

LIT = 1e-12  # a ray with less weight than this cannot be seen in any figure


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
    v = u + shift[None, :]
    return v - jnp.floor(v)


def trace(lens: Lens, scene: Scene, u, blur):
    """All designed paths. Returns (beam, lost, residual); weights are fractions of the emitted flux.

    ``u`` (N, 3) uniform numbers.  ``lost`` maps a name to a fraction of the emitted flux; beam
    and lost sum to the launched flux.  ``beam.launched`` is 1 for a bare emitter and
    within sampling noise of 1 under a dome; ``residual`` is the worst intersection (mm) of a lit ray.
    """
    source, box, glass = scene.launcher, scene.box, scene.glass
    shape = shape_of(lens, box)
    rho, azimuth = source.radius(u[:, 0]), np.pi * u[:, 1]
    turn = (jnp.cos(azimuth), jnp.sin(azimuth))
    corner = source.split(rho, turn, lens.corner[0], lens.corner[1])
    floor = jnp.zeros_like(rho)
    if box.foot > 0.0:
        floor = source.split(rho, turn, shape.mouth_radius, jnp.asarray(box.foot))

    def over_rim(c):
        return route.height_at_rim(source.ray(rho, turn, c)[0], shape, glass) - shape.rim_height

    nudge = 1e-7  # keeps both ends of the bracket on the wall's side of the corner
    over = bracketed_root(over_rim, floor + nudge, corner - nudge)
    at_corner, at_rim, at_floor = map(source.cumulative, (corner, over, floor))
    count, few = u.shape[0], max(u.shape[0] // 4, 1)  # the direct part is small: a quarter of the points do

    def rays(low, high, some):
        share = high - low
        c = source.cosine(low[:some] + u[:some, 2] * share[:some])
        ray, weight = source.ray(rho[:some], tuple(t[:some] for t in turn), c)
        part = share[:some] / some
        if some < count:  # a ratio estimate, so that the part carries the flux all points say it has
            seen = jnp.sum(part)
            part = part * jnp.where(seen > 0.0, jnp.sum(share) / count / jnp.where(seen > 0.0, seen, 1.0), 0.0)
        return ray, weight * part

    lost = {"under the foot": jnp.sum(1.0 - at_floor) / count}
    residual = []

    def follow(road, ray, weight, *rest):
        ray, after, losses, miss = road(ray, weight, shape, glass, *rest)
        for name, value in losses.items():
            lost[name] = lost.get(name, 0.0) + jnp.sum(value)
        residual.append(jnp.max(jnp.where(weight > LIT, miss, 0.0)))
        return ray, after

    starts = rays(jnp.zeros_like(rho), at_corner, count), rays(at_corner, at_rim, few), rays(at_rim, at_floor, count)
    launched = sum(jnp.sum(weight) for _, weight in starts) + lost["under the foot"]
    centre = follow(route.centre, *starts[0])
    direct = follow(route.wall, *starts[1])
    turned = follow(route.flank, *follow(route.wall, *starts[2]), blur)
    beam = route.leave(*_join(centre, direct, turned), shape, glass, blur)
    for name, value in beam.lost.items():
        lost[name] = lost.get(name, 0.0) + jnp.sum(value)
    residual.append(jnp.max(jnp.where(beam.weight > LIT, beam.residual, 0.0)))
    return beam._replace(launched=launched), lost, jnp.max(jnp.stack(residual))


def _join(*trees):
    return jax.tree_util.tree_map(lambda *a: jnp.concatenate(a), *trees)


def land(beam, scene: Scene, top):
    """Landing coordinate q = tan²θ (N,) and transmittance of the port of one exit beam."""
    outer, port = scene.surroundings.index, scene.surroundings.port
    ray = beam.ray
    climbs = ray.dz > 1e-3
    dz = jnp.where(climbs, ray.dz, 1e-3)
    sine2 = ray.dr * ray.dr + ray.dt * ray.dt
    cosine = lambda n: jnp.sqrt(jnp.maximum(1.0 - sine2 / n**2, 1e-12))
    passed = 1.0
    if port is not None:
        inside = cosine(port.index)
        passed = interface.transmittance(dz, 1.0, port.index)
        passed = passed * interface.transmittance(inside, port.index, outer)
    if scene.target.distance is None:
        q = sine2 / (outer**2 * cosine(outer) ** 2) if outer != 1.0 else sine2 * interface.reciprocal(dz * dz)
    else:
        left = scene.target.distance
        if port is None:
            run = (left - ray.z) * interface.reciprocal(dz)
        else:  # lengths along the in-plane direction, per unit sine in air
            gap = top + port.gap
            run = (gap - ray.z) / dz + port.thickness / (port.index * inside)
            run = run + (left - gap - port.thickness) / (outer * cosine(outer))
        x, y = ray.r + run * ray.dr, run * ray.dt
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
    beam, lost, residual = trace(lens, scene, u, blur)
    edge = jnp.tan(jnp.asarray(angles)) ** 2
    q, weight, turned = land(beam, scene, highest(lens, scene.box))
    shares = weight @ jax.nn.sigmoid((1.0 - q[:, None] * (1.0 / edge)[None, :]) * (1.0 / softness))
    lost["reflected by the port"] = jnp.sum(turned)
    return shares, {"forward": jnp.sum(weight), "lost": lost, "launched": beam.launched, "residual": residual}
