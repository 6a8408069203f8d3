"""A family at a glance: CNR of every variant with its own rig and with the one in common, and the parts they use."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from codesign.family.batch import Entry
from codesign.family.outcome import Outcome
from codesign.report.figures.base import (
    SMALL,
    TEXT_WIDTH,
    describe,
    dress,
    in_house_style,
    legend_above,
    new_figure,
    shortened,
    text_width,
    width_mm,
    wrapped,
)
from codesign.report.house import BACKGROUND, CARD, FILTER, INK, MISSED, MUTED, SENSOR, TARGET

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

#: Variants whose names are written; more are told from each other by their order alone.
MOST_NAMES = 40
#: Rows of each kind of part; the others share one.
MOST_CAMERAS, MOST_FILTERS, MOST_LEDS = 4, 8, 12
#: Heights of the upper panel, of a row of parts and of what goes with the axes; longest names. [mm]
UPPER, ROW, BESIDE, LONGEST = 62.0, 4.1, 24.0, 34.0
#: Width that the axes do not have, beside the names of the rows. [mm]
MARGINS = 14.0
#: Share of a row that its bars fill.
FILLED = 0.82


@dataclass(frozen=True, slots=True)
class _Row:
    """One row of the strip: its name, what fills it for each variant (0 to 1), number of variants, colour."""

    name: str
    fill: np.ndarray
    count: int
    colour: str
    first: bool


@in_house_style
def family_figure(
    entries: Sequence[Entry],
    shared: Mapping[str, Outcome] | None = None,
    title: str = "",
    *,
    common: str = "rig in common",
    width: float = TEXT_WIDTH,
) -> Figure:
    """Draw the CNR of each variant in the order of their own rigs, and below it the parts in use.

    Parameters
    ----------
    entries : sequence of Entry
        Each variant with its own best rig; those without a recipe are counted, not drawn.
    shared : mapping, optional
        Outcome of each variant with the rig in common. The strip then shows the drives of that one.
    title : str
    common : str
        Name of the rig in common.
    width : float
        [mm]
    """
    solved = sorted((entry for entry in entries if entry.outcome.solved), key=lambda entry: entry.outcome.cnr)
    rows = _strip([entry.outcome if shared is None else shared.get(entry.name) for entry in solved], shared is None)
    names = max((len(entry.name) for entry in solved), default=0) if len(solved) <= MOST_NAMES else 0
    low = ROW * max(len(rows), 1)
    height = UPPER + low + BESIDE + min(1.4 * names, LONGEST)
    figure = new_figure(width, height)
    above, below = figure.subplots(2, 1, sharex=True, gridspec_kw={"height_ratios": [UPPER, low]})
    aside = MARGINS + max((text_width(figure, shortened(figure, row.name, LONGEST)) for row in rows), default=0.0)
    _draw_cnr(above, solved, shared, (title, common), aside)
    _draw_strip(below, rows, len(solved))
    _draw_names(below, solved, entries)
    return describe(figure, f"CNR of the variants: {title}", _description(entries, solved, shared))


def _draw_cnr(
    axes: Axes, solved: Sequence[Entry], shared: Mapping[str, Outcome] | None, words: tuple[str, str], aside: float
) -> None:
    place = np.arange(len(solved))
    own = np.array([entry.outcome.cnr for entry in solved])
    size = 4.0 if len(solved) <= MOST_NAMES else 2.2
    entries = [(axes.plot(place, own, "-o", color=BACKGROUND, markersize=size)[0], "own rig of each")]
    reached = own
    if shared is not None:
        reached = np.array([_cnr(shared.get(entry.name)) for entry in solved])
        line = axes.plot(place, reached, "s", color=TARGET, markersize=size, markerfacecolor=CARD)[0]
        axes.vlines(place, reached, own, color=MUTED, linewidth=0.7, zorder=1)
        entries.append((line, words[1]))
    needs = np.array([entry.required_cnr or np.nan for entry in solved])
    if np.isfinite(needs).any():
        half = 0.5 if len(solved) <= MOST_NAMES else 0.9
        lines = axes.hlines(needs, place - half, place + half, color=INK, linewidth=1.3)
        entries.append((lines, "CNR needed"))
        missed = np.flatnonzero(reached < needs)
        if missed.size:
            crosses = axes.plot(place[missed], reached[missed], "x", color=MISSED, markersize=size + 3)[0]
            entries.append((crosses, f"misses it ({missed.size})"))
    dress(axes, y="CNR", grid="both" if len(solved) <= MOST_NAMES else "y")
    axes.set_xlim(-0.7, max(len(solved), 1) - 0.3)
    axes.set_ylim(bottom=0)
    axes.tick_params(axis="x", length=0, labelbottom=False)
    legend_above(axes, words[0] or "CNR of each variant", entries, aside=aside)


def _cnr(outcome: Outcome | None) -> float:
    return outcome.cnr if outcome is not None and outcome.solved else np.nan


def _draw_strip(axes: Axes, rows: Sequence[_Row], count: int) -> None:
    figure = axes.get_figure()
    for number, row in enumerate(rows):
        base = number + FILLED
        for start, stop, fill in _runs(row.fill, joined=count > MOST_NAMES):
            axes.fill_between([start - 0.42, stop + 0.42], base, base - FILLED * fill, color=row.colour, linewidth=0)
        if row.first and number:
            axes.axhline(number - (1 - FILLED) / 2, color=MUTED, linewidth=0.6)
    axes.set_ylim(len(rows), -(1 - FILLED))
    axes.set_yticks([number + FILLED / 2 for number in range(len(rows))])
    axes.set_yticklabels([shortened(figure, row.name, LONGEST) for row in rows], fontsize=SMALL)
    right = axes.secondary_yaxis("right")
    right.set_yticks([number + FILLED / 2 for number in range(len(rows))])
    right.set_yticklabels([str(row.count) for row in rows], fontsize=SMALL)
    for axis in (axes, right):
        axis.tick_params(axis="y", length=0)
    right.spines["right"].set_visible(False)
    axes.spines["left"].set_visible(False)
    axes.set_xlim(-0.7, max(count, 1) - 0.3)


def _runs(fill: np.ndarray, *, joined: bool) -> list[tuple[int, int, float]]:
    """Places that are filled, first and last; neighbours filled alike as one where ``joined``: few shapes for many."""
    found, start = [], 0
    for place in range(1, len(fill) + 1):
        if place == len(fill) or fill[place] != fill[start] or not joined:
            if fill[start] > 0:
                found.append((start, place - 1, float(fill[start])))
            start = place
    return found


def _draw_names(axes: Axes, solved: Sequence[Entry], entries: Sequence[Entry]) -> None:
    figure = axes.get_figure()
    lost = len(entries) - len(solved)
    text = f"{len(solved)} variants in the order of the CNR of their own rigs. Height of a bar: current, against the "
    text += "largest in its row; number at the right: variants that use the part."
    text += f" {lost} without a recipe are not drawn." if lost else ""
    axes.set_xlabel(wrapped(figure, text, 0.72 * width_mm(figure)))
    axes.tick_params(axis="x", length=0, labelbottom=True)
    if len(solved) <= MOST_NAMES:
        axes.set_xticks(range(len(solved)))
        axes.set_xticklabels([shortened(figure, entry.name, LONGEST) for entry in solved], rotation=90)
        axes.grid(visible=True, axis="x")
        return
    axes.set_xticks([0, len(solved) - 1])
    ends = [f"worst: {solved[0].name}", f"best: {solved[-1].name}"]
    for label, text, side in zip(axes.set_xticklabels(ends), ends, ("left", "right"), strict=True):
        label.set_text(shortened(figure, text, 2 * LONGEST))
        label.set_horizontalalignment(side)


def _strip(outcomes: Sequence[Outcome | None], own: bool) -> list[_Row]:
    """Rows of cameras and filters where each variant has its own, and of LEDs by their drive."""
    rows = []
    if own:
        cameras = [{outcome.camera: 1.0} for outcome in outcomes]
        rows += _rows("camera", cameras, MOST_CAMERAS, SENSOR)
        rows += _rows("filter", [{outcome.filter: 1.0} for outcome in outcomes], MOST_FILTERS, FILTER)
    return rows + _rows("LED", [_drives(outcome) for outcome in outcomes], MOST_LEDS, TARGET)


def _drives(outcome: Outcome | None) -> dict[str, float]:
    """Current of each lit LED, of several shots the largest. [mA]"""
    if outcome is None:
        return {}
    drives = [shot["drive_ma"] for shot in outcome.shots] or [outcome.drive_ma]
    return {led: max(drive.get(led, 0.0) for drive in drives) for led in outcome.leds}


def _rows(kind: str, used: Sequence[Mapping[str, float]], most: int, colour: str) -> list[_Row]:
    counts = Counter(name for each in used for name in each)
    order = [name for name, _ in sorted(counts.items(), key=lambda item: (-item[1], item[0]))]
    shown = order if len(order) <= most else order[: most - 1]
    rows = []
    for name in shown:
        fill = np.array([each.get(name, 0.0) for each in used])
        rows.append(_Row(f"{kind} {name}", fill / fill.max(), counts[name], colour, not rows))
    rest = set(order) - set(shown)
    if rest:
        fill = np.array([float(any(name in rest for name in each)) for each in used])
        rows.append(_Row(f"{len(rest)} other {kind}s", fill, int(fill.sum()), colour, not rows))
    return rows


def _description(entries: Sequence[Entry], solved: Sequence[Entry], shared: Mapping[str, Outcome] | None) -> str:
    if not solved:
        return f"None of {len(entries)} variants has a recipe."
    worst, best = solved[0], solved[-1]
    text = (
        f"{len(solved)} of {len(entries)} variants with a recipe. Own rigs: CNR from {worst.outcome.cnr:.3g} "
        f"({worst.name}) to {best.outcome.cnr:.3g} ({best.name})."
    )
    if shared is not None:
        values = {entry.name: _cnr(shared.get(entry.name)) for entry in solved}
        last = min(values, key=values.get)
        text += f" Rig in common: CNR from {values[last]:.3g} ({last}) to {max(values.values()):.3g}."
    return text
