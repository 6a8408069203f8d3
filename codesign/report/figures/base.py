"""The ground all figures stand on: page sizes, axes, labels and legends that fit, and files that come out the same.

No global state of matplotlib is left changed: every function that makes or draws artists runs inside `house_style`.
Words typed by people are never read as formulas, and a glyph the font lacks is shown as a box, without a warning.
"""

from __future__ import annotations

import functools
import warnings
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from io import BytesIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

from codesign.errors import ProblemError
from codesign.report.figures.inline import inline_svg
from codesign.report.house import CARD, INK, MUTED, RULE
from codesign.report.layout import number
from codesign.report.output import plain, write_file

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure, SubFigure
    from matplotlib.text import Text

    Panel = Figure | SubFigure

#: File formats by ending.
FORMATS = ("svg", "png", "pdf")
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


def in_house_style(draw: Callable[..., Figure]) -> Callable[..., Figure]:
    """Decorate a function that makes a figure: it runs in the house style and returns the figure laid out."""

    @functools.wraps(draw)
    def styled(*args: Any, **keywords: Any) -> Figure:
        with house_style():
            figure = draw(*args, **keywords)
            _read_no_formulas(figure)
            return figure

    return styled


@dataclass(frozen=True, slots=True)
class Words:
    """What a screen reader says of a figure."""

    title: str
    description: str


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


def describe(figure: Figure, title: str, description: str) -> Figure:
    """Give a figure the words a screen reader says; returns the figure."""
    figure.codesign_words = Words(plain(title), plain(description))  # type: ignore[attr-defined]
    return figure


def words_of(figure: Figure) -> Words:
    """Return title and description of a figure, empty where it has none."""
    return getattr(figure, "codesign_words", Words("", ""))


# --- axes and words --------------------------------------------------------------------------------------------


def dress(axes: Axes, *, title: str = "", x: str = "", y: str = "", grid: str = "y") -> Axes:
    """Title, axis labels and a pale grid ("x", "y", "both" or "") behind the data; returns the axes."""
    axes.set_title(plain(title))
    axes.set_xlabel(plain(x))
    axes.set_ylabel(plain(y))
    if grid:
        axes.grid(visible=True, axis=grid)  # type: ignore[arg-type]
    return axes


def write(axes: Axes, x: float, y: float, text: str, **keywords: Any) -> Text:
    """Write on axes, as they are: no formulas; a pale edge keeps the words legible over lines.

    Keywords are those of `Axes.annotate`, ``halo=False`` leaves the edge out.
    """
    from matplotlib.patheffects import withStroke

    halo = keywords.pop("halo", True)
    keywords = {"fontsize": SMALL, "color": INK, "annotation_clip": False, **keywords}
    found = axes.annotate(plain(text), (x, y), **keywords)
    found.set_parse_math(False)
    if halo:
        found.set_path_effects([withStroke(linewidth=2.0, foreground=CARD)])
    return found


def width_mm(panel: Panel) -> float:
    """Width of a figure, or of a part of one, in print. [mm]"""
    return float(panel.bbox.width) / panel.dpi * INCH


def height_mm(panel: Panel) -> float:
    """Height of a figure, or of a part of one, in print. [mm]"""
    return float(panel.bbox.height) / panel.dpi * INCH


def is_narrow(panel: Panel) -> bool:
    """Whether a figure, or a part of one, has room for the most needful only."""
    return width_mm(panel) < NARROW


def room_beside(panel: Panel, names: Sequence[str]) -> float:
    """Width that the names of rows take beside axes. [mm]"""
    return max((text_width(panel, name, SMALL, "bold") for name in names), default=0.0) + 6.0


def signed(value: float, digits: int = 4, *, plus: bool = False) -> str:
    """Return a number in few digits with a minus sign as set in print, on wish with a plus sign."""
    return ("−" if value < 0 else "+" if plus else "") + number(abs(value), digits)


def scale_of(largest: float) -> tuple[float, str]:
    """Return what to divide values by so that few digits say them, and the power of ten to put before the unit."""
    for power, sign in ((9, "10⁹ "), (6, "10⁶ "), (3, "10³ "), (0, ""), (-3, "10⁻³ "), (-6, "10⁻⁶ ")):
        if largest >= 2 * 10.0**power or (power == 0 and largest >= 0.02):
            return 10.0**power, sign
    return 1.0, ""


