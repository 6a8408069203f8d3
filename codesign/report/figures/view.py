"""What the camera would see: simulated pieces with a defect, with the recipe and with what it is compared to."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

import numpy as np

from codesign.design import Performance, setting_of
from codesign.design_simulation import expected, simulate
from codesign.design_spectra import worst_pair
from codesign.limits import saturation_electrons
from codesign.problem import Problem
from codesign.report.figures.base import (
    SMALL,
    TEXT_WIDTH,
    TITLE,
    describe,
    in_house_style,
    new_figure,
    shortened,
    signed,
    width_mm,
    wrapped,
    write,
)
from codesign.report.house import BACKGROUND, CARD, DASHES, INK, MUTED, RULE, TARGET
from codesign.report.layout import number
from codesign.report.text import rate_words

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from codesign.design_spectra import Array
    from codesign.report.figures.base import Panel

#: Pieces across and down, cells along each, cells between them.
ACROSS, DOWN, CELLS, GAP = 4, 2, 40, 2
#: The pictures run from black to white over at most so many standard deviations of the noise to either side.
WIDEST = 25.0
#: Room beyond the means on that scale. [standard deviations]
MARGIN = 3.0
#: Where pixels fill, dots from this share of saturation on are shown as white. [1], [standard deviations]
FULL, WHITE = 0.99, 1e6
#: Softness of a defect's edge. [cells]
EDGE = 1.3
#: Height of the panel below a picture. [mm]
SPREAD = 22.0
#: Seed of pieces and light; the same picture each time.
SEED = 20240607


class Side(Protocol):
    """A recipe to look through: its problem, what it does, and words that say what it is."""

    problem: Problem
    performance: Performance
    words: str


@dataclass(frozen=True, slots=True)
class View:
    """A `Side` made of a problem, a performance and words."""

    problem: Problem
    performance: Performance
    words: str


@in_house_style
def simulated_view(
    problem: Problem,
    performance: Performance,
    before: Side | None = None,
    *,
    width: float = TEXT_WIDTH,
    seed: int = SEED,
) -> Figure:
    """Draw simulated pieces with a defect, as the decision sees them, and how far target and background lie apart.

    Parameters
    ----------
    problem : Problem
    performance : Performance
        What `codesign.design.evaluate` said of the recipe.
    before : Side, optional
        Another recipe for the same scene, shown on the left: the present one, or `codesign.study.plain_light`.
    width : float
        Width in print. [mm]
    seed : int
        Of the pieces, the light and the noise.
    """
    sides = _sides(problem, performance, before)
    room = width / 2 + (4.0 if before is None else 0.0)  # the caption of one picture takes a line more
    figure = new_figure(room * len(sides), 0.52 * room + (46.0 if before is None else 42.0))
    draw_simulated_view(figure, problem, performance, before, seed=seed)
    said = "; ".join(f"{side.words}: CNR {number(side.performance.cnr)}" for side in sides)
    return describe(figure, "Simulated pictures of pieces with a defect", f"{said}.")


def draw_simulated_view(
    panel: Panel, problem: Problem, performance: Performance, before: Side | None, *, seed: int = SEED,
    across: int = ACROSS, down: int = DOWN,
) -> None:  # fmt: skip
    """Draw the pictures into a figure or a part of one, with so many pieces across and down."""
    sides = _sides(problem, performance, before)
    reach = display_reach([side.performance.cnr for side in sides])
    room = width_mm(panel) / len(sides)
    every = panel.subplots(
        2,
        len(sides),
        height_ratios=[1.03 * down / across * room + 9.0, SPREAD],
        squeeze=False,
        gridspec_kw={"wspace": 0.05},
    )
    coverage = defects(across * down, CELLS, np.random.default_rng(seed))
    for column, side in enumerate(sides):
        _draw_picture(every[0, column], side, coverage, reach, (across, seed), room)
        _draw_spread(every[1, column], side, max(reach, side.performance.cnr / 2 + MARGIN), room)
    panel.supxlabel(
        wrapped(panel, _caption(problem, reach, across * down), width_mm(panel) - 8.0), fontsize=SMALL, color=MUTED
    )


def _sides(problem: Problem, performance: Performance, before: Side | None) -> list[Side]:
    this = View(problem, performance, "With the recipe")
    return [this] if before is None else [before, this]


def display_reach(cnrs: Sequence[float]) -> float:
    """Standard deviations of the noise that lie between mid-grey and black or white, the same for all pictures."""
    return min(max(cnrs) / 2 + MARGIN, WIDEST)


def defects(count: int, cells: int, rng: np.random.Generator) -> Array:
    """Soft-edged, irregular defects, one on each piece.

    Returns
    -------
    (count, cells, cells) array
        Share of each cell that the defect covers. [1]
    """
    y, x = np.mgrid[:cells, :cells] + 0.5
    found = np.empty((count, cells, cells))
    for piece in range(count):
        centre = cells * rng.uniform(0.43, 0.57, 2)
        dx, dy = x - centre[0], y - centre[1]
        angle, stretch = np.arctan2(dy, dx), rng.uniform(0.8, 1.25)
        radius = cells * rng.uniform(0.16, 0.22)
        outline = np.ones_like(angle)
        for order in (2, 3, 4, 5):
            outline += rng.uniform(0.0, 0.28 / order) * np.cos(order * angle + rng.uniform(0, 2 * np.pi))
        inside = radius * outline - np.hypot(dx * stretch, dy / stretch)
        found[piece] = 1 / (1 + np.exp(-np.clip(inside / EDGE, -40.0, 40.0)))
    return found


def picture(side: Side, coverage: Array, seed: int) -> Array:
    """Simulated pieces, in standard deviations of the noise from midway between target and background."""
    want = expected(side.problem, side.performance)
    values = simulate(side.problem, side.performance, coverage, np.random.default_rng(seed))
    seen = (values - want.middle_e) / max(want.noise_e, 1e-12)
    if not _clips(side.performance) or side.performance.weights:
        return seen
    # The means lie above the end of the scale; a full well is white all the same.
    setting = setting_of(side.problem, side.performance.design)
    return np.where(values >= FULL * saturation_electrons(setting.camera, setting.gain), WHITE, seen)


def _clips(performance: Performance) -> bool:
    """Whether a target or a background fills its pixels."""
    return any(surface.saturation_share > 1 for surface in performance.surfaces if surface.role != "guard")


def _draw_picture(axes: Axes, side: Side, coverage: Array, reach: float, plan: tuple[int, int], room: float) -> None:
    across, seed = plan
    pieces = picture(side, coverage, seed)
    step = CELLS + GAP
    sheet = np.full((len(pieces) // across * step - GAP, across * step - GAP), np.nan)
    for index, piece in enumerate(pieces):
        top, left = divmod(index, across)
        sheet[top * step : top * step + CELLS, left * step : left * step + CELLS] = piece
    import matplotlib as mpl

    gap = RULE if _clips(side.performance) else CARD  # white pieces would not stand out of a white page
    shades = mpl.colormaps["gray"].with_extremes(bad=gap)
    axes.imshow(np.ma.masked_invalid(sheet), cmap=shades, vmin=-reach, vmax=reach, interpolation="none")
    axes.set_axis_off()
    axes.set_anchor("W")
    panel, result = axes.get_figure(root=False), side.performance
    full = "; pixels are full" if _clips(result) else ""
    said = f"CNR {number(result.cnr)}, {rate_words(result.error_rate)} missed{full}"
    axes.set_title("\n".join(shortened(panel, line, room - 8.0, TITLE, "bold") for line in (side.words, said)))


def _draw_spread(axes: Axes, side: Side, reach: float, room: float) -> None:
    """Predicted spread of target and background on the scale of the pictures."""
    want, problem = expected(side.problem, side.performance), side.problem
    noise = max(want.noise_e, 1e-12)
    x = np.linspace(-reach, reach, 401)
    for mean, deviation, color, dash in zip(want.mean_e, want.deviation_e, (TARGET, BACKGROUND), DASHES, strict=False):
        width = max(deviation / noise, 1e-3)
        curve = np.exp(-0.5 * ((x - (mean - want.middle_e) / noise) / width) ** 2) / width
        axes.plot(x, curve, color=color, linestyle=dash, linewidth=1.4)
        axes.fill_between(x, curve, color=color, alpha=0.15, linewidth=0)
    axes.axvline(0, color=INK, linewidth=0.8, linestyle=DASHES[3])
    axes.set_xlim(-reach, reach)
    axes.set_ylim(0, 1.45 * axes.get_ylim()[1])
    axes.set_yticks([])
    axes.set_xticks([])
    axes.spines["left"].set_visible(False)
    names = [problem.surfaces[index].id for index in worst_pair(problem, side.performance)]
    panel, brighter = axes.get_figure(root=False), int(want.mean_e[0] < want.mean_e[1])
    for which, place, align in ((1 - brighter, 0.0, "left"), (brighter, 1.0, "right")):
        text = shortened(panel, names[which], 0.5 * room - 6.0)
        write(axes, place, 0.98, text, xycoords="axes fraction", ha=align, va="top", color=(TARGET, BACKGROUND)[which])
    axes.set_xlabel(_level_words(side), fontsize=SMALL)


def _level_words(side: Side) -> str:
    """Grey values on both sides of the threshold; weighted electrons where readings are combined."""
    if side.performance.weights:
        low, high = sorted(expected(side.problem, side.performance).mean_e)
        return f"weighted sum: {signed(low)} and {signed(high)} e⁻"
    target, background = (side.performance.surfaces[i] for i in worst_pair(side.problem, side.performance))
    low, high = sorted((target.grey_dn, background.grey_dn))
    return f"grey values {low:.1f} and {high:.1f} DN"


def _caption(problem: Problem, reach: float, pieces: int) -> str:
    averaging = problem.spec.averaging
    counts = [f"{n} {what}" for n, what in ((averaging.pixels, "pixels"), (averaging.frames, "frames")) if n > 1]
    dot = f"one decision, the average of {' and '.join(counts)}" if counts else "one pixel"
    return (
        f"Simulated: {pieces} pieces, each with a defect. Each dot is {dot}. Black to white is "
        f"±{reach:.1f} standard deviations of the noise in every picture; dotted: threshold."
    )
