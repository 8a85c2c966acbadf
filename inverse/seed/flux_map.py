"""A first lens from a point, by mapping flux: the one-dimensional Monge-Ampère problem.

A point of the emitter at (x, 0) sends the flux C(θ); the beam wants the cumulative flux F(φ).
Equal flux gives the map φ(θ) = F⁻¹(C), exact by quadrature (each channel of the lens, centre and
flank, covers the whole beam with its own share).  Given the map, refraction or reflection fixes
the normal N at every point, hence one ordinary differential equation a surface, both linear:

    centre lens    (ln ρ)'(θ) = −(a'·N)/(a·N) ,                N = n b − a ,  point x + ρ a
    flank          t'(θ) = −[W'·N + t (a'·N)]/(a·N) ,          N = a − b ,    point W + t a

with a the incoming and b the outgoing unit direction (in the body on the outgoing side, and on
both sides of the flank); W(θ) is where the ray enters by the pocket wall.

*Edge rays.*  ``edge`` = e in [−1, 1] tailors both surfaces to the point x = −e ρ of the emitter
instead of its centre, and sends its rays to the edge −e θ_t of the beam instead of the axis:
e = 1 is the far edge of the emitter seen from the flank, at the beam's edge towards the axis
(the edge-ray principle: Ries and Rabl, J. Opt. Soc. Am. A 11, 2627, 1994, from memory).
"""

from dataclasses import dataclass

import numpy as np

from inverse.emitter import Emitter
from inverse.profile import bspline
from inverse.profile.envelope import Envelope
from inverse.profile.lens import RIM_MARGIN, Lens
from inverse.target import Target

STEPS = 240  # Runge-Kutta steps a surface; the closed form for a collimated beam is met to 1e-8 mm
NUDGE = 1e-5  # rad; central difference of directions, error ~ NUDGE² relative


@dataclass(frozen=True)
class Recipe:
    """One member of the seed families."""

    pocket: float  # wall radius at z = 0 over its least possible one
    foot: float  # foot width over the least one
    edge: float = 0.0  # e above
    crossing: bool = False  # whether the flank's outermost rays go to the beam's far side
    drop: float = 0.0  # stepped exit: height of the ring below the disc, mm; 0 = single face

    @property
    def words(self):
        kind = "point seed" if self.edge == 0 else f"edge-ray seed {self.edge:+.2f}"
        face = "" if self.drop == 0 else f", disc {'above' if self.drop > 0 else 'below'} the ring"
        return f"{kind}, pocket ×{self.pocket:.2f}, foot ×{self.foot:.1f}{', crossing' if self.crossing else ''}{face}"


SPANS = {"wall": 2, "centre": 16, "flank": 24, "exit": 20, "disc": 12}


def _direction(angle):
    return np.stack([np.sin(angle), np.cos(angle)], axis=-1)


def _dot(a, b):
    return a[..., 0] * b[..., 0] + a[..., 1] * b[..., 1]


def _refract(d, m, n1, n2):
    """Refracted directions (k, 2) at the normal ``m`` (2,) that points to the far side."""
    mu, c = n1 / n2, _dot(d, m)
    return mu * d + (np.sqrt(np.maximum(1 - mu * mu * (1 - c * c), 0.0)) - mu * c)[..., None] * m


def behind_wall(theta, source, radius, tan_draft, index):
    """Meridional rays from (source, 0) at θ (k,): wall points W and unit directions inside, (k, 2).

    ``radius`` is that of the wall at z = 0; it shrinks by ``tan_draft`` per mm of height.
    """
    d = _direction(theta)
    t = (radius - source) / (d[..., 0] + tan_draft * d[..., 1])
    normal = np.array([1.0, tan_draft]) / np.hypot(1.0, tan_draft)
    return np.array([source, 0.0]) + t[..., None] * d, _refract(d, normal, 1.0, index)


