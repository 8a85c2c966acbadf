"""Where the LED's light ends: one bar, a piece for every account."""

from inverse.report.canvas import BLUE, FAINT, GREEN, INK, ORANGE, PURPLE, RED, SKY, SOFT, YELLOW
from inverse.report.digits import percent

COLOURS = {
    "target": GREEN, "outside": SKY, "back": ORANGE, "foot": RED,
    "board": PURPLE, "material": YELLOW, "emitter": BLUE, "port": "#999933", "bouncing": SOFT, "other": FAINT,
}  # fmt: skip
ROOM = 0.075  # share of the bar a piece needs before its percentage fits inside
DARK = (GREEN, RED, SOFT, BLUE)  # pieces that want white letters


def draw_ledger(figure, accounts):
    """Fill ``figure`` from ``accounts`` [(kind, words, fraction)], in the order they are stacked."""
    ax = figure.subplots()
    left = 0.0
    for kind, _, fraction in accounts:
        colour = COLOURS[kind]
        ax.barh(0, fraction, left=left, color=colour, edgecolor="white", linewidth=1.2, height=0.8)
        if fraction >= ROOM:
            ax.text(left + fraction / 2, 0, percent(fraction), ha="center", va="center",
                    color="white" if colour in DARK else INK)  # fmt: skip
        left += fraction
    ax.set(xlim=(0, max(left, 1.0)), ylim=(-0.45, 0.45))
    ax.set_axis_off()
