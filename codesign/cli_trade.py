"""The command ``cnr trade``."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from codesign.cli_terminal import counting, page_width, put
from codesign.errors import ProblemError

if TYPE_CHECKING:
    from codesign.problem import Problem
    from codesign.study.trade import Trade

#: Stands for every quantity there is.
ALL = "all"


def trade(
    problem: Annotated[str, typer.Argument(metavar="PROBLEM", help="Problem file, or the name of a demo problem.")],
    against: Annotated[
        str, typer.Option(metavar="WHAT", help="exposure, heat, leds or price; several with commas, or 'all'.")
    ] = ALL,
    cnr: Annotated[
        float | None, typer.Option(metavar="X", help="CNR that is enough; by default the one the problem requires.")
    ] = None,
    points: Annotated[int | None, typer.Option(metavar="N", help="Points of a curve at most, 2 to 100.")] = None,
    csv: Annotated[Path | None, typer.Option(metavar="FILE", help="Write the table to this file.")] = None,
    figure: Annotated[Path | None, typer.Option(metavar="FILE", help="Draw it: .svg, .png or .pdf.")] = None,
    gap: Annotated[
        float | None, typer.Option(metavar="G", help="Prove each point to this share of its CNR, 1e-8 to 0.5.")
    ] = None,
    json: Annotated[bool, typer.Option("--json", help="Machine-readable result on standard output.")] = False,
) -> None:
    """Find what CNR costs in exposure, heat, LEDs or money: a certified curve each, and the least that is enough.

    Example: cnr trade bruise --against heat,price --figure trade.svg
    """
    from codesign.problem import load_problem
    from codesign.report.study_files import check_targets
    from codesign.report.trade_files import save_curves, show_curves

    names = _names(against)
    check_targets(csv, figure)
    found = _curves(load_problem(problem), names, {"required_cnr": cnr, "points": points, "gap": gap})
    save_curves(found, csv, figure)
    put(show_curves(found, json=json, width=page_width()))


def _names(against: str) -> list[str]:
    """Quantities asked for, each once."""
    from codesign.study.trade import AGAINST

    names = [name.strip() for name in against.split(",")]
    if names == [ALL]:
        return list(AGAINST)
    for name in names:
        if name not in AGAINST:
            raise ProblemError(f"--against is {name!r}, must be {', '.join(AGAINST)} or all")
        if names.count(name) > 1:
            raise ProblemError(f"--against names {name} twice; name it once")
    return names


def _curves(problem: Problem, names: list[str], options: dict[str, float | int | None]) -> list[Trade]:
    """One curve after another."""
    from codesign.study.trade import trade

    stated = {name: value for name, value in options.items() if value is not None}
    found = []
    with counting() as progress:
        for name in names:
            progress.begin(f"CNR against {name},")
            found.append(trade(problem, name, progress=progress, **stated))
    return found
