"""Snell and Fresnel of the verifier against textbook values."""

import numpy as np
import pytest

from inverse.verify.optics import reflectance, reflected, transmitted

# Index, R at normal incidence, critical and Brewster angles in degrees: closed forms from the index,
# ((n − 1)/(n + 1))², arcsin(1/n), arctan n, tabled to the digits given.
TABLE = [
    (1.49253, 0.03905, 42.067, 56.18),
    (1.58475, 0.05118, 39.125, 57.75),
    (1.5305, 0.04395, 40.797, 56.84),
    (1.51680, 0.04216, 41.245, 56.60),
]


@pytest.mark.parametrize("index, normal, critical, brewster", TABLE)
def test_normal_incidence_reflects_the_tabled_part(index, normal, critical, brewster):
    """R0 = ((n − 1)/(n + 1))² from either side."""
    for pair in ((1.0, index), (index, 1.0)):
        assert reflectance(np.ones(1), *pair)[0][0] == pytest.approx(normal, abs=6e-6)


@pytest.mark.parametrize("index, normal, critical, brewster", TABLE)
def test_total_reflection_begins_at_the_critical_angle(index, normal, critical, brewster):
    """R < 1 just below the tabled angle, R = 1 exactly just above it."""
    angle = np.radians([critical - 1e-3, critical + 1e-3])
    R, _ = reflectance(np.cos(angle), index, 1.0)
    assert R[0] < 1.0 and R[1] == 1.0


@pytest.mark.parametrize("index, normal, critical, brewster", TABLE)
def test_at_brewsters_angle_one_polarisation_does_not_reflect(index, normal, critical, brewster):
    """There R = ½ [(n² − 1)/(n² + 1)]² (Born & Wolf, section 1.5, from memory)."""
    R, _ = reflectance(np.cos(np.arctan([index])), 1.0, index)
    assert np.degrees(np.arctan(index)) == pytest.approx(brewster, abs=0.006)
    assert R[0] == pytest.approx(0.5 * ((index**2 - 1.0) / (index**2 + 1.0)) ** 2, rel=1e-12)


def test_grazing_light_is_all_reflected():
    """R → 1 as the cosine of incidence → 0, without a division by zero."""
    R, _ = reflectance(np.array([0.0, 1e-12]), 1.0, 1.5)
    np.testing.assert_allclose(R, 1.0, atol=1e-10)


def test_equal_media_do_nothing():
    """n1 = n2: no reflection, no bend, at any incidence."""
    c = np.linspace(1e-3, 1.0, 50)
    R, c2 = reflectance(c, 1.3, 1.3)
    np.testing.assert_allclose(R, 0.0, atol=1e-20)
    np.testing.assert_allclose(c2, c, rtol=1e-9)


def _fan(count=200):
    rng = np.random.default_rng(0)
    d, N = (v / np.linalg.norm(v, axis=1)[:, None] for v in rng.normal(size=(2, count, 3)))
    N = np.where(np.sum(d * N, 1)[:, None] > 0.0, -N, N)
    return d, N, -np.sum(d * N, 1)


def test_refraction_obeys_snell_in_the_plane_of_incidence():
    """n1 (d × N) = n2 (d' × N): sines and plane at once."""
    d, N, c = _fan()
    _, c2 = reflectance(c, 1.0, 1.49253)
    out = transmitted(d, N, c, c2, 1.0, 1.49253)
    np.testing.assert_allclose(np.cross(d, N), 1.49253 * np.cross(out, N), atol=1e-14)
    np.testing.assert_allclose(np.linalg.norm(out, axis=1), 1.0, rtol=1e-14)
    assert np.all(np.sum(out * N, 1) < 0.0)


def test_reflection_turns_the_normal_part_round():
    """d' × N = d × N and d' · N = −d · N."""
    d, N, c = _fan()
    out = reflected(d, N, c)
    np.testing.assert_allclose(np.cross(out, N), np.cross(d, N), atol=1e-15)
    np.testing.assert_allclose(np.sum(out * N, 1), c, atol=1e-15)
