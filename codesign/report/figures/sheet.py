"""One page to print: what to set, what comes of it, and why."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from codesign.design import Performance
from codesign.problem import Problem
from codesign.report.figures.alternatives import draw_alternatives
from codesign.report.figures.base import (
    A4,
    BODY,
    SMALL,
    describe,
    in_house_style,
    new_figure,
    shortened,
    signed,
    text_width,
    width_mm,
    wrapped,
)
from codesign.report.figures.limits import draw_limit_use
from codesign.report.figures.noise import draw_noise_budget
from codesign.report.figures.spectral import draw_spectral_story
from codesign.report.figures.view import draw_simulated_view
from codesign.report.house import INK, MISSED, MUTED, RULE
from codesign.report.layout import number, percent
from codesign.report.text import currents_words, exposure_words, light_words, rate_words

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from codesign.report.figures.base import Panel
    from codesign.report.figures.view import Side
    from codesign.solve import Solution

#: Edge of the page that stays white, for printers and punches. [mm]
EDGE = 10.0
#: Heights of head, story, pictures, budgets and foot. [mm]
HEIGHTS = (43.0, 104.0, 52.0, 71.0, 7.0)
#: Where the settings begin, from the top of the head. [mm]
SETTINGS_DOWN = 18.5
#: Letters of the headline. [pt]
HEADLINE = 13.0
#: LEDs listed in the head; rows of limits and of runners-up.
LISTED, LIMITS, RUNNERS_UP = 12, 12, 4
FOOT = (
    "A prediction: measure the first recipe and compare grey values. Bright or flashing light, heat and current can "
    "harm: read the cautions; local codes and licensed practice decide."
)


def recipe_sheet(solution: Solution, *, before: Side | None = None) -> Figure:
    """Draw a recipe on one A4 page: settings, spectral story, pictures, limits, noise, runners-up.

    Parameters
    ----------
    solution : Solution
    before : Side, optional
        Another recipe for the same scene to compare the pictures with.
    """
    return performance_sheet(solution.problem, solution.recipe, solution=solution, before=before)


@in_house_style
def performance_sheet(
    problem: Problem, performance: Performance, *, solution: Solution | None = None, before: Side | None = None
) -> Figure:
    """Draw any recipe on one A4 page; bound and runners-up come with a solution only."""
    figure = new_figure(*A4)
    inner = A4[0] - 2 * EDGE
    rows = figure.subfigures(
        len(HEIGHTS) + 2, 3, width_ratios=[EDGE, inner, EDGE], height_ratios=[EDGE, *HEIGHTS, EDGE]
    )
    head, story, pictures, budgets, foot = (rows[k, 1] for k in range(1, len(HEIGHTS) + 1))
    numbers = draw_spectral_story(story, problem, performance, noise=False, keys=False)
    _draw_head(head, problem, performance, solution, numbers)
    draw_simulated_view(pictures, problem, performance, before, across=6 if before is not None else 12, down=1)
    left, right = budgets.subfigures(1, 2, wspace=0.03)
    draw_limit_use(left, performance, None if solution is None else solution.binding, LIMITS)
    if solution is not None and solution.alternatives:
        upper, lower = right.subfigures(2, 1, height_ratios=[40.0, 31.0])
        draw_noise_budget(upper, problem, performance, most=5)
        draw_alternatives(lower, solution, RUNNERS_UP)
    else:
        draw_noise_budget(right, problem, performance)
    foot.text(0, 0.0, wrapped(foot, FOOT, width_mm(foot), lines=2), fontsize=SMALL, color=MUTED, va="bottom")
    return describe(figure, f"Recipe: {problem.spec.title}", _spoken(problem, performance))


def _spoken(problem: Problem, performance: Performance) -> str:
    settings = "; ".join(f"{label} {text}" for label, text in _settings(problem, performance))
    return (
        f"CNR {number(performance.cnr)}. {settings}. {'; '.join(name + what for name, what in _leds(performance, {}))}."
    )


# --- head ------------------------------------------------------------------------------------------------------


def _draw_head(
    panel: Panel, problem: Problem, performance: Performance, solution: Solution | None, numbers: Mapping[str, int]
) -> None:
    width = width_mm(panel)
    title = shortened(panel, problem.spec.title or problem.where, width, HEADLINE, "bold")
    panel.text(0, 1, title, fontsize=HEADLINE, fontweight="bold", color=INK, va="top")
    lines = [_result(performance), _proof(solution) if solution is not None else "all limits are met"]
    if not performance.feasible:
        lines.pop()
    for row, line in enumerate(lines):
        text = shortened(panel, line, width, BODY)
        panel.text(0, 1 - (7.5 + 4.3 * row) / HEIGHTS[0], text, fontsize=BODY, color=INK, va="top")
    if not performance.feasible:
        missed = _missed(panel, [limit.name for limit in performance.violated], width)
        panel.text(0, 1 - 11.8 / HEIGHTS[0], missed, fontsize=BODY, color=MISSED, fontweight="bold", va="top")
    _rule(panel, 17.0)
    _table(panel, _settings(problem, performance), 0.46 * width)
    panel.text(0.48, 1 - SETTINGS_DOWN / HEIGHTS[0], "LEDs", fontsize=BODY, color=MUTED, va="top")
    _led_list(panel, _leds(performance, numbers), 0.48 * width + 12.0, 0.52 * width - 12.0)


def _missed(panel: Panel, names: list[str], width: float) -> str:
    """Limits that are missed: as many by name as the line holds, the others counted."""
    for shown in range(len(names), 0, -1):
        more = f" and {len(names) - shown} more" if shown < len(names) else ""
        text = f"misses {'; '.join(names[:shown])}{more}"
        if text_width(panel, text, BODY, "bold") <= width:
            return text
    return shortened(panel, f"misses {names[0]}", width, BODY, "bold", tail=more.strip())


def _rule(panel: Panel, down: float) -> None:
    from matplotlib.lines import Line2D

    y = 1 - down / HEIGHTS[0]
    panel.add_artist(Line2D([0, 1], [y, y], color=RULE, linewidth=0.8))


def _result(performance: Performance) -> str:
    sign = f"target {performance.sign} than background" if performance.cnr > 0 else "no usable contrast"
    return f"CNR {number(performance.cnr)} ({sign}), {rate_words(performance.error_rate)} missed, as many false alarms"


def _proof(solution: Solution) -> str:
    bound = f"no setting of the candidates has a CNR above {number(solution.certificate.bound, 5)} (proven)"
    if solution.status != "proven":
        bound += f", search stopped with a gap of {percent(solution.certificate.gap)}"
    required = solution.problem.spec.required_cnr
    return bound if required is None else f"{bound}; required {required:g}"


def _settings(problem: Problem, performance: Performance) -> list[tuple[str, str]]:
    design = performance.design
    found = [
        ("camera", f"{design.camera}, channel {design.channel}, gain {design.gain_db:g} dB"),
        ("filter", design.filter),
        ("f-number", f"{design.f_number:g}"),
        ("exposure", exposure_words(design)),
        ("light", light_words(problem, performance)),
    ]
    if performance.weights:
        found.append(
            (
                "weights",
                ", ".join(f"{name} {signed(weight, plus=True)}" for name, weight in performance.weights.items()),
            )
        )
    return found


def _table(panel: Panel, rows: list[tuple[str, str]], width: float) -> None:
    """Labels and texts, a line each."""
    whole = width_mm(panel)
    for row, (label, text) in enumerate(rows):
        y = 1 - (SETTINGS_DOWN + 4.2 * row) / HEIGHTS[0]
        panel.text(0, y, label, fontsize=BODY, color=MUTED, va="top")
        text = shortened(panel, text, width - 17.0, BODY)
        panel.text(17.0 / whole, y, text, fontsize=BODY, color=INK, va="top")


def _leds(performance: Performance, numbers: Mapping[str, int]) -> list[tuple[str, str]]:
    """Each LED with its number over the light, if any, and what to set; in the order of the numbers."""
    ordered = sorted(performance.leds, key=lambda state: numbers.get(state.id, 0))
    return [
        (
            f"{numbers[state.id]}  {state.id}" if numbers else state.id,
            f" {currents_words(performance.design, state)} × {state.emitters}",
        )
        for state in ordered
    ]


def _led_list(panel: Panel, leds: list[tuple[str, str]], left: float, width: float) -> None:
    """LEDs and what to set, in two columns where there are many."""
    lines = leds or [("all off", "")]
    if len(lines) > LISTED:
        lines = [*lines[: LISTED - 1], (f"and {len(lines) - LISTED + 1} more", "")]
    columns = 1 if len(lines) <= 6 else 2
    whole, room = width_mm(panel), width / columns
    for index, (name, settings) in enumerate(lines):
        column, row = divmod(index, 6)
        text = shortened(panel, name, room - 2.0, BODY, tail=settings)
        y = 1 - (SETTINGS_DOWN + 4.2 * row) / HEIGHTS[0]
        panel.text((left + column * room) / whole, y, text, fontsize=BODY, color=INK, va="top")
