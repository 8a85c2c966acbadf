"""What the lens, or the medium around it, is made of.

Dispersion, with the wavelength λ in µm and indices at about 20 °C as published (against air, the
water's apparently against vacuum, 1.00027 times as much; no beam shows that):

    Sellmeier   n² = 1 + Σ B λ² / (λ² − C)         C in µm²
    Powers      n² = Σ c λᵏ                        k an integer, mostly negative
    Lines       n² = 1 + a₀ + a₁/λ² + a₂/λ⁴        least squares through measured lines

Each holds inside its measured range only; outside it ``index`` raises.  Polymer tables give three
decimals and differ from one grade and maker to the next by about 0.002, so the fourth decimal is that
of a paper's sample, not of a moulded part.  The Abbe number V = (n_d − 1)/(n_F − n_C) is what a fit
through rounded values spoils first, hence ``Lines`` and ``from_abbe`` take it in.

Bulk loss is Beer's law exp(−absorption · path).  It is the loss seen in *moulded parts*; extinction
coefficients from thin samples predict several times more and are not used.
"""

import difflib
import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

LINE_F, LINE_D, LINE_C = 0.48613, 0.58756, 0.65627  # µm; hydrogen F, helium d, hydrogen C


@dataclass(frozen=True)
class Sellmeier:
    """n² = 1 + Σ Bλ²/(λ² − C); ``terms`` holds the pairs (B, C), C in µm²."""

    terms: tuple[tuple[float, float], ...]

    def squared(self, wavelength):
        w2 = wavelength**2
        return 1.0 + sum(b * w2 / (w2 - c) for b, c in self.terms)


def from_abbe(index_d, abbe):
    """The one-term `Sellmeier` with this n_d and this Abbe number V_d."""

    def abbe_for(c):
        b = (index_d**2 - 1) * (1 - c / LINE_D**2)
        n_f, n_c = (math.sqrt(1 + b / (1 - c / line**2)) for line in (LINE_F, LINE_C))
        return (index_d - 1) / (n_f - n_c)

    low, high = 1e-6, 0.09  # µm²; C = 0.09 is a resonance at 0.3 µm, stronger than any clear material's
    for _ in range(60):  # halving: V falls as C grows; 60 halvings exhaust double precision
        middle = 0.5 * (low + high)
        low, high = (middle, high) if abbe_for(middle) > abbe else (low, middle)
    return Sellmeier((((index_d**2 - 1) * (1 - middle / LINE_D**2), middle),))


@dataclass(frozen=True)
class Powers:
    """n² = Σ c λᵏ; ``terms`` holds the pairs (k, c)."""

    terms: tuple[tuple[int, float], ...]

    def squared(self, wavelength):
        return sum(c * wavelength**k for k, c in self.terms)


@dataclass(frozen=True)
class Lines:
    """Least squares of n² − 1 in 1, 1/λ², 1/λ⁴ through ``lines``: triples (λ µm, n, weight)."""

    lines: tuple[tuple[float, float, float], ...]

    @cached_property
    def coefficients(self):
        wavelength, index, weight = np.array(self.lines).T
        columns = np.stack([np.ones_like(wavelength), wavelength**-2, wavelength**-4], axis=-1)
        return np.linalg.lstsq(columns * weight[:, None], (index**2 - 1) * weight, rcond=None)[0]

    def squared(self, wavelength):
        a0, a1, a2 = self.coefficients
        return 1.0 + a0 + a1 * wavelength**-2.0 + a2 * wavelength**-4.0


@dataclass(frozen=True)
class Constant:
    """The same index at every wavelength."""

    value: float

    def squared(self, wavelength):
        return self.value**2 + 0.0 * wavelength


@dataclass(frozen=True)
class Material:
    """A clear material. A constant that is unknown, or has no meaning here, is None.

    ``sources`` says for each constant where it comes from, under the constant's own name.
    """

    name: str
    dispersion: Sellmeier | Powers | Lines | Constant
    valid: tuple[float, float]  # µm, range of the dispersion
    absorption: float = 0.0  # 1/mm, bulk loss of real parts near 0.55 µm
    density: float | None = None  # g/mm³
    index_per_kelvin: float | None = None  # dn/dT, 1/K
    expansion: float | None = None  # linear, 1/K
    shrinkage: float | None = None  # linear, of the moulded part, fraction
    diffusivity: float | None = None  # thermal, mm²/s
    melt: float | None = None  # °C
    mould: float | None = None  # °C
    eject: float | None = None  # °C
    softens: float | None = None  # °C; keep the part well below
    sources: Mapping[str, str] = field(default_factory=dict, hash=False, compare=False)

    def index(self, wavelength_um):
        """Refractive index at ``wavelength_um`` (a number or an array), same shape.

        Raises ValueError outside the measured range.
        """
        wavelength = np.asarray(wavelength_um, float)
        low, high = self.valid
        if not np.all((wavelength >= low) & (wavelength <= high)):
            raise ValueError(
                f"{self.name}: index asked at {wavelength_um} µm, measured from {low} to {high} µm only. "
                "Choose a wavelength inside, or give a plain index."
            )
        n = np.sqrt(self.dispersion.squared(wavelength))
        return float(n) if n.ndim == 0 else n

    @property
    def abbe(self):
        """Abbe number V_d, infinite without dispersion; ValueError when a line is outside the range."""
        spread = self.index(LINE_F) - self.index(LINE_C)
        return (self.index(LINE_D) - 1) / spread if spread else math.inf


