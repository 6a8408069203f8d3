"""The ground all figures stand on: page sizes, axes, labels and legends that fit, and files that come out the same.

No global state of matplotlib is left changed: every function that makes or draws artists runs inside `house_style`.
Words typed by people are never read as formulas, and a glyph the font lacks is shown as a box, without a warning.
"""

from __future__ import annotations

import functools
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from io import BytesIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

from codesign.errors import ProblemError
from codesign.report.figures.inline import inline_svg
from codesign.report.figures.lettering import (
    height_mm,
    is_narrow,
    room_beside,
    scale_of,
    shortened,
    signed,
    text_width,
    width_mm,
    wrapped,
)
from codesign.report.figures.style import (
    A4,
    BODY,
    DPI,
    INCH,
    NARROW,
    POINTS,
    ROOM_BESIDE,
    SMALL,
    STYLE,
    TEXT_WIDTH,
    TITLE,
    house_style,
    new_figure,
)
from codesign.report.house import CARD, INK
from codesign.report.output import plain, write_file

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.text import Text

    from codesign.report.figures.style import Panel

__all__ = [
    "A4",
    "BODY",
    "DPI",
    "FORMATS",
    "INCH",
    "NARROW",
    "POINTS",
    "ROOM_BESIDE",
    "SMALL",
    "STYLE",
    "TEXT_WIDTH",
    "TITLE",
    "Words",
    "blank",
    "describe",
    "dress",
    "figure_bytes",
    "figure_format",
    "height_mm",
    "house_style",
    "in_house_style",
    "is_narrow",
    "legend_above",
    "legend_below",
    "new_figure",
    "room_beside",
    "save_figure",
    "scale_of",
    "shortened",
    "signed",
    "svg_fragment",
    "text_width",
    "width_mm",
    "words_of",
    "wrapped",
    "write",
]

#: File formats by ending.
FORMATS = ("svg", "png", "pdf")


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
