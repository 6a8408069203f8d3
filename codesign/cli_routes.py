"""The commands ``cnr routes`` and ``cnr calibrate``."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from codesign.cli_terminal import counting, page_width, put

_Problem = Annotated[str, typer.Argument(metavar="PROBLEM", help="Problem file, or the name of a demo problem.")]
_Json = Annotated[bool, typer.Option("--json", help="Machine-readable result on standard output.")]


def routes(
    problem: _Problem,
    cnr: Annotated[
        float | None, typer.Option(metavar="X", help="CNR to reach; by default the one the problem requires.")
    ] = None,
    json: _Json = False,
) -> None:
    """Find what would have to change for a CNR: each lever alone, the best pair, a new LED or filter.

    Example: cnr routes fast-web --cnr 5
    """
    from codesign.problem import load_problem
    from codesign.report.machine import as_json
    from codesign.report.routes_text import routes_dict, routes_text
    from codesign.study.routes import routes

    with counting("solving") as line:
        found = routes(load_problem(problem), cnr, progress=line.step)
    put(as_json(routes_dict(found)) if json else routes_text(found, page_width()))


def calibrate(
    problem: _Problem,
    readings: Annotated[
        Path, typer.Argument(metavar="READINGS", help="CSV table of measured grey values, a row per recipe.")
    ],
    fit: Annotated[
        str, typer.Option(metavar="LIST", help="Fit the camera too: 'offset', 'gain' or 'offset,gain'.")
    ] = "",
    update: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Write the problem with the deliveries fitted here.")
    ] = None,
    json: _Json = False,
) -> None:
    """Fit the light each LED brings to grey values measured with known recipes, and name what does not fit.

    \b
    Example: cnr calibrate problem.toml readings.csv --fit offset --update new.toml
    """
    from codesign.problem import load_problem
    from codesign.report.calibration_text import calibration_dict, calibration_text
    from codesign.report.machine import as_json
    from codesign.report.problem_file import write_calibrated
    from codesign.study.calibrate import calibrate
    from codesign.study.readings import load_readings

    loaded = load_problem(problem)
    extras = [name.strip() for name in fit.split(",") if name.strip()]
    with counting("fitting"):
        found = calibrate(loaded, load_readings(readings, loaded), extras)
    put(as_json(calibration_dict(found)) if json else calibration_text(found, page_width()))
    if update is not None:
        changed = write_calibrated(found, problem, update)
        from codesign.report.output import plain

        typer.echo(f"wrote {plain(str(update))}: delivery of {', '.join(changed)}", err=True)
