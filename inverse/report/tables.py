"""The tables of the report: which key of the result stands in which row, under what name and unit.

A row is a dict: ``key`` (the dotted path into result.json, kept in the page so that scripts and
tests can find it), ``name`` and ``text``.  Keys nobody foresaw are shown under their own name with
the unit their suffix tells; ``x_se`` is the standard error of ``x`` and never a row of its own.
"""

from inverse.report.digits import (
    MINUS,
    NO_BREAK,
    decimals,
    percent,
    quantity,
    signed,
    significant,
    tick,
    with_error,
)
from inverse.report.labels import FILES, READERS, UNITS, plain, unit_of
from inverse.report.wording import best, ordered, part_of_best
from inverse.verify.ledger import DESIGNED

DOUBT = 2.0  # standard errors by which a share may fall short and still count as met, as in the verdict
PATHS = 12  # told one by one
FAINTEST = 1e-4  # of the emitted flux; weaker paths are only summed
STARTS = 10  # told one by one
LUMEN_PLACES = 1


def rows(result, section, names=None):
    """Rows of ``result[section]``: the known keys in their order, then whatever else holds a plain value."""
    values, names = result.get(section) or {}, names or {}
    keys = [k for k in names if k in values] + [k for k in values if k not in names and not _is_error(k)]
    made = []
    for key in keys:
        value, known = values[key], names.get(key)
        if value is None or isinstance(value, (dict, list)):
            continue
        name, unit = known if isinstance(known, tuple) else (known or plain(key), unit_of(key))
        text = value if isinstance(value, str) else _text(key, value, unit, _error(values, key))
        made.append({"key": f"{section}.{key}", "name": name, "text": text})
    return made


def _is_error(key):
    return key.endswith("_se") or "_se_" in key


def _error(values, key):
    """The standard error that belongs to ``key``: ``x_lm_se`` or ``x_se_lm`` for ``x_lm``."""
    stem, _, unit = key.rpartition("_")
    return values.get(key + "_se", values.get(f"{stem}_se_{unit}"))


def _text(key, value, unit, error):
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int):
        return str(value) + (NO_BREAK + unit if unit not in ("", "%") else "")
    if unit == "mm" and not error:
        return decimals(value, 2) + NO_BREAK + unit  # 0.01 mm: what a drawing states
    return quantity(value, unit, error, 5 if key == "index" else 3)


def verdict(result):
    """Rows {name, key, found, wanted, mark}: mark is True (met), False (missed) or None (for information)."""
    wanted, got, limit = result.get("asked", {}), result.get("got", {}), result.get("limit", {})
    made = []
    if got.get("share") is not None:
        share, error, asked = got["share"], got.get("share_se") or 0.0, wanted.get("share")
        made.append(_judged("Light inside the target", "got.share", percent(share, error),
                            f"at least {tick(100 * asked)}{NO_BREAK}%" if asked else "as much as possible",
                            share >= asked - DOUBT * error if asked else None))  # fmt: skip
    if best(limit) is not None:
        made.append(_judged("Best that physics allows", "verdict.best", percent(best(limit)), "", None))
    key, part = part_of_best(result)
    if key:
        made.append(_judged("Share of that best", key, percent(part), "", None))
    if got.get("shape_deviation") is not None:
        made.append(_judged("Deviation from the wanted beam, rms, of its peak", "got.shape_deviation",
                            percent(got["shape_deviation"]), "", None))  # fmt: skip
    peak = (result.get("photometry") or {}).get("peak_cd")
    if peak is not None:
        made.append(_judged("Peak intensity", "photometry.peak_cd", _peak(result["photometry"]), "", None))
    constraints = result.get("constraints") or []
    if constraints:
        met = sum(bool(c["met"]) for c in constraints)
        count = f"{met} of {len(constraints)}"
        made.append(_judged("Constraints met", "constraints", count, "all", met == len(constraints)))
    agreement = result.get("agreement") or {}
    if agreement.get("difference") is not None:
        name, found = "Two independent ray traces differ by", _difference(agreement)
        made.append(_judged(name, "agreement.difference", found, "nothing beyond chance",
                            agreement.get("agrees"), ("agree", "disagree")))  # fmt: skip
    return made


