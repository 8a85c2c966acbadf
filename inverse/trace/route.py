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


class Beam(NamedTuple):
    """Rays as they leave the exit face, with what was lost on the way, all (N,)."""

    point: tuple
    direction: tuple
    weight: jax.Array
    lost: dict  # name -> (N,) weight
    residual: jax.Array  # mm, largest of the intersections
    launched: jax.Array | None = None  # () flux sent out, set by ``farfield.trace``


class Glass(NamedTuple):
    index: float
    absorption: float  # per mm


def _distance(a, b):
    return jnp.sqrt((a[0] - b[0]) ** 2 + (a[1] - b[1]) ** 2 + (a[2] - b[2]) ** 2 + intersect.TINY)


def _radius_at(p, d, z):
    t = (z - p[2]) / d[2]
    return intersect.radius((p[0] + t * d[0], p[1] + t * d[1]))


def into_wall(p, d, shape, glass):
    """Pocket wall: point, direction inside, transmittance, residual."""
    guess = intersect.to_cylinder(p, d, 0.5 * (shape.mouth_radius + shape.wall.coefficients[-1]))
    q, m, residual = intersect.with_radius(p, d, shape.wall, guess, steps=4)
    inside, passed = interface.refract(d, m, 1.0, glass.index)
    return q, inside, passed, residual


def height_at_rim(p, d, shape, glass):
    """z at which a ray that enters by the pocket wall reaches the rim's radius; above the rim it is direct."""
    q, inside, _, _ = into_wall(p, d, shape, glass)
    return q[2] + intersect.to_cylinder(q, inside, shape.rim_radius) * inside[2]


def _soft(x, blur):
    """0 below −2 blur, 1 above 2 blur, a cubic in between."""
    w = jnp.clip(0.5 + 0.25 * x / blur, 0.0, 1.0)
    return w * w * (3.0 - 2.0 * w)


def _upward(d):
    """Whether a ray climbs, and a direction that is safe to divide by."""
    ok = d[2] > 1e-3
    return ok, (d[0], d[1], jnp.where(ok, d[2], 1e-3))


def leave(p, d, weight, shape, glass, blur):
    """From inside the body at ``p`` out through the exit face, or through ring and disc: one Beam for all."""
    climbs, d = _upward(d)
    soft = lambda x: _soft(x, blur)
    step = lambda graph: intersect.with_height(p, d, graph, (graph.at(intersect.radius(p))[0] - p[2]) / d[2])
    hits = [step(shape.exit)]
    outer = soft(shape.exit.end - intersect.radius(hits[0][0])) * climbs
    windows = [outer]
    if shape.disc is not None:
        hits.append(step(shape.disc))
        on_ring = soft(intersect.radius(hits[0][0]) - shape.exit.start)
        on_disc = soft(shape.disc.end - intersect.radius(hits[1][0]))
        ring_low = shape.exit.coefficients[0] < shape.disc.coefficients[-1]
        windows = [
            on_ring * jnp.where(ring_low, 1.0, 1.0 - on_disc) * outer,
            on_disc * jnp.where(ring_low, 1.0 - on_ring, 1.0) * climbs,
        ]
    beams = []
    for part, ((q, m, residual), window) in enumerate(zip(hits, windows)):
        path = jnp.exp(-glass.absorption * _distance(p, q)) if glass.absorption else 1.0
        out, passed = interface.refract(d, m, glass.index, 1.0)
        clear = jnp.ones_like(window)
        if shape.disc is not None:  # the lower face may shine into the side of the step
            other = shape.exit.coefficients[0] if part else shape.disc.coefficients[-1]
            edge = _radius_at(q, _upward(out)[1], other)
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
        beams.append(Beam(q, out, entered * path * passed * clear, lost, residual))
    beams[0].lost["past the exit face"] = weight * (1.0 - sum(windows))
    if len(beams) == 1:
        return beams[0]
    join = lambda *parts: jnp.concatenate(parts)
    whole = jax.tree_util.tree_map(join, *(b._replace(lost={}) for b in beams))
    return whole._replace(lost={**beams[1].lost, **{k: v + beams[1].lost.get(k, 0.0) for k, v in beams[0].lost.items()}})


def centre(p, d, weight, shape, glass):
    """Through the centre lens: point, direction inside, weight, losses, residual."""
    with jax.named_scope("centre"):
        graph = shape.centre
        guess = (graph.at(intersect.radius(p))[0] - p[2]) / d[2]
        q, m, residual = intersect.with_height(p, d, graph, guess)
        inside, passed = interface.refract(d, m, 1.0, glass.index)
        return q, inside, weight * passed, {"entry reflection": weight * (1.0 - passed)}, residual


def wall(p, d, weight, shape, glass):
    """Through the pocket wall: point, direction inside, weight, losses, residual."""
    with jax.named_scope("wall"):
        q, inside, passed, residual = into_wall(p, d, shape, glass)
        return q, inside, weight * passed, {"entry reflection": weight * (1.0 - passed)}, residual


def flank(q, inside, weight, shape, glass, blur):
    """Off the flank: point, direction, weight, losses, residual."""
    with jax.named_scope("flank"):
        far = jax.lax.stop_gradient(intersect.to_cylinder(q, inside, shape.rim_radius))
        guess = _bisect_flank(q, inside, shape.flank, far)
        f, m, residual = intersect.with_radius(q, inside, shape.flank, guess)
        out, c = interface.reflect(inside, m)
        kept = interface.reflectance(c, glass.index, 1.0)
        path = jnp.exp(-glass.absorption * _distance(q, f)) if glass.absorption else 1.0
        corner_r, corner_z = shape.centre.end, shape.wall.end
        _, safe = _upward(out)
        past = _soft(_radius_at(f, safe, corner_z) - corner_r, blur)
        past = jnp.where(f[2] < corner_z, past, 1.0)
        # a curved wall can send rays over the rim from between two that meet the flank
        below = _soft(shape.rim_height - f[2], blur)
        weight, over = weight * below, weight * (1.0 - below)
        lost = {
            "absorbed in the material": weight * (1.0 - path),
            "flank leak": weight * path * (1.0 - kept),
            "over the rim": over,
            "back into the pocket": weight * path * kept * (1.0 - past),
        }
        return f, out, weight * path * kept * past, lost, residual


def _bisect_flank(p, d, graph, far):
    """A first bracket for the flank: three halvings between the wall and the rim's cylinder."""
    p, d, graph = jax.tree_util.tree_map(jax.lax.stop_gradient, (p, d, graph))

    def halve(_, ends):
        lo, hi = ends
        t = 0.5 * (lo + hi)
        x, y, z = (a + t * b for a, b in zip(p, d))
        h, _ = graph.at(z)
        inside = x * x + y * y < h * h
        return jnp.where(inside, t, lo), jnp.where(inside, hi, t)

    lo, hi = jax.lax.fori_loop(0, 3, halve, (jnp.zeros_like(far), far))
    return 0.5 * (lo + hi)
