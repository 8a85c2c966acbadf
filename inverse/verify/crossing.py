"""Where a ray first crosses the revolved body: no leak at a joint, no root lost at grazing.

A ray p(t) = o + t d, |d| = 1, runs over the plane with the speed f = √(d_x² + d_y²).  With b the part
of o along that flat direction and a the part across it, its radius is ρ(t)² = (f t + b)² + a².  It
meets the ring (r, z) of the body where, t being eliminated by z = o_z + t d_z,

    G(r, z) = d_z² (r² − a²) − [d_z b + (z − o_z) f]²

vanishes.  G is a sum of four products of a number of the ring (r², −z², z, 1) and one of the ray, so
one matrix product gives it at all nodes of the chain for all rays, a second one its slope along the
chain.

* A change of sign between two nodes brackets one root.  Neighbouring curves share the sign at
  their joint, so nothing slips through; on the axis G <= 0 always, so every line crosses the
  closed chain an even number of times.
* Equal signs with slopes that lead towards zero from both ends may hide a pair of roots
  (grazing, or a near-horizontal ray, whose two crossings of one ring nearly coincide in z).

Every candidate is then refined by Newton in (t, u) on the exact pieces,

    z(u) − o_z − t d_z = 0 ,   r(u) − ρ(t) = 0 ,   determinant  d_z r' − z' ρ'  ∝  −d · (outward normal),

well conditioned for horizontal rays and near the axis.  The sign of the determinant says whether
the crossing leaves or enters the body.  A ray that is known to be inside can only leave, one
outside can only enter: this rejects the point it starts from without a guessed offset.
"""

from dataclasses import dataclass

import numpy as np

BLOCK = 2048  # rays a matrix product: about 4 MB a table, so that it stays in the cache
SHALLOW = 0.05  # |d_z| below which the two crossings of a ring are told apart by ρ, not by z
# Newton has converged when the point is on the ray to this fraction of the body's size (rounding: 1e-15).
RESIDUAL = 1e-12
# A crossing this little behind the start, in body sizes, still counts: the start itself is rounded.
BEHIND = 1e-11
# Part of the larger |G| at the nodes by which a refined extremum may miss zero and still be tried.
NEAR_ZERO = 1e-3
REFINEMENTS = 8  # secant steps that find the extremum on the curve
ROUNDING = 1e-13  # of G, relative to its largest term


@dataclass(frozen=True)
class Crossing:
    """First crossing of each ray; ``curve`` is -1 and ``t`` infinite where there is none."""

    t: np.ndarray  # (k,) mm
    u: np.ndarray  # (k,) pieces
    curve: np.ndarray  # (k,) number of the curve


def first_crossing(chain, origin, direction, inside):
    """The first crossing of each ray with the body.

    ``origin`` (k, 3) mm, ``direction`` (k, 3) unit, ``inside`` (k,) bool: in the material or in air.
    """
    count = len(origin)
    t, u, curve = np.full(count, np.inf), np.zeros(count), np.full(count, -1)
    for a in range(0, count, BLOCK):
        part = slice(a, min(a + BLOCK, count))
        _search(chain, origin[part], direction[part], inside[part], t[part], u[part], curve[part])
    return Crossing(t, u, curve)


def _search(chain, origin, direction, inside, best_t, best_u, best_curve):
    ray = _Rays(origin, direction, inside)
    value, slope = _tables(chain, ray)
    ray_at, node, s, t, single = _candidates(chain, ray, value, slope)
    if not len(ray_at):
        return
    curve = chain.curve[node]
    t, u, facing, solved = _newton(chain, ray, ray_at, curve, t, chain.u[node] + s * chain.span[node])
    slack = 1e-6 * chain.span[node]  # in u; joints and nodes belong to both sides
    astray = single & ~(solved & (np.abs(u - chain.u[node] - 0.5 * chain.span[node])
                                  <= 0.5 * chain.span[node] + slack))
    astray &= np.abs(ray.dz[ray_at]) >= SHALLOW
    if astray.any():
        k = np.flatnonzero(astray)
        t[k], u[k], facing[k], solved[k] = _bisect(chain, ray, ray_at[k], node[k])
    good = solved & (facing * ray.sense[ray_at] > 0.0) & (t > -BEHIND * chain.size)
    ray_at, t, u, curve = ray_at[good], t[good], u[good], curve[good]
    order = np.lexsort((t, ray_at))
    lead = order[np.append(True, np.diff(ray_at[order]) > 0)] if len(order) else order
    best_t[ray_at[lead]], best_u[ray_at[lead]], best_curve[ray_at[lead]] = t[lead], u[lead], curve[lead]


class _Rays:
    """The numbers of each ray that the search needs, shape (k,)."""

    def __init__(self, origin, direction, inside):
        (ox, oy, self.oz), (dx, dy, self.dz) = origin.T, direction.T
        self.flat = np.hypot(dx, dy)
        safe = np.where(self.flat > 0.0, self.flat, 1.0)
        ex, ey = np.where(self.flat > 0.0, dx / safe, 1.0), dy / safe
        self.along, self.across = ox * ex + oy * ey, oy * ex - ox * ey
        self.sense = np.where(inside, -1.0, 1.0)  # sign of the determinant at an allowed crossing