def _linear(p, q, x0, step, y):
    """Solve y' = p + q y by Runge-Kutta; ``p``, ``q`` at x0, x0 + step/2, … (2 count + 1,)."""
    out = [y]
    for i in range(0, len(p) - 2, 2):
        k1 = p[i] + q[i] * y
        k2 = p[i + 1] + q[i + 1] * (y + step / 2 * k1)
        k3 = p[i + 1] + q[i + 1] * (y + step / 2 * k2)
        k4 = p[i + 2] + q[i + 2] * (y + step * k3)
        y = y + step / 6 * (k1 + 2 * k2 + 2 * k3 + k4)
        out.append(y)
    return np.array(out)


def flank_points(start, theta0, theta1, source, radius, tan_draft, index, out_angle):
    """Points (STEPS + 1, 2) of the flank from path ``start`` on the ray at ``theta0`` to that at ``theta1``, and θ.

    ``out_angle(θ)`` is the wanted angle from the axis inside the body, rad, positive outwards.
    """
    theta = np.linspace(theta0, theta1, 2 * STEPS + 1)
    w, a = behind_wall(theta, source, radius, tan_draft, index)
    (w1, a1), (w0, a0) = (behind_wall(theta + s * NUDGE, source, radius, tan_draft, index) for s in (1, -1))
    normal = a - _direction(out_angle(theta))
    along = _dot(a, normal)
    p = -_dot((w1 - w0) / (2 * NUDGE), normal) / along
    q = -_dot((a1 - a0) / (2 * NUDGE), normal) / along
    t = _linear(p, q, theta0, (theta1 - theta0) / STEPS, start)
    return w[::2] + t[:, None] * a[::2], theta[::2]


def centre_points(corner, source, index, out_angle):
    """Points (k, 2) of the centre lens from the pocket corner (r, z) past the axis.

    ``out_angle(θ)`` is the wanted angle inside the body of the ray at θ, rad, positive outwards.
    """
    first = np.arctan2(corner[0] - source, corner[1])
    last = min(0.0, np.arctan2(-source, 0.3 * corner[1]))
    theta = np.linspace(first, last, 2 * STEPS + 1)
    a = _direction(theta)
    normal = index * _direction(out_angle(theta)) - a
    sideways = np.stack([a[:, 1], -a[:, 0]], axis=-1)  # da/dθ
    q = -_dot(sideways, normal) / _dot(a, normal)
    log = _linear(q, np.zeros_like(q), first, (last - first) / STEPS, 0.0)
    reach = np.hypot(corner[0] - source, corner[1]) * np.exp(np.minimum(log, 50.0))  # past that it left every box
    return np.array([source, 0.0]) + reach[:, None] * a[::2]


def _maps(recipe, emitter, target, index, outer, theta_c):
    """Wanted angles inside the body, of θ: for the flank and for the centre lens."""
    inside = lambda angle: np.arcsin(np.clip(outer * np.sin(angle), -0.999, 0.999) / index)
    if target.kind == "spot":
        aim = inside(-recipe.edge * target.half_angle)
        return (lambda theta: np.full_like(theta, aim),) * 2
    grid = np.linspace(0.0, target.half_angle, 2001)
    wanted = target.cumulative(grid)
    beam = lambda flux: np.interp(flux, wanted, grid)
    law = emitter.law.cumulative
    at_corner = law(theta_c)

    def flank(theta):
        flux = np.clip((law(np.minimum(theta, np.pi / 2)) - at_corner) / (1 - at_corner), 0.0, 1.0)
        # the top of the flank (θ near the corner) lights the beam's edge unless the rays cross
        return inside(-beam(flux) if recipe.crossing else beam(1.0 - flux))

    def centre(theta):
        return inside(np.sign(theta) * beam(np.clip(law(np.abs(theta)) / at_corner, 0.0, 1.0)))

    return flank, centre


