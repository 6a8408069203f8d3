"""Use of every limit: how much of it is used, which ones bind, which are missed."""

from __future__ import annotations

from collections.abc import Collection, Sequence
from typing import TYPE_CHECKING

import numpy as np

from codesign.design import Performance
from codesign.limit_use import LimitUse
from codesign.report.figures.base import (
    POINTS,
    SMALL,
    TEXT_WIDTH,
    describe,
    dress,
    in_house_style,
    is_narrow,
    legend_above,
    new_figure,
    room_beside,
    shortened,
    text_width,
    width_mm,
    write,
)
from codesign.report.house import INK, MET, MISSED, NEAR
from codesign.report.layout import number, percent
from codesign.report.text import HARDLY_USED, REACHED, UNITS

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from codesign.report.figures.base import Panel

#: Height of a row, and of everything else. [mm]
ROW, REST = 4.4, 17.0
#: Shares are drawn up to this; more is said in words. [1]
LARGEST = 1.3
#: Rows at most in a figure of its own.
MOST_ROWS = 45


@in_house_style
def limit_use(performance: Performance, *, binding: Collection[str] | None = None, width: float = TEXT_WIDTH) -> Figure:
    """Draw how much of each limit a recipe uses, the most used first.

    Parameters
    ----------
    performance : Performance
        What `codesign.design.evaluate` said of the recipe.
    binding : collection of str, optional
        Names of the limits that bind at the optimum before rounding; by default those used to 99.9 %.
    width : float
        Width in print. [mm]
    """
    shown = shown_limits(performance, binding, MOST_ROWS)[0]
    figure = new_figure(width, REST + ROW * len(shown))
    draw_limit_use(figure, performance, binding, MOST_ROWS)
    said = "; ".join(f"{use.name} {percent(use.share, 1e-3)} {_word(use, binding)}".strip() for use in shown)
    return describe(figure, "Use of limits", f"Share of each limit that is used: {said}.")


def draw_limit_use(panel: Panel, performance: Performance, binding: Collection[str] | None, most: int) -> None:
    """Draw the use of at most so many limits into a figure or a part of one."""
    shown, left = shown_limits(performance, binding, most)
    axes = panel.subplots()
    shares = [min(use.share, LARGEST) for use in shown]
    for row, (use, share) in enumerate(zip(shown, shares, strict=True)):
        color, hatch = _look(use, binding)
        axes.barh(row, share, height=0.62, color=color, alpha=0.75, hatch=hatch, edgecolor="white", linewidth=0)
    axes.axvline(1.0, color=INK, linewidth=1.0, zorder=3)
    axes.set_xlim(0, max([1.04, *shares]))
    axes.set_ylim(len(shown) - 0.3, -0.7)
    names = [shortened(panel, use.name, 0.36 * width_mm(panel)) for use in shown]
    axes.set_yticks(range(len(shown)), names)
    axes.tick_params(axis="y", length=0)
    axes.spines["left"].set_visible(False)
    _per_cent(axes, 1.0 if is_narrow(panel) else 0.25)
    dress(axes, x=left_words(left) if left else "share used", grid="x")
    legend_above(axes, "Use of limits", [], aside=room_beside(panel, names))
    _columns(axes, panel, shown, binding)


def shown_limits(
    performance: Performance, binding: Collection[str] | None, most: int
) -> tuple[list[LimitUse], list[LimitUse]]:
    """Limits worth a row, the most used first, and those left."""
    ordered = sorted(performance.limits, key=lambda use: -use.share)
    worth = [use for use in ordered if use.share >= HARDLY_USED or not use.met or binds(use, binding)]
    if len(ordered) - len(worth) < 2:  # a row that counts one is no shorter
        worth = ordered
    if len(worth) > most:
        worth = worth[: most - 1]
    return worth, [use for use in ordered if use not in worth]


def left_words(left: Sequence[LimitUse]) -> str:
    """Count the limits without a row."""
    return f"and {len(left)} more, used to {percent(max(use.share for use in left), 1e-3)} at most"


def binds(use: LimitUse, binding: Collection[str] | None) -> bool:
    """Whether loosening a limit can raise the CNR; of a typed recipe, without ``binding``, whether it is reached."""
    return use.share >= REACHED if binding is None else use.name in binding


def _word(use: LimitUse, binding: Collection[str] | None) -> str:
    """Missed; of an optimum binds, of a recipe that was typed just reached."""
    if not use.met:
        return "missed"
    return ("reached" if binding is None else "binds") if binds(use, binding) else ""


def _look(use: LimitUse, binding: Collection[str] | None) -> tuple[str, str]:
    """Colour and hatch."""
    return (MISSED, "xxxx") if not use.met else (NEAR, "////") if binds(use, binding) else (MET, "")


def _per_cent(axes: Axes, step: float) -> None:
    from matplotlib.ticker import FixedLocator, FuncFormatter

    axes.xaxis.set_major_locator(FixedLocator(np.arange(0, LARGEST + 0.01, step).tolist()))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda share, _: f"{100 * share:.0f} %"))


def _columns(axes: Axes, panel: Panel, shown: Sequence[LimitUse], binding: Collection[str] | None) -> None:
    """Word, share, and value against bound beside the axes."""
    words = [_word(use, binding) for use in shown]
    shares = [percent(use.share, 1e-3) for use in shown]
    values = [_value_words(use) for use in shown]
    right = 1.5
    every = ((words, "left"), (shares, "right"), (values, "left"))
    for column, align in every[::2] if is_narrow(panel) else every:
        widest = max((text_width(panel, text, SMALL, "bold") for text in column), default=0.0)
        place = right if align == "left" else right + widest
        for row, text in enumerate(column):
            if text:
                write(
                    axes, 1.0, row, text, xycoords=("axes fraction", "data"), xytext=(place * POINTS, 0), halo=False,
                    textcoords="offset points", ha=align, va="center",
                    fontweight="bold" if column is words else "normal",
                    color=INK if column is not words else MISSED if text == "missed" else NEAR,
                )  # fmt: skip
        right += widest + 3.0


def _value_words(use: LimitUse) -> str:
    unit = UNITS.get(use.unit, use.unit)
    sign = ("≥" if use.floor else "≤") if use.met else ("<" if use.floor else ">")
    return f"{number(use.value)} {sign} {number(use.bound)} {unit}".rstrip()
