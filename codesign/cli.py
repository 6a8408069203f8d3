"""The command ``cnr``: thin commands over the library; a user's mistake becomes one line and an exit code.

Exit codes: 0 done, 2 input that cannot be used, 3 limits that cannot be met (or a checked recipe that misses some),
4 a result that failed its proof, 130 interrupted.

Nothing but the argument parser is imported here, so that ``cnr --help`` stays quick; each command imports what it
needs.
"""

from __future__ import annotations

import sys
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from codesign.cli_family import family
from codesign.cli_figures import Figures, Format, Present, draw_check, draw_solution, wanted_figures
from codesign.cli_group import INTERRUPTED, Commands
from codesign.cli_overview import ABOUT
from codesign.cli_radiation import radiation
from codesign.cli_report import Quick, Report, TradeOff, require_page, write_check_page, write_solution_page
from codesign.cli_routes import calibrate, routes
from codesign.cli_sensitivity import sensitivity
from codesign.cli_terminal import page_width, put, searching
from codesign.cli_tolerance import robust, tolerance
from codesign.cli_trade import trade
from codesign.cli_vary import vary, worth
from codesign.errors import InfeasibleError, ProblemError

if TYPE_CHECKING:
    from codesign.least_cost import LeastCost
    from codesign.report.progress import Progress
    from codesign.solve import Solution
    from codesign.study.sensitivity import Sensitivities

app = typer.Typer(
    cls=Commands,
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    help=ABOUT,
)

ProblemFile = Annotated[str, typer.Argument(metavar="PROBLEM", help="Problem file, or the name of a demo problem.")]
AsJson = Annotated[bool, typer.Option("--json", help="Machine-readable result on standard output.")]


class PartKind(StrEnum):
    """Kinds of parts, as typed."""

    LEDS = "leds"
    FILTERS = "filters"
    CAMERAS = "cameras"
    SURFACES = "surfaces"


class SchemaKind(StrEnum):
    """Files that have a JSON Schema."""

    PROBLEM = "problem"
    RECIPE = "recipe"
    FAMILY = "family"


@app.callback(invoke_without_command=True)
def main(version: Annotated[bool, typer.Option("--version", help="Show the version and exit.")] = False) -> None:
    if version:
        import codesign

        put(f"cnr {codesign.__version__}\n")
        raise typer.Exit


@app.command()
def solve(
    context: typer.Context,
    problem: ProblemFile,
    json: AsJson = False,
    recipe: Annotated[Path | None, typer.Option(metavar="FILE", help="Write the recipe here, for 'cnr check'.")] = None,
    gap: Annotated[
        float | None, typer.Option(metavar="G", help="Prove the best to this share of its CNR, 1e-8 to 0.5.")
    ] = None,
    alternatives: Annotated[
        int | None, typer.Option(metavar="N", help="Runners-up with other parts to certify, 0 to 50.")
    ] = None,
    verify: Annotated[bool, typer.Option("--verify", help="Check the whole proof again from the start.")] = False,
    sensitivities: Annotated[
        bool, typer.Option("--sensitivities", help="Add shadow prices and tolerances; see 'cnr sensitivity'.")
    ] = False,
    time_limit: Annotated[
        float | None,
        typer.Option(metavar="SECONDS", min=0, help="Stop after this time; the gap proven by then is told."),
    ] = None,
    least: Annotated[
        str | None, typer.Option(metavar="WHAT", help="Find the least price, heat, exposure or leds for a CNR instead.")
    ] = None,
    cnr: Annotated[
        float | None, typer.Option(metavar="CNR", help="CNR to reach with --least; by default required_cnr.")
    ] = None,
    report: Report = None,
    quick: Quick = False,
    trade_off: TradeOff = None,
    figures: Figures = None,
    form: Format = None,
    present: Present = None,
) -> None:
    """Find the recipe of greatest CNR, with its proof.

    \b
    Example: cnr solve yellow-stain --recipe recipe.toml
    The coolest light that is enough: cnr solve yellow-stain --least heat --cnr 4
    """
    cost = None
    require_page(report, quick=quick, trade_off=trade_off)
    drawing = wanted_figures(figures, form, present)
    if least is None and cnr is not None:
        raise ProblemError(f"--cnr {cnr:g} belongs to --least; for the greatest CNR set required_cnr in the problem")
    with searching() as line:
        if least is None:
            solution = _solved(problem, gap, alternatives, time_limit, line)
        else:
            cost = _least(problem, least, cnr, gap, time_limit, line)
            solution = cost.solution
        found = _sensitivities(solution, least, line) if sensitivities else None
        verdict = _verified(solution, line) if verify else None
    _show_solution(solution, verdict, json=json, cost=cost, sensitivities=found)
    if recipe is not None:
        from codesign.report.recipe_file import write_recipe

        write_recipe(solution, recipe)
    if report is not None:
        write_solution_page(
            context, report, solution, verdict=verdict, found=found, cost=cost, quick=quick, trade_off=trade_off
        )
    draw_solution(drawing, solution, found)


