"""How far a family is, on a terminal that somebody watches."""

from __future__ import annotations

from typing import TextIO

from codesign.report.layout import bar
from codesign.report.progress import Status

#: Cells of the bar.
SIZE = 24


class FamilyProgress(Status):
    """A bar with the time that is left, estimated from the variants run so far."""

    def __init__(self, stream: TextIO | None = None) -> None:
        self.last: tuple[int, int, int, int] | None = None
        super().__init__("reading", stream)

    def __call__(self, done: int, total: int, failed: int, run: int) -> None:
        """Show variants done of all, those that failed, and the time left.

        ``run`` counts the variants run in this call of the program; the others were in the store.
        """
        self.last = done, total, failed, run

    def line(self, now: float) -> str:
        """Return the line as it reads at a time. [s]"""
        return super().line(now) if self.last is None else family_line(*self.last, now - self.started)


def family_line(done: int, total: int, failed: int, run: int, seconds: float) -> str:
    """Return the line in words.

    Examples
    --------
    >>> family_line(50, 200, 1, 40, 60.0)
    '██████░░░░░░░░░░░░░░░░░░ 50 of 200 variants, 1 failed, 3:45 left'
    """
    parts = [f"{bar(done / max(total, 1), SIZE)} {done} of {total} variants"]
    if failed:
        parts.append(f"{failed} failed")
    if run and done < total:
        parts.append(f"{clock_time(seconds / run * (total - done))} left")
    return ", ".join(parts)


def clock_time(seconds: float) -> str:
    """Return a duration as minutes and seconds, or hours, minutes and seconds.

    Examples
    --------
    >>> clock_time(225.2), clock_time(3725)
    ('3:46', '1:02:05')
    """
    whole = int(-(-seconds // 1))
    hours, rest = divmod(whole, 3600)
    return f"{hours}:{rest // 60:02d}:{rest % 60:02d}" if hours else f"{rest // 60}:{rest % 60:02d}"
