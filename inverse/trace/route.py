"""The designed paths through the lens, each as one differentiable function.

    centre   pocket → centre lens → exit face
    flank    pocket wall → flank (total reflection) → exit face
    direct   pocket wall → exit face, passing over the rim's lower edge

A ray enters with weight 1 and loses what Fresnel reflection, bulk absorption, a flank beyond
total reflection and the edges of the surfaces take; every loss is booked under its name, so
weights and losses add up to what entered.  Edges behind the pocket (end of the exit face, step,
pocket corner seen from inside) have the soft width ``blur`` (mm), annealed by the refinement.
"""

from typing import NamedTuple

import jax
import jax.numpy as jnp

from inverse.trace import interface, intersect
from inverse.trace.interface import Ray
from inverse.trace.stage import stage


class Beam(NamedTuple):
    """Rays as they leave the exit face, with what was lost on the way, all (N,)."""

    ray: Ray
    weight: jax.Array
    lost: dict  # name -> (N,) weight
    residual: jax.Array  # mm, largest of the intersections
    launched: jax.Array | None = None  # () flux sent out, set by ``farfield.trace``


class Glass(NamedTuple):
    index: float
    absorption: float  # per mm


def into_wall(ray, shape, glass):
    """Pocket wall: ray inside, transmittance, residual."""
    guess = intersect.to_cylinder(ray, 0.5 * (shape.mouth_radius + shape.wall.coefficients[-1]))
    there, m, _, residual = intersect.with_radius(ray, shape.wall, guess, steps=4)
    inside, passed = interface.refract(there, m, 1.0, glass.index)
    return inside, passed, residual


def height_at_rim(ray, shape, glass):
    """z at which a ray that enters by the pocket wall reaches the rim's radius; above the rim it is direct."""
    inside, _, _ = into_wall(ray, shape, glass)
    return inside.z + intersect.to_cylinder(inside, shape.rim_radius) * inside.dz


@stage
def _soft(x, blur):
    """0 below −2 blur, 1 above 2 blur, a cubic in between."""
    w = jnp.clip(0.5 + x * (0.25 / blur), 0.0, 1.0)
    return w * w * (3.0 - 2.0 * w)


def _upward(ray):
    """Whether a ray climbs, and a ray that is safe to divide by."""
    ok = ray.dz > 1e-3
    return ok, ray._replace(dz=jnp.where(ok, ray.dz, 1e-3))


@stage
def leave(ray, weight, shape, glass, blur):
    """From inside the body out through the exit face, or through ring and disc: one Beam for all."""
    climbs, ray = _upward(ray)
    soft = lambda x: _soft(x, blur)
    step = lambda graph: intersect.with_height(ray, graph, (graph.at(ray.r)[0] - ray.z) / ray.dz)
    hits = [step(shape.exit)]
    outer = soft(shape.exit.end - hits[0][0].r) * climbs
    windows = [outer]
    if shape.disc is not None:
        hits.append(step(shape.disc))
        on_ring = soft(hits[0][0].r - shape.exit.start)
        on_disc = soft(shape.disc.end - hits[1][0].r)
        ring_low = shape.exit.coefficients[0] < shape.disc.coefficients[-1]
        windows = [
            on_ring * jnp.where(ring_low, 1.0, 1.0 - on_disc) * outer,
            on_disc * jnp.where(ring_low, 1.0 - on_ring, 1.0) * climbs,
        ]
    beams = []
    for part, ((there, m, length, residual), window) in enumerate(zip(hits, windows)):
        path = jnp.exp(-glass.absorption * length) if glass.absorption else 1.0
        out, passed = interface.refract(there, m, glass.index, 1.0)
        clear = jnp.ones_like(window)
        if shape.disc is not None:  # the lower face may shine into the side of the step
            other = shape.exit.coefficients[0] if part else shape.disc.coefficients[-1]
            edge = intersect.radius_at(_upward(out)[1], other)
            if part:
                clear = jnp.where(ring_low, 1.0, soft(shape.exit.start - edge))
            else:
                clear = jnp.where(ring_low, soft(edge - shape.disc.end), 1.0)
        entered = weight * window
        lost = {
            "absorbed in the material": entered * (1.0 - path),
            "exit reflection": entered * path * (1.0 - passed),
            "into the step": entered * path * passed * (1.0 - clear),
        }
        beams.append(Beam(out, entered * path * passed * clear, lost, residual))
    beams[0].lost["past the exit face"] = weight * (1.0 - sum(windows))
    if len(beams) == 1:
        return beams[0]
    join = lambda *parts: jnp.concatenate(parts)
    whole = jax.tree_util.tree_map(join, *(b._replace(lost={}) for b in beams))
    return whole._replace(lost={**beams[1].lost, **{k: v + beams[1].lost.get(k, 0.0) for k, v in beams[0].lost.items()}})


@stage
def centre(ray, weight, shape, glass):
    """Through the centre lens: ray inside, weight, losses, residual."""
    with jax.named_scope("centre"):
        graph = shape.centre
        there, m, _, residual = intersect.with_height(ray, graph, (graph.at(ray.r)[0] - ray.z) / ray.dz)
        inside, passed = interface.refract(there, m, 1.0, glass.index)
        return inside, weight * passed, {"entry reflection": weight * (1.0 - passed)}, residual


@stage
def wall(ray, weight, shape, glass):
    """Through the pocket wall: ray inside, weight, losses, residual."""
    with jax.named_scope("wall"):
        inside, passed, residual = into_wall(ray, shape, glass)
        return inside, weight * passed, {"entry reflection": weight * (1.0 - passed)}, residual


@stage
def flank(ray, weight, shape, glass, blur):
    """Off the flank: ray, weight, losses, residual."""
    with jax.named_scope("flank"):
        far = jax.lax.stop_gradient(intersect.to_cylinder(ray, shape.rim_radius))
        guess = _bisect_flank(ray, shape.flank, far)
        there, m, length, residual = intersect.with_radius(ray, shape.flank, guess)
        out, c = interface.reflect(there, m)
        kept = 1.0 - interface.transmittance(c, glass.index, 1.0)
        path = jnp.exp(-glass.absorption * length) if glass.absorption else 1.0
        corner_r, corner_z = shape.centre.end, shape.wall.end
        past = _soft(intersect.radius_at(_upward(out)[1], corner_z) - corner_r, blur)
        past = jnp.where(out.z < corner_z, past, 1.0)
        # a curved wall can send rays over the rim from between two that meet the flank
        below = _soft(shape.rim_height - out.z, blur)
        weight, over = weight * below, weight * (1.0 - below)
        lost = {
            "absorbed in the material": weight * (1.0 - path),
            "flank leak": weight * path * (1.0 - kept),
            "over the rim": over,
            "back into the pocket": weight * path * kept * (1.0 - past),
        }
        return out, weight * path * kept * past, lost, residual


def _bisect_flank(ray, graph, far):
    """A first bracket for the flank: three halvings between the wall and the rim's cylinder."""
    ray, graph = jax.tree_util.tree_map(jax.lax.stop_gradient, (ray, graph))

    def halve(_, ends):
        lo, hi = ends
        t = 0.5 * (lo + hi)
        x, y = ray.r + t * ray.dr, t * ray.dt
        h, _ = graph.at(ray.z + t * ray.dz)
        inside = x * x + y * y < h * h
        return jnp.where(inside, t, lo), jnp.where(inside, hi, t)

    lo, hi = jax.lax.fori_loop(0, 3, halve, (jnp.zeros_like(far), far))
    return 0.5 * (lo + hi)
