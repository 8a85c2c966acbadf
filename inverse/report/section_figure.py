"""The lens in section, with its LED and rays.

The half plane (r, z) is mirrored, scales are equal, light leaves upwards.  Curves are drawn by
what they are for: refracting, reflecting (total reflection wanted) or mechanical.  Names stand
in two columns beside the lens, spread so that none covers another.
"""

import numpy as np
from matplotlib.collections import LineCollection
from matplotlib.patches import Polygon, Rectangle
from matplotlib.patheffects import Normal, Stroke

from inverse.profile.section import MECHANICAL, REFLECTING, REFRACTING
from inverse.report.canvas import BLUE, FAINT, GREEN, INK, RED, SOFT, WIDTH

OUTLINE = {REFRACTING: (INK, 1.4), REFLECTING: (GREEN, 2.4), MECHANICAL: (SOFT, 1.1)}
INNER = ("centre lens", "pocket wall", "foot", "LED")  # named on the left, the others on the right
GLASS, DOME, DIE = "#dce9f3", "#fdf3c8", "#f2b705"
LENS_WIDTH = 0.60  # of the picture's width; the rest is for the names
BEAM_ABOVE = 0.42  # height of free beam shown, in heights of the lens
LINE = 0.023  # distance of two lines of text in widths of the picture: 13 points of 576
PER_CURVE = 160  # points a curve: chords of a 20 mm lens stay within a few µm, far below a pixel
HALO = [Stroke(linewidth=2.4, foreground="white", alpha=0.85), Normal()]


def picture_size(section):
    """(width, height) inch that fits the lens, its names and some beam at equal scales."""
    left, right, low, high = bounds(section)
    return WIDTH, float(np.clip(WIDTH * (high - low) / (right - left) + 0.55, 3.0, 9.0))


def bounds(section):
    """Limits (left, right, low, high) in mm of the drawing."""
    points, _ = section.dense(PER_CURVE)
    reach, low, top = points[:, 0].max(), points[:, 1].min(), points[:, 1].max()
    half = reach / LENS_WIDTH
    return -half, half, low - 0.10 * (top - low), top + BEAM_ABOVE * (top - low)


def draw_section(ax, section, rays=None, emitter=None, *, labels=True):
    """Draw ``section`` on ``ax`` and set its limits and equal scales.

    ``rays``: {"centre": [...], "edge": [...]} of polylines (k, 2), columns r (signed) and z in mm;
    those that end above the lens are carried on to the upper edge of the drawing.
    ``emitter``: {"reach_mm", "dome_radius_mm", "above_board_mm"}, each optional; without
    ``reach_mm`` the die is as wide as the edge rays' starting points.  ``labels`` names the curves.
    """
    rays, emitter = rays or {}, emitter or {}
    left, right, low, high = bounds(section)
    _lens(ax, section)
    parts = _led(ax, section, rays, emitter, left, right)
    for key, colour in (("edge", RED), ("centre", BLUE)):
        lines = [_carried_on(np.asarray(p, float), section, high) for p in rays.get(key, ())]
        ax.add_collection(LineCollection(lines, colors=colour, linewidths=0.7, alpha=0.75, zorder=3))
    ax.axvline(0.0, color=FAINT, linewidth=0.7, dashes=(9, 3, 2, 3), zorder=1)
    ax.set(xlim=(left, right), ylim=(low, high), aspect="equal")
    _key(ax, rays)
    ax.grid(False)
    ax.spines["left"].set_visible(False)
    ax.tick_params(left=False, labelleft=False)
    ax.set_xlabel("r / mm")
    ax.spines["bottom"].set_bounds(LENS_WIDTH * left, LENS_WIDTH * right)
    ax.set_xticks([x for x in ax.get_xticks() if abs(x) <= LENS_WIDTH * right])
    if labels:
        _names(ax, section, parts)


def _carried_on(path, section, high):
    """A ray (k, 2) that has left upwards, its last leg carried on to the upper edge of the drawing."""
    top = section.dense(PER_CURVE)[0][:, 1].max()
    (r0, z0), (r1, z1) = path[-2:]
    if not (z1 > z0 and top < z1 < high):
        return path
    return np.concatenate([path, [(r1 + (high - z1) * (r1 - r0) / (z1 - z0), high)]])


def _lens(ax, section):
    points, _ = section.dense(PER_CURVE)
    outline = points[:, :2]
    mirrored = outline[::-1] * (-1, 1)
    ax.add_patch(Polygon(np.concatenate([outline, mirrored]), facecolor=GLASS, edgecolor="none", zorder=2))
    for curve in section.curves:
        colour, width = OUTLINE[curve.role]
        r, z = curve.at(np.linspace(0.0, 1.0, PER_CURVE)).T
        for side in (1, -1):
            ax.plot(side * r, z, color=colour, linewidth=width, zorder=4)