def _tables(chain, ray):
    """G and its slope along the chain, (nodes, k), mm² and mm."""
    # d_z along + (z − o_z) flat = base + z flat
    base = ray.dz * ray.along - ray.oz * ray.flat
    constant = -(base**2) - (ray.dz * ray.across) ** 2
    weights = np.stack([ray.dz**2, ray.flat**2, -2.0 * base * ray.flat, constant])
    r, z = chain.r, chain.z
    value = np.column_stack([r * r, -z * z, z, np.ones_like(r)]) @ weights
    value[chain.twin] = value[chain.twin - 1]  # one sign a joint, whatever the rounding
    floor = -ROUNDING * chain.size**2
    np.minimum(value[0], floor, out=value[0])
    np.minimum(value[-1], floor, out=value[-1])
    slope = np.column_stack([2.0 * r * chain.dr, -2.0 * z * chain.dz, chain.dz]) @ weights[:3]
    return value, slope


def _candidates(chain, ray, value, slope):
    """Starting points (ray, node, s, t) for Newton, and whether each is a bracketed single root."""
    low, down = value < 0.0, slope < 0.0
    change = low[1:] ^ low[:-1]
    dip = (down[:-1] ^ low[:-1]) & ~(down[1:] ^ low[1:]) & ~change & chain.band[:, None]
    # On the axis the slope is zero; what counts is whether it falls towards the next node.
    dip[0], dip[-1] = low[1] & down[1], low[-2] & ~down[-2]
    node, at = np.nonzero(change)
    s = _single(value[node, at], value[node + 1, at], slope[node, at] * chain.length[node])
    pair, pair_at, early, late = _pairs(chain, ray, value, slope, *np.nonzero(dip))
    node, at = np.concatenate([node, pair, pair]), np.concatenate([at, pair_at, pair_at])
    single = np.arange(len(node)) < len(s)
    return _with_time(chain, ray, at, node, np.concatenate([s, early, late]), single)


def _single(g0, g1, d0):
    """Zero in [0, 1] of the parabola with end values g0, g1 of opposite sign and slope d0 at 0."""
    curvature = g1 - g0 - d0
    root = np.sqrt(np.maximum(d0 * d0 - 4.0 * curvature * g0, 0.0))
    with np.errstate(divide="ignore", invalid="ignore"):
        s = -2.0 * g0 / (d0 + np.where(g0 < g1, root, -root))
    return np.where((s >= 0.0) & (s <= 1.0), s, g0 / (g0 - g1))


def _pairs(chain, ray, value, slope, node, at):
    """Bands in which G may touch zero: (node, ray, s before the extremum, s behind it)."""
    g0, g1 = value[node, at], value[node + 1, at]
    d0, d1 = slope[node, at] * chain.length[node], slope[node + 1, at] * chain.length[node]
    # Between two nodes the slope is taken linear.  Beside the axis G is a parabola in s² instead:
    # G = g0 + p s² + q s⁴ away from it, from the values at both ends and the slope at the far one.
    first, last = node == 0, node == len(chain.band) - 1
    axis, rise = first | last, np.where(first, d1, -d0)
    q = np.where(axis, 0.5 * rise - np.where(first, g1 - g0, g0 - g1), -1.0)
    p = np.where(axis, np.where(first, g1 - g0, g0 - g1) - q, 1.0)
    out = np.sqrt(np.clip(p / np.where(q < 0.0, -2.0 * q, np.inf), 0.0, 1.0))
    middle = np.where(axis, np.where(first, out, 1.0 - out), d0 / np.where(axis, 1.0, d0 - d1))
    largest, rounding = np.maximum(np.abs(g0), np.abs(g1)), ROUNDING * chain.size**2
    keep = ~axis | (p > 0.0) & (q < 0.0)
    node, at, middle, largest, d0, d1, first, last = (
        x[keep] for x in (node, at, middle, largest, d0, d1, first, last)
    )
    rising = np.where(first, d1 < 0.0, d0 > 0.0)  # towards the extremum
    early, late = np.zeros_like(middle), np.ones_like(middle)
    bend, near = d1 - d0, (middle < 0.5) & ~first | last  # secant from the nearer node, never from the axis
    before, tilt_before = np.where(near, 0.0, 1.0), np.where(near, d0, d1)
    for _ in range(REFINEMENTS):
        peak, tilt = _along(chain, ray, node, at, middle)
        step, left = middle - before, (tilt > 0.0) == rising
        early, late = np.where(left, middle, early), np.where(left, late, middle)
        apart = np.abs(step) > 1e-3  # closer together the difference is rounding
        fresh = (tilt - tilt_before) / np.where(apart, step, 1.0)
        bend = np.where(apart & (fresh * bend > 0.0), fresh, bend)
        before, tilt_before, middle = middle, tilt, middle - tilt / bend
        middle = np.where((middle >= early) & (middle <= late), middle, 0.5 * (early + late))
    peak = peak - 0.5 * tilt * tilt / bend
    keep = np.sign(bend) * peak < NEAR_ZERO * largest + rounding
    node, at, middle, bend, peak = (x[keep] for x in (node, at, middle, bend, peak))
    half = np.sqrt(np.maximum(-2.0 * peak / bend, 0.0)) + 1e-3  # outside the pair, never both from one point
    return node, at, np.clip(middle - half, 0.0, 1.0), np.clip(middle + half, 0.0, 1.0)


