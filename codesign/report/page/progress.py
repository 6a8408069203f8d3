"""The steps that a report takes: their times, and progress on a terminal."""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

from codesign.errors import CodesignError
from codesign.report.output import plain
from codesign.report.progress import PointProgress

#: What a note says of a step that was interrupted.
INTERRUPTED = "interrupted"
#: Files above this are told of. [MB]
MAILED_MB = 3.0


class StepProgress(PointProgress):
    """One line on a terminal that tells how far a named step is; silent when nobody watches."""

    def __init__(self, step: str) -> None:
        super().__init__(doing=step)


class Work:
    """Runs steps and keeps their times; ``interrupted`` is whether one of them was."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}
        self.interrupted = False

    def timed(self, step: str, run: Callable[[StepProgress], Any]) -> Any:
        """Run a step and note how long it takes."""
        progress, started = StepProgress(step), time.perf_counter()
        try:
            return run(progress)
        finally:
            progress.clear()
            self.seconds[step] = time.perf_counter() - started

    def optional(self, step: str, notes: dict[str, str], run: Callable[[StepProgress], Any]) -> Any:
        """Run a step the report can do without; where it fails or is interrupted, the note says why it is not there.

        After an interrupt no further such step is begun.
        """
        if self.interrupted:
            notes[step] = INTERRUPTED
            return None
        try:
            return self.timed(step, run)
        except CodesignError as error:
            notes[step] = str(error)
        except KeyboardInterrupt:
            self.interrupted, notes[step] = True, INTERRUPTED
        return None

    def told(self, path: Path) -> str:
        """Say what was written and how long it took."""
        steps = ", ".join(f"{step} {seconds:.1f} s" for step, seconds in self.seconds.items())
        size = path.stat().st_size / 1e6 if path.is_file() else 0.0
        large = f"; larger than {MAILED_MB:g} MB, which some mail systems refuse" if size > MAILED_MB else ""
        return f"wrote {plain(str(path))}, {size:.1f} MB ({steps}){large}"
