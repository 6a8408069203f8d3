"""A problem file with other deliveries: the text stays as it is but for the lines that say so."""

from __future__ import annotations

import copy
import re
import tomllib
from collections.abc import Mapping
from pathlib import Path

from codesign.errors import ProblemError
from codesign.problem import build_problem
from codesign.problem.files import problem_path
from codesign.report.output import write_file
from codesign.study.calibrate import Calibration

_HEADER = re.compile(r"^\s*\[")
_OLD_KEYS = re.compile(r"^(\s*)(delivery_per_m2|measured_irradiance_w_per_m2)\s*=\s*[^#]*?(\s*)(#.*)?$")
_FORM = "write each LED's exceptions as a table [lighting.led.<id>]"


def write_calibrated(found: Calibration, source: str | Path, target: str | Path) -> tuple[str, ...]:
    """Write a problem file with the deliveries fitted; return the LEDs it changes.

    Parameters
    ----------
    found : Calibration
    source : path
        Problem file, or name of a demo problem, that the calibration is of.
    target : path
        File to write, whole or not at all; the source itself is allowed.

    Raises
    ------
    ProblemError
        When LEDs seem swapped, nothing is determined, or the file cannot be edited line by line.
    """
    swapped = next((suspect for suspect in found.suspects if suspect.kind == "swapped LEDs"), None)
    if swapped is not None:
        raise ProblemError(
            f"{target}: not written, {' and '.join(swapped.leds)} seem swapped; put them right, measure again"
        )
    told = {f.name: found.delivery_per_m2[f.name] for f in found.factors if f.determined and f.value > 0}
    if not told:
        raise ProblemError(f"{target}: not written, the readings determine no delivery; light each LED in one reading")
    source, target = problem_path(source), Path(target)
    text = with_deliveries(source.read_bytes().decode("utf-8"), told, source.name)
    # Curves and catalogue are named relative to the file: it must be usable where it is written.
    build_problem(tomllib.loads(text.removeprefix("\ufeff")), folder=target.parent, where=target.name)
    write_file(target, text)
    return tuple(told)


def with_deliveries(text: str, delivery_per_m2: Mapping[str, float], where: str = "problem") -> str:
    """Return the text of a problem file with ``[lighting.led.<id>] delivery_per_m2`` set.

    Comments, order and line ends stay. Raises ProblemError where the file states LEDs in a form that has no such lines.
    """
    wanted = copy.deepcopy(tomllib.loads(text.removeprefix("\ufeff")))
    exceptions = wanted.setdefault("lighting", {}).setdefault("led", {})
    for led, value in delivery_per_m2.items():
        own = exceptions.setdefault(led, {})
        own.pop("measured_irradiance_w_per_m2", None)
        own["delivery_per_m2"] = float(f"{value:.6g}")
        text = _set(text, led, f"{value:.6g}")
    try:
        reached = tomllib.loads(text.removeprefix("\ufeff"))
    except tomllib.TOMLDecodeError:
        reached = None
    if reached != wanted:
        raise ProblemError(f"{where}: lighting.led is in a form that cannot be edited line by line; {_FORM}")
    return text


def _set(text: str, led: str, value: str) -> str:
    end = "\r\n" if "\r\n" in text else "\n"
    lines = text.split(end)
    header = re.compile(rf"^\s*\[\s*lighting\s*\.\s*led\s*\.\s*[\"']?{re.escape(led)}[\"']?\s*\]\s*(#.*)?$")
    start = next((k for k, line in enumerate(lines) if header.match(line)), None)
    if start is None:
        while lines and not lines[-1].strip():
            lines.pop()
        return end.join([*lines, "", f"[lighting.led.{led}]", f"delivery_per_m2 = {value}", ""])
    stop = next((k for k in range(start + 1, len(lines)) if _HEADER.match(lines[k])), len(lines))
    own, done = [], False
    for line in lines[start + 1 : stop]:
        match = _OLD_KEYS.match(line)
        if match is None:
            own.append(line)
        elif not done:
            own.append(f"{match[1]}delivery_per_m2 = {value}{match[3] if match[4] else ''}{match[4] or ''}")
            done = True
    if not done:
        own.insert(0, f"delivery_per_m2 = {value}")
    return end.join([*lines[: start + 1], *own, *lines[stop:]])
