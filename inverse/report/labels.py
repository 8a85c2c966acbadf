"""Names and units of the keys of result.json, and what each file of a run is for.

A key nobody foresaw is named after itself and gets the unit its suffix tells.
"""

SUFFIXES = (  # longest first, so that _cd_per_lm is not read as _lm
    ("_cd_per_lm", "cd/lm"), ("_mm2sr", "mm²·sr"), ("_w_m2_sr", "W/(m²·sr)"), ("_mm3", "mm³"), ("_deg", "°"),
    ("_mm", "mm"), ("_um", "µm"), ("_lm", "lm"), ("_cd", "cd"), ("_lx", "lx"), ("_g", "g"), ("_m", "m"),
    ("_s", "s"), ("_share", "%"), ("share", "%"), ("efficiency", "%"), ("_ceiling", "%"),
    ("transmittance", "%"),
)  # fmt: skip
UNITS = {"deg": "°", "1": "", "": "", None: ""}
PHOTOMETRY = {
    "flux_lm": "Flux",
    "efficiency": "Optical efficiency",
    "peak_cd": "Peak intensity",
    "peak_cd_per_lm": "Peak intensity a lumen",
    "peak_at_deg": "Peak stands at",
    "beam_angle_deg": "Beam angle, full, at 50 % of peak",
    "field_angle_deg": "Field angle, full, at 10 % of peak",
    "beam_distance_m": "Beam distance to 0.25 lx",
    "ring_contrast": "Contrast of the worst ring (0: none)",
}
PART = {
    "material": "Material",
    "index": "Refractive index",
    "wavelength_um": "Design wavelength",
    "diameter_mm": "Diameter over all",
    "height_mm": "Height over all",
    "thickest_mm": "Thickest place",
    "volume_mm3": "Volume",
    "mass_g": "Mass",
}
LIMIT = {
    "ceiling": ("Largest share any body of revolution can deliver", "%"),
    "ceiling_with_losses": ("The same with uncoated surfaces", "%"),
    "etendue_ratio": ("Étendue, target ÷ source", "1"),
    "skewness_ceiling": ("Ceiling from skewness, before losses", "%"),
    "brightness_ceiling": ("Ceiling from brightness, before losses", "%"),
    "transmission": ("Transmission of the uncoated surfaces", "%"),
    "smallest_aperture_mm": ("Smallest aperture for this beam", "mm"),
    "narrowest_half_angle_deg": ("Narrowest half-angle from this aperture", "°"),
    "largest_candela": ("Largest intensity on the axis", "cd"),
    "source_etendue_mm2sr": ("Étendue of the source", "mm²·sr"),
    "target_etendue_mm2sr": ("Étendue of the target", "mm²·sr"),
}
STAMP = {
    "version": "Version of inverse",
    "brief_sha256": "SHA-256 of the brief",
    "seed": "Random seed",
    "effort": "Effort of the search",
    "precision": "Precision",
    "jax": "JAX",
    "numpy": "NumPy",
}
FILES = {  # name or suffix -> what it is for, whom it is for
    "brief.toml": ("the brief as resolved, with every default: run it again to get this lens", "everyone"),
    "lens.step": ("the solid, in mm, emitter at the origin, light towards +z", "CAD colleague"),
    "lens.dxf": ("the section as a dimensioned drawing with exact curves", "moulder"),
    "lens.json": ("the exact curves: degree, knots, control points", "CAD colleague"),
    "profile.csv": ("points and slopes along every curve, for toolmaking and measuring", "moulder"),
    "beam.ies": ("the beam as LM-63 photometric file", "lighting colleague"),
    "beam.ldt": ("the beam as EULUMDAT photometric file", "lighting colleague"),
    "result.json": ("every figure of this page, with its standard error where it has one", "scripts"),
    "log.csv": ("the search step by step", "scripts"),
    "report.html": ("this page", "everyone"),
    "section.png": ("picture: lens, LED and rays", "slides and data sheets"),
    "beam.png": ("picture: intensity over angle", "slides and data sheets"),
    "encircled.png": ("picture: encircled flux and its limit", "slides and data sheets"),
    "spot.png": ("picture: the spot on a wall", "slides and data sheets"),
    "convergence.png": ("picture: the search", "slides and data sheets"),
    ".tm25ray": ("rays of the beam in IES TM-25 form", "lighting colleague"),
    ".stl": ("the solid as triangles, for a look or a print, not for a mould", "CAD colleague"),
    ".png": ("picture", "slides and data sheets"),
    ".csv": ("table", "scripts"),
    ".json": ("data", "scripts"),
}
READERS = ("CAD colleague", "moulder", "lighting colleague", "everyone", "scripts", "slides and data sheets")


def unit_of(key):
    """The unit the suffix of ``key`` tells, "" when it tells none."""
    return next((unit for suffix, unit in SUFFIXES if key.endswith(suffix)), "")


def plain(key):
    """A key as words: ``cooling_time_s`` becomes "Cooling time"."""
    for suffix, _ in SUFFIXES:
        if suffix.startswith("_") and suffix not in ("_share", "_ceiling") and key.endswith(suffix):
            key = key[: -len(suffix)]
            break
    words = key.replace("_", " ").strip()
    return words[:1].upper() + words[1:]
