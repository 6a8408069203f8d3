"""Trade-off curves: what is reached, what is proven impossible, and the room between, against what it costs."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from codesign.report.figures.base import (
    SMALL,
    TEXT_WIDTH,
    describe,
    dress,
    in_house_style,
    new_figure,
    wrapped,
    write,
)
from codesign.report.figures.combinations import LISTED, part_entries, parts_below, sign
from codesign.report.figures.ends import log_axis
from codesign.report.house import BACKGROUND, INK, MUTED, RULE, TARGET
from codesign.report.layout import number
from codesign.report.study_text import configuration_letters, configuration_words
from codesign.report.text import UNITS

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from codesign.study.trade import Trade

#: Height of one curve, and of each row of several. [mm]
ALONE, ROW = 82.0, 62.0
#: Ratio of the ends from which on an axis is logarithmic.
LOGARITHMIC = 6.0
#: A CNR required above this multiple of the greatest is said, not drawn.
OUT_OF_SIGHT = 2.0


@in_house_style
def trade_figure(curves: Sequence[Trade], *, width: float = TEXT_WIDTH) -> Figure:
    """Draw one trade-off curve, or several of one problem side by side with shared letters.

    Parameters
    ----------
    curves : sequence of Trade
        One at least, of the same problem.
    width : float
        Width in print. [mm]
    """
    from matplotlib.figure import SubFigure  # noqa: F401  (constrained layout needs the class loaded)

    columns = min(len(curves), 2)
    rows = -(-len(curves) // columns)
    figure = new_figure(width, ALONE if len(curves) == 1 else ROW * rows)
    letters = configuration_letters([point.optimum for curve in curves for point in curve.points])
    cells = figure.subplots(rows, columns, squeeze=False).ravel()
    for axes in cells[len(curves) :]:
        axes.set_visible(False)
    for axes, curve in zip(cells, curves, strict=False):
        _draw(axes, curve, letters, width / columns)
    title = wrapped(figure, curves[0].title, width - 8.0, lines=2)
    figure.suptitle(title, x=0.01, ha="left", fontsize=SMALL + 1.5, fontweight="bold", color=INK)
    words = {letter: configuration_words(_example(curves, each)) for each, letter in letters.items()}
    parts_below(figure, [*_line_entries(curves), *part_entries(words)])
    return describe(figure, f"Trade-offs: {curves[0].title}", " ".join(_said(curve) for curve in curves))


def _example(curves: Sequence[Trade], configuration: tuple[str, ...]):
    return next(p.optimum for c in curves for p in c.possible if p.optimum.configuration == configuration)


def axis_words(curve: Trade) -> str:
    """Name and unit of what CNR is traded against."""
    unit = UNITS.get(curve.quantity.unit, curve.quantity.unit)
    return curve.quantity.label + (f" [{unit}]" if unit else "")


def _said(curve: Trade) -> str:
    """One curve in words."""
    first, last = curve.possible[0], curve.possible[-1]
    unit = UNITS.get(curve.quantity.unit, curve.quantity.unit)
    text = (
        f"CNR against {curve.quantity.label}: {number(first.optimum.cnr)} with {number(first.used)} {unit}, "
        f"{number(last.optimum.cnr)} with {number(last.used)} {unit}."
    )
    if curve.enough is not None and curve.enough.reached:
        text += f" {number(curve.enough.value)} {unit} is enough for CNR {curve.enough.cnr:g}."
    return " ".join(text.split())


def _draw(axes: Axes, curve: Trade, letters: dict[tuple[str, ...], str], width: float) -> None:
    low, high = _range(curve)
    top = curve.points[-1].optimum.bound
    required = curve.required_cnr
    shown = required if required is not None and required <= OUT_OF_SIGHT * top else None
    axes.set_ylim(0, 1.16 * max(top, shown or 0.0))
    _band(axes, curve, low, high)
    _recipes(axes, curve, high)
    _signs(axes, curve, letters)
    _scale(axes, curve, low, high, width)
    _required(axes, curve, shown)
    _own(axes, curve, low, high)
    dress(axes, x=axis_words(curve), y="CNR", grid="y")


def _range(curve: Trade) -> tuple[float, float]:
    """Both ends of the axis."""
    points = curve.points
    if curve.quantity.whole:
        return 0.5, points[-1].limit + 0.5
    low, high = points[0].limit if not points[0].optimum.possible else points[0].used, points[-1].limit
    if not curve.possible[0].used < high * (1 - 1e-3):
        return 0.5 * low, 2.0 * high
    room = 0.03 * (high - low)
    return (low, high) if high / low >= LOGARITHMIC else (low - room, high + room)


def _band(axes: Axes, curve: Trade, low: float, high: float) -> None:
    """From what recipes reach up to what is proven impossible: both hold beyond their point, to the right and left."""
    points = curve.points
    x = np.unique([low, *(p.limit for p in points), *(p.used for p in points), high])
    x = x[(x >= low) & (x <= high)]
    # Just right of each step the next bound holds, just left of each the recipe before.
    x = np.sort(np.concatenate([x, x * (1 + 1e-9)]))
    above = [min((p.optimum.bound for p in points if p.limit >= v * (1 - 2e-10)), default=np.nan) for v in x]
    below = [max((p.recipe_cnr for p in curve.possible if p.used <= v and p.recipe), default=0.0) for v in x]
    above = np.where(np.isnan(np.array(above, float)), points[-1].optimum.bound, np.array(above, float))
    above = np.where(np.isfinite(above), above, 0.0)
    axes.fill_between(x, below, np.maximum(above, below), color=RULE, alpha=0.75, linewidth=0, zorder=1)
    axes.plot(x, above, color=MUTED, linewidth=0.8, zorder=2)


def _recipes(axes: Axes, curve: Trade, high: float) -> None:
    points = [point for point in curve.possible if point.recipe is not None]
    x, y = [point.used for point in points], [point.recipe_cnr for point in points]
    if x:
        style = "steps-post" if curve.quantity.steps else "default"
        axes.plot([*x, max(high, x[-1])], [*y, y[-1]], color=BACKGROUND, linewidth=1.4, drawstyle=style, zorder=3)


def _signs(axes: Axes, curve: Trade, letters: dict[tuple[str, ...], str]) -> None:
    """A sign at each point, a letter where the parts change."""
    order, before = list(letters), None
    for point in curve.possible:
        each = point.optimum.configuration
        index = order.index(each)
        value = point.recipe_cnr if point.recipe is not None else point.optimum.cnr
        axes.plot([point.used], [value], **sign(index), zorder=4, clip_on=False)
        if each != before:
            write(
                axes, point.used, value, letters[each], xytext=(0, 5.5), textcoords="offset points", ha="center",
                va="bottom", fontweight="bold",
            )  # fmt: skip
        before = each


def _scale(axes: Axes, curve: Trade, low: float, high: float, width: float) -> None:
    if curve.quantity.whole:
        axes.set_xlim(low, high)
        count = int(curve.points[-1].limit)
        axes.set_xticks(range(1, count + 1, max(1, -(-count // 12))))
    elif high / low >= LOGARITHMIC:
        log_axis(axes, "x", low, high, most=int(width / 11))
    else:
        axes.set_xlim(low, high)
        axes.locator_params(axis="x", nbins=max(3, int(width / 17)))


def _required(axes: Axes, curve: Trade, shown: float | None) -> None:
    """The CNR required, and the least that is enough for it."""
    if shown is None:
        if curve.required_cnr is not None:
            write(
                axes, 0.02, 1.0, f"required CNR {curve.required_cnr:g}: out of reach", xycoords="axes fraction",
                va="top", color=TARGET,
            )  # fmt: skip
        return
    axes.axhline(shown, color=TARGET, linewidth=1.0, linestyle=(0, (5, 3)), zorder=2)
    write(
        axes, 1.0, shown, f"required {shown:g}", xycoords=("axes fraction", "data"), xytext=(-1, -2),
        textcoords="offset points", ha="right", va="top", color=TARGET,
    )  # fmt: skip
    enough = curve.enough
    if enough is not None and enough.reached and enough.value > 0:
        axes.plot([enough.value] * 2, [0, enough.cnr], color=TARGET, linewidth=1.0, linestyle=(0, (1, 1.5)), zorder=2)
        unit = UNITS.get(curve.quantity.unit, curve.quantity.unit)
        write(
            axes, enough.value, 0, f"enough: {number(enough.value)} {unit}", xytext=(2.5, 2.5),
            textcoords="offset points", ha="left", va="bottom", color=TARGET,
        )  # fmt: skip


def _own(axes: Axes, curve: Trade, low: float, high: float) -> None:
    """The limit the problem itself sets."""
    own = curve.own_limit
    if own is None or not low <= own <= high:
        return
    axes.axvline(own, color=INK, linewidth=0.9, linestyle=(0, (4, 2, 1, 2)), zorder=2)


def _line_entries(curves: Sequence[Trade]) -> list[tuple[Artist, str]]:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    entries: list[tuple[Artist, str]] = [
        (Line2D([], [], color=BACKGROUND, linewidth=1.4), "recipes found, in setting steps"),
        (Line2D([], [], color=MUTED, linewidth=0.8), "proven: nothing is above"),
        (Patch(facecolor=RULE, alpha=0.75), "not decided between points"),
    ]
    if any(curve.required_cnr is not None for curve in curves):
        entries.append((Line2D([], [], color=TARGET, linewidth=1.0, linestyle=(0, (5, 3))), "CNR required"))
    if any(curve.own_limit is not None for curve in curves):
        entries.append((Line2D([], [], color=INK, linewidth=0.9, linestyle=(0, (4, 2, 1, 2))), "limit of the problem"))
    return entries


__all__ = ["LISTED", "axis_words", "trade_figure"]