def text_width(figure: Panel, text: str, size: float = SMALL, weight: str = "normal") -> float:
    """Width of a line of text in print. [mm]"""
    return _width_of_line(plain(text), size, weight)


@functools.lru_cache(maxsize=4096)
def _width_of_line(text: str, size: float, weight: str) -> float:
    from matplotlib.text import Text

    with house_style():
        figure = new_figure(layout=None)
        measured = Text(0, 0, text, fontsize=size, fontweight=weight)
        measured.set_figure(figure)
        extent = measured.get_window_extent(figure.canvas.get_renderer())  # type: ignore[attr-defined]
        return float(extent.width) / figure.dpi * INCH


def shortened(
    figure: Panel, text: str, width_mm: float, size: float = SMALL, weight: str = "normal", *, tail: str = ""
) -> str:
    """Return the text on one line, its middle left out where it is wider than ``width_mm``: ends tell names apart.

    ``tail`` follows the text and stays whole, for values that must not be cut.
    """
    text, tail = plain(text), tail and f" {plain(tail)}"
    if text_width(figure, text + tail, size, weight) <= width_mm:
        return text + tail
    low, high = 0, len(text)
    while high - low > 1:
        middle = (low + high) // 2
        fits = text_width(figure, _without_middle(text, middle) + tail, size, weight) <= width_mm
        low, high = (middle, high) if fits else (low, middle)
    return _without_middle(text, low) + tail


def _without_middle(text: str, kept: int) -> str:
    """The first and last letters, ``kept`` in all."""
    tail = kept // 3
    return text[: kept - tail].rstrip() + "…" + (text[-tail:].lstrip() if tail else "")


def wrapped(figure: Panel, text: str, width_mm: float, size: float = SMALL, lines: int = 99) -> str:
    """Return the text in lines no wider than ``width_mm``; the last one is shortened where ``lines`` are too few."""
    found: list[str] = []
    for word in plain(text).split():
        longer = f"{found[-1]} {word}" if found else word
        if found and text_width(figure, longer, size) <= width_mm:
            found[-1] = longer
        else:
            found.append(word)
    kept = [*found[: lines - 1], " ".join(found[lines - 1 :])] if len(found) > lines else found
    return "\n".join(shortened(figure, line, width_mm, size) for line in kept)


def legend_below(figure: Panel, entries: Sequence[tuple[Artist, str]], *, size: float = SMALL) -> None:
    """Put a legend under everything, in as many columns as fit; entries too wide for half the page are shortened.

    Parameters
    ----------
    figure : Figure or SubFigure
        With ``layout="constrained"``, which makes the room.
    entries : sequence of (artist, str)
        What is shown and its name, in reading order.
    """
    if entries:
        artists, names, columns = _columns(figure, entries, width_mm(figure) - 6.0, size)
        _named(figure.legend(artists, _numbers(names), loc="outside lower left", ncols=columns, fontsize=size), names)


def legend_above(axes: Axes, title: str, entries: Sequence[tuple[Artist, str]], *, aside: float = ROOM_BESIDE) -> None:
    """Put a title and under it a legend above axes, in as many columns as fit.

    Parameters
    ----------
    axes : Axes
        Of a figure with ``layout="constrained"``, which makes the room.
    title : str
    entries : sequence of (artist, str)
    aside : float
        Width of the figure or part of it that the axes do not have. [mm]
    """
    panel = axes.get_figure(root=False)
    room = width_mm(panel) - aside
    artists, names, columns = _columns(panel, entries, room, SMALL)
    title = shortened(panel, title, room, TITLE, "bold")
    legend = axes.legend(
        artists, _numbers(names), loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=columns, fontsize=SMALL,
        title="title", title_fontproperties={"size": TITLE, "weight": "bold"}, alignment="left", borderpad=0.1,
    )  # fmt: skip
    legend.get_title().set_text(title)
    legend.get_title().set_parse_math(False)
    _named(legend, names)


def blank() -> Artist:
    """Nothing to see, for entries of a legend that are words only."""
    from matplotlib.lines import Line2D

    return Line2D([], [], linestyle="none")