@app.command()
def check(
    context: typer.Context,
    problem: ProblemFile,
    recipe: Annotated[Path, typer.Argument(metavar="RECIPE", help="Recipe file; 'cnr solve --recipe' writes one.")],
    json: AsJson = False,
    report: Report = None,
    figures: Figures = None,
    form: Format = None,
) -> None:
    """Predict what a recipe does and which limits it misses.

    The exit code is 3 when it misses any limit.

    \b
    Example: cnr check yellow-stain recipe.toml
    """
    from codesign.design import evaluate
    from codesign.problem import load_problem
    from codesign.report import machine, text
    from codesign.report.recipe_file import load_recipe

    require_page(report)
    drawing = wanted_figures(figures, form)
    loaded = load_problem(problem)
    result = evaluate(loaded, load_recipe(recipe))
    table = machine.as_json(machine.performance_dict(loaded, result)) if json else None
    put(table or text.performance_text(loaded, result, page_width()))
    if report is not None:
        write_check_page(context, report, loaded, result)
    draw_check(drawing, loaded, result)
    if not result.feasible:
        raise InfeasibleError(f"{recipe}: {'; '.join(limit.shortfall() for limit in result.violated)}")


@app.command()
def parts(
    kind: Annotated[
        PartKind | None, typer.Argument(metavar="KIND", help="What to list: leds, filters, cameras or surfaces.")
    ] = None,
    expression: Annotated[
        str, typer.Argument(metavar="EXPRESSION", help="Which, e.g. '700 <= peak_nm <= 1000 and price < 12'.")
    ] = "all",
    catalog: Annotated[str, typer.Option(metavar="FOLDER", help="Folder of another catalogue.")] = "demo",
    id: Annotated[str | None, typer.Option(metavar="ID", help="Show all that one part states.")] = None,
    json: AsJson = False,
) -> None:
    """List, filter and inspect the parts of a catalogue.

    Example: cnr parts leds "match(id, 'nir-*') and price < 10"
    """
    from codesign.catalog import load_catalog
    from codesign.report.parts import listing

    shown = listing(load_catalog(catalog), kind and kind.value, expression, id, json=json, width=page_width())
    put(shown)


@app.command()
def new(
    file: Annotated[Path, typer.Argument(metavar="FILE", help="Problem file to write, e.g. problem.toml.")],
    force: Annotated[bool, typer.Option("--force", help="Replace the file if it exists.")] = False,
) -> None:
    """Write a commented problem file that runs as it is, to start from.

    Example: cnr new problem.toml
    """
    from importlib.resources import files

    from codesign.report.output import plain, write_file

    write_file(file, (files("codesign") / "data" / "new_problem.toml").read_bytes(), overwrite=force)
    put(f"wrote {plain(str(file))}; next: cnr solve {plain(str(file))}\n")