_DATABASE = "coefficients as in the CC0 database refractiveindex.info"
_MOULDER = "a moulder's table"
_REAL_PART = "Lauret, SPIE Newsroom, 8 Apr 2011: 1-2 % in real acrylic collimators; taken as 1.5 % over 20 mm"
_MEMORY = "from memory"
_PRACTICE = "common practice, no source"
_PROCESS = dict.fromkeys(("shrinkage", "diffusivity", "melt", "mould", "eject"), _MEMORY)

PMMA = Material(
    name="PMMA",
    dispersion=Powers(
        ((0, 2.1778), (2, 6.1209e-3), (4, -1.5004e-3), (-2, 2.3678e-2), (-4, -4.2137e-3), (-6, 7.3417e-4),
         (-8, -4.5042e-5))
    ),
    valid=(0.42, 1.62),
    absorption=7.6e-4,
    density=1.19e-3,
    index_per_kelvin=-8.5e-5,
    expansion=6.5e-5,
    shrinkage=0.004,
    diffusivity=0.11,
    melt=240.0,
    mould=70.0,
    eject=90.0,
    softens=100.0,
    sources={
        "dispersion": f"Beadie et al., Appl. Opt. 54, F139 (2015); {_DATABASE}",
        "absorption": _REAL_PART,
        "density": _MEMORY,
        "index_per_kelvin": _MOULDER,
        "expansion": f"{_MOULDER}: 6-7e-5",
        "softens": _PRACTICE,
        **_PROCESS,
    },
)

# F, d and C weigh more than the other lines: they fix the visible dispersion. These weights, tried by hand,
# keep every line of the table within its ±0.001 and V within the 3.5 % that rounding of n_F and n_d leaves.
_PC_LINE_C = 1.599 - (1.585 - 1) / 29.1  # n_C from the tabulated n_F, n_d and V_d
PC = Material(
    name="PC",
    dispersion=Lines(
        ((0.4368, 1.612, 1), (LINE_F, 1.599, 2), (LINE_D, 1.585, 3), (0.6328, 1.580, 1),
         (LINE_C, _PC_LINE_C, 3), (0.703, 1.575, 1), (0.833, 1.569, 1), (0.879, 1.568, 1), (1.052, 1.565, 1))
    ),
    valid=(0.4368, 1.052),
    absorption=1.5e-3,
    density=1.20e-3,
    index_per_kelvin=-13.0e-5,
    expansion=6.5e-5,
    shrinkage=0.006,
    diffusivity=0.14,
    melt=300.0,
    mould=100.0,
    eject=125.0,
    softens=125.0,
    sources={
        "dispersion": "raw table and V_d of Sultanova et al., Acta Phys. Pol. A 116, 585 (2009), ±0.001",
        "absorption": f"{_PRACTICE}: about twice that of PMMA",
        "density": _MEMORY,
        "index_per_kelvin": f"{_MOULDER}: -11.8e-5 to -14.3e-5, middle",
        "expansion": f"{_MOULDER}: 6-7e-5",
        "softens": _PRACTICE,
        **_PROCESS,
    },
)

COP = Material(
    name="COP",
    dispersion=from_abbe(1.5305, 56.0),
    valid=(0.4368, 1.052),
    absorption=7.6e-4,
    density=1.01e-3,
    index_per_kelvin=-8.0e-5,
    expansion=6.5e-5,
    shrinkage=0.005,
    diffusivity=0.10,
    melt=280.0,
    mould=110.0,
    eject=125.0,
    softens=120.0,
    sources={
        "dispersion": "n_d: Sultanova et al., Acta Phys. Pol. A 116, 585 (2009); V_d = 56: material tables",
        "absorption": f"{_PRACTICE}: taken as that of PMMA",
        "density": _MEMORY,
        "index_per_kelvin": _MOULDER,
        "expansion": f"{_MOULDER}: 6-7e-5",
        "softens": _MEMORY,
        **_PROCESS,
    },
)

