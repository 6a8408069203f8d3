"""The style of all figures: sizes in print, letters, lines; no global state of matplotlib is left changed."""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from codesign.report.house import CARD, INK, MUTED, RULE

if TYPE_CHECKING:
    from matplotlib.figure import Figure, SubFigure

    Panel = Figure | SubFigure

#: Millimetres per inch, and points per millimetre.
INCH, POINTS = 25.4, 72 / 25.4
#: Width of a figure in the text of an A4 page, and the page itself. [mm]
TEXT_WIDTH = 170.0
A4 = (210.0, 297.0)
#: Sizes of letters in print; none is smaller than the last. [pt]
TITLE, BODY, SMALL = 8.5, 8.0, 7.0
#: Parts of a page narrower than this have fewer columns and labels. [mm]
NARROW = 120.0
#: Width that axis labels and margins take beside axes, rather too much. [mm]
ROOM_BESIDE = 22.0
#: Dots per inch of a PNG.
DPI = 200

STYLE: dict[str, Any] = {
    "font.family": ["DejaVu Sans"], "font.size": BODY, "text.color": INK, "text.parse_math": False,
    "text.hinting": "none",
    "axes.titlesize": TITLE, "axes.titlelocation": "left", "axes.titleweight": "bold", "axes.titlecolor": INK,
    "axes.labelsize": BODY, "axes.labelcolor": INK, "axes.edgecolor": MUTED, "axes.linewidth": 0.7,
    "axes.spines.top": False, "axes.spines.right": False, "axes.axisbelow": True, "axes.facecolor": "none",
    "axes.unicode_minus": True, "axes.formatter.use_mathtext": False, "axes.formatter.useoffset": False,
    "axes.formatter.limits": (-9, 9),
    "xtick.labelsize": SMALL, "ytick.labelsize": SMALL, "xtick.color": MUTED, "ytick.color": MUTED,
    "xtick.labelcolor": INK, "ytick.labelcolor": INK, "xtick.major.width": 0.7, "ytick.major.width": 0.7,
    "xtick.major.size": 3, "ytick.major.size": 3, "grid.color": RULE, "grid.linewidth": 0.6,
    "lines.linewidth": 1.3, "lines.markersize": 4, "patch.linewidth": 0.6, "hatch.linewidth": 0.5,
    "legend.frameon": False, "legend.fontsize": SMALL, "legend.handlelength": 2.4, "legend.handletextpad": 0.6,
    "legend.columnspacing": 1.6, "legend.borderpad": 0.0, "legend.borderaxespad": 0.2, "legend.labelspacing": 0.35,
    "figure.facecolor": CARD, "savefig.facecolor": "auto", "figure.dpi": 100, "savefig.dpi": DPI,
    "svg.hashsalt": "codesign", "pdf.fonttype": 42, "pdf.compression": 6, "path.simplify": True,
    "figure.constrained_layout.h_pad": 0.03, "figure.constrained_layout.w_pad": 0.03,
}  # fmt: skip


@contextmanager
def house_style(**more: Any) -> Iterator[None]:
    """Make or draw artists in the house style; ``more`` are further settings of matplotlib."""
    import matplotlib as mpl

    with warnings.catch_warnings(), mpl.rc_context({**STYLE, **more}):
        # A part may be named in any script; what the font lacks is a box in print and right in SVG text.
        warnings.filterwarnings("ignore", message=r"Glyph .* missing from font", category=UserWarning)
        yield


def new_figure(width_mm: float = TEXT_WIDTH, height_mm: float = 95.0, *, layout: str | None = "constrained") -> Figure:
    """Return an empty figure of a size in print, drawn without a display.

    Parameters
    ----------
    width_mm, height_mm : float
        [mm]
    layout : {"constrained", None}
        Whether axes, labels and legends make room for each other.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width_mm / INCH, height_mm / INCH), layout=layout)
    FigureCanvasAgg(figure)
    return figure
