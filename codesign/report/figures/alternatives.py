"""Runners-up with other parts beside the recipe, and the bound that nothing passes."""

from __future__ import annotations

from typing import TYPE_CHECKING

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
from codesign.report.house import BACKGROUND, INK, MUTED, TARGET
from codesign.report.layout import number

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from codesign.report.figures.base import Panel
    from codesign.solve import Solution

#: Height of a row, and of everything else. [mm]
ROW, REST = 5.0, 28.0
#: Runners-up shown at most.
MOST_ROWS = 30


@in_house_style
def alternatives(solution: Solution, *, width: float = TEXT_WIDTH) -> Figure:
    """Draw the CNR of the best configuration with each of other parts, with the bound and the CNR required.

    Parameters
    ----------
    solution : Solution
    width : float
        Width in print. [mm]
    """
    rows = _rows(solution, MOST_ROWS)
    figure = new_figure(width, REST + ROW * len(rows))
    draw_alternatives(figure, solution, MOST_ROWS)
    said = "; ".join(f"{camera}, {optics}: CNR {number(cnr)}" for camera, optics, cnr, _ in rows)
    bound = f"No configuration is above {number(solution.certificate.bound, 5)}."
    return describe(figure, "Alternatives with other parts", f"Before rounding. {said}. {bound}")


def draw_alternatives(panel: Panel, solution: Solution, most: int) -> None:
    """Draw at most so many rows into a figure or a part of one."""
    rows, axes = _rows(solution, most), panel.subplots()
    bound, required = solution.certificate.bound, solution.problem.spec.required_cnr
    for row, (_, _, cnr, best) in enumerate(rows):
        axes.barh(row, cnr, height=0.58, color=TARGET if best else BACKGROUND, alpha=0.8, hatch="" if best else "////",
                  edgecolor="white", linewidth=0)  # fmt: skip
    lines = [(axes.axvline(bound, color=INK, linewidth=1.1, zorder=3), f"bound, {number(bound, 5)}")]
    if required is not None:
        dashed = axes.axvline(required, color=INK, linewidth=1.1, linestyle=(0, (3, 2)), zorder=3)
        lines.append((dashed, f"required, {required:g}"))
    reach = max([bound, *([required] if required is not None else [])])
    axes.set_xlim(0, 1.03 * reach)
    axes.set_ylim(len(rows) - 0.4, -0.6)
    names = [f"{camera}, {optics}" for camera, optics, _, _ in rows]
    names = [shortened(panel, name, 0.42 * width_mm(panel), SMALL, "bold") for name in names]
    axes.set_yticks(range(len(rows)), names)
    for label, (_, _, _, best) in zip(axes.get_yticklabels(), rows, strict=True):
        label.set_fontweight("bold" if best else "normal")
    axes.tick_params(axis="y", length=0)
    axes.spines["left"].set_visible(False)
    dress(axes, x="" if is_narrow(panel) else "CNR before rounding to setting steps", grid="x")
    title = "CNR by parts, before rounding" if is_narrow(panel) else "CNR with other parts"
    legend_above(axes, title, lines, aside=room_beside(panel, names))
    _columns(axes, panel, rows)


def _rows(solution: Solution, most: int) -> list[tuple[str, str, float, bool]]:
    """Camera, filter, CNR, and whether it is the recipe: that one first, then the runners-up."""
    design = solution.optimum.design
    found = [(design.camera, _filter_words(design.filter), solution.certificate.value, True)]
    ordered = sorted(solution.alternatives, key=lambda other: -other.cnr)
    found += [(other.design.camera, _filter_words(other.design.filter), other.cnr, False) for other in ordered]
    return found[:most]


def _filter_words(name: str) -> str:
    return "no filter" if name == "none" else name


def _columns(axes, panel: Panel, rows: list[tuple[str, str, float, bool]]) -> None:
    """CNR and change beside the axes."""
    best = rows[0][2]
    values = [f"{cnr:#.4g}".rstrip(".") for _, _, cnr, _ in rows]
    changes = ["recipe" if chosen else f"−{100 * (1 - cnr / best):.1f} %" for _, _, cnr, chosen in rows]
    right = 1.5
    for column in (values, changes):
        right += max(text_width(panel, text, SMALL, "bold") for text in column)
        for row, text in enumerate(column):
            write(
                axes, 1.0, row, text, xycoords=("axes fraction", "data"), xytext=(right * POINTS, 0), halo=False,
                textcoords="offset points", ha="right", va="center", color=INK if column is values else MUTED,
                fontweight="bold" if rows[row][3] else "normal",
            )  # fmt: skip
        right += 3.0
