"""The command ``cnr radiation``."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from codesign.cli_terminal import page_width, put, searching


def radiation(
    problem: Annotated[str, typer.Argument(metavar="PROBLEM", help="Problem file, or the name of a demo problem.")],
    recipe: Annotated[
        Path | None, typer.Argument(metavar="RECIPE", help="Recipe file; by default the best recipe is found first.")
    ] = None,
    distance_mm: Annotated[
        float, typer.Option(metavar="MM", help="From the emitters to the eye; 200 is usual.", show_default=False)
    ] = 200.0,
    json: Annotated[bool, typer.Option("--json", help="Machine-readable result on standard output.")] = False,
) -> None:
    """Compare the light at the eye with published exposure limits: a warning aid, never a classification.

    Example: cnr radiation yellow-stain --distance-mm 500
    """
    from codesign.design import evaluate
    from codesign.problem import load_problem
    from codesign.report.machine import as_json
    from codesign.report.radiation_text import radiation_dict, radiation_text
    from codesign.report.recipe_file import load_recipe
    from codesign.solve import solve
    from codesign.study.radiation import require_distance, screening

    require_distance(distance_mm)
    loaded = load_problem(problem)
    with searching() as line:
        if recipe is None:
            performance = solve(loaded, alternatives=0, progress=line).recipe
        else:
            performance = evaluate(loaded, load_recipe(recipe))
    found = screening(loaded, performance, distance_mm)
    put(as_json(radiation_dict(loaded, found)) if json else radiation_text(loaded, found, page_width()))
