"""Combinations of parts in figures: a letter and a sign each, and a legend below that says what they stand for.

Letters stand beside signs that differ in shape, filling and colour, so none is told by colour alone. The legend wraps
long lists of LEDs instead of cutting them, and the figure grows by the lines it takes.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from codesign.report.figures.base import INCH, POINTS, SMALL, TITLE, blank, text_width, width_mm, wrapped
from codesign.report.house import CARD, INK, MARKERS, SERIES

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.figure import Figure

#: Combinations listed below a figure; the table that goes with it has all.
LISTED = 12
#: Lines an entry takes at most, and columns tried.
LINES, COLUMNS = 4, 5
#: More columns are taken where they make a legend that much lower.
WORTH_BREAKING = 0.8
#: Height of a line of the legend. [pt]
LINE = 1.42 * SMALL


def sign(index: int, **more: Any) -> dict[str, Any]:
    """Marker, colour and filling of the combination of that number, as keywords of `Axes.plot`."""
    color = SERIES[index % len(SERIES)]
    hollow = (index // len(MARKERS)) % 2 == 1
    return {
        "linestyle": "none", "marker": MARKERS[index % len(MARKERS)], "color": color, "markeredgecolor": INK,
        "markerfacecolor": CARD if hollow else color, "markeredgewidth": 0.6, "markersize": 5.5, **more,
    }  # fmt: skip


def part_entries(words: Mapping[str, str]) -> list[tuple[Artist, str]]:
    """Legend entries of combinations, by letter in the order of their signs; those beyond `LISTED` are counted."""
    from matplotlib.lines import Line2D

    entries: list[tuple[Artist, str]] = [
        (Line2D([], [], **sign(index)), f"{letter}  {text}")
        for index, (letter, text) in enumerate(words.items())
        if index < LISTED
    ]
    left = len(words) - len(entries)
    if left:
        entries.append((blank(), f"and {left} more combination{'s' if left > 1 else ''}, see the table"))
    return entries


def lines_above(figure: Figure, title: str, entries: Sequence[tuple[Artist, str]]) -> None:
    """Put a title, wrapped, and below it what lines mean on top of a figure, and make it higher by that.

    Parameters
    ----------
    figure : Figure
        With ``layout="constrained"``.
    title : str
    entries : sequence of (artist, str)
    """
    room = width_mm(figure) - 6.0
    names, columns = _set(figure, [name for _, name in entries], room)
    title = wrapped(figure, title, room / 1.12, TITLE, lines=2)  # bold letters are wider than they are measured
    legend = _legend(figure, entries, names, columns, "outside upper left")
    legend.set_title(title, prop={"size": TITLE, "weight": "bold"})
    legend.get_title().set_parse_math(False)
    _grow(figure, (title.count("\n") + 1) * 1.4 * TITLE + _height(names, columns))


def parts_below(figure: Figure, entries: Sequence[tuple[Artist, str]], *, bare: bool = False) -> None:
    """Put a legend below everything, its names wrapped, and make the figure higher by it.

    Parameters
    ----------
    figure : Figure
        With ``layout="constrained"``.
    entries : sequence of (artist, str)
    bare : bool
        Without signs: the letters alone stand in the figure.
    """
    if entries:
        names, columns = _set(figure, [name for _, name in entries], width_mm(figure) - 6.0)
        shown = [(blank(), name) for _, name in entries] if bare else entries
        _legend(figure, shown, names, columns, "outside lower left", bare=bare)
        _grow(figure, _height(names, columns))


def _legend(
    figure: Figure,
    entries: Sequence[tuple[Artist, str]],
    names: list[str],
    columns: int,
    place: str,
    *,
    bare: bool = False,
) -> Any:
    # matplotlib fills column by column; people read row by row.
    order = [k for column in range(columns) for k in range(column, len(names), columns)]
    legend = figure.legend(
        [entries[k][0] for k in order], [f"entry {k}" for k in order], loc=place, ncols=columns, fontsize=SMALL,
        alignment="left", **({"handlelength": 0, "handletextpad": 0} if bare else {}),
    )  # fmt: skip
    for text, k in zip(legend.get_texts(), order, strict=True):
        text.set_parse_math(False)
        text.set_text(names[k])
    return legend


def _grow(figure: Figure, points: float) -> None:
    figure.set_figheight(figure.get_figheight() + (points + 4) / POINTS / INCH)


def _height(names: list[str], columns: int) -> float:
    """Height of a legend. [pt]"""
    rows = [names[k : k + columns] for k in range(0, len(names), columns)]
    return sum(LINE * max(name.count("\n") + 1 for name in row) for row in rows)


def _set(figure: Figure, names: list[str], room: float) -> tuple[list[str], int]:
    """The names wrapped, and in how many columns they stand: in as many as make the legend low.

    ``room`` is the width there is. [mm]
    """
    handle, gap = 3.6 * SMALL / POINTS, 1.6 * SMALL / POINTS
    best: tuple[list[str], int] | None = None
    for columns in range(1, min(len(names), COLUMNS) + 1):
        width = (room - (columns - 1) * gap) / columns - handle
        trial = [_hanging(figure, name, width) for name in names], columns
        if any("…" in name for name in trial[0]) and best is not None:
            break
        # A little lower is not worth lines that are broken.
        if best is None or _height(*trial) < WORTH_BREAKING * _height(*best):
            best = trial
    return best or (names, 1)


def _hanging(figure: Figure, name: str, width: float) -> str:
    """A wrapped name, its further lines set in below the words after the letter."""
    letter, _, words = name.partition("  ")
    if not words:
        return wrapped(figure, name, width, lines=LINES)
    first, *rest = wrapped(figure, words, width - text_width(figure, f"{letter}  "), lines=LINES).split("\n")
    return "\n".join([f"{letter}  {first}", *(f"     {line}" for line in rest)])
