"""A problem as a parcel: everything that determines its result, and nothing else, with a name for the content.

The parcel needs no files, so it can be worked on by another process or machine; its key changes when, and only when,
something that determines the result does.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable, Mapping
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np

import codesign
from codesign.catalog import Filter
from codesign.catalog.common import Part
from codesign.problem import Problem
from codesign.problem.choices import FilterChoices

#: Fields of parts that are words for people only.
WORDS = {"description", "source", "invented", "tags"}
#: Sections and fields of a problem that no result of a solve depends on; parts are taken as they were found.
BESIDE = {"title", "notes", "catalog", "required_cnr", "tolerance", "led", "filter", "camera", "surface"}
#: Code that cannot change a result, and within it what can.
OUTSIDE = ("report/", "cli", "study/", "family/", "verify", "least_cost")
INSIDE = ("study/common", "study/warm", "study/multipliers", "family/worker", "family/outcome", "family/sealed")


class Sealer:
    """Seals problems that share most of their parts: each part is read and digested once.

    ``sealed`` returns the parcel and its key.
    """

    def __init__(self) -> None:
        self._seen: dict[int, tuple[Part, Part, str]] = {}

    def sealed(self, problem: Problem, *further: str) -> tuple[Problem, str]:
        """Return the problem with all its curves inside, and the key of its content.

        Parameters
        ----------
        problem : Problem
        *further : str
            What else the result depends on, e.g. where the search starts.

        Returns
        -------
        problem : Problem
            Its catalogue holds only the parts it can use.
        key : str
            64 hexadecimal digits (SHA-256).
        """
        choices = FilterChoices.of(problem.filters)
        members = self._members(problem, choices.base)
        parcel = replace(
            problem,
            where="",
            folder=Path(),
            channels=tuple(replace(channel, led=self._part(channel.led)[0]) for channel in problem.channels),
            filters=self._filters(problem, choices),
            cameras=self._parts(problem.cameras),
            targets=self._parts(problem.targets),
            backgrounds=self._parts(problem.backgrounds),
            guards=self._parts(problem.guards),
            catalog=replace(
                problem.catalog,
                leds={channel.id: self._part(channel.led)[0] for channel in problem.channels},
                cameras={part.id: self._part(part)[0] for part in problem.cameras},
                filters={part.id: self._part(part)[0] for part in members},
                surfaces={part.id: self._part(part)[0] for part in problem.surfaces},
                folder=Path(),
            ),
        )
        content = {
            "program": program(),
            "further": further,
            "spec": problem.spec.model_dump(mode="json", exclude=BESIDE),
            "channels": [
                [self._part(c.led)[1], c.emitters, c.delivery, c.specular_weight, c.driver_max_ma, c.peak_shift_nm]
                for c in problem.channels
            ],
            "parts": [
                [self._part(part)[1] for part in group]
                for group in (choices.base, members, problem.cameras, problem.targets, problem.backgrounds)
            ],
            "guards": [self._part(part)[1] for part in problem.guards],
            "arrays": [_digest_array(a) for a in (choices.members, problem.grid, problem.ambient, problem.lens)],
        }
        return parcel, _digest(content)

    def _part(self, part: Part) -> tuple[Any, str]:
        found = self._seen.get(id(part))
        if found is None:
            sealed = part.sealed()
            # The part itself is kept, so that its id stays its own.
            found = self._seen[id(part)] = (part, sealed, _digest_part(sealed))
        return found[1:]

    def _parts(self, parts: Iterable[Part]) -> tuple[Any, ...]:
        return tuple(self._part(part)[0] for part in parts)

    def _filters(self, problem: Problem, choices: FilterChoices):
        base = self._parts(choices.base)
        return FilterChoices(base, choices.members) if isinstance(problem.filters, FilterChoices) else base

    def _members(self, problem: Problem, base: Iterable[Filter]) -> list[Filter]:
        """The filters and, of stacks, what they are made of."""
        found: dict[str, Filter] = {}
        waiting = list(base)
        while waiting:
            part = waiting.pop()
            if part.id not in found and part.id in problem.catalog.filters:
                found[part.id] = part
                waiting += [problem.catalog.part("filter", name) for name in part.parts or ()]
        return [found[name] for name in sorted(found)]


@cache
def program() -> str:
    """Version of the program, and a digest of the code that results depend on."""
    root = Path(__file__).resolve().parents[1]
    digest = hashlib.sha256()
    for name in sorted(path.relative_to(root).as_posix() for path in root.rglob("*.py")):
        if decides(name):
            digest.update(name.encode() + b"\0" + (root / name).read_bytes() + b"\0")
    return f"{codesign.__version__}+{digest.hexdigest()[:12]}"


def decides(file: str) -> bool:
    """Whether results depend on a file of the package, e.g. ``search/walk.py``."""
    return not file.startswith(OUTSIDE) or file.startswith(INSIDE)


def _digest_part(part: Part) -> str:
    fields = part.model_dump(mode="json", exclude=WORDS)
    tables = {
        file: [list(table.names), _digest_array(table.spectrum.wavelength_nm), _digest_array(table.spectrum.values)]
        for file, table in part._tables.items()
    }
    return _digest([type(part).__name__, fields, tables])


def _digest_array(array: np.ndarray) -> str:
    array = np.ascontiguousarray(array)
    return hashlib.sha256(f"{array.dtype.str} {array.shape} ".encode() + array.tobytes()).hexdigest()


def _digest(content: Mapping | list) -> str:
    # Numbers are written with all their digits.
    text = json.dumps(content, sort_keys=True, ensure_ascii=True, separators=(",", ":"))
    return hashlib.sha256(text.encode()).hexdigest()
