"""The tables of the report: which key of the result stands in which row, under what name and unit.

A row is a dict: ``key`` (the dotted path into result.json, kept in the page so that scripts and
tests can find it), ``name`` and ``text``.  Keys nobody foresaw are shown under their own name with
the unit their suffix tells; ``x_se`` is the standard error of ``x`` and never a row of its own.
"""

from inverse.report.digits import NO_BREAK, decimals, percent, quantity, signed, significant, tick, with_error
from inverse.report.wording import ordered

SUFFIXES = (  # longest first, so that _cd_per_lm is not read as _lm
    ("_cd_per_lm", "cd/lm"), ("_mm2sr", "mm²·sr"), ("_w_m2_sr", "W/(m²·sr)"), ("_mm3", "mm³"), ("_deg", "°"),
    ("_mm", "mm"), ("_um", "µm"), ("_lm", "lm"), ("_cd", "cd"), ("_lx", "lx"), ("_g", "g"), ("_m", "m"),
    ("_s", "s"), ("_share", "%"), ("share", "%"), ("efficiency", "%"), ("_ceiling", "%"), ("transmittance", "%"),
)  # fmt: skip
UNITS = {"deg": "°", "1": "", "": "", None: ""}
PHOTOMETRY = {
    "flux_lm": "Flux",
    "efficiency": "Optical efficiency",
    "peak_cd": "Peak intensity",
    "peak_cd_per_lm": "Peak intensity a lumen",
    "beam_angle_deg": "Beam angle, full, at 50 % of peak",
    "field_angle_deg": "Field angle, full, at 10 % of peak",
    "beam_distance_m": "Beam distance to 0.25 lx",
}
PART = {
    "material": "Material",
    "index": "Refractive index",
    "diameter_mm": "Diameter over all",
    "height_mm": "Height over all",
    "thickest_mm": "Thickest place",
    "volume_mm3": "Volume",
    "mass_g": "Mass",
}
LIMIT = {
    "ceiling": ("Largest share any lens of revolution can deliver", "%"),
    "etendue_ratio": ("Étendue, target ÷ source", "1"),
    "skewness_ceiling": ("Ceiling from skewness, before losses", "%"),
    "brightness_ceiling": ("Ceiling from brightness, before losses", "%"),
    "transmission": ("Transmission of two uncoated surfaces", "%"),
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
PATHS = 12  # told one by one
LUMEN_PLACES = 1
READERS = ("CAD colleague", "moulder", "lighting colleague", "everyone", "scripts", "slides and data sheets")


def rows(result, section, names=None):
    """Rows of ``result[section]``: the known keys in their order, then whatever else holds a plain value."""
    values, names = result.get(section) or {}, names or {}
    keys = [k for k in names if k in values] + [k for k in values if k not in names and not k.endswith("_se")]
    made = []
    for key in keys:
        value, known = values[key], names.get(key)
        if value is None or isinstance(value, (dict, list)):
            continue
        name, unit = known if isinstance(known, tuple) else (known or plain(key), unit_of(key))
        text = value if isinstance(value, str) else _text(key, value, unit, values.get(key + "_se"))
        made.append({"key": f"{section}.{key}", "name": name, "text": text})
    return made


def _text(key, value, unit, error):
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int):
        return str(value) + (NO_BREAK + unit if unit not in ("", "%") else "")
    if unit == "mm" and not error:
        return decimals(value, 2) + NO_BREAK + unit  # 0.01 mm: what a drawing states
    return quantity(value, unit, error, 5 if key == "index" else 3)


def unit_of(key):
    return next((unit for suffix, unit in SUFFIXES if key.endswith(suffix)), "")


def plain(key):
    """A key as words: ``cooling_time_s`` becomes "Cooling time"."""
    for suffix, _ in SUFFIXES:
        if suffix.startswith("_") and suffix not in ("_share", "_ceiling") and key.endswith(suffix):
            key = key[: -len(suffix)]
            break
    words = key.replace("_", " ").strip()
    return words[:1].upper() + words[1:]


def verdict(result):
    """Rows {name, key, found, wanted, mark}: mark is True (met), False (missed) or None (for information)."""
    wanted, got, limit = result.get("asked", {}), result.get("got", {}), result.get("limit", {})
    made = []
    if got.get("share") is not None:
        share, asked = got["share"], wanted.get("share")
        made.append(_judged("Light inside the target", "got.share", percent(share, got.get("share_se")),
                            f"at least {tick(100 * asked)}{NO_BREAK}%" if asked else "as much as possible",
                            share >= asked if asked else None))  # fmt: skip
    if limit.get("ceiling") is not None:
        made.append(_judged("Most that physics allows", "limit.ceiling", percent(limit["ceiling"]), "", None))
    if got.get("share_of_ceiling") is not None:
        made.append(_judged("Share of the limit", "got.share_of_ceiling", percent(got["share_of_ceiling"]), "", None))
    peak = (result.get("photometry") or {}).get("peak_cd")
    if peak is not None:
        made.append(_judged("Peak intensity", "photometry.peak_cd", _peak(result["photometry"]), "", None))
    constraints = result.get("constraints") or []
    if constraints:
        met = sum(bool(c["met"]) for c in constraints)
        made.append(_judged("Constraints met", "constraints", f"{met} of {len(constraints)}", "all", met == len(constraints)))
    agreement = result.get("agreement") or {}
    if agreement.get("difference") is not None:
        made.append(_judged("Two independent ray traces differ by", "agreement.difference", _difference(agreement),
                            "nothing beyond chance", agreement.get("agrees"), ("agree", "disagree")))  # fmt: skip
    return made


