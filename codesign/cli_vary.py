"""The commands ``cnr vary`` and ``cnr worth``."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from codesign.cli_terminal import counting, page_width, put

_Problem = Annotated[str, typer.Argument(metavar="PROBLEM", help="Problem file, or the name of a demo problem.")]
_Json = Annotated[bool, typer.Option("--json", help="Machine-readable result on standard output.")]
_Csv = Annotated[Path | None, typer.Option(metavar="FILE", help="Write the table to this file.")]
_Gap = Annotated[float | None, typer.Option(metavar="G", help="Prove the best to this share of its CNR, 1e-8 to 0.5.")]
_Values = "FIELD=FIRST:LAST:COUNT[:log] or FIELD=A,B,C"


def vary(
    problem: _Problem,
    set_: Annotated[
        list[str] | None,
        typer.Option("--set", metavar="FIELD=VALUE", help="Set a field of the problem or of a part; may be repeated."),
    ] = None,
    sweep: Annotated[str | None, typer.Option(metavar="VALUES", help=f"Sweep a field: {_Values}.")] = None,
    sweep2: Annotated[
        str | None, typer.Option(metavar="VALUES", help="Sweep a second field, written the same way.")
    ] = None,
    without: Annotated[
        list[str] | None, typer.Option(metavar="KIND:ID", help="Leave a part out, e.g. led:nir-850-a; may be repeated.")
    ] = None,
    with_: Annotated[
        list[Path] | None,
        typer.Option("--with", metavar="FILE", help="Add the parts of a TOML file of [[led]] ... tables."),
    ] = None,
    catalog: Annotated[Path | None, typer.Option(metavar="FOLDER", help="Choose from this catalogue instead.")] = None,
    csv: _Csv = None,
    figure: Annotated[Path | None, typer.Option(metavar="FILE", help="Draw it: .svg, .png or .pdf.")] = None,
    gap: _Gap = None,
    json: _Json = False,
) -> None:
    """Re-solve with fields set or swept, or with other parts; every point is certified.

    \b
    Example: cnr vary bruise --sweep lighting.distance_mm=200:500:7 --figure d.svg
    """
    from codesign.problem import load_problem
    from codesign.report.study_files import check_targets, save, show
    from codesign.study.request import Request, requested

    check_targets(csv, figure)
    stock = {"without": without or (), "added": with_ or (), "catalog": catalog}
    request = Request(settings=set_ or (), sweep=sweep, sweep2=sweep2, gap=gap, **stock)
    with counting() as progress:
        found = requested(load_problem(problem), request, progress)
    save(found, csv, figure)
    put(show(found, json=json, width=page_width()))


def worth(
    problem: _Problem,
    others: Annotated[
        Path | None, typer.Option("--from", metavar="FOLDER", help="Try the parts of this catalogue as additions.")
    ] = None,
    csv: _Csv = None,
    gap: _Gap = None,
    json: _Json = False,
) -> None:
    """Find what each part is worth: the CNR lost if it were not in stock, and what comes in for it.

    Example: cnr worth bruise
    """
    from codesign.catalog import load_catalog
    from codesign.problem import load_problem, solver_settings
    from codesign.report.study_files import check_targets, save, show
    from codesign.study.worth import worth

    check_targets(csv)
    loaded = load_problem(problem)
    more = None if others is None else load_catalog(str(others))
    with counting() as progress:
        found = worth(loaded, others=more, gap=solver_settings(loaded, gap=gap).gap, progress=progress)
    save(found, csv)
    put(show(found, json=json, width=page_width()))
