"""What one smooth interface of a body of revolution does to a ray: Snell, Fresnel, total reflection.

A ray is described in the meridional plane of the point where it is: radius r and height z, and
the components of its unit direction d along the radius, along the azimuth and along the axis,
(d_r, d_φ, d_z).  The normal m of a surface of revolution has no azimuthal component, so d_φ is
only scaled, and r n d_φ, the skewness, is the same before and behind every interface.

m points to the far side (c = d·m > 0); the index is n1 before and n2 behind.  With μ = n1/n2 and
k = 1 − μ²(1 − c²),

    d' = μ d + (√k − μ c) m          refracted, k > 0
    d' = d − 2 c m                   reflected
    T = 2 n1 n2 c √k [1/(n1 c + n2 √k)² + 1/(n2 c + n1 √k)²]

T being the transmittance for unpolarised light, the mean of s and p (Born & Wolf, Principles of
Optics, §1.5); R = 1 − T, and 1 when k ≤ 0.  Square roots are guarded at their input, so gradients
stay finite on both sides of the critical angle.
"""

from typing import NamedTuple

import jax
import jax.numpy as jnp

from inverse.trace.stage import stage

TINY = 1e-30  # mm²; keeps the radius differentiable on the axis


@jax.custom_jvp
def reciprocal(x):
    """1/x; its derivative takes two products, no second division."""
    return 1.0 / x


@reciprocal.defjvp
def _reciprocal_jvp(x, dx):
    y = reciprocal(x[0])
    return y, -(y * y) * dx[0]


@jax.custom_jvp
def inverse_root(x):
    """1/√x for x > 0; √x is x times this, and neither derivative divides."""
    return 1.0 / jnp.sqrt(x)


@inverse_root.defjvp
def _inverse_root_jvp(x, dx):
    y = inverse_root(x[0])
    return y, -0.5 * (y * y) * (y * dx[0])


class Ray(NamedTuple):
    """Rays at a point each, (N,): radius and height (mm), direction radial, azimuthal, axial."""

    r: jax.Array
    z: jax.Array
    dr: jax.Array
    dt: jax.Array
    dz: jax.Array


def ray(p, d) -> Ray:
    """The rays of Cartesian points ``p`` and unit directions ``d``, tuples of three (N,)."""
    square = p[0] * p[0] + p[1] * p[1] + TINY
    over = inverse_root(square)
    return Ray(square * over, p[2], (p[0] * d[0] + p[1] * d[1]) * over, (p[0] * d[1] - p[1] * d[0]) * over, d[2])


def _root(k):
    ok = k > 0.0
    safe = jnp.where(ok, k, 1.0)
    return jnp.where(ok, safe * inverse_root(safe), 0.0)


def facing(ray, m):
    """``m`` = (m_r, m_z) turned to the side the ray travels to, and the cosine c > 0."""
    c = ray.dr * m[0] + ray.dz * m[1]
    sign = jnp.where(c < 0.0, -1.0, 1.0)
    return (sign * m[0], sign * m[1]), sign * c


@stage
def refract(ray, m, n1, n2):
    """Refracted ray and transmittance (0 at total reflection, where d' is the tangential limit)."""
    m, c = facing(ray, m)
    mu = n1 / n2
    q = _root(1.0 - mu * mu * (1.0 - c * c))
    a = q - mu * c
    out = ray._replace(dr=mu * ray.dr + a * m[0], dt=mu * ray.dt, dz=mu * ray.dz + a * m[1])
    return out, _passed(c, q, n1, n2)


@stage
def reflect(ray, m):
    """Mirrored ray and the cosine of incidence."""
    m, c = facing(ray, m)
    return ray._replace(dr=ray.dr - 2.0 * c * m[0], dz=ray.dz - 2.0 * c * m[1]), c


def _passed(c, q, n1, n2):
    s, p = reciprocal(n1 * c + n2 * q), reciprocal(n2 * c + n1 * q)
    return (2.0 * n1 * n2) * c * q * (s * s + p * p)


@stage
def transmittance(c, n1, n2):
    """Unpolarised Fresnel transmittance at the cosine of incidence ``c``; 0 beyond the critical angle."""
    mu = n1 / n2
    return _passed(c, _root(1.0 - mu * mu * (1.0 - c * c)), n1, n2)
