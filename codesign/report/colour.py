"""Colours for terminals, put on finished text as the last step: how limits stand, never said by colour alone."""

from __future__ import annotations

import os
import re
from collections.abc import Mapping
from typing import TextIO

from codesign.report.progress import watched

_RED, _YELLOW, _GREEN, _BOLD = "31", "33", "32", "1"
#: A row of the limits: mark, cells, bar where there is room for one. The mark says the same as the colour.
_LIMIT = re.compile(r"^ (?:([!►>]) (.*?)([█░]{6,}|[#.]{6,})?|( ) (.*?)([█░]{6,}|[#.]{6,}))$")
_MISSED = re.compile(r"\bNOT (MET|met)\b")


def wanted(stream: TextIO, environment: Mapping[str, str] = os.environ) -> bool:
    """Whether a stream gets colours.

    On a terminal that knows them, unless ``NO_COLOR`` is set; elsewhere only with ``FORCE_COLOR`` (both: common
    practice, an empty value counts as not set).
    """
    if environment.get("NO_COLOR"):
        return False
    force = environment.get("FORCE_COLOR", "")
    return force != "0" if force else watched(stream, environment)


def coloured(text: str) -> str:
    """Return a report, in any encoding, with its limits in colour: met, reached and missed."""
    return "\n".join(_limit(line) if _LIMIT.match(line) else _MISSED.sub(_missed, line) for line in text.split("\n"))


def _limit(line: str) -> str:
    mark, cells, *bar = (part for part in _LIMIT.match(line).groups() if part is not None)  # type: ignore[union-attr]
    colour = {"!": _RED, "►": _YELLOW, ">": _YELLOW}.get(mark, _GREEN)
    if mark != " ":
        mark = _painted(mark, _BOLD, *([_RED] if mark == "!" else []))
    return f" {mark} {cells}{''.join(_painted(one, colour) for one in bar)}"


def _missed(match: re.Match[str]) -> str:
    return _painted(match[0], _BOLD, _RED)


def _painted(text: str, *codes: str) -> str:
    return f"\x1b[{';'.join(codes)}m{text}\x1b[0m"
