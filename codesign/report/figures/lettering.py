"""Words and numbers in figures: how wide they are in print, and how they are made to fit."""

from __future__ import annotations

import functools
from collections.abc import Sequence
from typing import TYPE_CHECKING

from codesign.report.figures.style import INCH, NARROW, SMALL, house_style, new_figure
from codesign.report.layout import number
from codesign.report.output import plain

if TYPE_CHECKING:
    from codesign.report.figures.style import Panel


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