def _columns(
    panel: Panel, entries: Sequence[tuple[Artist, str]], room: float, size: float
) -> tuple[list[Artist], list[str], int]:
    """Artists and names that fit, in the order in which matplotlib sets them row by row, and the number of columns."""
    sign, gap = 3.2 * size / POINTS, 2.2 * size / POINTS  # handle with its pad, space between columns
    names = [shortened(panel, name, room - sign, size) for _, name in entries]
    columns = _most_columns([text_width(panel, name, size) + sign for name in names], room, gap)
    if columns == 1 and len(names) > 1:
        names = [shortened(panel, name, (room - gap) / 2 - sign, size) for name in names]
        columns = _most_columns([text_width(panel, name, size) + sign for name in names], room, gap)
    order = [k for column in range(columns) for k in range(column, len(names), columns)]
    return [entries[k][0] for k in order], [names[k] for k in order], columns


def _numbers(names: Sequence[str]) -> list[str]:
    """Stand-ins: names that begin with "_" would be dropped by matplotlib, so all are written afterwards."""
    return [f"entry {k}" for k in range(len(names))]


def _named(legend: Any, names: Sequence[str]) -> None:
    for text, name in zip(legend.get_texts(), names, strict=True):
        text.set_parse_math(False)
        text.set_text(name)


def _most_columns(widths: Sequence[float], room: float, gap: float) -> int:
    """Columns that entries of these widths can be set in."""
    return next((n for n in range(len(widths), 1, -1) if _table_width(widths, n, gap) <= room), 1)


def _table_width(widths: Sequence[float], columns: int, gap: float) -> float:
    """Width of entries set row by row in columns. [mm]"""
    return sum(max(widths[k::columns]) for k in range(columns)) + gap * (columns - 1)


def _read_no_formulas(figure: Figure) -> None:
    from matplotlib.text import Text

    for text in figure.findobj(Text):
        text.set_parse_math(False)


# --- files -----------------------------------------------------------------------------------------------------


def figure_format(path: str | Path) -> str:
    """File format by the ending of a path. Raises ProblemError for one that is not known."""
    form = Path(path).suffix.lower().removeprefix(".")
    if form not in FORMATS:
        raise ProblemError(f"{path}: ending must be one of .{', .'.join(FORMATS)}")
    return form


def figure_bytes(figure: Figure, form: str = "svg", *, letters: str = "shapes") -> bytes:
    """Return the content of a figure file; the same for the same figure.

    Parameters
    ----------
    figure : Figure
    form : {"svg", "png", "pdf"}
    letters : {"shapes", "text"}
        Letters of an SVG as shapes, which look the same everywhere, or as text in the fonts of the reader, which is
        smaller and can be searched.
    """
    if form == "svg":
        return ('<?xml version="1.0" encoding="utf-8"?>\n' + svg_fragment(figure, letters=letters) + "\n").encode()
    return _raw(figure, form, letters)


def save_figure(figure: Figure, path: str | Path, *, letters: str = "shapes") -> None:
    """Write a figure to a file, the format by its ending: svg, png or pdf; whole or not at all."""
    write_file(path, figure_bytes(figure, figure_format(path), letters=letters))


def svg_fragment(figure: Figure, *, prefix: str | None = None, letters: str = "shapes") -> str:
    """Return a figure as an ``<svg>`` element to put into an HTML page among others.

    Parameters
    ----------
    figure : Figure
    prefix : str, optional
        Begins every id, so that figures of one page do not mix; by default made from the content.
    letters : {"shapes", "text"}
        As in `figure_bytes`.

    Returns
    -------
    str
        One element with ``title`` and ``desc`` for screen readers, no style sheet, no script, no outside reference.
    """
    words = words_of(figure)
    return inline_svg(_raw(figure, "svg", letters), words.title, words.description, prefix)


def _raw(figure: Figure, form: str, letters: str) -> bytes:
    metadata = {"svg": {"Date": None}, "pdf": {"CreationDate": None, "Title": words_of(figure).title}}.get(form)
    content = BytesIO()
    with house_style(**{"svg.fonttype": "path" if letters == "shapes" else "none"}):
        figure.savefig(content, format=form, metadata=metadata, dpi=DPI)
    return content.getvalue()
