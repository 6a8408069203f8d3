"""The commands ``cnr tolerance`` and ``cnr robust``."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from codesign.cli_terminal import counting, page_width, put, searching

_Problem = Annotated[str, typer.Argument(metavar="PROBLEM", help="Problem file, or the name of a demo problem.")]
_Json = Annotated[bool, typer.Option("--json", help="Machine-readable result on standard output.")]
_Seed = Annotated[int, typer.Option(metavar="S", help="The same seed gives the same draws.")]


def tolerance(
    problem: _Problem,
    recipe: Annotated[
        Path | None, typer.Argument(metavar="RECIPE", help="Recipe file; by default the best recipe is found first.")
    ] = None,
    draws: Annotated[int, typer.Option(metavar="N", help="Rigs to draw.")] = 10_000,
    seed: _Seed = 1,
    required: Annotated[
        float | None, typer.Option(metavar="CNR", help="CNR a rig must reach; by default required_cnr.")
    ] = None,
    retune_exposure: Annotated[
        bool, typer.Option("--retune-exposure", help="Let each rig set its own exposure.")
    ] = False,
    json: _Json = False,
) -> None:
    """Predict the yield over rigs built from real parts, and what makes them differ.

    Spreads are under [tolerance] in the problem file.

    \b
    Example: cnr tolerance bruise --retune-exposure
    """
    from codesign.problem import load_problem
    from codesign.report import machine, tolerance_dict, tolerance_text
    from codesign.study.tolerance import tolerance

    loaded = load_problem(problem)
    with searching() as line:
        design = _design(loaded, recipe, line)
        line.begin("drawing rigs")
        found = tolerance(
            loaded, design, draws=draws, seed=seed, required=required, retune=retune_exposure, progress=line.count
        )
    table = machine.as_json(tolerance_dict.tolerance_dict(found)) if json else None
    put(table or tolerance_text.tolerance_text(found, page_width()))


def robust(
    problem: _Problem,
    quantile: Annotated[
        float, typer.Option(metavar="Q", help="Share of scenarios that may fall short; 0 is the worst case.")
    ] = 0.05,
    worst: Annotated[bool, typer.Option("--worst", help="No scenario may fall short, as --quantile 0.")] = False,
    scenarios: Annotated[int, typer.Option(metavar="N", help="Scenarios to draw.")] = 20,
    seed: _Seed = 1,
    recipe: Annotated[Path | None, typer.Option(metavar="FILE", help="Write the recipe here.")] = None,
    json: _Json = False,
) -> None:
    """Find the recipe that holds up best when parts and surroundings stray; all limits hold in every scenario.

    Example: cnr robust bruise --worst
    """
    from codesign.problem import load_problem
    from codesign.report import machine, tolerance_dict, tolerance_text
    from codesign.study.robust import robust

    share = 0.0 if worst else quantile
    with counting() as line:
        found = robust(load_problem(problem), scenarios=scenarios, seed=seed, quantile=share, progress=line.step)
    table = machine.as_json(tolerance_dict.robust_dict(found)) if json else None
    put(table or tolerance_text.robust_text(found, page_width()))
    if recipe is not None:
        from codesign.report.output import write_file
        from codesign.report.recipe_file import recipe_toml

        write_file(recipe, recipe_toml(found.robust.design, f"Robust recipe for {found.problem.where}"))


def _design(problem, recipe: Path | None, line):
    from codesign.report.recipe_file import load_recipe
    from codesign.solve import solve

    return solve(problem, alternatives=0, progress=line).recipe.design if recipe is None else load_recipe(recipe)
