"""What all commands share towards the terminal: text out, page width, the progress line, interrupts."""

from __future__ import annotations

import signal
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

import typer

if TYPE_CHECKING:
    from codesign.report.progress import PointProgress, Progress

#: Widest page of a report. [characters]
PAGE = 80


def put(text: str) -> None:
    """Write a report or JSON to standard output, in what it can show; coloured where somebody looks at it."""
    from codesign.report.colour import coloured, wanted
    from codesign.report.output import shown

    colours, text = wanted(sys.stdout), shown(text, sys.stdout.encoding)
    typer.echo(coloured(text) if colours else text, nl=False, color=colours)


def page_width() -> int:
    """Return how wide a report may be: as wide as the terminal, 80 at most and where there is none."""
    if not sys.stdout.isatty():
        return PAGE
    from shutil import get_terminal_size

    return min(get_terminal_size((PAGE, 24)).columns, PAGE)


def searching(doing: str = "searching") -> Progress:
    """Return the progress line of a search, a context manager called with best CNR and bound."""
    from codesign.report.progress import Progress

    return Progress(doing=doing)


def counting(doing: str = "solving") -> PointProgress:
    """Return the progress line of a study, a context manager called with points done and in all."""
    from codesign.report.progress import PointProgress

    return PointProgress(doing=doing)


class Interrupts:
    """Whether Ctrl-C was pressed, also where the work went on with what it had."""

    seen = False

    def __call__(self, number: int, frame: Any) -> None:
        self.seen = True
        signal.default_int_handler(number, frame)


@contextmanager
def interrupts() -> Iterator[Interrupts]:
    """Note interrupts from now on; they are raised as ever."""
    noted = Interrupts()
    try:
        before = signal.signal(signal.SIGINT, noted)
    except ValueError:  # not the main thread: interrupts do not come here
        yield noted
        return
    try:
        yield noted
    finally:
        signal.signal(signal.SIGINT, before)
