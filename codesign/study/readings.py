"""Grey values measured with known recipes, as a CSV table: one row per recipe.

======================== ===========================================================================================
camera, channel,         as in a recipe file; a column may be left out where the problem leaves no choice
gain_db, filter,
f_number
exposure_us              exposure [us]
pixels                   pixels (times frames) averaged for each grey value; 1 where left out
drive_ma.<LED id>        current of an LED [mA]; empty or 0 is off
grey_dn.<surface id>     mean grey value measured on a surface [DN]; empty where it was not measured
error_dn.<surface id>    standard error of that mean, where known [DN]; else the noise model says
noise_dn.<surface id>    standard deviation of one pixel over time [DN], for the conversion gain; optional
======================== ===========================================================================================
"""

from __future__ import annotations

import csv
import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

from codesign.design import Design, setting_of
from codesign.design_checks import check_values
from codesign.errors import ProblemError, nearest
from codesign.problem import Problem
from codesign.problem.model import find_part, part_names

SETTINGS = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us", "pixels")
PREFIXES = ("drive_ma", "grey_dn", "error_dn", "noise_dn")
_WORDS = ("camera", "channel", "filter")


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading:
    """One recipe and what was measured with it.

    Attributes
    ----------
    design : Design
        ``where`` names file and line.
    grey_dn : mapping
        Mean grey value by surface. [DN]
    error_dn : mapping
        Standard errors that are known, by surface. [DN]
    noise_dn : mapping
        Standard deviation of a pixel over time, by surface, where measured. [DN]
    pixels : int
        Samples averaged for each grey value.
    """

    design: Design
    grey_dn: Mapping[str, float]
    error_dn: Mapping[str, float] = field(default_factory=dict)
    noise_dn: Mapping[str, float] = field(default_factory=dict)
    pixels: int = 1


def load_readings(path: str | Path, problem: Problem) -> tuple[Reading, ...]:
    """Read a table of measured grey values.

    Raises
    ------
    ProblemError
        One line: file, line, column, value, what is allowed.
    """
    path = Path(path)
    lines = _lines(path)
    number, header = lines[0]
    _check_header(f"{path.name}:{number}", header, problem)
    return tuple(_Row(f"{path.name}:{line}", header, cells, problem).reading() for line, cells in lines[1:])


def with_surfaces(problem: Problem, readings: Iterable[Reading]) -> Problem:
    """Return the problem with measured surfaces it does not name, white standards for instance, as guards.

    Raises ProblemError for surfaces that the catalogue does not hold.
    """
    own = {surface.id for surface in problem.surfaces}
    more: dict[str, object] = {}
    for reading in readings:
        for name in reading.grey_dn:
            if name in own or name in more:
                continue
            if name not in problem.catalog.surfaces:
                advice = nearest(name, problem.catalog.surfaces)
                raise ProblemError(f"{reading.design.where}: grey_dn.{name}: no such surface; {advice}")
            more[name] = problem.catalog.surfaces[name]
    return replace(problem, guards=(*problem.guards, *more.values())) if more else problem


