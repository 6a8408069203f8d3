"""A family solved in one call."""

from __future__ import annotations

from pathlib import Path

from codesign.family.batch import OwnRigs, Progress, own_rigs
from codesign.family.engine import local_engine
from codesign.family.load import Family, load_family
from codesign.family.store import IN_MEMORY, Store


def solve_family(
    family: Family | str | Path,
    *,
    store: str | Path | None = None,
    processes: int = 1,
    gap: float | None = None,
    progress: Progress | None = None,
) -> OwnRigs:
    """Find the best rig of each variant of a family, with proof.

    Parameters
    ----------
    family : Family or path
        As `load_family` returns or takes it.
    store : path, optional
        File in which each result is kept as soon as it is known, and looked for first; none by default.
    processes : int
        Local processes; results do not depend on it. A script that asks for more than one has to guard what it does
        by ``if __name__ == "__main__"``, as with any processes of Python.
    gap : float, optional
        Relative gap to prove; each problem's own by default. [1]
    progress : callable, optional
        Called with (variants done, in all, failed so far, run by now).

    Returns
    -------
    OwnRigs
        Variants that cannot be solved are part of it.

    Raises
    ------
    CodesignError
        When the family as a whole cannot be used, or the store fails.

    Examples
    --------
    >>> from codesign import load_family
    >>> found = solve_family(load_family("labels-200").only(["001-pale-cyan"]), gap=0.01)
    >>> found.solved[0].outcome.proven
    True
    """
    loaded = family if isinstance(family, Family) else load_family(family)
    with Store(IN_MEMORY if store is None else store) as opened:
        return own_rigs(loaded, opened, local_engine(processes, len(loaded.variants)), gap=gap, progress=progress)
