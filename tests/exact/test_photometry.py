"""Photometric definitions against closed forms."""

import math

import numpy as np
import pytest
from scipy.integrate import quad

from inverse import photometry
from inverse.photometry import FarField

DEG = math.pi / 180.0


def field(theta, candela, se=None):
    return FarField(theta, candela, np.zeros(len(theta)) if se is None else se)


def test_uniform_cone_flux():
    """A uniform cone of half-angle a holds Φ = 2π I (1 − cos a) (closed form), however coarse the table."""
    a = 7.0 * DEG
    assert field([0.0, 0.02, a], [300.0] * 3).flux == pytest.approx(
        2 * math.pi * 300 * (1 - math.cos(a)), rel=1e-14
    )


def test_linear_table_flux_is_exact():
    """The table's flux integrates its linear pieces; source: scipy's adaptive quadrature."""
    theta, candela = np.array([0.0, 0.3, 0.35, 1.9, math.pi]), np.array([5.0, 90.0, 2.0, 7.0, 1.0])
    wanted = sum(
        quad(
            lambda t: 2 * math.pi * np.interp(t, theta, candela) * math.sin(t),
            a,
            b,
            epsabs=1e-12,
            epsrel=1e-13,
        )[0]
        for a, b in zip(theta, theta[1:])
    )
    assert field(theta, candela).flux == pytest.approx(wanted, rel=1e-12)


def test_tiny_steps_lose_no_digits():
    """Ten million times finer steps near the axis still add up: Φ = π I θ² for small θ (closed form)."""
    theta = np.linspace(0.0, 1e-5, 1001)
    assert field(theta, np.full(1001, 2.0)).flux == pytest.approx(
        2 * math.pi * 1e-10, rel=1e-9, abs=0.0
    )  # θ²/12 = 1e-11


def test_lambertian_flux_and_encircled():
    """A Lambertian source has Φ = π I₀ and sin²θ of it inside θ (closed forms)."""
    theta = np.linspace(0.0, 0.5 * math.pi, 4001)
    lambertian = field(theta, 100.0 * np.cos(theta))
    asked = np.array([0.1, 0.31234, 1.0, 1.5])
    # linear pieces of width h miss cos by h²/8 at most: 2e-8 of the peak
    assert lambertian.flux == pytest.approx(100.0 * math.pi, rel=1e-7)
    np.testing.assert_allclose(
        photometry.encircled(lambertian, asked, 200.0), 0.5 * math.pi * np.sin(asked) ** 2, rtol=1e-7
    )


def test_first_angle_off_the_axis():
    """Below the first angle the first intensity holds: a table from 0.1 rad counts the cap inside it."""
    assert field([0.1, 0.2], [50.0, 50.0]).flux == pytest.approx(
        2 * math.pi * 50 * (1 - math.cos(0.2)), rel=1e-14
    )


def test_no_light_beyond_the_table():
    """Intensity is linear between the angles and zero beyond the last, even if that row is not."""
    assert list(field([0.0, 0.2], [50.0, 30.0]).at([0.1, 0.2, 0.2001, 3.0])) == [40.0, 30.0, 0.0, 0.0]


def test_flux_error_adds_independent_entries():
    """The flux is linear in the entries; its error is the root sum of squares of each entry's own effect."""
    theta, candela, se = (
        np.array([0.05, 0.2, 0.5, 0.9]),
        np.array([9.0, 6.0, 2.0, 0.5]),
        np.array([0.3, 0.2, 0.1, 0.05]),
    )
    effects = [
        field(theta, candela + se * (np.arange(4) == k)).flux - field(theta, candela).flux for k in range(4)
    ]
    assert field(theta, candela, se).flux_se == pytest.approx(np.linalg.norm(effects), rel=1e-10)


def test_gaussian_beam_angle():
    """A Gaussian beam has FWHM 2σ√(2 ln 2) and full width 2σ√(2 ln 10) at a tenth (closed forms)."""
    sigma, theta = 4.0 * DEG, np.linspace(0.0, 0.6, 6001)
    gauss = field(theta, 1000.0 * np.exp(-0.5 * (theta / sigma) ** 2))
    # linear interpolation between angles 1e-4 rad apart: h²/(8σ²) of a σ, 3e-7
    assert photometry.beam_angle(gauss) == pytest.approx(2 * sigma * math.sqrt(2 * math.log(2)), rel=1e-6)
    assert photometry.field_angle(gauss) == pytest.approx(2 * sigma * math.sqrt(2 * math.log(10)), rel=1e-6)


def test_dip_in_the_middle_keeps_the_outer_edge():
    """With a dark middle and a dark ring the outermost crossing of half the peak counts."""
    ringed = field([0.0, 0.1, 0.2, 0.3, 0.4], [10.0, 100.0, 20.0, 80.0, 0.0])
    assert photometry.beam_angle(ringed) == pytest.approx(2 * (0.3 + 0.1 * (80 - 50) / 80), rel=1e-14)


