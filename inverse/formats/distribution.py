"""An intensity distribution as photometric files hold it: planes C around the axis, angles γ from it.

γ is measured from the nadir, which is where the lens's axis points when the file is used; so γ is the
θ of the far field.  C runs round the axis.  Files may give a quarter, a half or one plane only; here
the planes always go once round, each C in [0, 2π) once.
"""

import math
from dataclasses import dataclass, field

import numpy as np

from inverse.photometry import FarField


@dataclass(frozen=True)
class Distribution:
    """What a photometric file says. Raises ValueError when the table is not one."""

    planes: np.ndarray  # (p,) rad, increasing, in [0, 2π); one entry when rotational
    gamma: np.ndarray  # (g,) rad, increasing, in [0, π]
    candela: np.ndarray  # (p, g) cd
    lamp_flux: float | None  # lm of the lamps; None when the file is absolute and states none
    words: dict = field(default_factory=dict)  # what the file says about itself, by its own keywords

    def __post_init__(self):
        c, g, i = self.planes, self.gamma, self.candela
        if i.shape != (len(c), len(g)) or len(c) < 1 or len(g) < 2:
            raise ValueError(f"{len(c)} planes of {len(g)} angles do not fit a table of {i.shape}")
        if not np.all(np.isfinite(i)) or np.any(i < 0.0):
            raise ValueError("intensities must be finite and not negative")
        if np.any(np.diff(g) <= 0.0) or g[0] < 0.0 or g[-1] > math.pi:
            raise ValueError("the angles γ must increase within 0 and 180°")
        if np.any(np.diff(c) <= 0.0) or c[0] < 0.0 or c[-1] >= 2.0 * math.pi:
            raise ValueError("the planes C must increase within 0 and 360°")

    def far_field(self):
        """The mean over all planes, each weighted by the arc it stands for; no errors are known."""
        arc = np.diff(np.append(self.planes, self.planes[0] + 2.0 * math.pi))
        weight = 0.5 * (arc + np.roll(arc, 1)) / (2.0 * math.pi)
        return FarField(self.gamma, weight @ self.candela, np.zeros(len(self.gamma)))


def once_round(planes, rows, mirrors):
    """Planes (rad) and rows completed by mirror images: ``mirrors`` lists C₀ of each C → 2 C₀ − C.

    A mirrored plane that is there already (to 1e-6°, far below any printed digit) is dropped.
    """
    step = math.radians(1e-6)
    whole = {}
    todo = list(zip(planes, rows))
    for mirror in mirrors:
        todo += [(2.0 * mirror - c, row) for c, row in todo]
    for c, row in todo:
        key = round((c % (2.0 * math.pi)) / step) % round(2.0 * math.pi / step)
        whole.setdefault(key, row)
    keys = sorted(whole)
    return np.array(keys) * step, np.array([whole[k] for k in keys])
