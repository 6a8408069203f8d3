"""What-ifs as typed on a command line: text to fields, axes and stock."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from codesign.errors import ProblemError
from codesign.problem import Problem, solver_settings
from codesign.study.fields import parse_axis, parse_setting
from codesign.study.stock import parse_part_name, restocked
from codesign.study.vary import Variation, vary

#: Fewer points are solved sooner in one process than others start.
LEAST_FOR_PROCESSES = 60
#: Processes that may be used.
PROCESSES = 2


@dataclass(frozen=True, slots=True, kw_only=True)
class Request:
    """A what-if in words: ``field=value`` texts, sweeps, ``kind:id`` of parts left out, files of parts, a catalogue."""

    settings: Sequence[str] = ()
    sweep: str | None = None
    sweep2: str | None = None
    without: Sequence[str] = ()
    added: Sequence[Path] = ()
    catalog: Path | None = None
    gap: float | None = None


def requested(problem: Problem, request: Request, progress: Callable[[int, int], None] | None = None) -> Variation:
    """Carry out a what-if.

    Raises
    ------
    ProblemError, CatalogError
        One line with the field, what is allowed and the nearest name.
    """
    if request.sweep2 is not None and request.sweep is None:
        raise ProblemError("--sweep2 without --sweep; give the first axis as --sweep")
    pairs = [parse_setting(text) for text in request.settings]
    settings = dict(pairs)
    if len(settings) < len(pairs):
        keys = [key for key, _ in pairs]
        raise ProblemError(f"{next(k for k in keys if keys.count(k) > 1)}: is set twice; set it once")
    axes = [parse_axis(text) for text in (request.sweep, request.sweep2) if text is not None]
    removed = [parse_part_name(text) for text in request.without]
    if not (settings or axes or removed or request.added or request.catalog):
        raise ProblemError("nothing to vary; give --set, --sweep, --without, --with or --catalog")
    gap = solver_settings(problem, gap=request.gap).gap
    stocked = restocked(problem, catalog=request.catalog, added=request.added, removed=removed)
    points = 1
    for axis in axes:
        points *= len(axis.values)
    workers = PROCESSES if points >= LEAST_FOR_PROCESSES else 1
    return vary(stocked, settings, axes, base=problem, gap=gap, workers=workers, progress=progress)