def _along(chain, ray, node, at, s):
    """G and dG/ds at the part ``s`` of the band that starts at ``node``, by the formula of the docstring."""
    r, z, r1, z1 = chain.at(chain.u[node] + s * chain.span[node], chain.curve[node])
    dz, flat, across = ray.dz[at], ray.flat[at], ray.across[at]
    x = dz * ray.along[at] + (z - ray.oz[at]) * flat  # d_z times the way along the flat direction
    value = dz * dz * (r - across) * (r + across) - x * x
    return value, 2.0 * chain.span[node] * (dz * dz * r * r1 - x * flat * z1)


def _with_time(chain, ray, at, node, s, single):
    """The starting ``t`` of each candidate; those plainly behind or facing the wrong way are dropped."""
    r, z, r1, z1 = chain.at(chain.u[node] + s * chain.span[node], chain.curve[node])
    dz, flat, along = ray.dz[at], ray.flat[at], ray.along[at]
    shallow = np.abs(dz) < SHALLOW
    t = (z - ray.oz[at]) / np.where(shallow, 1.0, dz)
    x = flat * t + along
    facing = (dz * r1 - z1 * flat * x / np.maximum(r, np.abs(x) + np.finfo(float).tiny)) / np.hypot(r1, z1)
    # The estimate is off by up to one band in z, and by the turn of a band in direction.
    keep = (t * np.abs(dz) > -2.0 * chain.length[node]) & (facing * ray.sense[at] > -0.2) & ~shallow
    k = np.flatnonzero(shallow)
    reach = np.sqrt(np.maximum(r[k] ** 2 - ray.across[at[k]] ** 2, 1e-6 * r[k] ** 2))  # never both the same
    t = np.concatenate([t[keep], (-along[k] - reach) / flat[k], (-along[k] + reach) / flat[k]])
    at, node, s, single = (np.concatenate([x[keep], x[k], x[k]]) for x in (at, node, s, single))
    return at, node, s, t, single


def _newton(chain, ray, at, curve, t, u, steps=4, more=12):
    """(t, u, determinant, solved) from starting values; ``solved`` by the residual, never assumed."""
    t, u = t.copy(), u.copy()
    facing, off = np.zeros_like(t), np.full_like(t, np.inf)
    todo = np.arange(len(t))
    for step in range(steps + more):
        if step >= steps:
            todo = todo[off[todo] > RESIDUAL * chain.size]
        if not len(todo):
            break
        i, c, tt, uu = at[todo], curve[todo], t[todo], u[todo]
        dz, flat, across = ray.dz[i], ray.flat[i], ray.across[i]
        r, z, r1, z1 = chain.at(uu, c)
        x = flat * tt + ray.along[i]
        rho = np.sqrt(x * x + across * across)
        rho1 = flat * x / np.maximum(rho, np.finfo(float).tiny)
        f1, f2 = z - ray.oz[i] - tt * dz, r - rho
        det = dz * r1 - z1 * rho1
        off[todo], facing[todo] = np.abs(f1) + np.abs(f2), det
        safe = np.where(det == 0.0, np.inf, det)  # exactly grazing: no step, the pair stays unsolved
        limit = 0.5 + 0.02 * (chain.last[c] - chain.first[c])
        du = np.clip((rho1 * f1 - dz * f2) / safe, -limit, limit)
        u[todo] = np.clip(uu + du, chain.first[c], chain.last[c])
        t[todo] = tt + (r1 * f1 - z1 * f2) / safe
    return t, u, facing, off <= RESIDUAL * chain.size


def _bisect(chain, ray, at, node):
    """As ``_newton``, for roots bracketed by a change of sign that Newton did not find in its band."""
    low, high, width = np.zeros(len(at)), np.ones(len(at)), chain.span[node]
    start = (_along(chain, ray, node, at, low)[0] < 0.0) | (chain.r[node] == 0.0)
    for _ in range(50):  # bands are at most a few dozen pieces: down to 1e-13 of a piece
        s = 0.5 * (low + high)
        here = (_along(chain, ray, node, at, s)[0] < 0.0) == start
        low, high = np.where(here, s, low), np.where(here, high, s)
    u, curve = chain.u[node] + s * width, chain.curve[node]
    return _newton(chain, ray, at, curve, (chain.at(u, curve)[1] - ray.oz[at]) / ray.dz[at], u)