def build(recipe: Recipe, emitter: Emitter, box: Envelope, index, target: Target, outer=1.0) -> Lens | None:
    """The seed lens of ``recipe`` (``outer``: index of the outer medium), or None when it does not exist in the box."""
    tan_draft = np.tan(box.draft) * (1 + 1e-5)
    radius = (emitter.keep_out + box.clearance) * recipe.pocket
    source = -recipe.edge * emitter.reach
    mouth = radius - box.foot * tan_draft
    foot_width = max(box.wall / np.cos(box.draft) * 1.01, 0.02 * box.radius) * recipe.foot
    rim_radius = box.radius - (0.0 if box.flange else RIM_MARGIN * box.rim * tan_draft)
    if mouth + foot_width > 0.9 * rim_radius:
        return None
    theta_c = np.radians(35.0)
    for _ in range(3 if target.kind == "shape" else 1):  # the map of a shape needs the corner it leads to
        flank_out, centre_out = _maps(recipe, emitter, target, index, outer, theta_c)
        theta0 = np.pi / 2 - 1e-3
        w, a = behind_wall(np.array(theta0), source, radius, tan_draft, index)
        start = (mouth + foot_width + abs(box.foot) - w[0]) / a[0]
        points, thetas = flank_points(
            start, theta0, np.radians(12.0), source, radius, tan_draft, index, flank_out
        )
        good = np.isfinite(points).all(1) & (points[:, 0] > 0)
        rising = np.concatenate([[True], (np.diff(points[:, 0]) > 0) & (np.diff(points[:, 1]) > 0)])
        end = np.argmax(~(good & rising)) if not (good & rising).all() else len(points)
        points, thetas = points[:end], thetas[:end]
        if end < 8 or points[-1, 0] < rim_radius:
            return None
        theta_c = np.interp(rim_radius, points[:, 0], thetas)
    corner_z = (radius - source) / (np.tan(theta_c) + tan_draft)
    corner = np.array([radius - corner_z * tan_draft, corner_z])
    rim_z = np.interp(rim_radius, points[:, 0], points[:, 1])
    edge_z = rim_z + RIM_MARGIN * box.rim
    lens_points = centre_points(corner, source, index, centre_out)
    falls = np.diff(lens_points[:, 0]) < 0
    lens_points = lens_points[: (np.argmax(~falls) + 1 if not falls.all() else len(lens_points))]
    if corner[0] < 0.2 * radius or edge_z - box.foot > 1.02 * box.height or not np.isfinite(lens_points).all():
        return None
    if lens_points[-1, 0] > 0.05 * corner[0]:
        return None
    return _fitted(recipe, box, corner, foot_width, mouth, points, lens_points, rim_z, tan_draft)


def _fitted(recipe, box, corner, foot_width, mouth, points, lens_points, rim_z, tan_draft):
    """The seed's surfaces as spline coefficients."""
    import jax.numpy as jnp

    foot_point = np.array([mouth + foot_width, box.foot])
    chain = np.vstack([foot_point, points[points[:, 1] > box.foot + 0.1 * (rim_z - box.foot) / SPANS["flank"]]])
    heights = lambda x: box.foot + x * (rim_z - box.foot)
    flank = bspline.fit(lambda x: np.interp(heights(x), chain[:, 1], chain[:, 0]), SPANS["flank"])
    r, z = lens_points[::-1].T
    centre = bspline.fit(lambda x: np.interp(x * corner[0], r, z) - corner[1], SPANS["centre"])
    edge_z, count = rim_z + RIM_MARGIN * box.rim, SPANS["exit"] + bspline.DEGREE
    disc = step = None
    face = np.full(count - 1, edge_z)
    if recipe.drop:
        step = jnp.asarray(float(np.clip(corner[0] * 1.3, 0.2 * box.radius, 0.7 * box.radius)))
        disc = jnp.full(SPANS["disc"] + bspline.DEGREE - 1, edge_z + recipe.drop)
        face = np.full(count, edge_z)
    return Lens(
        corner=jnp.asarray(corner),
        foot=jnp.asarray(float(foot_width)),
        wall=jnp.full(SPANS["wall"] + bspline.DEGREE - 1, tan_draft),
        centre=jnp.asarray(np.delete(centre, 1)[:-1]),
        flank=jnp.asarray(flank[1:-1]),
        exit=jnp.asarray(face),
        disc=disc,
        step=step,
    )
