"""Every error a user can cause, each one clear line.

::

    CodesignError                 exit code 2
    ├── CatalogError              a part or its data file is wrong
    ├── ProblemError              the problem or recipe file is wrong
    │   └── CoverageError         a curve does not cover the wavelengths asked of it
    └── SolveError
        ├── InfeasibleError       exit code 3, the limits cannot be met together
        └── CertificateError      exit code 4, a result did not pass its proof check

A message says where (file, key or row), what value, what is allowed and what to try.
"""

from __future__ import annotations

from collections.abc import Iterable
from difflib import get_close_matches


class CodesignError(Exception):
    """Base of all errors raised on purpose; the command line prints it as one line."""

    exit_code = 2


class CatalogError(CodesignError, ValueError):
    """A part, its table row or its curve file is not usable."""


class ProblemError(CodesignError, ValueError):
    """A problem or recipe file is not usable."""


class CoverageError(ProblemError):
    """A curve does not cover the wavelengths asked of it."""


class SolveError(CodesignError):
    """The optimisation could not deliver a checked result."""


class InfeasibleError(SolveError):
    """No setting meets all limits; ``limits`` names those in conflict."""

    exit_code = 3

    def __init__(self, message: str, limits: Iterable[str] = ()) -> None:
        super().__init__(message)
        self.limits = tuple(limits)


class CertificateError(SolveError):
    """A result failed the solver-independent check."""

    exit_code = 4


def nearest(name: str, known: Iterable[str]) -> str:
    """Return advice naming the closest known word, or the first few known words."""
    known = sorted(known)
    turned = [word for word in known if sorted(word.split("-")) == sorted(name.split("-"))]
    close = turned or get_close_matches(name, known, n=1, cutoff=0.5)
    if close:
        return f"did you mean {close[0]!r}?"
    shown = ", ".join(known[:8]) + (", ..." if len(known) > 8 else "")
    return f"known: {shown}" if shown else "none are known"
