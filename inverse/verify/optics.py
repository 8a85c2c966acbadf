"""One interface between two clear media: Snell and Fresnel, written for the verifier alone.

d is the unit direction, N a unit normal on the side the ray comes from, c = −d · N >= 0 the cosine
of incidence, n1 and n2 the indices before and behind, g = n1/n2:

    reflected     d + 2 c N
    transmitted   g d + (g c − c2) N ,    c2 = sqrt(1 − g² (1 − c²))
    R = ½ [ (n1 c − n2 c2)/(n1 c + n2 c2) ]² + ½ [ (n1 c2 − n2 c)/(n1 c2 + n2 c) ]²

Unpolarised light at every interface (a second interface sees slightly polarised light; neglected).
The root is imaginary exactly at total reflection: R = 1.  Born & Wolf, *Principles of Optics*,
section 1.5 (from memory).
"""

import numpy as np


def reflectance(cosine, before, behind):
    """(R, c2), each (k,): unpolarised Fresnel reflectance and cosine of refraction; R = 1, c2 = 0 beyond
    the critical angle. ``cosine`` (k,) of incidence in [0, 1]; indices numbers or (k,)."""
    c, n1, n2 = cosine, before, behind
    square = 1.0 - (n1 / n2) ** 2 * (1.0 - c * c)
    total = square <= 0.0
    c2 = np.sqrt(np.where(total, 0.0, square))
    across = (n1 * c - n2 * c2) / (n1 * c + n2 * c2 + np.finfo(float).tiny)
    within = (n1 * c2 - n2 * c) / (n1 * c2 + n2 * c + np.finfo(float).tiny)
    return np.where(total, 1.0, 0.5 * (across**2 + within**2)), c2


def reflected(direction, normal, cosine):
    """Unit directions (k, 3) after reflection; ``normal`` (k, 3) towards the incoming side."""
    return direction + (2.0 * cosine)[:, None] * normal


def transmitted(direction, normal, cosine, cosine_behind, before, behind):
    """Unit directions (k, 3) after refraction; ``cosine_behind`` from ``reflectance``."""
    g = np.broadcast_to(np.asarray(before / behind), cosine.shape)
    d = g[:, None] * direction + (g * cosine - cosine_behind)[:, None] * normal
    return d / np.sqrt(np.sum(d * d, axis=1))[:, None]  # hold the length over many bounces
