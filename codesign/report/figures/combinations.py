"""Combinations of parts in figures: a letter and a sign each, and a legend below that says what they stand for.

Letters stand beside signs that differ in shape, filling and colour, so none is told by colour alone. The legend wraps
long lists of LEDs instead of cutting them, and the figure grows by the lines it takes.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from codesign.report.figures.base import INCH, POINTS, SMALL, blank, text_width, width_mm, wrapped
from codesign.report.house import CARD, INK, MARKERS, SERIES

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.figure import Figure

#: Combinations listed below a figure; the table that goes with it has all.
LISTED = 12
#: Lines an entry takes at most, and entries from which on two columns are tried.
LINES, MANY = 4, 4
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


def parts_below(figure: Figure, entries: Sequence[tuple[Artist, str]]) -> None:
    """Put a legend below everything, its names wrapped, and make the figure higher by it.

    Parameters
    ----------
    figure : Figure
        With ``layout="constrained"``.
    entries : sequence of (artist, str)
    """
    if not entries:
        return
    room, handle, gap = width_mm(figure) - 6.0, 3.2 * SMALL / POINTS, 2.2 * SMALL / POINTS
    names, columns = _set(figure, [name for _, name in entries], room, handle, gap)
    rows = -(-len(names) // columns)
    heights = [max(name.count("\n") + 1 for name in names[k * columns : (k + 1) * columns]) for k in range(rows)]
    figure.set_figheight(figure.get_figheight() + (sum(heights) * LINE + 6) / POINTS / INCH)
    # matplotlib fills column by column; people read row by row.
    order = [k for column in range(columns) for k in range(column, len(names), columns)]
    legend = figure.legend(
        [entries[k][0] for k in order], [f"entry {k}" for k in order], loc="outside lower left", ncols=columns,
        fontsize=SMALL, alignment="left",
    )  # fmt: skip
    for text, k in zip(legend.get_texts(), order, strict=True):
        text.set_parse_math(False)
        text.set_text(names[k])


def _set(figure: Figure, names: list[str], room: float, handle: float, gap: float) -> tuple[list[str], int]:
    """The names wrapped, and in how many columns they stand: two or three where all are short."""
    for columns in (3, 2) if len(names) >= MANY else ():
        width = (room - (columns - 1) * gap) / columns - handle
        if all(text_width(figure, name) <= width for name in names):
            return names, columns
    width = room - handle
    return [_hanging(figure, name, width) for name in names], 1


def _hanging(figure: Figure, name: str, width: float) -> str:
    """A wrapped name, its further lines set in below the words after the letter."""
    letter, _, words = name.partition("  ")
    if not words:
        return wrapped(figure, name, width, lines=LINES)
    first, *rest = wrapped(figure, words, width - text_width(figure, f"{letter}  "), lines=LINES).split("\n")
    return "\n".join([f"{letter}  {first}", *(f"     {line}" for line in rest)])