SILICONE = Material(
    name="silicone",
    dispersion=Sellmeier(((1.0093, 0.013185),)),
    valid=(0.35, 0.70),
    absorption=1.0e-3,
    density=1.03e-3,
    index_per_kelvin=-4.5e-4,
    expansion=3.0e-4,
    shrinkage=0.025,
    softens=150.0,
    sources={
        "dispersion": f"PDMS, Schneider et al., Sens. Actuators A 151, 95 (2009); {_DATABASE}",
        "absorption": f"{_PRACTICE}: about 1 % a centimetre",
        "density": _MEMORY,
        "index_per_kelvin": _MEMORY,
        "expansion": _MEMORY,
        "shrinkage": f"{_MEMORY}: 2-3 %",
        "softens": f"{_PRACTICE}: it does not melt; lasting service temperature",
    },
)

BK7 = Material(
    name="N-BK7",
    dispersion=Sellmeier(
        ((1.03961212, 0.00600069867), (0.231792344, 0.0200179144), (1.01046945, 103.560653))
    ),
    valid=(0.3, 2.5),
    absorption=1.6e-4,
    density=2.51e-3,
    index_per_kelvin=2.4e-6,
    expansion=7.1e-6,
    diffusivity=0.52,
    softens=557.0,
    sources={
        "dispersion": "maker's catalogue",
        "absorption": f"maker's catalogue: extinction 6.97e-9 at 0.546 µm; {_DATABASE}",
        "density": _MEMORY,
        "index_per_kelvin": f"{_MEMORY}: relative to air, e line, 20-40 °C",
        "expansion": _MEMORY,
        "diffusivity": _MEMORY,
        "softens": f"{_MEMORY}: transformation temperature",
    },
)

FUSED_SILICA = Material(
    name="fused silica",
    dispersion=Sellmeier(
        ((0.6961663, 0.0684043**2), (0.4079426, 0.1162414**2), (0.8974794, 9.896161**2))
    ),
    valid=(0.21, 6.7),
    absorption=1.0e-5,
    density=2.20e-3,
    index_per_kelvin=1.0e-5,
    expansion=5.5e-7,
    diffusivity=0.85,
    softens=1100.0,
    sources={
        "dispersion": f"Malitson, J. Opt. Soc. Am. 55, 1205 (1965); {_DATABASE}",
        "absorption": f"{_MEMORY}: internal transmission above 0.9999 a centimetre",
        "density": _MEMORY,
        "index_per_kelvin": _MEMORY,
        "expansion": _MEMORY,
        "diffusivity": _MEMORY,
        "softens": f"{_MEMORY}: annealing point, rounded down",
    },
)

WATER = Material(
    name="water",
    dispersion=Sellmeier(
        ((0.5684027565, 0.005101829712), (0.1726177391, 0.01821153936), (0.02086189578, 0.02620722293),
         (0.1130748688, 10.69792721))
    ),
    valid=(0.182, 1.129),
    absorption=5.7e-5,
    density=0.998e-3,
    index_per_kelvin=-9.0e-5,
    sources={
        "dispersion": f"20 °C, Daimon and Masumura, Appl. Opt. 46, 3811 (2007); {_DATABASE}",
        "absorption": f"Pope and Fry, Appl. Opt. 36, 8710 (1997), 0.0565 1/m at 0.55 µm, {_MEMORY}",
        "density": f"{_MEMORY}, 20 °C",
        "index_per_kelvin": _MEMORY,
    },
)

MATERIALS = {m.name: m for m in (PMMA, PC, COP, SILICONE, BK7, FUSED_SILICA, WATER)}

_OTHER_NAMES = {
    "acrylic": "PMMA",
    "polycarbonate": "PC",
    "cyclo-olefin": "COP",
    "PDMS": "silicone",
    "BK7": "N-BK7",
    "silica": "fused silica",
}


def _key(name):
    return name.strip().casefold().replace("_", " ")


def by_name(name):
    """The `Material` called ``name``, whatever the case; ValueError naming the nearest one known."""
    known = {_key(n): m for n, m in MATERIALS.items()}
    known |= {_key(other): MATERIALS[n] for other, n in _OTHER_NAMES.items()}
    if _key(name) in known:
        return known[_key(name)]
    near = difflib.get_close_matches(_key(name), known, n=1, cutoff=0.5)
    hint = f"Did you mean `{known[near[0]].name}`?" if near else "Name one of these, or give a plain index."
    raise ValueError(f"unknown material `{name}`; known are {', '.join(MATERIALS)}. {hint}")


def plain(index):
    """A material with this index at every wavelength, no absorption and no other constant.

    Raises ValueError unless ``index`` is a finite number above 1.
    """
    if not (math.isfinite(index) and index > 1.0):
        raise ValueError(f"plain index must be a number above 1, got {index}. Plastics have 1.49 to 1.59.")
    return Material(
        name=f"index {index:g}",
        dispersion=Constant(float(index)),
        valid=(0.0, math.inf),
        sources={"dispersion": "as given", "absorption": "none assumed"},
    )
