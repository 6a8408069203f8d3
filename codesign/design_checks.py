"""Whether a recipe names parts and values that can be set; a design has the fields of `codesign.design.Design`."""

from __future__ import annotations

from typing import Any

import numpy as np

from codesign.build import free
from codesign.errors import ProblemError, nearest
from codesign.problem import Problem
from codesign.problem.model import find_part, part_names


def candidate(problem: Problem, design: Any, kind: str) -> Any:
    """Return the camera or filter a design names. Raises ProblemError when it is not a candidate."""
    name = getattr(design, kind)
    parts = getattr(problem, f"{kind}s")
    part = find_part(parts, name)
    if part is not None:
        return part
    raise ProblemError(
        f"{design.where}: {kind} is {name!r}, not among the candidates of {problem.where}; "
        f"{nearest(name, part_names(parts))}"
    )


def check_values(problem: Problem, design: Any) -> None:
    """Raise ProblemError naming the first value that cannot be set."""
    if not design.exposure_us > 0 or not np.isfinite(design.exposure_us):
        raise ProblemError(f"{design.where}: exposure_us is {design.exposure_us:g}, must be > 0")
    if not design.f_number > 0 or not np.isfinite(design.f_number):
        raise ProblemError(f"{design.where}: f_number is {design.f_number:g}, must be > 0")
    candidate(problem, design, "filter")
    _check_emitters(problem, design)
    known = problem.channel_index
    for led, drive in design.drive_ma.items():
        if led not in known:
            raise ProblemError(
                f"{design.where}: drive_ma.{led}: no such LED among the candidates of {problem.where}; "
                f"{nearest(led, known)}"
            )
        top = problem.channel(led).led.largest_current_ma
        if not 0 <= drive <= top * (1 + 1e-9):
            raise ProblemError(
                f"{design.where}: drive_ma.{led} is {drive:g}, must be 0 to {top:g} mA, its largest rating"
            )


def _check_emitters(problem: Problem, design: Any) -> None:
    known = problem.channel_index
    for led, count in design.emitters.items():
        if led not in known:
            raise ProblemError(
                f"{design.where}: emitters.{led}: no such LED among the candidates of {problem.where}; "
                f"{nearest(led, known)}"
            )
        most = problem.channel(led).emitters
        if not free(problem) and count != most:
            raise ProblemError(
                f"{design.where}: emitters.{led} is {count}, must be {most}; build.emitters = 'free' lets it vary"
            )
        if not 1 <= count <= most or count != int(count):
            raise ProblemError(f"{design.where}: emitters.{led} is {count:g}, must be a whole number, 1 to {most}")
