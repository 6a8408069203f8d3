"""All figures of a result by name, drawn one at a time, and written to a folder."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING

from codesign.design import Performance
from codesign.errors import CodesignError, ProblemError
from codesign.problem import Problem
from codesign.report.figures.alternatives import alternatives
from codesign.report.figures.base import FORMATS, save_figure
from codesign.report.figures.limits import limit_use
from codesign.report.figures.noise import noise_budget
from codesign.report.figures.sensitivity import sensitivity_figure
from codesign.report.figures.sheet import performance_sheet
from codesign.report.figures.spectral import spectral_story
from codesign.report.figures.view import simulated_view

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from codesign.report.figures.view import Side
    from codesign.solve import Solution
    from codesign.study.sensitivity import Sensitivities


def solution_figures(
    solution: Solution, *, before: Side | None = None, sensitivities: Sensitivities | None = None
) -> dict[str, Callable[[], Figure]]:
    """Return the figures of a solution by file name, each drawn when called.

    Parameters
    ----------
    solution : Solution
    before : Side, optional
        Another recipe for the same scene, whose picture stands beside.
    sensitivities : Sensitivities, optional
    """
    found = _common(solution.problem, solution.recipe, solution, before)
    if solution.alternatives:
        found["alternatives"] = lambda: alternatives(solution)
    if sensitivities is not None:
        found["sensitivities"] = lambda: sensitivity_figure(sensitivities)
    return found


def performance_figures(
    problem: Problem, performance: Performance, *, before: Side | None = None
) -> dict[str, Callable[[], Figure]]:
    """Return the figures of a recipe that was typed, by file name, each drawn when called."""
    return _common(problem, performance, None, before)


def _common(
    problem: Problem, performance: Performance, solution: Solution | None, before: Side | None
) -> dict[str, Callable[[], Figure]]:
    binding = None if solution is None else solution.binding
    return {
        "recipe-sheet": lambda: performance_sheet(problem, performance, solution=solution, before=before),
        "spectral-story": lambda: spectral_story(problem, performance),
        "simulated-view": lambda: simulated_view(problem, performance, before),
        "noise-budget": lambda: noise_budget(problem, performance),
        "use-of-limits": lambda: limit_use(performance, binding=binding),
    }


def check_folder(folder: Path, form: str) -> None:
    """Raise CodesignError now where figures could not be written once the work is done."""
    if form not in FORMATS:
        raise ProblemError(f"--format is {form!r}, must be {', '.join(FORMATS)}")
    if folder.exists() and not folder.is_dir():
        raise CodesignError(f"{folder}: is a file; name a folder for the figures")
    if not folder.resolve().parent.is_dir():
        raise CodesignError(f"{folder}: folder {str(folder.parent)!r} does not exist; create it first")


def write_figures(folder: Path, figures: Mapping[str, Callable[[], Figure]], form: str) -> list[Path]:
    """Write figures to a folder, each whole or not at all; the folder is made where it is missing.

    Returns the files written.
    """
    check_folder(folder, form)
    drawn = {folder / f"{name}.{form}": draw for name, draw in figures.items()}
    try:
        folder.mkdir(exist_ok=True)
    except OSError as error:
        raise CodesignError(f"{folder}: cannot be made, {error.strerror}; choose another place") from None
    for path, draw in drawn.items():
        save_figure(draw(), path)
    return list(drawn)