def _lines(path: Path) -> list[tuple[int, list[str]]]:
    """Cells of all lines that are neither empty nor comments, with their numbers."""
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (FileNotFoundError, NotADirectoryError):
        raise ProblemError(f"{path}: no such file; give a CSV table of readings") from None
    except OSError as error:
        raise ProblemError(f"{path}: cannot be read, {error.strerror}; give a CSV table of readings") from None
    except UnicodeDecodeError as error:
        raise ProblemError(f"{path}: byte {error.start} is not UTF-8 text; save the file as UTF-8") from None
    kept = [
        (number, [cell.strip() for cell in next(csv.reader([line]))])
        for number, line in enumerate(text.splitlines(), start=1)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    if len(kept) < 2:
        raise ProblemError(f"{path.name}: {max(len(kept) - 1, 0)} readings, must have a header line and at least one")
    return kept


def _check_header(where: str, header: list[str], problem: Problem) -> None:
    for mark, word in ((";", "semicolons"), ("\t", "tabs")):
        if len(header) == 1 and mark in header[0]:
            raise ProblemError(f"{where}: columns are separated by {word}, must be commas; points as decimal marks")
    for name in header:
        if header.count(name) > 1:
            raise ProblemError(f"{where}: column {name!r} appears twice; give each its own name")
        prefix, _, part = name.partition(".")
        if name in SETTINGS:
            continue
        if prefix not in PREFIXES or not part:
            known = [*SETTINGS, *(f"{prefix}.<id>" for prefix in PREFIXES)]
            raise ProblemError(f"{where}: unknown column {name!r}; {nearest(name, known)}")
        if prefix == "drive_ma" and part not in problem.channel_index:
            raise ProblemError(
                f"{where}: column {name!r}: no such LED among the candidates of {problem.where}; "
                f"{nearest(part, problem.channel_index)}"
            )
        if prefix in ("error_dn", "noise_dn") and f"grey_dn.{part}" not in header:
            raise ProblemError(f"{where}: column {name!r} has no column 'grey_dn.{part}' to go with")
        if prefix == "grey_dn" and part not in {s.id for s in problem.surfaces} | set(problem.catalog.surfaces):
            known = {surface.id for surface in problem.surfaces} | set(problem.catalog.surfaces)
            raise ProblemError(f"{where}: column {name!r}: no such surface; {nearest(part, known)}")
    if not any(name.startswith("grey_dn.") for name in header):
        raise ProblemError(f"{where}: no column 'grey_dn.<surface id>'; give the grey values measured")


class _Row:
    """One line of the table, with its names and its place for messages."""

    def __init__(self, where: str, header: list[str], cells: list[str], problem: Problem) -> None:
        if len(cells) != len(header):
            advice = "decimal commas? write decimal points" if len(cells) > len(header) else "fill the row"
            raise ProblemError(f"{where}: {len(cells)} cells, must be {len(header)} as in the header; {advice}")
        self.where, self.cells, self.problem = where, dict(zip(header, cells, strict=True)), problem

    def reading(self) -> Reading:
        design = Design(
            camera=self._setting("camera"),
            channel=self._setting("channel"),
            gain_db=self._setting("gain_db"),
            filter=self._setting("filter"),
            f_number=self._setting("f_number"),
            exposure_us=self._setting("exposure_us"),
            drive_ma={led: ma for led, ma in self._numbers("drive_ma", least=0.0).items() if ma > 0},
            where=self.where,
        )
        check_values(self.problem, design)
        setting_of(self.problem, design)
        grey, pixels = self._numbers("grey_dn"), self._number("pixels", 1.0)
        if not grey:
            raise ProblemError(f"{self.where}: no grey value is given; fill a grey_dn column or remove the row")
        if pixels < 1 or pixels != int(pixels):
            raise ProblemError(f"{self.where}: pixels is {pixels:g}, must be a whole number >= 1")
        errors, noise = self._numbers("error_dn", above=0.0), self._numbers("noise_dn", above=0.0)
        return Reading(design=design, grey_dn=grey, error_dn=errors, noise_dn=noise, pixels=int(pixels))

    def _setting(self, name: str) -> str | float:
        text = self.cells.get(name, "")
        if text:
            return text if name in _WORDS else self._number(name)
        offered = self._offered(name)
        if len(offered) == 1:
            return offered[0]
        what = "column is missing" if name not in self.cells else "is empty"
        advice = f"one of {', '.join(map(str, offered[:6]))}" if offered else "a number"
        raise ProblemError(f"{self.where}: {name} {what}; give {advice}")

    def _offered(self, name: str) -> list:
        """What the problem leaves to choose from."""
        problem, wanted = self.problem, self.problem.spec.candidates
        if name == "camera":
            return [camera.id for camera in problem.cameras]
        if name == "filter":
            return [part.id for part in problem.filters[:7]]
        if name == "f_number":
            return list(problem.spec.optics.f_numbers)
        if name not in ("channel", "gain_db"):
            return []
        camera = find_part(problem.cameras, self._setting("camera"))
        if camera is None:
            text = f"camera is {self.cells['camera']!r}, not among the candidates of {problem.where}"
            raise ProblemError(f"{self.where}: {text}; {nearest(self.cells['camera'], part_names(problem.cameras))}")
        if name == "channel":
            return list(camera.channel_names)
        return [g.gain_db for g in camera.gain_settings() if wanted.gains_db is None or g.gain_db in wanted.gains_db]

    def _numbers(self, prefix: str, *, least: float = -math.inf, above: float = -math.inf) -> dict[str, float]:
        """Filled cells of all columns of one kind."""
        found = {}
        for name, text in self.cells.items():
            if name.startswith(f"{prefix}.") and text:
                value = self._number(name)
                if value < least or value <= above:
                    allowed = f">= {least:g}" if value < least else f"> {above:g}"
                    raise ProblemError(f"{self.where}: {name} is {value:g}, must be {allowed}")
                found[name.partition(".")[2]] = value
        return found

    def _number(self, name: str, default: float | None = None) -> float:
        text = self.cells.get(name, "")
        if not text and default is not None:
            return default
        try:
            value = float(text)
        except ValueError:
            raise ProblemError(f"{self.where}: {name} is {text!r}, must be a number") from None
        if not math.isfinite(value):
            raise ProblemError(f"{self.where}: {name} is {text!r}, must be finite; measure again or leave it empty")
        return value
