"""What one smooth interface does to a ray: Snell, Fresnel, total reflection.

A ray has unit direction d; the unit normal m points to the far side (c = d·m > 0); the index
is n1 before and n2 behind.  With μ = n1/n2 and k = 1 − μ²(1 − c²),

    d' = μ d + (√k − μ c) m          refracted, k > 0
    d' = d − 2 c m                   reflected
    r_s = (n1 c − n2 √k)/(n1 c + n2 √k),   r_p = (n2 c − n1 √k)/(n2 c + n1 √k)

and the reflectance for unpolarised light is (r_s² + r_p²)/2, 1 when k ≤ 0 (Born & Wolf,
Principles of Optics, §1.5).  Square roots are guarded at their input, so gradients stay finite
on both sides of the critical angle.  Vectors are tuples of component arrays.
"""

import jax.numpy as jnp


def dot(a, b):
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]


def _root(k):
    ok = k > 0.0
    return jnp.where(ok, jnp.sqrt(jnp.where(ok, k, 1.0)), 0.0), ok


def facing(d, m):
    """``m`` turned to the side ``d`` travels to, and the cosine c > 0."""
    c = dot(d, m)
    sign = jnp.where(c < 0.0, -1.0, 1.0)
    return tuple(sign * x for x in m), sign * c


def refract(d, m, n1, n2):
    """Refracted direction and transmittance (0 at total reflection, where d' is the tangential limit)."""
    m, c = facing(d, m)
    mu = n1 / n2
    q, _ = _root(1.0 - mu * mu * (1.0 - c * c))
    out = tuple(mu * a + (q - mu * c) * b for a, b in zip(d, m))
    return out, 1.0 - reflectance(c, n1, n2)


def reflect(d, m):
    """Mirrored direction and the cosine of incidence."""
    m, c = facing(d, m)
    return tuple(a - 2.0 * c * b for a, b in zip(d, m)), c


def reflectance(c, n1, n2):
    """Unpolarised Fresnel reflectance at the cosine of incidence ``c``; 1 beyond the critical angle."""
    mu = n1 / n2
    q, ok = _root(1.0 - mu * mu * (1.0 - c * c))
    s = (n1 * c - n2 * q) / (n1 * c + n2 * q)
    p = (n2 * c - n1 * q) / (n2 * c + n1 * q)
    return jnp.where(ok, 0.5 * (s * s + p * p), 1.0)
