"""Figure paper: fonts, colours, and SVG and PNG that come out the same byte for byte.

A picture is drawn by a function that receives an empty figure.  Settings hold only while it is
drawn and start from matplotlib's own defaults, so neither the reader's settings file nor an
earlier figure can change it.  The palette is that of Okabe and Ito, Color Universal Design,
2008 (from memory), told apart by colour-blind readers; line styles differ as well.

SVG text stays text, so the page can be searched and read aloud, and takes the page's own font.
"""

import io
import re
from contextlib import contextmanager

import matplotlib
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

INK, SOFT, FAINT, PALE = "#1f2933", "#5b6670", "#a3adb5", "#eef1f4"
BLUE, SKY, GREEN, ORANGE = "#0072B2", "#56B4E9", "#009E73", "#E69F00"
RED, PURPLE, YELLOW = "#D55E00", "#CC79A7", "#F0E442"
WIDTH = 8.0  # inch; 576 pt across, so 9 pt letters are 12.5 px high in a column of 800 px
IMAGE_DPI = 144  # of images inside an SVG: two dots a point
PNG_DPI = 200  # 1600 px across
SETTINGS = {
    "font.family": ["DejaVu Sans"],  # ships with matplotlib: PNGs do not depend on installed fonts
    "font.size": 9.0,
    "axes.titlesize": 9.5,
    "axes.titlelocation": "left",
    "axes.labelsize": 9.0,
    "axes.labelcolor": INK,
    "axes.edgecolor": SOFT,
    "axes.linewidth": 0.7,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": True,
    "axes.axisbelow": True,
    "grid.color": "#dfe4e8",
    "grid.linewidth": 0.6,
    "text.color": INK,
    "text.parse_math": False,  # a dollar sign in a name is a dollar sign
    "xtick.color": SOFT,
    "ytick.color": SOFT,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "xtick.labelsize": 8.5,
    "ytick.labelsize": 8.5,
    "legend.frameon": False,
    "legend.fontsize": 8.5,
    "lines.linewidth": 1.6,
    "lines.solid_capstyle": "round",
    "svg.fonttype": "none",
    "svg.hashsalt": "inverse",
}
# Settings of the session, not of a drawing: left as they are.
SESSION = ("backend", "interactive", "toolbar", "timezone", "date.epoch", "tk.", "webagg.", "docstring")
PAGE_FONT = "system-ui, -apple-system, 'Segoe UI', 'Helvetica Neue', Arial, 'Liberation Sans', sans-serif"


@contextmanager
def paper():
    """Our figure settings for as long as the block lasts, on top of matplotlib's defaults."""
    default = {k: v for k, v in matplotlib.rcParamsDefault.items() if not k.startswith(SESSION)}
    with matplotlib.rc_context({**default, **SETTINGS}):
        yield


def picture(size, draw, prefix):
    """Draw once, save twice.

    ``size`` (width, height) inch; ``draw(figure)`` fills the figure; ``prefix`` sets this
    drawing's SVG ids apart from its neighbours' on the page.  Returns (SVG text for inlining,
    PNG bytes).
    """
    with paper():
        figure = Figure(figsize=size, layout="constrained", facecolor="white")
        FigureCanvasAgg(figure)
        draw(figure)
        vector, raster = io.StringIO(), io.BytesIO()
        figure.savefig(raster, format="png", dpi=PNG_DPI, metadata={"Software": None})
        figure.savefig(vector, format="svg", dpi=IMAGE_DPI, metadata={"Date": None, "Creator": None})
    return inline(vector.getvalue(), prefix), raster.getvalue()


def inline(svg, prefix):
    """An SVG document made fit to stand inside an HTML page: no prologue, no name spaces, own ids."""
    svg = svg[svg.index("<svg") :]
    svg = re.sub(r"<metadata>.*?</metadata>", "", svg, flags=re.S)
    svg = re.sub(r'\sxmlns(:\w+)?="[^"]*"', "", svg)
    head, body = svg.split(">", 1)
    body = re.sub(r"<style.*?</style>", "", body, flags=re.S)  # would leak into the page; see page.css
    head = re.sub(r'\s(width|height|version)="[^"]*"', "", head)
    body = re.sub(r'\bid="', f'id="{prefix}-', body)
    body = re.sub(r'((?:xlink:)?href=")#', rf"\1#{prefix}-", body)
    body = re.sub(r"url\(#", f"url(#{prefix}-", body)
    body = re.sub(r"'DejaVu Sans'(, [^;\"]*)?(?=[;\"])", PAGE_FONT, body)
    return head + ">" + body.strip()
