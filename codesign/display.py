"""How results show themselves in notebooks and at a prompt.

Results live far below the reports, so they cannot know how to be shown. The one upward step is taken here, by name and
only when something is to be shown: `Displayed` asks the module `RENDERER`, which knows all results. Nothing is imported
before that, and a result that cannot be drawn still has its plain `repr`.

A class of results takes part with two words, `class Found(Displayed)` and ``@dataclass(repr=False, ...)``, and an entry
in ``codesign.report.notebook.RENDERERS``.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

#: Module with ``html(value)`` and ``line(value)``.
RENDERER = "codesign.report.notebook"


class Displayed:
    """Mixin of results: compact HTML in notebooks, one informative line elsewhere. Holds nothing, also with slots."""

    __slots__ = ()

    def _repr_html_(self) -> str:
        """Return a compact view for notebooks."""
        return _renderer().html(self)

    def __repr__(self) -> str:
        """Return one line; never fails, since it serves debuggers too."""
        try:
            return _renderer().line(self)
        except Exception:  # half-made objects are looked at as well
            return object.__repr__(self)


def _renderer() -> Any:
    return import_module(RENDERER)
