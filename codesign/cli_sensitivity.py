"""The command ``cnr sensitivity``."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated

import typer

from codesign.cli_terminal import page_width, put, searching
from codesign.errors import ProblemError

if TYPE_CHECKING:
    from codesign.report.progress import Status
    from codesign.solve import Solution
    from codesign.study.sensitivity import Sensitivities


def sensitivity(
    problem: Annotated[str, typer.Argument(metavar="PROBLEM", help="Problem file, or the name of a demo problem.")],
    json: Annotated[bool, typer.Option("--json", help="Machine-readable result on standard output.")] = False,
    tolerance: Annotated[
        list[str] | None,
        typer.Option(
            metavar="NAME=VALUE", help="Standard deviation to use, e.g. 'LED flux=5%' or 'LED peak=2'; may be repeated."
        ),
    ] = None,
    quick: Annotated[
        bool, typer.Option("--quick", help="Derivatives only, without solving at the ends of tolerances.")
    ] = False,
) -> None:
    """Price each limit (shadow prices) and tell what each data-sheet tolerance does to the CNR.

    Each tolerance is told twice: with the recipe tuned again, and held fixed.

    Example: cnr sensitivity yellow-stain --tolerance "LED flux=5%"
    """
    from codesign.problem import load_problem
    from codesign.report.machine import as_json
    from codesign.report.sensitivity_text import sensitivity_dict, sensitivity_text
    from codesign.solve import solve

    wanted = dict(_spread(text) for text in tolerance or ())
    with searching() as line:
        solution = solve(load_problem(problem), alternatives=0, progress=line)
        found = found_at(solution, line, wanted, changes=not quick)
    put(as_json(sensitivity_dict(found)) if json else sensitivity_text(found, page_width()))


def found_at(
    solution: Solution, line: Status, tolerances: dict[str, float] | None = None, *, changes: bool = True
) -> Sensitivities:
    """Sensitivities at a solution, with what is done told on a progress line."""
    from codesign.study.sensitivity import sensitivities

    line.begin("tolerances")
    return sensitivities(solution, tolerances=tolerances, changes=changes, progress=line.count)


def _spread(text: str) -> tuple[str, float]:
    """Read ``NAME=VALUE``; a per cent sign divides by 100."""
    name, sign, value = (piece.strip() for piece in text.partition("="))
    try:
        number = float(value.removesuffix("%")) / (100 if value.endswith("%") else 1)
    except ValueError:
        number = -1.0
    if not sign or not 0 <= number < float("inf"):
        raise ProblemError(f"--tolerance is {text!r}, must be NAME=VALUE with a value >= 0, e.g. 'LED flux=5%'")
    return name, number
