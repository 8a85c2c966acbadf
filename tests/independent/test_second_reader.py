"""Our photometric files through another library's readers (photompy), which share no code with ours."""

import numpy as np
import pytest

from inverse.formats import eulumdat, lm63
from inverse.formats.nameplate import Nameplate
from inverse.photometry import FarField

photompy = pytest.importorskip("photompy", reason="needs the photompy library")
pytestmark = pytest.mark.external


@pytest.mark.parametrize("format, reader, suffix", [(lm63, "IESFile", ".ies"), (eulumdat, "LDTFile", ".ldt")])
def test_another_reader_sees_the_same_beam(tmp_path, format, reader, suffix):
    """Intensities within 0.5 % of the peak at every fine angle, and the flux within a percent."""
    theta = np.linspace(0.0, 0.5 * np.pi, 1801)
    beam = FarField(
        theta, 9000.0 * np.exp(-((theta / 0.07) ** 2)) + 20.0 * np.cos(theta) ** 2, np.zeros(1801)
    )
    path = tmp_path / f"beam{suffix}"
    plate = Nameplate(name="Lantern 7", date="2026-03-01", lamp="LED", lamp_flux=400.0, aperture_radius=12.5)
    path.write_bytes(format.text(beam, plate).encode("ascii"))
    seen = getattr(photompy, reader).read(str(path)).photometry
    candela = np.interp(np.degrees(theta), seen.thetas, np.asarray(seen.values)[0])
    assert np.abs(candela - beam.candela).max() < 0.005 * beam.candela.max()
    # it gives each angle the band halfway to its neighbours, a rule good to a percent on these rows
    assert seen.total_optical_power() == pytest.approx(beam.flux, rel=0.01)