def _led(ax, section, rays, emitter, left, right):
    """Board, package, die and dome; returns what of it to name, [(name, (r, z))]."""
    points, _ = section.dense(PER_CURVE)
    foot = points[:, 1].min()
    board = -emitter["above_board_mm"] if "above_board_mm" in emitter else min(foot, 0.0)
    starts = [abs(p[0][0]) for p in rays.get("edge", ())]
    reach = emitter.get("reach_mm") or max(starts, default=0.0)
    thickness = 0.05 * (points[:, 1].max() - foot)
    corner, width = (0.62 * left, board - thickness), 0.62 * (right - left)
    ax.add_patch(Rectangle(corner, width, thickness, facecolor="#c9d0d6", zorder=1))
    named = [("board", (0.5 * right, board - thickness / 2))]
    if reach <= 0:
        return named
    dome = emitter.get("dome_radius_mm")
    half = 1.08 * max(reach, dome or 0.0)
    if board < 0:
        ax.add_patch(Rectangle((-half, board), 2 * half, -board, facecolor="#8b959d", zorder=2))
    if dome:
        t = np.linspace(0.0, np.pi, 90)
        arc = dome * np.column_stack([np.cos(t), np.sin(t)])
        ax.add_patch(Polygon(arc, facecolor=DOME, edgecolor="#b59a3c", linewidth=0.8, zorder=2))
    ax.plot([-reach, reach], [0, 0], color=DIE, linewidth=3.2, solid_capstyle="butt", zorder=5)
    return named + [("LED", (-0.7 * (dome or reach), 0.7 * (dome or 0.0)))]


def _key(ax, rays):
    words = {"centre": ("LED centre", BLUE), "edge": ("LED edge", RED)}
    shown = [words[k] for k in ("centre", "edge") if rays.get(k)]
    left, right, low, high = ax.get_xlim() + ax.get_ylim()
    x, y, gap = left + 0.005 * (right - left), high, LINE * (right - left)
    if shown:
        ax.text(x, y - gap, "Rays from the", va="center")
    for i, (text, colour) in enumerate(shown):
        y = high - (i + 2) * gap
        ax.plot([x, x + 1.4 * gap], [y, y], color=colour, linewidth=1.6)
        ax.text(x + 1.9 * gap, y, text, color=colour, va="center")


def _names(ax, section, parts):
    """Curve names, and ``parts`` [(name, (r, z))] that are no curves, beside the lens."""
    left, right, low, high = ax.get_xlim() + ax.get_ylim()
    gap = LINE * (right - left)
    anchors = [(c.name, _middle(c)) for c in section.curves] + parts
    for side, x in ((-1, 0.80 * left), (1, 0.80 * right)):
        mine = sorted(((n, p) for n, p in anchors if (n in INNER) == (side < 0)), key=lambda a: a[1][1])
        heights = spread([p[1] for _, p in mine], gap, low + gap / 2, high - 4 * gap)
        for (name, (r, z)), y in zip(mine, heights):
            line = [x - side * 0.01 * right, side * abs(r)], [y, z]
            ax.plot(*line, color=SOFT, linewidth=0.7, zorder=6, path_effects=HALO)
            ax.plot(*np.transpose([(side * abs(r), z)]), "o", color=INK, markersize=2.6, zorder=7)
            ax.text(x, y, name, ha="left" if side > 0 else "right", va="center", zorder=7)


def _middle(curve):
    """The point half way along a curve by length, (2,) mm."""
    points = curve.at(np.linspace(0.0, 1.0, PER_CURVE))
    length = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(points, axis=0).T))])
    return points[np.searchsorted(length, length[-1] / 2)]


def spread(wanted, gap, low, high):
    """Heights near the increasing ``wanted`` (k,), at least ``gap`` apart, from ``low`` up.

    They stay below ``high`` while there is room for all; otherwise they run over the top.
    """
    heights = np.array(wanted, float)
    for i in range(1, len(heights)):
        heights[i] = max(heights[i], heights[i - 1] + gap)
    ceiling = high
    for i in range(len(heights) - 1, -1, -1):
        heights[i] = min(heights[i], ceiling)
        ceiling = heights[i] - gap
    floor = low
    for i in range(len(heights)):
        heights[i] = max(heights[i], floor)
        floor = heights[i] + gap
    return heights
