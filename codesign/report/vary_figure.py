"""Figures of what-ifs: a line over one axis, a map with contours over two.

Legible in black and white and for colour-blind readers: configurations differ by sign and letter, never by colour
alone; the map's colours run evenly in lightness.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from codesign.errors import ProblemError
from codesign.report.figures.base import (
    BODY,
    SMALL,
    TEXT_WIDTH,
    describe,
    figure_bytes,
    in_house_style,
    new_figure,
    shortened,
    text_width,
    write,
)
from codesign.report.figures.combinations import lines_above, part_entries, parts_below, sign
from codesign.report.figures.ends import tick_axis
from codesign.report.house import BACKGROUND, CARD, INK, MISSED, MUTED, TARGET
from codesign.report.output import plain
from codesign.report.study_text import configuration_letters, configuration_words, shown_value
from codesign.study.fields import Axis
from codesign.study.vary import Variation

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

#: Height without title and legends, and what the axes do not have of it across and up. [mm]
HEIGHT, BESIDE, BELOW = 82.0, 18.0, 16.0
#: Width that a colour bar takes. [mm]
COLOUR_BAR = 18.0
#: Labels of contours nearer to an edge of a map are left out. [share of the axis]
EDGE = 0.035
#: Longest name of a value on an axis. [mm]
NAME = 28.0
#: Lines that mean the same in every figure.
REQUIRED = {"color": TARGET, "linewidth": 1.0, "linestyle": (0, (5, 3))}
CHANGE = {"color": MUTED, "linewidth": 0.8, "linestyle": ":"}
BORDER = {"color": INK, "linewidth": 1.0, "linestyle": (0, (2, 1.5))}


def variation_figure(found: Variation, form: str = "svg") -> bytes:
    """Return the file of a what-if over one or two axes; the same for the same result.

    Parameters
    ----------
    found : Variation
    form : {"svg", "png", "pdf"}
    """
    return figure_bytes(variation_drawing(found), form, letters="text")


@in_house_style
def variation_drawing(found: Variation, *, width: float = TEXT_WIDTH) -> Figure:
    """Draw a what-if over one or two axes.

    Parameters
    ----------
    found : Variation
    width : float
        Width in print. [mm]
    """
    if not found.axes:
        raise ProblemError("a figure needs an axis; give --sweep")
    figure = new_figure(width, HEIGHT)
    axes = figure.add_subplot()
    letters = configuration_letters(found.points)
    flat = len(found.axes) == 1
    lines = (_draw_line if flat else _draw_map)(axes, found, letters, width)
    lines_above(figure, found.title, lines)
    first = {p.configuration: p for p in reversed(found.points) if p.possible}
    words = {letter: configuration_words(first[each]) for each, letter in letters.items()}
    parts_below(figure, part_entries(words), bare=not flat)
    return describe(figure, f"What if: {found.title}", _said(found))


def _said(found: Variation) -> str:
    """A what-if in words."""
    over = " and ".join(axis.label for axis in found.axes)
    reached = [point.cnr for point in found.points if point.possible]
    if not reached:
        return f"CNR over {over}: the limits cannot be met at any point."
    lost = len(found.points) - len(reached)
    text = f"CNR over {over}: from {min(reached):.4g} to {max(reached):.4g} at {len(reached)} points."
    return text + (f" The limits cannot be met at {lost} points." if lost else "")


def _coordinates(axis: Axis) -> np.ndarray:
    """Numbers where they are numbers, else 0, 1, 2 ..."""
    return np.array(axis.values, dtype=float) if axis.numeric else np.arange(len(axis.values), dtype=float)


def _dress(axes: Axes, axis: Axis, which: str, length: float, ends: tuple[float, float]) -> None:
    """Label, ticks, spacing and ends of one axis about ``length`` long. [mm]"""
    getattr(axes, f"set_{which}label")(plain(axis.label))
    if axis.numeric:
        tick_axis(axes, which, _coordinates(axis), ends, length, log=axis.log)
        return
    names = [shortened(axes.figure, shown_value(value), NAME) for value in axis.values]
    every = -(-len(names) // max(int(length / 4.5), 1))
    turned = which == "x" and sum(text_width(axes.figure, name) + 3 for name in names[::every]) > length
    getattr(axes, f"set_{which}ticks")(
        _coordinates(axis)[::every], names[::every], rotation=90 if turned else 0,
    )  # fmt: skip
    getattr(axes, f"set_{which}lim")(*ends)


def _draw_line(axes: Axes, found: Variation, letters: Mapping[tuple[str, ...], str], width: float) -> list:
    """CNR over one axis; returns what its lines mean."""
    from matplotlib.lines import Line2D

    axis, points, required = found.axes[0], found.points, found.required_cnr
    x, cnr = _coordinates(axis), np.array([point.cnr for point in points])
    top = np.nanmax(cnr) if np.isfinite(cnr).any() else 1.0
    axes.set_ylim(0, 1.18 * max(top, required or 0.0))
    axes.set_ylabel("CNR")
    axes.grid(visible=True, axis="y")
    length = width - BESIDE
    room = 0.0 if axis.log else 0.03 * float(np.ptp(x)) if np.ptp(x) > 0 else 0.5
    _dress(axes, axis, "x", length, (float(x.min()) - room, float(x.max()) + room))
    axes.plot(x, cnr, color=BACKGROUND, linestyle="-" if axis.numeric else "none", zorder=2)
    for index, configuration in enumerate(letters):
        own = [k for k, p in enumerate(points) if p.possible and p.configuration == configuration]
        axes.plot(x[own], cnr[own], **sign(index), zorder=3, clip_on=False)
    lines: list[tuple[Artist, str]] = [(Line2D([], [], color=BACKGROUND), "greatest CNR, proven at each point")]
    if _mark_changes(axes, found, x, letters, length):
        lines.append((Line2D([], [], **CHANGE), "the parts change"))
    if required is not None:
        lines.append((axes.axhline(required, zorder=1, **REQUIRED), f"required CNR {required:g}"))
    lost = [k for k, point in enumerate(points) if not point.possible]
    if lost:
        cross = {"linestyle": "none", "marker": "x", "color": MISSED, "markersize": 6}
        lines.append((axes.plot(x[lost], np.zeros(len(lost)), clip_on=False, **cross)[0], "limits cannot be met"))
    return lines


def _mark_changes(
    axes: Axes, found: Variation, x: np.ndarray, letters: Mapping[tuple[str, ...], str], length: float
) -> bool:
    """A thin line where the configuration changes, the letter of each stretch above it where there is room."""
    points, log = found.points, found.axes[0].log
    starts = [k for k in range(len(points)) if k == 0 or points[k].configuration != points[k - 1].configuration]
    place = np.log(x) if log else x
    apart, before = 3.5 / length * max(float(np.ptp(place)), 1e-300), -np.inf
    for k in sorted(starts, key=lambda k: place[k]):
        end = next((n for n in starts if n > k), len(points)) - 1
        if k:
            middle = (place[k - 1] + place[k]) / 2
            axes.axvline(np.exp(middle) if log else middle, zorder=0, **CHANGE)
        where = (place[k] + place[end]) / 2
        if points[k].possible and (where - before >= apart or len(points) == 1):
            before = where
            write(
                axes, np.exp(where) if log else where, 0.985, letters[points[k].configuration], ha="center", va="top",
                xycoords=("data", "axes fraction"), fontsize=BODY, fontweight="bold",
            )  # fmt: skip
    return len(starts) > 1


def _draw_map(axes: Axes, found: Variation, letters: Mapping[tuple[str, ...], str], width: float) -> list:
    """CNR over two axes; returns what its lines mean."""
    down, across = found.axes
    y, x = _coordinates(down), _coordinates(across)
    shape = len(y), len(x)
    cnr = np.array([point.cnr for point in found.points]).reshape(shape)
    order = {configuration: index for index, configuration in enumerate(letters)}
    kind = np.array([order.get(point.configuration, -1) for point in found.points]).reshape(shape)
    edges_x, edges_y = _edges(x, across.log), _edges(y, down.log)
    image = axes.pcolormesh(edges_x, edges_y, np.ma.masked_invalid(cnr), cmap="cividis", rasterized=True)
    axes.figure.colorbar(image, ax=axes, label="CNR", pad=0.02)
    _hatch_lost(axes, edges_x, edges_y, np.isnan(cnr))
    _dress(axes, across, "x", width - BESIDE - COLOUR_BAR, (edges_x[0], edges_x[-1]))
    _dress(axes, down, "y", HEIGHT - BELOW, (edges_y[0], edges_y[-1]))
    taken, drawn = _contours(axes, x, y, cnr, found.required_cnr)
    _borders(axes, edges_x, edges_y, kind)
    _letters(axes, _middles(edges_x, across.log), _middles(edges_y, down.log), kind, list(letters.values()), taken)
    return _map_lines(found, kind, drawn)


def _map_lines(found: Variation, kind: np.ndarray, required_drawn: bool) -> list:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch
    from matplotlib.patheffects import withStroke

    lines: list[tuple[Artist, str]] = []
    if np.unique(kind[kind >= 0]).size > 1:
        lines.append((Line2D([], [], **BORDER), "the parts change"))
    if required_drawn:
        thick = Line2D([], [], color=CARD, linewidth=2.0, path_effects=[withStroke(linewidth=3.2, foreground=INK)])
        lines.append((thick, f"required CNR {found.required_cnr:g}"))
    elif found.required_cnr is not None and (kind >= 0).any():
        met = min(point.cnr for point in found.points if point.possible) >= found.required_cnr
        lines.append((Line2D([], [], linestyle="none"), f"required CNR {found.required_cnr:g}: " + _everywhere(met)))
    if (kind < 0).any():
        patch = Patch(facecolor=CARD, edgecolor=MUTED, hatch="////", linewidth=0.4)
        lines.append((patch, "limits cannot be met"))
    return lines


def _everywhere(met: bool) -> str:
    return "met wherever there is a result" if met else "met nowhere"


def _edges(centres: np.ndarray, log: bool) -> np.ndarray:
    """Edges of cells around their centres."""
    if len(centres) == 1:
        return np.array([centres[0] - 0.5, centres[0] + 0.5])
    c = np.log(centres) if log else centres
    inner = (c[1:] + c[:-1]) / 2
    # Half cells at the border: nothing is drawn beyond the points swept, where a field may have no meaning.
    edges = np.concatenate([[c[0]], inner, [c[-1]]])
    return np.exp(edges) if log else edges


def _middles(edges: np.ndarray, log: bool) -> np.ndarray:
    """Middles of cells between their edges."""
    return np.sqrt(edges[1:] * edges[:-1]) if log else (edges[1:] + edges[:-1]) / 2


def _hatch_lost(axes: Axes, edges_x: np.ndarray, edges_y: np.ndarray, lost: np.ndarray) -> None:
    from matplotlib.patches import Rectangle

    for i, j in zip(*np.nonzero(lost), strict=True):
        width, height = edges_x[j + 1] - edges_x[j], edges_y[i + 1] - edges_y[i]
        axes.add_patch(
            Rectangle(
                (edges_x[j], edges_y[i]), width, height, facecolor=CARD, edgecolor=MUTED, hatch="////", linewidth=0
            )
        )


def _contours(
    axes: Axes, x: np.ndarray, y: np.ndarray, cnr: np.ndarray, required: float | None
) -> tuple[np.ndarray, bool]:
    """Labelled contours, the required CNR thick; returns where the labels stand (k, 2), and whether it is there."""
    finite = cnr[np.isfinite(cnr)]
    taken: list[tuple[float, float]] = []
    if min(cnr.shape) < 2 or finite.size < 4 or np.ptp(finite) <= 1e-3 * finite.max():
        return np.zeros((0, 2)), False
    from matplotlib.ticker import MaxNLocator

    low, high, margin = finite.min(), finite.max(), 0.02 * np.ptp(finite)
    levels = [v for v in MaxNLocator(7).tick_values(low, high) if low + margin < v < high - margin]
    levels = [v for v in levels if required is None or abs(v - required) > margin]
    shown = np.ma.masked_invalid(cnr)
    if levels:
        taken += _labelled(axes.contour(x, y, shown, levels, colors=CARD, linewidths=0.9), axes)
    thick_drawn = required is not None and bool(low < required < high)
    if thick_drawn:
        thick = axes.contour(x, y, shown, [required], colors=CARD, linewidths=2.4)
        taken += _labelled(thick, axes, f"required {required:g}")
    return np.array(taken).reshape(-1, 2), thick_drawn


def _labelled(contours: Any, axes: Axes, text: str | None = None) -> list[tuple[float, float]]:
    from matplotlib.patheffects import withStroke

    formats = {level: text or f"{level:g}" for level in contours.levels}
    contours.set_path_effects([withStroke(linewidth=1.8 if text is None else 3.6, foreground=INK)])
    labels = axes.clabel(contours, fmt=formats, fontsize=SMALL, colors=CARD)
    kept = []
    for label in labels:
        place = axes.transAxes.inverted().transform(axes.transData.transform(label.get_position()))
        if min(*place, *(1 - place)) < EDGE:  # half of it would be cut
            label.set_visible(False)
            continue
        label.set_path_effects([withStroke(linewidth=2, foreground=INK)])
        kept.append(label.get_position())
    return kept


def _borders(axes: Axes, edges_x: np.ndarray, edges_y: np.ndarray, kind: np.ndarray) -> None:
    """Dashed lines between cells of different configurations."""
    for i, j in zip(*np.nonzero(kind[:, 1:] != kind[:, :-1]), strict=True):
        axes.plot([edges_x[j + 1]] * 2, edges_y[i : i + 2], **BORDER)
    for i, j in zip(*np.nonzero(kind[1:] != kind[:-1]), strict=True):
        axes.plot(edges_x[j : j + 2], [edges_y[i + 1]] * 2, **BORDER)


def _letters(axes: Axes, x: np.ndarray, y: np.ndarray, kind: np.ndarray, names: list[str], taken: np.ndarray) -> None:
    """The letter of each configuration inside its area, clear of the labels of contours."""
    from matplotlib.patheffects import withStroke

    turn = axes.transAxes.inverted()
    labels = turn.transform(axes.transData.transform(taken)) if len(taken) else np.zeros((0, 2))
    for index, name in enumerate(names):
        rows, columns = np.nonzero(kind == index)
        where = np.stack([x[columns], y[rows]], axis=1)
        place = turn.transform(axes.transData.transform(where))
        off_centre = np.hypot(*(place - place.mean(axis=0)).T)
        near = np.hypot(*(place[:, None] - labels[None]).transpose(2, 0, 1)).min(axis=1, initial=1.0)
        middle = int(np.argmin(off_centre + 10 * np.maximum(0.09 - near, 0.0)))
        axes.annotate(
            name, where[middle], ha="center", va="center", fontsize=10, fontweight="bold", color=INK,
            path_effects=[withStroke(linewidth=2.5, foreground=CARD)],
        )  # fmt: skip
