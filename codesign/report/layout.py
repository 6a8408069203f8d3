"""The small typographic means of the plain-text reports: sections, labelled lines, tables, bars."""

from __future__ import annotations

import textwrap
import unicodedata
from collections.abc import Container, Sequence

#: Narrowest page a report is laid out for. [characters]
NARROWEST = 60
#: Narrowest column whose cells run on over several lines. [characters]
LEAST_TO_FLOW = 16
#: Width of the label column.
LABEL = 12
#: Lengths of bars, the first that leaves room for the words beside them. [characters]
BARS = (12, 6)


def visible(text: str) -> str:
    """Return the text with every control or direction character turned into a space: it cannot leave its place."""
    return text if text.isprintable() else "".join(c if c.isprintable() else " " for c in text)


def columns(text: str) -> int:
    """Return the columns of a terminal that a text takes: wide letters take two, accents set on others none."""
    return len(text) if text.isascii() else sum(map(_columns_of, text))


def _columns_of(character: str) -> int:
    if unicodedata.category(character) in ("Mn", "Me"):
        return 0
    return 2 if unicodedata.east_asian_width(character) in "WF" else 1


def cut(text: str, size: int) -> str:
    """Return the text, cut with an ellipsis where it takes more than ``size`` columns."""
    if columns(text) <= size:
        return text
    kept, used = [], 0
    for character in text:
        used += _columns_of(character)
        if used > size - 1:
            break
        kept.append(character)
    return "".join(kept).rstrip() + "…"


def wrap(text: str, size: int) -> list[str]:
    """Return the text in lines of at most ``size`` columns, broken at spaces, else inside a word."""
    text = visible(text)
    if columns(text) == len(text):
        return textwrap.wrap(text, size, break_on_hyphens=False)
    lines = [""]
    for word in text.split():
        joined = f"{lines[-1]} {word}" if lines[-1] else word
        if columns(joined) <= size:
            lines[-1] = joined
            continue
        lines += [""] if lines[-1] else []
        for character in word:
            if columns(lines[-1] + character) > size:
                lines.append("")
            lines[-1] += character
    return lines if any(lines) else []


def heading(title: str, width: int) -> str:
    """Return a section title with a rule to the right edge."""
    text = f"─ {cut(visible(title).upper(), width - 4)} "
    return text + "─" * (width - columns(text))


def labelled(label: str, text: str, width: int) -> list[str]:
    """Return a label and its text, wrapped with a hanging indent."""
    lines = wrap(text, width - LABEL - 1) or [""]
    first, *rest = lines
    return [f" {label:<{LABEL - 1}} {first}".rstrip(), *(" " * (LABEL + 1) + line for line in rest)]


def bullet(text: str, width: int) -> list[str]:
    """Return a wrapped list entry."""
    return [f" - {line}" if index == 0 else f"   {line}" for index, line in enumerate(wrap(text, width - 3))]


def table(
    header: Sequence[str],
    rows: Sequence[Sequence[str]],
    width: int,
    left: Container[int] = (0,),
    flow: int | None = None,
) -> list[str]:
    """Return rows in columns, those in ``left`` flush left, the others flush right.

    A cell that would push the line over the edge is cut with an ellipsis, the widest column first; those of the column
    ``flow`` run on over as many lines as they need instead, broken after a semicolon where there is one.
    """
    cells = [[visible(cell) for cell in row] for row in (header, *rows)]
    sizes = [max(columns(row[k]) for row in cells) for k in range(len(header))]
    if flow is not None:
        room = width + 1 - 2 * len(sizes) - (sum(sizes) - sizes[flow])
        sizes[flow] = min(sizes[flow], max(room, LEAST_TO_FLOW))
    while sum(sizes) + 2 * len(sizes) - 1 > width and max(sizes) > 4:
        sizes[sizes.index(max(sizes))] -= 1
    lines = []
    for row in cells:
        lines += _row(row, sizes, left, flow)
    return lines


def _row(row: Sequence[str], sizes: Sequence[int], left: Container[int], flow: int | None) -> list[str]:
    """One row of a table: a line, or as many as the cell that runs on needs."""
    pieces = [[cell] if k != flow else _flowing(cell, sizes[k]) or [""] for k, cell in enumerate(row)]
    lines = []
    for line in range(max(map(len, pieces))):
        cells = [piece[line] if line < len(piece) else "" for piece in pieces]
        parts = [
            _fit(cell, size, flush_left=k in left) for k, (cell, size) in enumerate(zip(cells, sizes, strict=True))
        ]
        lines.append(" " + "  ".join(parts).rstrip())
    return lines


def _flowing(text: str, size: int) -> list[str]:
    """A cell in lines: as many of its entries as fit in each, an entry longer than a line wrapped."""
    lines: list[str] = []
    *others, last = text.split("; ")
    for entry in [*(f"{other};" for other in others), last]:
        joined = f"{lines[-1]} {entry}" if lines else entry
        if lines and columns(joined) <= size:
            lines[-1] = joined
        else:
            lines += wrap(entry, size)
    return lines


def _fit(cell: str, size: int, *, flush_left: bool) -> str:
    cell = cut(cell, size)
    room = " " * (size - columns(cell))
    return cell + room if flush_left else room + cell


def barred(header: Sequence[str], rows: Sequence[Sequence[str]], shares: Sequence[float], width: int) -> list[str]:
    """Return rows in columns with a bar of each row's share at the right edge.

    Where the page is too narrow for both, bars are shortened or left out rather than words cut.
    """
    whole = max(map(columns, table(header, rows, 10 * width)))
    size = next((size for size in BARS if whole + size + 2 <= width), 0)
    lines = table(header, rows, width - size - 2 if size else width)
    if not size:
        return lines
    return [lines[0]] + [
        line + " " * (width - size - 1 - columns(line)) + " " + bar(share, size)
        for line, share in zip(lines[1:], shares, strict=True)
    ]


def bar(share: float, size: int) -> str:
    """Return a bar filled to a share; what is above 1 fills it all."""
    filled = int(min(max(share, 0.0), 1.0) * size + 0.01)
    return "█" * filled + "░" * (size - filled)


def number(value: float, digits: int = 4) -> str:
    """Return a number in few digits, without powers of ten in everyday ranges."""
    if value != value or value in (float("inf"), float("-inf")):
        return "none"
    if 10**digits <= abs(value) < 1e9:
        return f"{value:.0f}"
    return f"{value:.{digits}g}"


def percent(share: float, least: float = 0.0) -> str:
    """Return a share as percent; what is below ``least`` is said to be so."""
    value = 100 * share
    if value > 9999:
        return "> 9999 %"
    if 0 < share < least:
        return f"< {100 * least:g} %"
    if value >= 0.1 or value == 0:
        return f"{value:.0f} %" if value >= 999.5 else f"{value:.1f} %"
    return f"{value:.1g} %"


def duration(seconds: float) -> str:
    """Return a time in the unit people would say it in."""
    for unit, size, top in (("µs", 1e-6, 1e-3), ("ms", 1e-3, 1.0), ("s", 1.0, 120.0), ("min", 60.0, 7200.0)):
        if seconds < top:
            return f"{number(seconds / size, 2 if seconds / size < 100 else 3)} {unit}"
    return f"{number(seconds / 3600, 2)} h"


def counted(count: int, thing: str) -> str:
    """Return a number of things in words: "1 point", "2 points"."""
    return f"{count} {thing}" if count == 1 else f"{count} {thing}s"
