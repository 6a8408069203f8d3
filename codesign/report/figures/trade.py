"""Trade-off curves: what is reached, what is proven impossible, and the room between, against what it costs."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from codesign.report.figures.base import (
    POINTS,
    TEXT_WIDTH,
    describe,
    dress,
    in_house_style,
    new_figure,
    text_width,
    write,
)
from codesign.report.figures.combinations import lines_above, part_entries, parts_below, sign
from codesign.report.figures.ends import log_axis, rounded_out
from codesign.report.house import BACKGROUND, INK, MUTED, RULE, TARGET
from codesign.report.layout import number
from codesign.report.study_text import configuration_letters, configuration_words
from codesign.report.trade_text import axis_words, in_units

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.text import Annotation

    from codesign.study.trade import Trade
    from codesign.study.vary import Point

#: Height of one curve, and of each row of several; what the axes of a curve do not have of it across and up. [mm]
ALONE, ROW, BESIDE, BELOW = 82.0, 62.0, 16.0, 16.0
#: Ratio of the ends from which on an axis is logarithmic.
LOGARITHMIC = 6.0
#: A CNR required above this multiple of the greatest is said, not drawn.
OUT_OF_SIGHT = 2.0
#: Height of a line of words. [pt]
WORDS = 8.5
#: Room of a letter and of a sign across and up, and places of a letter from its point that are tried. [mm], [pt]
LETTER, SIGN = (3.4, 3.6), (2.6, 2.8)
SPOTS = ((0, 5.5), (0, -14.0), (9, -4.5), (-9, -4.5), (0, 15.5), (0, -24.0), (9, 5.5), (-9, 5.5), (0, 25.5))
#: What lines look like wherever they stand.
PROVEN, REQUIRED, OWN = (
    {"color": MUTED, "linewidth": 0.8},
    {"color": TARGET, "linewidth": 1.0, "linestyle": (0, (5, 3))},
    {"color": INK, "linewidth": 0.9, "linestyle": (0, (4, 2, 1, 2))},
)


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
    columns = min(len(curves), 2)
    rows = -(-len(curves) // columns)
    size = width / columns, ALONE if len(curves) == 1 else ROW
    figure = new_figure(width, size[1] * rows)
    letters = configuration_letters([point.optimum for curve in curves for point in curve.points])
    cells = figure.subplots(rows, columns, squeeze=False).ravel()
    for axes in cells[len(curves) :]:
        axes.set_visible(False)
    for axes, curve in zip(cells, curves, strict=False):
        _draw(axes, curve, letters, (size[0] - BESIDE, size[1] - BELOW))
    lines_above(figure, curves[0].title, _line_entries(curves))
    words = {letter: configuration_words(_example(curves, each)) for each, letter in letters.items()}
    parts_below(figure, part_entries(words))
    return describe(figure, f"Trade-offs: {curves[0].title}", " ".join(_said(curve) for curve in curves))


def _example(curves: Sequence[Trade], configuration: tuple[str, ...]) -> Point:
    return next(p.optimum for c in curves for p in c.possible if p.optimum.configuration == configuration)


def _said(curve: Trade) -> str:
    """One curve in words."""
    first, last = curve.possible[0], curve.possible[-1]
    text = (
        f"CNR against {curve.quantity.label}: {number(first.optimum.cnr)} with {in_units(curve, first.used)}, "
        f"{number(last.optimum.cnr)} with {in_units(curve, last.used)}."
    )
    if curve.enough is not None and curve.enough.reached:
        text += f" {in_units(curve, curve.enough.value)} is enough for CNR {curve.enough.cnr:g}."
    return text


def _draw(axes: Axes, curve: Trade, letters: dict[tuple[str, ...], str], size: tuple[float, float]) -> None:
    """One curve; ``size`` is about that of its axes. [mm]"""
    low, high, log = _range(curve)
    wanted = curve.required_cnr if _in_sight(curve) else 0.0
    axes.set_ylim(0, 1.2 * max(curve.points[-1].optimum.bound, wanted))
    if log:
        log_axis(axes, "x", low, high, size[0])
    else:
        axes.set_xlim(low, high)
    if curve.quantity.whole:
        axes.set_xticks(range(1, int(high) + 1, max(1, -(-int(high) // 12))))
    elif not log:
        axes.locator_params(axis="x", nbins=max(4, int(size[0] / 12)))
    _band(axes, curve)
    _recipes(axes, curve, high)
    _marks(axes, curve, size[1] * POINTS)
    _signs(axes, curve, letters, size, _written(axes, size))
    dress(axes, x=axis_words(curve), y="CNR", grid="y")


def _range(curve: Trade) -> tuple[float, float, bool]:
    """Both ends of the axis, and whether it is logarithmic."""
    low, high = curve.possible[0].used, curve.points[-1].limit
    if curve.quantity.whole:
        return 0.5, high + 0.5, False
    if high / low < 1 + 1e-3:
        return 0.5 * low, 1.5 * high, False
    if high / low >= LOGARITHMIC:
        return *rounded_out(low, high), True
    room = 0.04 * (high - low)
    return low - room, high + room, False


def _band(axes: Axes, curve: Trade) -> None:
    """From what recipes reach up to what is proven impossible: both hold beyond their point, to the right and left."""
    points = curve.points
    ends = [value for point in points for value in (point.limit, point.used)]
    x = np.unique([value * nudge for value in ends for nudge in (1 - 1e-9, 1.0, 1 + 1e-9)])
    x = x[(x >= curve.possible[0].used * (1 - 1e-9)) & (x <= points[-1].limit)]
    if curve.quantity.whole:  # each count by itself, a tread of half a step to either side
        x = np.repeat(np.arange(1, points[-1].limit + 1), 2)
    above = [
        next(p.optimum.bound if p.optimum.possible else 0.0 for p in points if p.limit >= v * (1 - 1e-12)) for v in x
    ]
    below = [max((p.recipe_cnr for p in curve.possible if p.used <= v and p.recipe), default=0.0) for v in x]
    if curve.quantity.whole:
        x = x + np.tile([-0.5, 0.5], len(x) // 2)
    axes.fill_between(x, below, np.maximum(above, below), color=RULE, alpha=0.75, linewidth=0, zorder=1)
    axes.plot(x, above, zorder=2, **PROVEN)


def _recipes(axes: Axes, curve: Trade, high: float) -> None:
    points = [point for point in curve.possible if point.recipe is not None]
    x, y = [point.used for point in points], [point.recipe_cnr for point in points]
    if curve.quantity.whole and x:
        axes.plot([x[0] - 0.5, *x, high], [y[0], *y, y[-1]], color=BACKGROUND, drawstyle="steps-mid", zorder=3)
    elif x:
        style = "steps-post" if curve.quantity.steps else "default"
        axes.plot([*x, max(high, x[-1])], [*y, y[-1]], color=BACKGROUND, drawstyle=style, zorder=3)


def _signs(
    axes: Axes,
    curve: Trade,
    letters: dict[tuple[str, ...], str],
    size: tuple[float, float],
    taken: list[tuple[float, float]],
) -> None:
    """A sign at each recipe, and at it a letter where the parts change, clear of other signs, letters and words."""
    order, before = list(letters), None
    points = [point for point in curve.possible if point.recipe is not None]
    spots = [tuple(np.multiply(_place(axes, point.used, point.recipe_cnr), size)) for point in points]
    for point, (across, up) in zip(points, spots, strict=True):
        each = point.optimum.configuration
        axes.plot([point.used], [point.recipe_cnr], **sign(order.index(each)), zorder=4, clip_on=False)
        if each != before:
            # A letter stands on its spot, a sign around it. Where there is no room the sign alone has to do.
            trials = {spot: (across + spot[0] / POINTS, up + spot[1] / POINTS) for spot in SPOTS}
            spot = next((spot for spot, place in trials.items() if _free(place, taken, spots, size)), None)
            if spot is not None:
                taken.append(trials[spot])
                write(
                    axes, point.used, point.recipe_cnr, letters[each], xytext=spot, zorder=6,
                    textcoords="offset points", ha="center", va="bottom", fontweight="bold",
                )  # fmt: skip
        before = each


def _place(axes: Axes, x: float, y: float) -> tuple[float, float]:
    """Where a point stands, as shares of both axes."""
    return tuple(axes.transAxes.inverted().transform(axes.transData.transform((x, y))))


def _share(axes: Axes, words: Annotation) -> tuple[float, float]:
    """Where words are tied to, as shares of both axes."""
    x, y = words.xy
    across, up = _place(axes, x, y)
    kinds = words.xycoords if isinstance(words.xycoords, tuple) else (words.xycoords,) * 2
    return x if kinds[0] == "axes fraction" else across, y if kinds[1] == "axes fraction" else up


def _written(axes: Axes, size: tuple[float, float]) -> list[tuple[float, float]]:
    """Spots along the words written so far. [mm]"""
    spots = []
    for words in axes.texts:
        x, y = np.multiply(_share(axes, words), size) + np.divide(words.xyann, POINTS)
        width = text_width(axes.get_figure(root=False), words.get_text())
        left = x - (width if words.get_ha() == "right" else 0.0)
        low = y - (LETTER[1] if words.get_va() == "top" else 0.0)
        spots += [(left + step, low) for step in np.linspace(0, width, 2 + int(width / LETTER[0]))]
    return spots


def _free(spot: tuple[float, float], letters: Sequence, signs: Sequence, size: tuple[float, float]) -> bool:
    """Whether a letter may stand on a spot: on the axes, apart from other letters and from signs. [mm]"""
    x, y = spot
    apart = all(abs(x - a) >= LETTER[0] or abs(y - b) >= LETTER[1] for a, b in letters)
    middle = y + LETTER[1] / 2
    clear = all(abs(x - a) >= SIGN[0] or abs(middle - b) >= SIGN[1] for a, b in signs)
    return 0 <= y <= size[1] - LETTER[1] and x <= size[0] + LETTER[0] / 2 and apart and clear


def _marks(axes: Axes, curve: Trade, height: float) -> None:
    """The CNR required and the least that is enough, and the limit of the problem; ``height`` of the axes in points."""
    taken = _required(axes, curve, height)
    enough = curve.enough
    if taken and enough is not None and enough.reached and enough.value > 0:
        axes.plot([enough.value] * 2, [0, enough.cnr], **{**REQUIRED, "linestyle": (0, (1, 1.5))}, zorder=2)
        _beside(axes, enough.value, f"enough: {in_units(curve, enough.value)}", TARGET, taken)
    if _own_shown(curve):
        axes.axvline(curve.own_limit, zorder=2, **OWN)
        _beside(axes, curve.own_limit, f"limit: {in_units(curve, curve.own_limit)}", INK, taken)


def _required(axes: Axes, curve: Trade, height: float) -> list[float]:
    """The line of the CNR required; returns heights no other words may stand at, none where it is out of sight. [pt]"""
    wanted, enough = curve.required_cnr, curve.enough
    style = {"color": TARGET, "textcoords": "offset points"}
    if wanted is None or not _in_sight(curve):
        if wanted is not None:
            text = f"required CNR {wanted:g}: out of reach"
            write(axes, 0, 1, text, xycoords="axes fraction", xytext=(4, 0), va="top", **style)
        return []
    axes.axhline(wanted, zorder=2, **REQUIRED)
    late = enough is not None and enough.reached and enough.value > 0 and _place(axes, enough.value, 0)[0] > 0.7
    line = height * wanted / axes.get_ylim()[1]
    # A curve is below the line before it crosses and above it after: the words stand where it is not.
    above = late or line < 1.5 * WORDS
    x, side, offset = (0, "left", 3) if late else (1, "right", -1)
    write(
        axes, x, wanted, f"required {wanted:g}", xycoords=("axes fraction", "data"), ha=side,
        va="bottom" if above else "top", xytext=(offset, 2 if above else -2), **style,
    )  # fmt: skip
    return [line - WORDS, line + 2 if above else line - 1.0]


def _in_sight(curve: Trade) -> bool:
    return curve.required_cnr is not None and curve.required_cnr <= OUT_OF_SIGHT * curve.points[-1].optimum.bound


def _own_shown(curve: Trade) -> bool:
    low, high, _ = _range(curve)
    return curve.own_limit is not None and low <= curve.own_limit <= high


def _beside(axes: Axes, x: float, text: str, color: str, taken: list[float]) -> None:
    """Words low beside an upright line, on the side that has room and clear of other words; notes their height. [pt]"""
    rise = next(r for r in (2.5 + k * WORDS for k in range(20)) if all(abs(r - other) >= WORDS for other in taken))
    taken.append(rise)
    right = _place(axes, x, 0)[0] > 0.62
    write(
        axes, x, 0, text, xytext=(-2.5 if right else 2.5, rise), textcoords="offset points",
        ha="right" if right else "left", va="bottom", color=color,
    )  # fmt: skip


def _line_entries(curves: Sequence[Trade]) -> list[tuple[Artist, str]]:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    entries: list[tuple[Artist, str]] = [
        (Line2D([], [], color=BACKGROUND), "recipes found, in setting steps"),
        (Line2D([], [], **PROVEN), "proven: nothing is above"),
        (Patch(facecolor=RULE, alpha=0.75), "between points: not decided"),
    ]
    if any(curve.required_cnr is not None for curve in curves):
        entries.append((Line2D([], [], **REQUIRED), "CNR required"))
    if any(_own_shown(curve) for curve in curves):
        entries.append((Line2D([], [], **OWN), "limit the problem sets"))
    return entries
