"""What a person sees at the end: what was asked, what physics allows, what was got, in a few lines.

Reads the blocks of ``result.json``; a figure that is not there is shown as a dash, never made up.
"""

from inverse.report.digits import MINUS, NARROW, NO_BREAK, quantity

DASH = "-"
TYPED = str.maketrans({NARROW: " ", NO_BREAK: " ", MINUS: "-"})  # what grep and a terminal font can take
ASCII = {"±": "+/-", "°": " deg", "×": "x", "√": "sqrt ", "µ": "u", "²": "2", "é": "e"}


def typed(text, encoding):
    """``text`` with the typographer's blanks and minus replaced, and in ASCII where the stream needs it."""
    text = text.translate(TYPED)
    if (encoding or "ascii").lower().replace("-", "").startswith("utf"):
        return text
    for sign, plain in ASCII.items():
        text = text.replace(sign, plain)
    return text


def figure(block, key, unit="", error=None, digits=4):
    """One figure of a block with its error and unit, or a dash."""
    value = block.get(key)
    if value is None:
        return DASH
    return quantity(value, unit, block.get(error) if error else None, digits)


class Page:
    """Lines and columns on the stream of a rich ``console``."""

    def __init__(self, console):
        self.console = console

    def line(self, text="", style=None):
        """One line, never cut, so that paths can be copied."""
        text = typed(text, self.console.encoding)
        self.console.print(text, style=style, markup=False, highlight=False, soft_wrap=True)

    def columns(self, rows, heading=None):
        """Rows of equal length under a heading, set in columns."""
        rows = [heading, *rows] if heading else rows
        rows = [[typed(cell, self.console.encoding) for cell in row] for row in rows]
        widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
        for number, row in enumerate(rows):
            text = "  ".join(cell.ljust(width) for cell, width in zip(row, widths)).rstrip()
            self.line("  " + text, style="dim" if heading and number == 0 else None)


def limits(page, brief, found):
    """The answer of ``inverse limit``."""
    page.line(f"{brief.name}: what no lens can beat", style="bold")
    rows = [
        ("largest share in the target, before surface losses", figure(found, "ceiling", "%")),
        ("   by the étendue of target over source", figure(found, "etendue_ratio")),
        ("   by skewness (any body of revolution)", figure(found, "skewness_ceiling", "%")),
        ("   by brightness", figure(found, "brightness_ceiling", "%")),
        ("transmission of the uncoated faces", figure(found, "transmission", "%")),
        ("largest share through uncoated faces", figure(found, "ceiling_with_losses", "%")),
        ("smallest clear diameter for this beam", figure(found, "smallest_aperture_mm", "mm")),
        ("narrowest half-angle for this lens", figure(found, "narrowest_half_angle_deg", "°")),
        ("largest intensity on the axis", figure(found, "largest_candela", "cd")),
        ("étendue of the source", figure(found, "source_etendue_mm2sr", "mm² sr")),
        ("étendue of the target", figure(found, "target_etendue_mm2sr", "mm² sr")),
    ]
    page.columns([row for row in rows if row[1] != DASH])


def run(page, result, folder):
    """The answer of ``inverse design`` and ``inverse verify``."""
    asked, limit, got, light, part = (
        result.get(block) or {} for block in ("asked", "limit", "got", "photometry", "part")
    )
    reachable = "ceiling_with_losses" if "ceiling_with_losses" in limit else "ceiling"
    rows = [
        ["share in the target", figure(asked, "share", "%"), figure(limit, reachable, "%"),
         figure(got, "share", "%", "share_se")],
        ["share of the ceiling", DASH, DASH, figure(got, "share_of_ceiling", "%")],
        ["half-angle of the target", figure(asked, "half_angle_deg", "°"),
         figure(limit, "narrowest_half_angle_deg", "°"), DASH],
        ["beam angle at 50 %", figure(asked, "beam_angle_deg", "°"), DASH,
         figure(light, "beam_angle_deg", "°")],
        ["peak intensity", DASH, figure(limit, "largest_candela", "cd"), figure(light, "peak_cd", "cd")],
        ["clear diameter", figure(asked, "aperture_mm", "mm"), figure(limit, "smallest_aperture_mm", "mm"),
         DASH],
        ["diameter of the part", DASH, DASH, figure(part, "diameter_mm", "mm")],
    ]
    rows = [row for row in rows if any(cell != DASH for cell in row[1:])]
    page.columns(rows, ["", "asked", "limit", "got"])
    for sentence in constraints(result.get("constraints") or []):
        page.line(sentence)
    for sentence in agreement(result.get("agreement") or {}):
        page.line(sentence)
    verdict, stopped = result["verdict"], result.get("stopped") or {}
    page.line(f"{result.get('name', folder.name)}: {verdict['word']}", style="bold")
    for sentence in [*verdict.get("missing", []), stopped.get("advice")]:
        if sentence:
            page.line(f"  {sentence}")
    for name in result.get("files", []):
        page.line(str(folder / name))


def constraints(found):
    """One sentence for all constraints that are met, one for each that is not."""
    if not found:
        return
    met = [c for c in found if c["met"]]
    active = ", ".join(c["name"] for c in met if c.get("active"))
    yield f"{len(met)} of {len(found)} constraints met" + (f"; at their limit: {active}" if active else "")
    for c in found:
        if not c["met"]:
            ends = [(sign, c.get(end)) for sign, end in ((">=", "lower"), ("<=", "upper"))]
            wanted = [f"{sign} {quantity(end, c['unit'])}" for sign, end in ends if end is not None]
            measured = quantity(c["measured"], c["unit"])
            where = f", at {c['where']}" if c.get("where") else ""
            yield f"  not met: {c['name']} {measured}, wanted {' and '.join(wanted)}{where}"


def agreement(found):
    """Whether the two tracers tell the same story."""
    if "agrees" in found:
        word = "agree" if found["agrees"] else "DISAGREE: do not use this lens"
        yield f"tracer and independent check {word} ({abs(found['deviations']):.1f} standard errors apart)"
