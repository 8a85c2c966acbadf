"""How the search went: share and share ÷ ceiling, merit, and what is left of each constraint.

Steps are counted through all stages; lines are broken between them, for each stage may be another
starting shape and may measure the merit with another edge width.  Stages that share the words
before their first comma ("round 1, start 3: …") are shaded together.  *Slack* is the distance to
the nearer bound: negative means not met.  Columns of the log without a suffix are in internal
units, so angles are turned from rad to the degrees of result.json.
"""

import re

import numpy as np
from matplotlib.ticker import FuncFormatter, PercentFormatter

from inverse.report.canvas import BLUE, GREEN, INK, ORANGE, PALE, PURPLE, RED, SKY, SOFT
from inverse.report.digits import significant, tick
from inverse.report.section_figure import spread
from inverse.units import deg

COLOURS = (BLUE, RED, GREEN, PURPLE, ORANGE, SKY)
LETTER = 0.012  # width of a letter in widths of the drawing
SHOWN = len(COLOURS)  # constraints drawn a unit, the tightest first
NEAR = {"mm": 1.0, "deg": 3.0}  # slack beyond this is comfortable and not drawn to scale


def draw_convergence(figure, log_rows, constraints):
    """Fill ``figure`` from the rows of log.csv (text or numbers) and the constraints of result.json."""
    step, stages = timeline(log_rows)
    units = drawn_units(log_rows, constraints)
    axes = figure.subplots(2 + len(units), 1, sharex=True, height_ratios=[1.5, 1] + [1.2] * len(units))
    _shares(axes[0], step, log_rows, stages)
    _merit(axes[1], step, log_rows, stages)
    for ax, unit in zip(axes[2:], units):
        _slacks(ax, step, log_rows, stages, [c for c in constraints if c["unit"] == unit], unit)
    for ax in axes:
        for i, (_, first, last) in enumerate(groups(stages)):
            if i % 2:
                ax.axvspan(step[max(first - 1, 0)], step[last], color=PALE, linewidth=0, zorder=0)
    axes[-1].set_xlabel("step, through all stages")
    axes[-1].set_xlim(step[0], max(step[-1], step[0] + 1) * 1.22)
    axes[-1].xaxis.set_major_formatter(FuncFormatter(tick))


def drawn_units(log_rows, constraints):
    """Units that get a panel of slack: those of constraints with a column in the log."""
    present = {c["unit"] for c in constraints if slack(log_rows, c) is not None}
    return [u for u in NEAR if u in present] + sorted(present - set(NEAR))


def convergence_height(log_rows, constraints):
    """Height of the drawing in inch, a strip for every panel."""
    return 3.6 + 1.45 * len(drawn_units(log_rows, constraints))


def timeline(log_rows):
    """Cumulative steps (k,) and stages [(name, first row, last row)].

    A step that does not go up starts a new count: it is added to what came before.
    """
    raw, total, offset, stages = column(log_rows, "step"), [], 0.0, []
    for i, row in enumerate(log_rows):
        if i and raw[i] <= raw[i - 1]:
            offset = total[-1]
        total.append(offset + raw[i])
        if stages and stages[-1][0] == str(row.get("stage", "")):
            stages[-1][2] = i
        else:
            stages.append([str(row.get("stage", "")), i, i])
    return np.array(total), [tuple(s) for s in stages]


def groups(stages):
    """[(name, first row, last row)] of neighbouring stages with the same words before their first comma."""
    made = []
    for stage, first, last in stages:
        name = stage.split(",")[0].split(":")[0]
        if made and made[-1][0] == name:
            made[-1] = (name, made[-1][1], last)
        else:
            made.append((name, first, last))
    return made


def column(log_rows, name):
    """One column as numbers (k,); empty and missing cells are NaN, which leaves a gap in the line."""
    return np.array([_number(row.get(name)) for row in log_rows])


def _number(cell):
    return float("nan") if cell in (None, "") else float(cell)


