"""Names over the peaks of curves: stacked so that none is set on another, numbers where names take too many rows."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from codesign.report.figures.base import ROOM_BESIDE, height_mm, shortened, text_width, width_mm, write
from codesign.report.house import MUTED

if TYPE_CHECKING:
    from matplotlib.axes import Axes

#: Rows of names at most, and share of the height they may take; where more are needed numbers stand for them.
MOST_ROWS, MOST_HEIGHT = 3, 0.42
#: Height of a row, room between names side by side, longest name. [mm]
ROW, GAP, LONGEST = 3.3, 2.0, 48.0
#: Height of a panel that its ticks, titles and legend take. [mm]
NOT_AXES = 13.0


@dataclass(frozen=True, slots=True)
class Peak:
    """A point to be named: where, how high, its name, and a value that goes with the name."""

    x: float
    height: float
    name: str
    value: str = ""


def name_peaks(axes: Axes, peaks: list[Peak]) -> list[tuple[int, str, str]]:
    """Write names over peaks, with leaders, and make room for them at the top of the axes.

    Returns number, name, and name with value as far as it fits, of each where numbers stand for the names.
    """
    ordered = sorted(peaks, key=lambda peak: peak.x)
    panel = axes.get_figure(root=False)
    whole = [shortened(panel, peak.name, LONGEST, tail=peak.value) for peak in ordered]
    names = whole
    rows = _rows(axes, ordered, names)
    keys: list[tuple[int, str, str]] = []
    if max(rows, default=0) >= min(MOST_ROWS, int(MOST_HEIGHT * _axes_height(axes) / ROW)):
        keys = [(k, peak.name, words) for k, (peak, words) in enumerate(zip(ordered, whole, strict=True), start=1)]
        names = [str(number) for number, _, _ in keys]
        rows = _rows(axes, ordered, names)
    count = max(rows, default=-1) + 1
    row = ROW / _axes_height(axes)
    top = max((peak.height for peak in ordered), default=0.0) or 1.0
    axes.set_ylim(0, top / max(1 - (count + 0.5) * row, 0.2))
    for peak, name, number, place in zip(ordered, names, rows, _places(axes, ordered, names), strict=True):
        write(
            axes, peak.x, peak.height, name, xytext=(place[0], 1 - (count - number) * row), va="bottom",
            textcoords="axes fraction", arrowprops={"arrowstyle": "-", "color": MUTED, "linewidth": 0.6, "shrinkA": 0,
            "shrinkB": 1, "relpos": (place[1], 0.0)},
        )  # fmt: skip
    return keys


def _axes_width(axes: Axes) -> float:
    """About the width of axes in print, rather too little. [mm]"""
    return width_mm(axes.get_figure(root=False)) - ROOM_BESIDE


def _axes_height(axes: Axes) -> float:
    """About the height of axes in a column of panels, rather too little. [mm]"""
    grid = axes.get_subplotspec().get_gridspec()
    ratios = grid.get_height_ratios()
    share = ratios[axes.get_subplotspec().rowspan.start] / sum(ratios)
    return max(height_mm(axes.get_figure(root=False)) * share - NOT_AXES, 3 * ROW)


def _places(axes: Axes, peaks: list[Peak], names: list[str]) -> list[tuple[float, float]]:
    """Left end of each name as share of the axes, and where along the name its leader begins."""
    low, high = axes.get_xlim()
    whole, panel = _axes_width(axes), axes.get_figure(root=False)
    found = []
    for peak, name in zip(peaks, names, strict=True):
        x, width = (peak.x - low) / (high - low), text_width(panel, name) / whole
        left = min(x, 1.0 - width)
        found.append((max(left, 0.0), min(max((x - left) / max(width, 1e-9), 0.0), 1.0)))
    return found


def _rows(axes: Axes, peaks: list[Peak], names: list[str]) -> list[int]:
    """Row of each name, from the right: above all it would touch, so that no leader crosses a name further left."""
    whole, panel = _axes_width(axes), axes.get_figure(root=False)
    spans = [
        (left, left + (text_width(panel, name) + GAP) / whole)
        for (left, _), name in zip(_places(axes, peaks, names), names, strict=True)
    ]
    rows = [0] * len(peaks)
    for k in reversed(range(len(peaks))):
        later = [rows[j] for j in range(k + 1, len(peaks)) if spans[j][0] < spans[k][1] and spans[k][0] < spans[j][1]]
        rows[k] = max(later, default=-1) + 1
    return rows
