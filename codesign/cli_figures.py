"""The options ``--figures``, ``--format`` and ``--present`` of ``cnr solve`` and ``cnr check``: figures in a folder."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from codesign.errors import ProblemError

if TYPE_CHECKING:
    from codesign.design import Performance
    from codesign.problem import Problem
    from codesign.report.figures.view import Side
    from codesign.solve import Solution
    from codesign.study.sensitivity import Sensitivities

Figures = Annotated[Path | None, typer.Option(metavar="FOLDER", help="Draw the result into this folder.")]
Format = Annotated[
    str | None, typer.Option("--format", metavar="FORM", help="With --figures: svg, png or pdf; svg if left out.")
]
Present = Annotated[
    Path | None,
    typer.Option(metavar="RECIPE", help="With --figures: the recipe you run now, to compare the pictures with."),
]


@dataclass(frozen=True, slots=True)
class Wanted:
    """Figures asked for on the command line; nothing is drawn where ``folder`` is None."""

    folder: Path | None
    form: str
    present: Path | None


def wanted_figures(folder: Path | None, form: str | None, present: Path | None = None) -> Wanted:
    """Refuse early what would fail after a long search."""
    if folder is None:
        idle = "--format" if form is not None else "--present" if present is not None else None
        if idle is not None:
            raise ProblemError(f"{idle} belongs to --figures; add --figures FOLDER or leave it out")
    else:
        from codesign.report.figures.collection import check_folder

        check_folder(folder, form or "svg")
        if present is not None:
            from codesign.report.recipe_file import load_recipe

            load_recipe(present)
    return Wanted(folder, form or "svg", present)


def draw_solution(wanted: Wanted, solution: Solution, found: Sensitivities | None) -> None:
    """Draw a solution where that was asked for."""
    if wanted.folder is not None:
        from codesign.report.figures.collection import solution_figures

        before = _before(wanted, solution.problem)
        _written(wanted, solution_figures(solution, before=before, sensitivities=found))


def draw_check(wanted: Wanted, problem: Problem, performance: Performance) -> None:
    """Draw a recipe that was typed where that was asked for."""
    if wanted.folder is not None:
        from codesign.report.figures.collection import performance_figures

        _written(wanted, performance_figures(problem, performance, before=_before(wanted, problem)))


def _before(wanted: Wanted, problem: Problem) -> Side | None:
    """What the pictures are compared with: the present recipe, else plain light."""
    if wanted.present is None:
        from codesign.study.plain_light import plain_light

        return plain_light(problem)
    from codesign.design import evaluate
    from codesign.report.figures.view import View
    from codesign.report.recipe_file import load_recipe

    return View(problem, evaluate(problem, load_recipe(wanted.present)), "With the present recipe")


def _written(wanted: Wanted, figures) -> None:
    from codesign.report.figures.collection import write_figures

    files = write_figures(wanted.folder, figures, wanted.form)
    typer.echo(f"wrote {len(files)} figures to {wanted.folder}: {', '.join(path.name for path in files)}", err=True)