def test_beam_angle_never_reached():
    """A table that ends above half its peak has no beam angle, and darkness has none."""
    assert photometry.beam_angle(field([0.0, 1.0], [10.0, 6.0])) is None
    assert photometry.beam_angle(field([0.0, 1.0], [0.0, 0.0])) is None


@pytest.mark.parametrize("candela, metres", [(400.0, 40.0), (10_000.0, 200.0)])
def test_beam_distance(candela, metres):
    """400 cd reach 40 m and 10 000 cd 200 m at 0.25 lx (ANSI/PLATO FL 1, from memory)."""
    assert photometry.beam_distance(candela) == pytest.approx(1000.0 * metres, rel=1e-15)


def test_illuminance_on_the_wall():
    """A source with I = I₀/cos³θ lights a flat wall evenly with I₀/d² (inverse square and cosine law)."""
    theta = np.linspace(0.0, 1.0, 20001)
    wall = field(theta, 900.0 / np.cos(theta) ** 3)
    np.testing.assert_allclose(
        photometry.illuminance(wall, 3000.0, np.array([0.0, 500.0, 2000.0])), 100.0, rtol=1e-8
    )  # h²/8 · I''/I, below 5e-9


def test_diameter_of_half_the_flux():
    """On an evenly lit disc the half of the flux lies inside 1/√2 of the diameter (closed form)."""
    theta = np.linspace(0.0, 0.7, 20001)
    wall = field(theta, 1.0 / np.cos(theta) ** 3)
    whole = 2 * 2000.0 * math.tan(0.7)
    assert photometry.spot_diameter(wall, 0.5, 2000.0) == pytest.approx(whole / math.sqrt(2), rel=1e-8)
    assert photometry.spot_diameter(wall, 1.0, 2000.0) == pytest.approx(whole, rel=1e-12)


def test_no_diameter_beyond_the_plane():
    """Flux that leaves backwards is in no disc: a bare isotropic source holds 90 % nowhere in front."""
    assert photometry.spot_diameter(field([0.0, math.pi], [1.0, 1.0]), 0.9, 1000.0) is None


def test_ring_contrast_of_a_known_pair():
    """A dip of 40 cd inside a ring of 60 cd has Michelson contrast (60 − 40)/(60 + 40), errors propagated."""
    ringed = field([0.0, 0.1, 0.2, 0.3], [100.0, 40.0, 60.0, 0.0], [0.0, 3.0, 4.0, 0.0])
    contrast, error = photometry.ring_contrast(ringed)
    assert contrast == pytest.approx(0.2, rel=1e-14)
    # dC = 2 (I₁ dI₂, I₂ dI₁)/(I₁ + I₂)²
    assert error == pytest.approx(2 * math.hypot(40 * 4, 60 * 3) / 100**2, rel=1e-14)


def test_smooth_beam_has_no_rings():
    """A beam that only darkens outwards has contrast 0, whatever stray light lies beyond its field angle."""
    assert photometry.ring_contrast(field([0.0, 0.1, 0.2, 0.3, 0.4], [100.0, 60.0, 1.0, 2.0, 0.0])) == (
        0.0,
        0.0,
    )


def test_figures_speak_in_their_units():
    """The result block states degrees, metres and candela per emitted lumen (uniform cone, closed form)."""
    a = 5.0 * DEG
    cone = field([0.0, a, a + 1e-9], [1000.0, 1000.0, 0.0])
    block = photometry.figures(cone, 50.0, distances=(2000.0,))
    flux = 2 * math.pi * 1000 * (1 - math.cos(a))
    assert block["efficiency"] == pytest.approx(flux / 50.0, rel=1e-6)
    assert block["peak_cd_per_lm"] == pytest.approx(20.0)
    assert block["beam_angle_deg"] == pytest.approx(10.0, abs=1e-6)
    assert block["beam_distance_m"] == pytest.approx(2 * math.sqrt(1000.0))
    assert block["spots"][0]["illuminance_lx"] == pytest.approx(250.0)


@pytest.mark.parametrize(
    "theta, candela",
    [
        ([0.0, 0.0], [1.0, 1.0]),
        ([0.0, 4.0], [1.0, 1.0]),
        ([0.0, 1.0], [1.0, -1.0]),
        ([0.0, 1.0], [1.0, math.nan]),
        ([0.0], [1.0]),
        ([0.0, 1.0], [1.0, 1.0, 1.0]),
    ],
)
def test_bad_tables_are_refused(theta, candela):
    """Standing angles, angles past 180°, negative or undefined intensities, unequal columns: refused."""
    with pytest.raises(ValueError, match="far field"):
        field(theta, candela)
