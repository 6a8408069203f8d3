"""The noise budget: what share of the variance each term takes, readable from 99 % down to a millionth."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from codesign.design import Performance
from codesign.design_spectra import worst_pair
from codesign.problem import Problem
from codesign.report.figures.base import (
    TEXT_WIDTH,
    describe,
    dress,
    in_house_style,
    is_narrow,
    legend_above,
    new_figure,
    room_beside,
    text_width,
    width_mm,
    write,
)
from codesign.report.figures.spectral_electrons import NOISE_COLORS
from codesign.report.house import BACKGROUND, CARD, INK, MARKERS, MUTED, RULE, TARGET
from codesign.report.layout import number, percent

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from codesign.report.figures.base import Panel

#: Hatches of bars side by side; dots would take a quarter of a megabyte each in SVG.
HATCHES = ("", "////", "xxx", "\\\\\\\\")
#: Shares below this are drawn at the edge. [1]
LEAST = 1e-6
#: Height of a row, and of everything else. [mm]
ROW, REST = 5.2, 31.0


@in_house_style
def noise_budget(problem: Problem, performance: Performance, *, width: float = TEXT_WIDTH) -> Figure:
    """Draw the share of the variance that each noise term takes at target and background.

    The scale is logarithmic, so that small terms can be read beside one that takes all; the numbers stand beside.

    Parameters
    ----------
    problem : Problem
    performance : Performance
        What `codesign.design.evaluate` said of the recipe.
    width : float
        Width in print. [mm]
    """
    figure = new_figure(width, REST + ROW * len(_terms(performance)))
    draw_noise_budget(figure, problem, performance)
    said = "; ".join(f"{name} {percent(share, 1e-6)}" for name, _, share in _terms(performance))
    return describe(figure, "Noise budget", f"Shares of the variance, mean of target and background: {said}.")


def draw_noise_budget(panel: Panel, problem: Problem, performance: Performance, *, most: int = 99) -> None:
    """Draw at most so many terms into a figure or a part of one; a narrow part has the shares only, no electrons."""
    terms = _terms(performance)[:most]
    if is_narrow(panel):
        axes = top = panel.subplots()
    else:
        top, axes = panel.subplots(2, 1, height_ratios=[1.0, max(len(terms), 2)])
        _draw_strip(top, terms)
    totals = [sum(values[side] for values in performance.noise.values()) for side in (0, 1)]
    target, background = (problem.surfaces[index].id for index in worst_pair(problem, performance))
    rows = range(len(terms))
    handles = []
    for side, (color, marker) in enumerate(((TARGET, MARKERS[1]), (BACKGROUND, MARKERS[0]))):
        shares = [max(variances[side] / totals[side], LEAST) if totals[side] else LEAST for _, variances, _ in terms]
        handles += axes.plot(
            shares, rows, linestyle="none", marker=marker, color=color, markersize=5.5 - side,
            markeredgecolor=CARD, markeredgewidth=0.5, zorder=3 + side, clip_on=False,
        )  # fmt: skip
    axes.hlines(rows, LEAST, [max(share, LEAST) for _, _, share in terms], color=RULE, linewidth=2.2, zorder=1)
    _scale(axes, [share for _, _, share in terms])
    axes.set_yticks(list(rows), [name for name, _, _ in terms])
    axes.set_ylim(max(len(terms), 1) - 0.4, -0.6)
    axes.tick_params(axis="y", length=0)
    axes.spines["left"].set_visible(False)
    dress(axes, x="" if is_narrow(panel) else "share of the variance", grid="x")
    _numbers(axes, panel, terms)
    names = ("target", "background") if is_narrow(panel) else (f"at {target}", f"at {background}")
    keys = list(zip(handles, names, strict=True))
    legend_above(top, "Noise: share of the variance", keys, aside=room_beside(panel, [name for name, _, _ in terms]))


def _terms(performance: Performance) -> list[tuple[str, tuple[float, float], float]]:
    """Name, variance at target and background, and share of both together, the greatest first; none that are zero."""
    whole = sum(sum(pair) for pair in performance.noise.values())
    found = [(name, pair, sum(pair) / whole) for name, pair in performance.noise.items() if sum(pair) > 0]
    return sorted(found, key=lambda term: -term[2])


def _draw_strip(axes: Axes, terms: list[tuple[str, tuple[float, float], float]]) -> None:
    """All terms in proportion, one bar; those wide enough with their name."""
    panel, left = axes.get_figure(root=False), 0.0
    room = 0.45 * width_mm(panel)
    for index, (name, _, share) in enumerate(terms):
        axes.barh(
            0, share, left=left, height=1.0, color=NOISE_COLORS.get(name, MUTED), alpha=0.28, hatch=HATCHES[index % 4],
            edgecolor=CARD, linewidth=0.8,
        )  # fmt: skip
        if text_width(panel, name) + 2.0 <= share * room:
            write(axes, left + share / 2, 0, name, ha="center", va="center")
        left += share
    axes.set_xlim(0, 1)
    axes.set_ylim(-0.5, 0.5)
    axes.set_axis_off()


def _scale(axes: Axes, shares: list[float]) -> None:
    """A scale of ratios down to the smallest share, in words of per cent."""
    from matplotlib.ticker import FixedLocator, FuncFormatter, NullLocator

    least = max(min(shares, default=0.1), LEAST)
    first = min(math.floor(math.log10(least)), -2)
    axes.set_xscale("log")
    axes.set_xlim(max(10.0**first, LEAST), 1.0)
    step = 1 if first > -4 else 2
    axes.xaxis.set_major_locator(FixedLocator([10.0**k for k in range(0, first - 1, -step)]))
    axes.xaxis.set_minor_locator(NullLocator())
    axes.xaxis.set_major_formatter(FuncFormatter(lambda share, _: f"{100 * share:g} %"))


def _numbers(axes: Axes, panel: Panel, terms: list[tuple[str, tuple[float, float], float]]) -> None:
    """Share and standard deviations in electrons, flush right beside the axes."""
    columns = (
        ("share", [percent(share, LEAST) for _, _, share in terms]),
        ("σ target [e⁻]", [number(math.sqrt(pair[0]), 3) for _, pair, _ in terms]),
        ("σ background [e⁻]", [number(math.sqrt(pair[1]), 3) for _, pair, _ in terms]),
    )
    right = 3.0
    for head, cells in columns[:1] if is_narrow(panel) else columns:
        right += max(text_width(panel, text) for text in (head, *cells)) + 3.0
        for row, text in ((-1.0, head), *enumerate(cells)):
            write(
                axes, 1.0, row, text, xycoords=("axes fraction", "data"), xytext=(right * 72 / 25.4, 0), halo=False,
                textcoords="offset points", ha="right", va="center", color=MUTED if row < 0 else INK,
            )  # fmt: skip
