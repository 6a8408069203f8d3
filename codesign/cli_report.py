"""The options ``--report`` of ``cnr solve`` and ``cnr check``: a result as one HTML file."""

from __future__ import annotations

import shlex
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from codesign.errors import ProblemError

if TYPE_CHECKING:
    from codesign.design import Performance
    from codesign.least_cost import LeastCost
    from codesign.problem import Problem
    from codesign.report.page.progress import StepProgress
    from codesign.solve import Solution
    from codesign.study.plain_light import PlainLight
    from codesign.study.sensitivity import Sensitivities
    from codesign.study.trade import Trade

ENDINGS = (".html", ".htm")

Report = Annotated[
    Path | None, typer.Option(metavar="FILE", help="Write the result as one HTML file with figures, to read or mail.")
]
Quick = Annotated[
    bool, typer.Option("--quick", help="With --report: derivatives only, without solving at the ends of tolerances.")
]
TradeOff = Annotated[
    list[str] | None,
    typer.Option(metavar="WHAT", help="With --report: CNR against exposure, heat, leds or price; may be repeated."),
]


def require_page(path: Path | None, *, quick: bool = False, trade_off: list[str] | None = None) -> None:
    """Refuse early what would fail after a long search: another ending, a folder that is not there, idle options."""
    from codesign.report.study_files import check_targets

    if path is None:
        idle = "--quick" if quick else "--trade-off" if trade_off else None
        if idle is not None:
            raise ProblemError(f"{idle} belongs to --report; add --report FILE.html or leave it out")
        return
    if path.suffix.lower() not in ENDINGS:
        raise ProblemError(f"--report is {str(path)!r}, must end in .html: the report is a page for a browser")
    check_targets(path)
    _require_quantities(trade_off or [])


def _require_quantities(wanted: list[str]) -> None:
    if not wanted:
        return
    from codesign.errors import nearest
    from codesign.study.trade import AGAINST

    unknown = next((name for name in wanted if name not in AGAINST), None)
    if unknown is not None:
        raise ProblemError(f"--trade-off is {unknown!r}; {nearest(unknown, AGAINST)}")


def write_solution_page(
    context: typer.Context,
    path: Path,
    solution: Solution,
    *,
    verdict: Any,
    found: Sensitivities | None,
    cost: LeastCost | None,
    quick: bool,
    trade_off: list[str] | None,
) -> None:
    """Write the report of a solution, working out what it needs beside it; tells on a terminal what takes how long."""
    from codesign.report.page.document import write_report
    from codesign.report.page.progress import Work
    from codesign.verify import verify

    work, notes = Work(), {}
    if verdict is None:
        verdict = work.timed("check of the proof", lambda progress: verify(solution, progress))
    if found is None:
        found = work.optional("sensitivities", notes, _sensitivities(solution, cost, quick))
    curves = [
        curve
        for name in trade_off or ()
        if (curve := work.optional(f"trade-off {name}", notes, _curve(solution, name))) is not None
    ]
    plain = work.optional("plain light", notes, lambda _: _plain_light(solution))
    work.timed(
        "page",
        lambda _: write_report(
            path,
            solution,
            verdict=verdict,
            sensitivities=found,
            trade=tuple(curves),
            cost=cost,
            plain=plain,
            notes=notes,
            command=command_line(context),
        ),
    )
    typer.echo(work.told(path), err=True)
    if work.interrupted:  # the page is there, without what was being worked out
        raise KeyboardInterrupt


def write_check_page(context: typer.Context, path: Path, problem: Problem, performance: Performance) -> None:
    """Write the report of a recipe that was typed."""
    from codesign.report.output import write_file
    from codesign.report.page.document import check_html
    from codesign.report.page.progress import Work

    work = Work()
    work.timed("page", lambda _: write_file(path, check_html(problem, performance, command=command_line(context))))
    typer.echo(work.told(path), err=True)


def _plain_light(solution: Solution) -> PlainLight | None:
    from codesign.study.plain_light import plain_light

    return plain_light(solution.problem)


def _sensitivities(solution: Solution, cost: LeastCost | None, quick: bool) -> Callable[[StepProgress], Sensitivities]:
    def run(progress: StepProgress) -> Sensitivities:
        from codesign.study.sensitivity import sensitivities

        if cost is not None:
            raise ProblemError(f"they belong to the greatest CNR, and this recipe has the least {cost.quantity}")
        return sensitivities(solution, changes=not quick, progress=progress)

    return run


def _curve(solution: Solution, against: str) -> Callable[[StepProgress], Trade]:
    def run(progress: StepProgress) -> Trade:
        from codesign.study.trade import trade

        return trade(solution.problem, against, progress=progress)

    return run


def command_line(context: typer.Context) -> str:
    """Return a command with the arguments and options it was given."""
    words = ["cnr", context.info_name or ""]
    for parameter in context.command.params:
        value = context.params.get(parameter.name or "")
        if value is None or value == parameter.get_default(context):
            continue
        words += _typed(parameter, value)
    return shlex.join(words)


def _typed(parameter: Any, value: Any) -> list[str]:
    values = [str(each) for each in value] if isinstance(value, list | tuple) else [str(value)]
    if parameter.param_type_name == "argument":
        return values
    option = max(parameter.opts, key=len)
    return [option] if value is True else [word for each in values for word in (option, each)]