def _judged(name, key, found, wanted, mark, words=("met", "missed")):
    return {"name": name, "key": key, "found": found, "wanted": wanted, "mark": mark, "words": words}


def _peak(photometry):
    return quantity(photometry["peak_cd"], "cd", photometry.get("peak_cd_se"))


def _difference(agreement):
    sigma = agreement.get("sigma")
    points = with_error(100 * agreement["difference"], None if sigma is None else 100 * sigma)
    text = points + NO_BREAK + "points"
    deviations = agreement.get("deviations")
    return text if deviations is None else f"{text} ({decimals(abs(deviations), 1)}{NO_BREAK}σ)"


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
    """Rows {key, name, text, designed} of the ways the light took, strongest first, the weak ones summed.

    ``designed`` is None for the sum, which may hold both kinds.
    """
    found = sorted((result.get("paths") or {}).items(), key=lambda pair: -pair[1])
    told = [pair for pair in found[:PATHS] if pair[1] >= FAINTEST]
    made = [
        {"key": f"paths.{name}", "name": name, "text": percent(fraction), "designed": name in DESIGNED}
        for name, fraction in told
    ]
    rest = found[len(told) :]
    if rest:
        total = percent(sum(fraction for _, fraction in rest))
        name = "1 weaker path" if len(rest) == 1 else f"{len(rest)} weaker paths together"
        made.append({"key": "paths", "name": name, "text": total, "designed": None})
    return made


def constraints(result):
    """Rows {key, name, measured, bound, slack, met, active, where}; without a bound there is no verdict."""
    made = []
    for c in result.get("constraints") or []:
        unit = UNITS.get(c["unit"], c["unit"])
        show = _fixed(unit)
        bounds = [s + show(c[k]) for k, s in (("lower", "≥ "), ("upper", "≤ ")) if c.get(k) is not None]
        made.append({
            "key": f"constraints.{c['name']}", "name": c["name"],
            "met": bool(c["met"]), "active": bool(c.get("active")),
            "measured": _with_unit(show(c["measured"]), unit),
            "bound": _with_unit(" and ".join(bounds), unit) if bounds else "",
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
        tied = where.replace(" = ", f"{NO_BREAK}={NO_BREAK}").replace(" mm", f"{NO_BREAK}mm")
        return tied.replace(f"={NO_BREAK}-", f"={NO_BREAK}{MINUS}")
    r, z = where
    return f"r = {decimals(r, 2)}, z = {decimals(z, 2)}{NO_BREAK}mm"


def search(result):
    """(rows {family, start, end, kept} of the starts that were refined, how many more there were)."""
    starts = result.get("search") or []
    return [
        {
            "family": str(s.get("family", "")),
            "start": _share(s.get("start_score")),
            "end": _share(s.get("end_score")),
            "kept": bool(s.get("kept")),
        }
        for s in starts[:STARTS]
    ], max(len(starts) - STARTS, 0)


def _share(value):
    return "" if value is None else percent(value)


def spots(result):
    """Rows {distance, illuminance, half, nine_tenths} of what the beam does on a wall."""
    return [
        {
            "distance": tick(s["distance_m"]) + NO_BREAK + "m",
            "illuminance": quantity(s["illuminance_lx"], "lx"),
            "half": _diameter(s.get("diameter_half_flux_mm")),
            "nine_tenths": _diameter(s.get("diameter_nine_tenths_flux_mm")),
        }
        for s in (result.get("photometry") or {}).get("spots") or []
    ]


def _diameter(value):
    return "not inside 90°" if value is None else quantity(value, "mm")


def files(names):
    """Rows {name, purpose, reader}, grouped by the person who needs them."""
    made = []
    for name in dict.fromkeys(names):
        suffix = "." + name.rsplit(".", 1)[-1]
        purpose, reader = FILES.get(name) or FILES.get(suffix) or ("", "everyone")
        made.append({"name": name, "purpose": purpose, "reader": reader})
    return sorted(made, key=lambda row: READERS.index(row["reader"]))