@app.command()
def schema(
    kind: Annotated[
        SchemaKind, typer.Argument(metavar="KIND", help="Of which file: problem, recipe or family.")
    ] = SchemaKind.PROBLEM,
) -> None:
    """Print the JSON Schema of a file, for editors and programs.

    Example: cnr schema > problem.schema.json
    """
    from codesign.family.schema import json_schema as family_schema
    from codesign.problem import json_schema
    from codesign.report.machine import as_json
    from codesign.report.recipe_file import recipe_schema

    schemas = {SchemaKind.PROBLEM: json_schema, SchemaKind.RECIPE: recipe_schema, SchemaKind.FAMILY: family_schema}
    put(as_json(schemas[kind]()))


@app.command()
def demos() -> None:
    """List the demo problems and families that come with the program.

    Example: cnr demos
    """
    from codesign.family.files import demo_families
    from codesign.problem import demo_problems
    from codesign.report.layout import table

    lists = {("demo", "what it finds"): demo_problems(), ("family", "for 'cnr family'"): demo_families()}
    tables = [
        table(head, [(d.name, d.title) for d in found], page_width(), left=(0, 1)) for head, found in lists.items()
    ]
    put("\n\n".join("\n".join(lines) for lines in tables) + "\n\n try one with 'cnr solve NAME'\n")


def _least(
    name: str, quantity: str, cnr: float | None, gap: float | None, time_limit: float | None, line: Progress
) -> LeastCost:
    from codesign.least_cost import DEFAULT_GAP, least_cost
    from codesign.problem import load_problem, solver_settings

    problem = load_problem(name)
    wanted = solver_settings(problem, gap=gap).gap if gap is not None else DEFAULT_GAP
    return least_cost(problem, quantity, cnr, gap=wanted, time_limit=time_limit, progress=line.narrowing)


def _solved(
    name: str, gap: float | None, alternatives: int | None, time_limit: float | None, line: Progress
) -> Solution:
    from codesign.problem import load_problem, solver_settings
    from codesign.solve import solve

    problem = load_problem(name)
    wanted = solver_settings(problem, gap=gap, alternatives=alternatives)
    return solve(problem, gap=wanted.gap, alternatives=wanted.alternatives, progress=line, time_limit=time_limit)


def _verified(solution: Solution, line: Progress) -> Any:
    from codesign.verify import verify

    line.begin("checking the proof")
    return verify(solution, progress=line.count)


def _sensitivities(solution: Solution, least: str | None, line: Progress) -> Sensitivities:
    from codesign.cli_sensitivity import found_at

    if least is not None:
        raise ProblemError("--sensitivities belongs to the greatest CNR, --least is given too; leave one out")
    return found_at(solution, line)


def _show_solution(
    solution: Solution, verdict: Any, *, json: bool, cost: LeastCost | None, sensitivities: Sensitivities | None
) -> None:
    from codesign.report import machine, text

    if sensitivities is not None:
        from codesign.report.sensitivity_text import sensitivity_dict, sensitivity_text
    if json:
        result = machine.solution_dict(solution, verdict)
        if sensitivities is not None:
            result["sensitivities"] = sensitivity_dict(sensitivities)
        if cost is not None:
            names = ("quantity", "unit", "value", "bound", "required_cnr", "status")
            result["least"] = {name: getattr(cost, name) for name in names}
        put(machine.as_json(result))
    else:
        width = page_width()
        put(text.solution_text(solution, width, verdict, cost))
        if sensitivities is not None:
            put("\n" + sensitivity_text(sensitivities, width))


app.command()(sensitivity)
app.command()(vary)
app.command()(worth)
app.command()(trade)
app.command()(tolerance)
app.command()(robust)
app.command()(routes)
app.command()(calibrate)
app.command()(family)
app.command()(radiation)


def run() -> None:
    """Console entry point."""
    try:
        app(prog_name="cnr")
    except KeyboardInterrupt:
        sys.exit(INTERRUPTED)
