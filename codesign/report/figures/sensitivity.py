"""How the CNR answers: to data-sheet tolerances, re-tuned and held fixed, and to limits that are loosened."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from codesign.report.figures.base import (
    BODY,
    POINTS,
    TEXT_WIDTH,
    describe,
    dress,
    in_house_style,
    legend_above,
    new_figure,
    room_beside,
    shortened,
    signed,
    text_width,
    width_mm,
    wrapped,
    write,
)
from codesign.report.house import BACKGROUND, CARD, INK, MISSED, MUTED, NEAR, TARGET
from codesign.report.layout import number
from codesign.report.sensitivity_text import NEGLIGIBLE
from codesign.report.text import UNITS
from codesign.study.sensitivity import Elasticity, LimitPrice, Sensitivities, Shifted

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure


#: Heights of a row of either part, and of everything else. [mm]
ROW, PRICE_ROW, REST = 6.0, 4.6, 52.0
#: Quantities with a row at most.
MOST_ROWS = 26
#: Between this change of CNR and its negative the scale is even, beyond it is one of ratios. [%]
EVEN = 0.1
#: Changes of CNR below this are not told from none. [%]
LEAST = 0.005


@dataclass(frozen=True, slots=True)
class Swing:
    """What one quantity does to the CNR at the lower and upper end of its tolerance. [%]

    None where the limits cannot be met or nothing was worked out; ``misses``: the unchanged recipe then misses limits.
    """

    name: str
    size: str
    retuned: tuple[float | None, float | None]
    fixed: tuple[float | None, float | None]
    misses: bool
    impossible: bool

    @property
    def weight(self) -> float:
        """Largest change of CNR. [%]"""
        return max((abs(x) for x in (*self.retuned, *self.fixed) if x is not None), default=0.0)


@in_house_style
def sensitivity_figure(found: Sensitivities, *, width: float = TEXT_WIDTH) -> Figure:
    """Draw what tolerances do to the CNR, and what loosening each binding limit would bring.

    Parameters
    ----------
    found : Sensitivities
    width : float
        Width in print. [mm]
    """
    swings, small = swings_of(found)
    priced = prices_of(found)
    heights = [ROW * max(len(swings), 2), PRICE_ROW * max(len(priced), 2)]
    figure = new_figure(width, REST + sum(heights))
    upper, lower = figure.subplots(2, 1, height_ratios=[heights[0] + 4, heights[1] + 2])
    _draw_swings(upper, swings, small)
    _draw_prices(lower, found, priced)
    said = "; ".join(f"{x.name} at most {x.weight:.2g} %" for x in swings[:8])
    return describe(figure, "Sensitivities of the CNR", f"Change of CNR within tolerances: {said}.")


def swings_of(found: Sensitivities) -> tuple[list[Swing], list[str]]:
    """Quantities that move the CNR, the strongest first, and the names of those that hardly do."""
    every = [_swing(x, found.cnr) for x in found.parameters]
    worth = sorted((x for x in every if x.weight >= 100 * NEGLIGIBLE or x.impossible), key=lambda x: -x.weight)
    shown = worth[:MOST_ROWS]
    names = dict.fromkeys(x.parameter for x, swing in zip(found.parameters, every, strict=True) if swing not in shown)
    return shown, list(names)


def _swing(x: Elasticity, cnr: float) -> Swing:
    size = f"±{100 * x.tolerance:g} %" if x.unit == "1" else f"±{x.tolerance:g} {x.unit}"
    name = x.parameter if x.part is None else f"{x.parameter}, {x.part}"
    ends = (x.low, x.high)
    return Swing(
        name=name,
        size=size,
        retuned=tuple(_change(end, "cnr_retuned", cnr, x.retuned * s) for end, s in zip(ends, _signs(x), strict=True)),
        fixed=tuple(_change(end, "cnr_fixed", cnr, x.fixed * s) for end, s in zip(ends, _signs(x), strict=True)),
        misses=any(end is not None and bool(end.missed) for end in ends),
        impossible=any(end is not None and end.cnr_retuned is None for end in ends),
    )


def _signs(x: Elasticity) -> tuple[float, float]:
    return -x.tolerance, x.tolerance


def _change(end: Shifted | None, key: str, cnr: float, linear: float) -> float | None:
    """Change of CNR at one end: as solved, else by the derivative. [%]"""
    if end is None:
        return 100 * linear if math.isfinite(linear) else None
    value = getattr(end, key)
    return None if value is None else 100 * (value / cnr - 1)


def prices_of(found: Sensitivities) -> list[tuple[LimitPrice, float]]:
    """Limits that bind and have a price, and the change of CNR when the bound is 1 % larger, the greatest first. [%]"""
    priced = [(x, x.price * x.bound / found.cnr) for x in found.limits if x.binds and x.price is not None]
    return sorted(priced, key=lambda pair: -abs(pair[1]) if math.isfinite(pair[1]) else 0.0)


# --- tolerances ------------------------------------------------------------------------------------------------


def _draw_swings(axes: Axes, swings: list[Swing], small: list[str]) -> None:
    from matplotlib.lines import Line2D

    looks = (("retuned", -0.18, BACKGROUND, BACKGROUND, "-"), ("fixed", 0.18, TARGET, CARD, "--"))
    for row, swing in enumerate(swings):
        for key, lift, color, face, dash in looks:
            ends = getattr(swing, key)
            known = [x for x in ends if x is not None]
            axes.hlines(row + lift, min([0.0, *known]), max([0.0, *known]), color=color, linewidth=1.1, linestyle=dash)
            for end, marker in zip(ends, "v^", strict=True):
                if end is not None:
                    axes.plot(end, row + lift, marker=marker, color=color, markerfacecolor=face, markersize=4.5)
    axes.axvline(0, color=INK, linewidth=0.8)
    _scale(axes, max((swing.weight for swing in swings), default=EVEN))
    axes.set_ylim(max(len(swings), 1) - 0.4, -0.6)
    if not swings:
        write(axes, 0, 0, "no tolerance moves the CNR", va="center", xytext=(4, 0), textcoords="offset points")
    panel = axes.get_figure(root=False)
    names = [shortened(panel, swing.name, 0.36 * width_mm(panel), tail=swing.size) for swing in swings]
    axes.set_yticks(range(len(swings)), names)
    axes.tick_params(axis="y", length=0)
    axes.spines["left"].set_visible(False)
    dress(axes, x="change of CNR when one quantity strays by its tolerance", grid="x")
    if small:
        note = f"below {100 * NEGLIGIBLE:g} % each: {', '.join(small)}"
        axes.set_xlabel(f"{axes.get_xlabel()}\n{wrapped(panel, note, 0.6 * width_mm(panel), BODY)}")
    keys = [
        (Line2D([], [], color=BACKGROUND, linestyle="-"), "recipe tuned again"),
        (Line2D([], [], color=TARGET, linestyle="--"), "recipe held fixed"),
        (Line2D([], [], color=MUTED, linestyle="none", marker="v"), "quantity lower"),
        (Line2D([], [], color=MUTED, linestyle="none", marker="^"), "quantity higher"),
    ]
    legend_above(axes, "What tolerances do to the CNR", keys, aside=room_beside(panel, names))
    if swings:
        _worst_columns(axes, swings)


def _scale(axes: Axes, largest: float) -> None:
    """An even scale about zero that becomes one of ratios beyond."""
    from matplotlib.ticker import FixedLocator, FuncFormatter, NullLocator

    top = max(largest, EVEN)
    axes.set_xscale("symlog", linthresh=EVEN, linscale=0.8)
    axes.set_xlim(-1.6 * top, 1.6 * top)
    powers = [10.0**k for k in range(-1, 6) if 10.0**k <= 1.6 * top]
    axes.xaxis.set_major_locator(FixedLocator([-p for p in reversed(powers)] + [0.0] + powers))
    axes.xaxis.set_minor_locator(NullLocator())
    axes.xaxis.set_major_formatter(FuncFormatter(lambda x, _: f"{signed(x, plus=True)} %" if x else "0"))


def _worst_columns(axes: Axes, swings: list[Swing]) -> None:
    """The worse end of each, re-tuned and held fixed, and whether the fixed recipe then misses a limit."""
    retuned = ["impossible" if x.impossible else _worst(x.retuned) for x in swings]
    fixed = [_worst(x.fixed) for x in swings]
    misses = ["misses a limit" if x.misses else "" for x in swings]
    panel, right = axes.get_figure(root=False), 1.5
    for head, column, align in (
        ("worst tuned", retuned, "right"),
        ("worst fixed", fixed, "right"),
        ("", misses, "left"),
    ):
        widest = max(text_width(panel, text) for text in (head, *column))
        place = right + (widest if align == "right" else 0.0)
        for row, text in ((-0.95, head), *enumerate(column)):
            if text:
                color = MUTED if row < 0 else MISSED if text in ("misses a limit", "impossible") else INK
                write(
                    axes, 1.0, row, text, xycoords=("axes fraction", "data"), xytext=(place * POINTS, 0), color=color,
                    textcoords="offset points", ha=align, va="center", halo=False,
                )  # fmt: skip
        right += widest + 3.0


def _worst(ends: tuple[float | None, float | None]) -> str:
    known = [x for x in ends if x is not None]
    if not known:
        return ""
    return _percent(min(known))


def _percent(change: float) -> str:
    """A change of CNR in few digits, with its sign."""
    if abs(change) < LEAST:
        return "0 %"
    return f"{signed(change, 2, plus=True)} %"


# --- limits ----------------------------------------------------------------------------------------------------


def _draw_prices(axes: Axes, found: Sensitivities, priced: list[tuple[LimitPrice, float]]) -> None:
    panel = axes.get_figure(root=False)
    shown = [share if math.isfinite(share) else 0.0 for _, share in priced]
    axes.barh(range(len(priced)), shown, height=0.6, color=NEAR, alpha=0.75, hatch="////", edgecolor=CARD, linewidth=0)
    axes.axvline(0, color=INK, linewidth=0.8)
    reach = max([abs(x) for x in shown], default=0.0) or 1.0
    axes.set_xlim(min([*shown, 0.0]) - 0.05 * reach, max([*shown, 0.0]) + 0.05 * reach)
    axes.set_ylim(max(len(priced), 1) - 0.4, -0.6)
    bounds = [f"{number(x.bound)} {UNITS.get(x.unit, x.unit)}".strip() for x, _ in priced]
    names = [
        shortened(panel, x.name, 0.36 * width_mm(panel), tail=bound)
        for (x, _), bound in zip(priced, bounds, strict=True)
    ]
    axes.set_yticks(range(len(names)), names)
    axes.tick_params(axis="y", length=0)
    axes.spines["left"].set_visible(False)
    for row, (_, share) in enumerate(priced):
        text = _percent(share) if math.isfinite(share) else "one-sided"
        write(
            axes,
            1.0,
            row,
            text,
            xycoords=("axes fraction", "data"),
            xytext=(4, 0),
            textcoords="offset points",
            va="center",
            halo=False,
        )
    if not priced:
        write(axes, 0, 0, "no limit with a price binds", va="center", xytext=(4, 0), textcoords="offset points")
    steps = [x.name for x in found.limits if x.binds and x.price is None]
    dress(axes, x="change of CNR [%]", grid="x")
    if steps:
        note = f"bind too, but move in whole steps: {', '.join(steps)}"
        axes.set_xlabel(f"{axes.get_xlabel()}\n{wrapped(panel, note, 0.6 * width_mm(panel), BODY)}")
    legend_above(axes, "What 1 % more of a binding limit brings", [], aside=room_beside(panel, names))
