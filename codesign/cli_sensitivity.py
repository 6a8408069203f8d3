"""The command ``cnr sensitivity``."""

from __future__ import annotations

import sys
from typing import TYPE_CHECKING, Annotated

import typer

from codesign.errors import ProblemError

if TYPE_CHECKING:
    from codesign.solve import Solution
    from codesign.study.sensitivity import Sensitivities


def sensitivity(
    problem: Annotated[str, typer.Argument(metavar="PROBLEM", help="Problem file, or the name of a demo problem.")],
    json: Annotated[bool, typer.Option("--json", help="Machine-readable result on standard output.")] = False,
    tolerance: Annotated[
        list[str] | None,
        typer.Option(metavar="NAME=VALUE", help="Another standard deviation, e.g. 'LED flux=5%' or 'LED peak=2'."),
    ] = None,
    quick: Annotated[bool, typer.Option("--quick", help="Derivatives only, without solving at either end.")] = False,
) -> None:
    """Shadow prices of the limits, and what each data-sheet tolerance does to the CNR, re-tuned and held fixed.

    Example: cnr sensitivity yellow-stain --tolerance "LED flux=5%"
    """
    from codesign.problem import load_problem
    from codesign.report.machine import as_json
    from codesign.report.output import shown
    from codesign.report.sensitivity_text import sensitivity_dict, sensitivity_text
    from codesign.solve import solve

    wanted = dict(_spread(text) for text in tolerance or ())
    found = found_at(solve(load_problem(problem), alternatives=0), wanted, changes=not quick)
    text = as_json(sensitivity_dict(found)) if json else sensitivity_text(found)
    typer.echo(shown(text, sys.stdout.encoding), nl=False)


def found_at(solution: Solution, tolerances: dict[str, float] | None = None, *, changes: bool = True) -> Sensitivities:
    """Sensitivities at a solution."""
    from codesign.study.sensitivity import sensitivities

    return sensitivities(solution, tolerances=tolerances, changes=changes)


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
