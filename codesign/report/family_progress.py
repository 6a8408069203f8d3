"""How far a family is, on a terminal that somebody watches."""

from __future__ import annotations

from typing import TextIO

from codesign.report.layout import bar, duration, number
from codesign.report.progress import LEAST_TO_GUESS, Status

#: Cells of the bar.
SIZE = 24


class FamilyProgress(Status):
    """A bar with the time that is left, guessed from the variants run so far; those in the store took none."""

    def __init__(self, stream: TextIO | None = None) -> None:
        self._variants = (0, 0, 0, 0)
        super().__init__("family", stream)

    def __call__(self, done: int, total: int, failed: int, run: int) -> None:
        """Tell variants done of all, those that failed, and those run by now."""
        self._variants = (done, total, failed, run)

    def line(self, now: float) -> str:
        """Return the line as it reads at a time. [s]"""
        if not self._variants[1]:
            return super().line(now)
        return family_line(*self._variants, now - self.started)


class CommonProgress(Status):
    """The line of a search for rigs in common: called with the best so far and its bound, of whatever is sought."""

    def __init__(self, sought: str, stream: TextIO | None = None) -> None:
        self._sought = sought
        super().__init__("rigs in common", stream)

    def __call__(self, value: float, bound: float) -> None:
        """Show what was found and what is proven."""
        self.note(f"{self._sought} {number(value)}, bound {number(bound)}")


def family_line(done: int, total: int, failed: int, run: int, seconds: float) -> str:
    """Return the line in words.

    Examples
    --------
    >>> family_line(50, 200, 1, 40, 60.0)
    '██████░░░░░░░░░░░░░░░░░░ 50 of 200 variants, 1 failed, about 3.8 min left'
    """
    parts = [f"{bar(done / total, SIZE)} {done} of {total} variants"]
    if failed:
        parts.append(f"{failed} failed")
    if run and done < total and seconds >= LEAST_TO_GUESS:
        parts.append(f"about {duration(max(round(seconds / run * (total - done)), 1))} left")
    return ", ".join(parts)
