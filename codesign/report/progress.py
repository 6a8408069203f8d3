"""One line on a terminal that tells what is being done; silent when nobody watches, wiped at the end."""

from __future__ import annotations

import os
import sys
import threading
import time
from collections.abc import Mapping
from typing import Self, TextIO

from codesign.report.layout import columns, cut, duration

#: Work shorter than this shows no line. [s]
QUIET_SECONDS = 0.5
#: The line is drawn anew this often, so that the seconds run on while a step takes long. [s]
TICK_SECONDS = 0.2
#: How long a share of the work must have taken before what is left is guessed from it. [s]
LEAST_TO_GUESS = 1.0


def watched(stream: TextIO, environment: Mapping[str, str] = os.environ) -> bool:
    """Whether somebody looks at a stream that can write over its last line; ``TERM=dumb`` cannot."""
    return environment.get("TERM") != "dumb" and stream.isatty()


class Status:
    """The line: what is being done, for how long, how long still where a total is known, and a note.

    A thread draws it, so that whoever works only says what has changed. Use it as a context manager, or call `close`.

    Parameters
    ----------
    doing : str
        What is being done, in one to three words.
    stream : text stream, optional
        Standard error by default.
    """

    def __init__(self, doing: str = "working", stream: TextIO | None = None) -> None:
        self.stream = sys.stderr if stream is None else stream
        self.watched = watched(self.stream)
        self.started = time.monotonic()
        self.begin(doing)
        self._drawn = 0
        self._over = threading.Event()
        self._thread = threading.Thread(target=self._run, daemon=True) if self.watched else None
        if self._thread is not None:
            self._thread.start()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def begin(self, doing: str) -> None:
        """Start another part of the work."""
        self._state = (doing, "", 0, 0, time.monotonic())

    def step(self, what: str, done: int = 0, total: int = 0) -> None:
        """Tell what is being done, as another part of the work when it is something else than before."""
        if what != self._state[0]:
            self.begin(what)
        self.count(done, total)

    def note(self, text: str) -> None:
        """Tell something about the work under way."""
        doing, _, done, total, since = self._state
        self._state = (doing, text, done, total, since)

    def count(self, done: int, total: int) -> None:
        """Tell how many of the equal pieces of the work under way are done."""
        doing, note, _, _, since = self._state
        self._state = (doing, note, done, total, since)

    def line(self, now: float) -> str:
        """Return the line as it reads at a time. [s]"""
        doing, note, done, total, since = self._state
        text = f"{doing} {now - self.started:.0f} s"
        spent = now - since
        if total:
            note = f"{done} of {total}" + (f", {note}" if note else "")
            if 0 < done < total and spent >= LEAST_TO_GUESS:
                text += f", about {duration(max(round(spent / done * (total - done)), 1))} left"
        return f"{text}: {note}" if note else text

    def draw(self) -> None:
        """Write the line over the last one, cut to what the terminal is wide now."""
        room, encoding = self._columns() - 1, self.stream.encoding or "ascii"  # a full row would make the next one wrap
        line = cut(self.line(time.monotonic()), room).encode(encoding, "replace").decode(encoding)
        self._write("\r" + line + " " * (min(self._drawn, room) - columns(line)))
        self._drawn = columns(line)

    def close(self) -> None:
        """Wipe the line; nothing is drawn any more."""
        self._over.set()
        if self._thread is not None:
            self._thread.join()
            self._thread = None
        if self._drawn:
            self._write("\r" + " " * min(self._drawn, self._columns() - 1) + "\r")
            self._drawn = 0

    clear = close

    def _run(self) -> None:
        wait = QUIET_SECONDS
        while not self._over.wait(wait):
            self.draw()
            wait = TICK_SECONDS

    def _columns(self) -> int:
        try:
            return max(os.get_terminal_size(self.stream.fileno()).columns, 2)
        except (OSError, ValueError, AttributeError):  # no terminal after all, or one that does not say
            return 80

    def _write(self, text: str) -> None:
        try:
            self.stream.write(text)
            self.stream.flush()
        except (OSError, ValueError):  # the terminal has gone; the work goes on
            self._over.set()


class Progress(Status):
    """The line of a search: called with the best CNR so far and the bound on what is left."""

    def __init__(self, stream: TextIO | None = None, doing: str = "searching") -> None:
        self.best = 0.0
        super().__init__(doing, stream)

    def __call__(self, best: float, bound: float) -> None:
        """Show the best CNR so far and the bound on what is left."""
        self.best = max(self.best, best)
        # A search among fewer parts starts from nothing again: it is after runners-up.
        left = f"none above {bound:.4g}" if best >= self.best else "looking for runners-up"
        self.note(f"best CNR {self.best:.4g}, {left}" if self.best > 0 else "")

    def narrowing(self, value: float, bound: float) -> None:
        """Show the least value so far that is enough, and what is proven to be too little."""
        self.note(f"{value:.4g} is enough, {bound:.4g} is not")


class PointProgress(Status):
    """The line of a study: called with how many of its points are solved, and how many there are."""

    def __init__(self, stream: TextIO | None = None, doing: str = "solving") -> None:
        super().__init__(doing, stream)

    def __call__(self, done: int, total: int) -> None:
        """Show how many points are solved."""
        self.count(done, total)