def _judged(name, key, found, wanted, mark, words=("met", "missed")):
    return {"name": name, "key": key, "found": found, "wanted": wanted, "mark": mark, "words": words}


def _peak(photometry):
    return quantity(photometry["peak_cd"], "cd", photometry.get("peak_cd_se"))


def _difference(agreement):
    text = with_error(100 * agreement["difference"], _scaled(agreement.get("sigma"), 100)) + NO_BREAK + "points"
    deviations = agreement.get("deviations")
    return text if deviations is None else f"{text} ({decimals(abs(deviations), 1)}{NO_BREAK}σ)"


def _scaled(value, factor):
    return None if value is None else factor * value


def ledger(result):
    """Rows {key, kind, words, text, lumens} of the energy ledger, the target first, and their sum."""
    accounts, errors = result.get("ledger") or {}, result.get("ledger_se") or {}
    flux = (result.get("emitter") or {}).get("flux_lm")
    made = []
    for key, kind, words, fraction in ordered(accounts):
        text = percent(fraction, errors.get(key))
        lumens = "" if flux is None else decimals(flux * fraction, LUMEN_PLACES) + NO_BREAK + "lm"
        made.append({"key": f"ledger.{key}", "kind": kind, "words": words, "text": text, "lumens": lumens})
    total = sum(accounts.values())
    lumens = "" if flux is None else decimals(flux * total, LUMEN_PLACES) + NO_BREAK + "lm"
    return made, {"text": percent(total, digits=5), "lumens": lumens}


def paths(result):
    """Rows {key, name, text} of the ways the light took, strongest first, the weak ones summed."""
    found = sorted((result.get("paths") or {}).items(), key=lambda pair: -pair[1])
    made = [
        {"key": f"paths.{name}", "name": name.replace("_", " ").replace(">", "→"), "text": percent(fraction)}
        for name, fraction in found[:PATHS]
    ]
    rest = found[PATHS:]
    if rest:
        total = percent(sum(fraction for _, fraction in rest))
        made.append({"key": "paths", "name": f"{len(rest)} weaker paths together", "text": total})
    return made


def constraints(result):
    """Rows {key, name, measured, bound, slack, met, active, where}; digits follow the slack that matters."""
    made = []
    for c in result.get("constraints") or []:
        unit = UNITS.get(c["unit"], c["unit"])
        show = _fixed(unit)
        bounds = [s + show(c[k]) for k, s in (("lower", "≥ "), ("upper", "≤ ")) if c.get(k) is not None]
        made.append({
            "key": f"constraints.{c['name']}", "name": c["name"], "met": bool(c["met"]), "active": bool(c.get("active")),
            "measured": _with_unit(show(c["measured"]), unit),
            "bound": _with_unit(" and ".join(bounds), unit) if bounds else "none",
            "slack": "" if c.get("slack") is None else _with_unit(signed(show(c["slack"])), unit),
            "where": place(c.get("where")),
        })  # fmt: skip
    return made


def _fixed(unit):
    """How a constraint in ``unit`` is written: to 1 µm and 0.01°, finer than a mould is made."""
    places = {"mm": 3, "°": 2}.get(unit)
    return significant if places is None else lambda value: decimals(value, places)


def _with_unit(text, unit):
    return text + unit if unit in ("", "°") else text + NO_BREAK + unit


def place(where):
    """Where a constraint is tightest: words as they are, a point (r, z) with its unit."""
    if where is None:
        return ""
    if isinstance(where, str):
        return where
    r, z = where
    return f"r = {decimals(r, 2)}, z = {decimals(z, 2)}{NO_BREAK}mm"


def search(result):
    """Rows {family, start, end, kept} of the starts that were tried."""
    return [
        {
            "family": str(s.get("family", "")),
            "start": _share(s.get("start_share")),
            "end": _share(s.get("end_share")),
            "kept": bool(s.get("kept")),
        }
        for s in result.get("search") or []
    ]


def _share(value):
    return "" if value is None else percent(value)


def files(names):
    """Rows {name, purpose, reader}, grouped by the person who needs them."""
    made = []
    for name in dict.fromkeys(names):
        suffix = "." + name.rsplit(".", 1)[-1]
        purpose, reader = FILES.get(name) or FILES.get(suffix) or ("", "everyone")
        made.append({"name": name, "purpose": purpose, "reader": reader})
    return sorted(made, key=lambda row: READERS.index(row["reader"]))
