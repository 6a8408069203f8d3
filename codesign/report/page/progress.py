"""The steps that a report takes: their times, and progress on a terminal."""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

from codesign.errors import CodesignError
from codesign.report.progress import PointProgress


class StepProgress(PointProgress):
    """One line on a terminal that tells how far a named step is; silent when nobody watches."""

    def __init__(self, step: str) -> None:
        super().__init__(doing=step)


class Work:
    """Runs steps and keeps their times."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}

    def timed(self, step: str, run: Callable[[StepProgress], Any]) -> Any:
        """Run a step and note how long it takes."""
        progress, started = StepProgress(step), time.perf_counter()
        try:
            return run(progress)
        finally:
            progress.clear()
            self.seconds[step] = time.perf_counter() - started

    def optional(self, step: str, notes: dict[str, str], run: Callable[[StepProgress], Any]) -> Any:
        """Run a step the report can do without; where it fails, the note says why it is not there."""
        try:
            return self.timed(step, run)
        except CodesignError as error:
            notes[step] = str(error)
            return None

    def told(self, path: Path) -> str:
        """Say what was written and how long it took."""
        steps = ", ".join(f"{step} {seconds:.1f} s" for step, seconds in self.seconds.items())
        size = path.stat().st_size / 1e6 if path.is_file() else 0.0
        return f"wrote {path}, {size:.1f} MB ({steps})"