def slack(log_rows, constraint):
    """Distance (k,) to the nearer bound over the log, or None when the log has no such column."""
    plain = _plain(constraint["name"])
    unit = _plain(constraint["unit"])
    key = next((k for k in log_rows[0] if _plain(k) in (plain, f"{plain}_{unit}")), None)
    if key is None:
        return None
    measured = column(log_rows, key)
    if unit == "deg" and _plain(key) == plain:
        measured = deg(measured)
    below = measured - constraint["lower"] if constraint.get("lower") is not None else np.inf
    above = constraint["upper"] - measured if constraint.get("upper") is not None else np.inf
    return np.minimum(below, above)


def _plain(name):
    return re.sub(r"\W+", "_", str(name).lower()).strip("_")


def _shares(ax, step, log_rows, stages):
    ends = []
    lines = ("share_over_ceiling", "share ÷ ceiling", INK), ("share", "share in target", BLUE)
    for name, words, colour in lines:
        values = column(log_rows, name)
        if np.isfinite(values).any():
            _pieces(ax, step, values, stages, color=colour)
            ends.append((values[np.isfinite(values)][-1], words, colour))
    _end_labels(ax, step, ends)
    ax.yaxis.set_major_formatter(PercentFormatter(1.0, decimals=0, symbol="\u00a0%"))
    for name, first, last in groups(stages):
        start = step[max(first - 1, 0)]
        if step[last] - start > (0.01 + LETTER * len(name)) * (step[-1] - step[0]):
            ax.text((start + step[last]) / 2, 1.02, name, transform=ax.get_xaxis_transform(),
                    ha="center", va="bottom", color=SOFT)  # fmt: skip


def _merit(ax, step, log_rows, stages):
    merit = column(log_rows, "merit")
    _pieces(ax, step, merit, stages, color=INK)
    finite = merit[np.isfinite(merit)]
    if len(finite) and finite.min() > 0 and finite.max() > 20 * finite.min():
        ax.set_yscale("log")
    ax.set_title("Merit (what the search lowers)")


def _pieces(ax, step, values, stages, **style):
    """One line a stage; a stage of a single row is a dot."""
    for _, first, last in stages:
        here = slice(first, last + 1)
        ax.plot(step[here], values[here], marker="." if first == last else "", **style)


def _slacks(ax, step, log_rows, stages, constraints, unit):
    found = [(c["name"], slack(log_rows, c)) for c in constraints]
    found = [(n, s) for n, s in found if s is not None and np.isfinite(s).any()]
    found.sort(key=lambda pair: pair[1][np.isfinite(pair[1])][-1])
    near = max(np.nanmax(np.abs(s)) for _, s in found[:SHOWN])
    near = min(1.1 * near, NEAR.get(unit, np.inf)) or 1.0
    ends = []
    for (name, values), colour in zip(found[:SHOWN], COLOURS):
        _pieces(ax, step, values, stages, color=colour, linewidth=1.3)
        last = values[np.isfinite(values)][-1]
        ends.append((last, name if last < near else f"{name}: {significant(last, 2)} ↑", colour))
    low = min(min(np.nanmin(s) for _, s in found[:SHOWN]), 0.0)
    ax.set_ylim(max(1.1 * low, -near) - 0.08 * near, near)
    ax.fill_between(step[[0, -1]], ax.get_ylim()[0], 0.0, color=RED, alpha=0.12, linewidth=0)
    ax.plot(step[[0, -1]], [0.0, 0.0], color=INK, linewidth=0.8)
    ax.yaxis.set_major_formatter(FuncFormatter(tick))
    more = f"; the {SHOWN} tightest of {len(found)}" if len(found) > SHOWN else ""
    ax.set_title(f"Slack of the constraints / {'°' if unit == 'deg' else unit} (red: not met{more})")
    _end_labels(ax, step, ends)


def _end_labels(ax, step, ends):
    """Name each line at its right end, [(last value, words, colour)], moved apart where they collide."""
    low, high = ax.get_ylim()
    gap = 0.13 * (high - low)
    ends = sorted(ends, key=lambda e: e[0])
    heights = spread([min(max(e[0], low), high) for e in ends], gap, low, high)
    for (_, words, colour), y in zip(ends, heights):
        box = dict(facecolor="white", edgecolor="none", pad=0.8)
        at = dict(xytext=(6, 0), textcoords="offset points", va="center")
        ax.annotate(words, (step[-1], y), color=colour, bbox=box, **at)
    ax.set_ylim(low, high)
