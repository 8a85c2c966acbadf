"""The report of a run: one page that stands alone, and its pictures as PNG.

The page holds its style and its drawings; it loads nothing, runs nothing and is the same byte for
byte whenever the same result is given.  Every part of the result may be missing: its chapter is
then left out.  Text from outside (names, places, paths) is escaped.
"""

import os
import tempfile
from pathlib import Path

from jinja2 import Environment, FileSystemLoader, StrictUndefined
from markupsafe import Markup, escape

from inverse.report import labels, tables, wording
from inverse.report.beam_figure import draw_beam, draw_encircled
from inverse.report.canvas import WIDTH, picture
from inverse.report.convergence_figure import convergence_height, draw_convergence, groups, timeline
from inverse.report.digits import percent
from inverse.report.ledger_figure import COLOURS, draw_ledger
from inverse.report.section_figure import draw_section, picture_size
from inverse.report.spot_figure import draw_spot

HERE = Path(__file__).parent


def write(folder, result, log_rows, section, rays):
    """Write report.html and the PNGs into ``folder``; returns the names of the files written.

    ``result``: the structure of result.json, plus optional "emitter" {reach_mm, dome_radius_mm,
    above_board_mm, flux_lm}, "spot" {grid, extent_mm or extent_deg, distance_mm, peak_lx or peak_cd}
    and "notes" [sentences].
    ``log_rows``: the rows of log.csv.  ``section``: the Section, or None.  ``rays``: {"centre",
    "edge"} lists of polylines (k, 2), r signed and z, mm.  Raises OSError when the folder cannot
    be written.
    """
    folder = Path(folder)
    drawings = pictures(result, log_rows, section, rays)
    written = [f"{name}.png" for name in drawings if name != "ledger"]
    for name in written:
        _replace(folder / name, drawings[name[:-4]][1])
    html = render(result, log_rows, {n: Markup(svg) for n, (svg, _) in drawings.items()}, section, written)
    _replace(folder / "report.html", html.encode("utf-8"))
    return ["report.html", *written]


def pictures(result, log_rows, section, rays):
    """{name: (SVG text, PNG bytes)} of every drawing the result has data for."""
    asked, photometry = result.get("asked") or {}, result.get("photometry") or {}
    wanted = {}
    if section is not None:
        emitter = result.get("emitter")
        wanted["section"] = (
            picture_size(section), lambda f: draw_section(f.subplots(), section, rays, emitter)
        )  # fmt: skip
    if (result.get("beam") or {}).get("candela"):
        wanted["beam"] = (WIDTH, 3.9), lambda f: draw_beam(f, result["beam"], asked, photometry)
    if (result.get("encircled") or {}).get("share"):
        got, limit = result.get("got") or {}, result.get("limit") or {}
        curve = result["encircled"]
        wanted["encircled"] = (WIDTH, 3.9), lambda f: draw_encircled(f, curve, asked, got, limit)
    if result.get("spot"):
        wanted["spot"] = (WIDTH, 4.5), lambda f: draw_spot(f, result["spot"], asked, photometry)
    if len(log_rows) > 1:
        constraints = result.get("constraints") or []
        size = WIDTH, convergence_height(log_rows, constraints)
        wanted["convergence"] = size, lambda f: draw_convergence(f, log_rows, constraints)
    if result.get("ledger"):
        accounts = [row[1:] for row in wording.ordered(result["ledger"])]
        wanted["ledger"] = (WIDTH, 0.62), lambda f: draw_ledger(f, accounts)
    return {name: picture(size, draw, name) for name, (size, draw) in wanted.items()}


def render(result, log_rows, figures, section, written):
    """The page as text. ``figures`` {name: Markup}; ``written`` names of the pictures beside it."""
    environment = Environment(
        loader=FileSystemLoader(HERE),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters["commands"] = commands
    accounts, total = tables.ledger(result)
    stages = timeline(log_rows)[1] if log_rows else []
    starts, more_starts = tables.search(result)
    tone, word = wording.outcome(result)
    return environment.get_template("page.html").render(
        style=Markup((HERE / "page.css").read_text(encoding="utf-8")),
        name=result.get("name") or "Lens",
        no_solid="lens.json" in (result.get("files") or ()) and "lens.step" not in result["files"],
        notes=result.get("notes") or [],
        tone=tone,
        word=word,
        headline=wording.headline(result),
        verdict=tables.verdict(result),
        figures=figures,
        size=_size(section),
        wanted_drawn=(result.get("beam") or {}).get("wanted_candela") is not None,
        kind=(result.get("asked") or {}).get("kind"),
        ledger=accounts,
        ledger_sum=total,
        colours=COLOURS,
        holds_back=wording.holds_back(result),
        paths=tables.paths(result),
        designed=_designed(result),
        constraints=tables.constraints(result),
        spots=tables.spots(result),
        photometry=tables.rows(result, "photometry", labels.PHOTOMETRY),
        part=tables.rows(result, "part", labels.PART),
        limit=tables.rows(result, "limit", labels.LIMIT),
        stages=[name for name, _, _ in groups(stages) if name],
        pieces=len(stages),
        stopped=result.get("stopped") or {},
        search=starts,
        more_starts=more_starts,
        blue_light=tables.rows(result, "blue_light"),
        material=(result.get("part") or {}).get("material"),
        stamp=tables.rows(result, "stamp", labels.STAMP),
        version=(result.get("stamp") or {}).get("version"),
        files=tables.files([*(result.get("files") or ()), "report.html", *written]),
    )


def commands(text):
    """Markup of ``text``: escaped, with what stands between backticks set as code."""
    parts = [escape(part) for part in text.split("`")]
    if len(parts) % 2 == 0:
        return escape(text)  # an odd backtick is just a character
    return Markup("").join(Markup("<code>{}</code>").format(p) if i % 2 else p for i, p in enumerate(parts))


def _size(section):
    if section is None:
        return None
    points, _ = section.dense(200)  # points a curve; the drawing's caption rounds to 0.01 mm
    return f"{2 * points[:, 0].max():.2f}", f"{points[:, 1].max() - points[:, 1].min():.2f}"


def _designed(result):
    got = result.get("got") or {}
    share = got.get("designed_paths_share")
    return None if share is None else percent(share, got.get("designed_paths_share_se"))


def _replace(path, data):
    """Write ``data`` beside ``path`` and put it in place in one step, so a reader never sees half a file."""
    handle, temporary = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(data)
        os.chmod(temporary, 0o644)  # mkstemp makes it private
        os.replace(temporary, path)
    except BaseException:
        os.unlink(temporary)
        raise
