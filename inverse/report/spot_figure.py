"""The spot as an eye or a camera would see it on a white wall.

Screens decode grey values by a power law; to make screen luminance proportional to illuminance
each value is encoded with the sRGB curve of IEC 61966-2-1 (from memory):

    v = 12.92 E            for E <= 0.0031308
    v = 1.055 E^(1/2.4) - 0.055   above,      E = illuminance / white, clipped to [0, 1].

Two exposures are shown: the peak at white, and 16 times longer (4 stops), which shows the spill an
eye adapted to a dark room sees.  ``white`` is stated under each.
"""

import numpy as np
from mpl_toolkits.axes_grid1.anchored_artists import AnchoredSizeBar

from inverse.report.canvas import SKY
from inverse.report.digits import significant, tick
from inverse.report.grain import without_grain

STOPS = 4


def grey(relative):
    """sRGB grey value in [0, 1] for relative luminance, any shape; values outside [0, 1] are clipped."""
    E = np.clip(relative, 0.0, 1.0)
    return np.where(E <= 0.0031308, 12.92 * E, 1.055 * E ** (1 / 2.4) - 0.055)


def draw_spot(figure, spot, asked, photometry):
    """Fill ``figure`` from ``spot`` {grid (k, k), extent_mm or extent_deg, distance_mm, peak_lx?, peak_cd?}.

    The extent is the half width of the picture.
    """
    raw = np.array(spot["grid"], float)
    grid = without_grain(raw)
    half, unit = (spot["extent_mm"], "mm") if spot.get("extent_mm") else (spot["extent_deg"], "°")
    edge = _edge(spot, asked, unit)
    first, second = figure.subplots(1, 2, sharey=True)
    peak = _peak_lux(spot, photometry, grid.max() / raw.max())
    for ax, stops in ((first, 0), (second, STOPS)):
        image = grey(grid / grid.max() * 2.0**stops)
        extent = (-half, half, -half, half)
        ax.imshow(image, "gray", vmin=0, vmax=1, extent=extent, origin="lower", interpolation="bilinear")
        ax.grid(False)
        ax.set_xlabel(f"across the wall / {unit}" if unit == "mm" else "angle from the axis / °")
        white = "white = peak" if stops == 0 else f"white = peak ÷ {2**stops}"
        white += f" = {significant(peak[0] / 2**stops)} lx {peak[1]}" if peak else ""
        exposure = "Exposed for the peak" if stops == 0 else f"Exposed {2**stops} times longer"
        ax.set_title(exposure + "\n" + white)
        if edge:
            t = np.linspace(0, 2 * np.pi, 181)
            ax.plot(edge * np.cos(t), edge * np.sin(t), color=SKY, linewidth=1.0, dashes=(3, 3))
        _scale_bar(ax, spot, half, unit)
    first.set_ylabel(first.get_xlabel())


def _edge(spot, asked, unit):
    """Radius of the target in the unit of the picture, or None when it is not known."""
    angle = asked.get("half_angle_deg")
    if not angle or unit == "°":
        return angle
    distance = spot.get("distance_mm") or asked.get("distance_mm")
    return distance * np.tan(np.radians(angle)) if distance else None


def _peak_lux(spot, photometry, part):
    """(lux at the brightest point, where), or None: I / d², for a far-field picture at one metre.

    ``part``: peak of the picture shown over that of the grid, whose peak may be grain.
    """
    if spot.get("peak_lx"):
        return part * spot["peak_lx"], "on this wall"
    if not spot.get("extent_deg"):
        return None
    if spot.get("peak_cd"):
        return part * spot["peak_cd"], "at 1 m"  # lx = cd / m²
    return (photometry["peak_cd"], "at 1 m") if photometry.get("peak_cd") else None


def _scale_bar(ax, spot, half, unit):
    """A bar of a round number of mm: on this wall, or at 1 m for a far-field picture."""
    per_unit = 1.0 if unit == "mm" else 1000.0 * np.radians(1.0)  # mm at 1 m a degree, near the axis
    wanted = 0.5 * half * per_unit
    decade = 10.0 ** np.floor(np.log10(wanted))
    length = max(s * decade for s in (1, 2, 5) if s * decade <= wanted)
    words = f"{tick(length)} mm" + ("" if unit == "mm" else " at 1 m")
    style = dict(color="white", pad=0.5, sep=4, size_vertical=0.012 * half, label_top=True)
    bar = AnchoredSizeBar(ax.transData, length / per_unit, words, "lower right", **style)
    bar.patch.set(facecolor="black", edgecolor="none", alpha=0.55)
    ax.add_artist(bar)
