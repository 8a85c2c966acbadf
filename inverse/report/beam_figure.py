"""The beam: intensity over angle against the wanted one, and the encircled flux against its ceiling.

Intensity is drawn twice: in candela around the beam, and on a logarithmic scale from the axis to
90°, where stray light shows.  Encircled flux is the share of the emitted flux inside a half-angle;
the shaded region above the ceiling is out of reach.  Bands are ± 2 standard errors.
"""

import numpy as np
from matplotlib.ticker import FuncFormatter, PercentFormatter

from inverse.report.canvas import BLUE, FAINT, INK, PALE, RED, SOFT
from inverse.report.digits import NO_BREAK, decimals, percent, tick
from inverse.report.wording import best

BAND = 2.0  # standard errors either side
DECADES = 4.0  # shown of the logarithmic scale
AROUND = 2.6  # the close view reaches this many half-angles


def draw_beam(figure, beam, asked, photometry):
    """Fill ``figure`` from ``beam`` {angle_deg, candela, candela_se?, wanted_candela?}, all (k,)."""
    close, whole = figure.subplots(1, 2, width_ratios=(1.75, 1))
    angle, candela = np.array(beam["angle_deg"], float), np.array(beam["candela"], float)
    error = np.array(beam.get("candela_se", np.zeros_like(candela)), float)
    wanted = beam.get("wanted_candela")
    edge = asked.get("half_angle_deg")
    for ax in (close, whole):
        if wanted is not None:
            ax.plot(angle, wanted, color=INK, linewidth=1.2, linestyle=(0, (5, 2)), label="wanted")
        low, high = candela - BAND * error, candela + BAND * error
        if ax is whole:
            low = np.maximum(low, candela.max() * 10**-DECADES)
        ax.fill_between(angle, low, high, color=BLUE, alpha=0.25, linewidth=0)
        ax.plot(angle, candela, color=BLUE, label="this lens")
        if edge:
            ax.axvline(edge, color=RED, linewidth=1.0, dashes=(2, 2))
        ax.set_xlabel("angle from the axis / °")
    reach = min(90.0, AROUND * edge) if edge else _last_light(angle, candela)
    asked_for = wanted[: np.searchsorted(angle, reach)] if wanted is not None else []
    top = 1.12 * max(candela.max(), np.max(asked_for, initial=0.0))
    close.set(xlim=(0, reach), ylim=(0, top), ylabel="intensity / cd", title="Around the beam")
    close.yaxis.set_major_formatter(FuncFormatter(tick))
    if edge:
        words = f"target edge {decimals(edge, 2)}°"
        close.annotate(words, (edge, top), (5, -3), textcoords="offset points", color=RED, va="top")
    _widths(close, candela.max(), photometry, edge or 0.0, reach)
    close.legend(loc="upper right", bbox_to_anchor=(1.0, 0.93))
    whole.set(yscale="log", xlim=(0, 90), title="All angles, logarithmic")
    whole.set_ylim(candela.max() * 10**-DECADES, 2 * max(candela.max(), top / 1.12))
    whole.set_xticks([0, 30, 60, 90])
    whole.yaxis.set_major_formatter(FuncFormatter(tick))


def _last_light(angle, candela):
    """Angle beyond which the beam stays below 1 % of its peak, with a margin; degrees."""
    bright = angle[candela >= 0.01 * candela.max()]
    return min(90.0, 1.3 * bright[-1])


def _widths(ax, peak, photometry, edge, reach):
    for key, level, name in (("beam_angle_deg", 0.5, "beam angle"), ("field_angle_deg", 0.1, "field angle")):
        full = photometry.get(key)
        if full and full / 2 < reach:
            ax.plot([0, full / 2], [level * peak] * 2, color=SOFT, linewidth=0.9, marker="|", markersize=5)
            words = f"{name} {decimals(full, 1)}° ({round(100 * level)} %)"
            x = max(edge, full / 2) + 0.025 * reach
            ax.text(x, level * peak, words, color=SOFT, va="center", fontsize=8.5)


def draw_encircled(figure, encircled, asked, got, limit):
    """Fill ``figure`` from ``encircled`` {angle_deg, share, share_se?, ceiling?}, all (k,)."""
    ax = figure.subplots()
    angle, share = np.array(encircled["angle_deg"], float), np.array(encircled["share"], float)
    error = np.array(encircled.get("share_se", np.zeros_like(share)), float)
    edge = asked.get("half_angle_deg")
    reach = min(float(angle[-1]), 3.0 * edge) if edge else float(angle[-1])
    if encircled.get("ceiling") is not None:
        ceiling = np.array(encircled["ceiling"], float)
        ax.fill_between(angle, ceiling, 2.0, color=PALE, linewidth=0, zorder=0)
        ax.plot(angle, ceiling, color=INK, linewidth=1.2, linestyle=(0, (5, 2)))
        at = 0.72 * reach
        words = "best possible with uncoated surfaces"
        ax.text(at, np.interp(at, angle, ceiling) + 0.015, words, ha="center", va="bottom")
    ax.fill_between(angle, share - BAND * error, share + BAND * error, color=BLUE, alpha=0.25, linewidth=0)
    ax.plot(angle, share, color=BLUE)
    at = 0.72 * reach
    ax.text(at, np.interp(at, angle, share) - 0.02, "this lens", color=BLUE, ha="center", va="top")
    ax.set(xlim=(0, reach), ylim=(0, 1.0), xlabel="half-angle / °", ylabel="share of the LED's light inside")
    ax.yaxis.set_major_formatter(PercentFormatter(1.0, decimals=0, symbol="\u00a0%"))
    if edge:
        _at_the_edge(ax, edge, asked, got, limit, reach)


def _at_the_edge(ax, edge, asked, got, limit, reach):
    """The target's edge with what is found there, asked there and possible there."""
    ax.axvline(edge, color=RED, linewidth=1.0, dashes=(2, 2))
    lines = [f"At {decimals(edge, 2)}°, the target's edge"]
    for word, value, colour, marker, size in (
        ("possible", best(limit), INK, "_", 13),
        ("asked", asked.get("share"), RED, "_", 13),
        ("found", got.get("share"), BLUE, "o", 6),
    ):
        if value is None:
            continue
        ax.plot([edge], [value], marker, color=colour, markersize=size, markeredgewidth=2, zorder=5)
        shown = percent(value, got.get("share_se") if word == "found" else None)
        lines.append(f"{word}: {tick(100 * value) + NO_BREAK + '%' if word == 'asked' else shown}")
    box = dict(facecolor="white", edgecolor=FAINT, linewidth=0.6, boxstyle="round,pad=0.5")
    y, va = (0.09, "bottom") if (got.get("share") or 0.0) > 0.5 else (0.91, "top")  # where the curve is not
    ax.text(edge + 0.05 * reach, y, "\n".join(lines), linespacing=1.5, bbox=box, va=va, zorder=6)
