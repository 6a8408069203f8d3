"""The rig in common with the greatest worst CNR, and what no rig exceeds.

Rigs are taken best bound first, and those whose bound is below what was found are never looked at. The bound of a rig
is the least of its variants', so few variants close most rigs: each variant is only bounded on the rigs that those
before it left open.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from codesign.certificate_shared_sets import cheapest_set
from codesign.program import Array
from codesign.search.shared_rig import Found, Hunt, Outcome

#: Rigs on which all variants are bounded before anything is found, and how many of them are worked out.
FIRST_RIGS, FIRST_TRIED = 24, 3
#: Share of the rigs that is left after each of them.
FEWER = 0.4
#: Step by which the level asked of a rig is lowered until a set of LEDs reaches it; squared each time one does not.
LEVEL_STEP = 0.93
#: A CNR up to this is none.
NOTHING = 1e-6
#: Share of the gap that a rig is asked to beat the best by; the rest is room for round-off.
OWN_SHARE = 0.99


class _Worst:
    """The best found so far, and the level each rig was shown not to exceed."""

    def __init__(self, hunt: Hunt, gap: float, progress: Callable[[float, float], None] | None) -> None:
        self.hunt, self.gap, self.progress = hunt, gap * OWN_SHARE, progress
        self.proven = hunt.uppers().min(axis=0)
        self.best: Found | None = None

    @property
    def aim(self) -> float:
        """Level that another rig must exceed to matter."""
        return NOTHING if self.best is None else self.best.value * (1 + self.gap)

    def open(self) -> np.ndarray:
        """Rigs not closed yet, best bound first."""
        found = np.flatnonzero(self.proven > self.aim)
        return found[np.argsort(-self.proven[found], kind="stable")]

    def sift(self, most: int | None = None) -> np.ndarray:
        """Bound one variant after the other on the rigs left open, or on fewer and fewer; those bounded by all."""
        left = self.open()
        for place in self.hunt.in_order():
            wanted = np.zeros(self.proven.size, dtype=bool)
            wanted[left] = True
            self.hunt.variants[place].look(wanted)
            self.proven = np.minimum(self.proven, self.hunt.variants[place].upper)
            keep = len(left) if most is None else max(most, int(FEWER * len(left)))
            left = left[np.argsort(-self.proven[left], kind="stable")][:keep]
            left = left[self.proven[left] > self.aim]
        return left

    def offer(self, rig: int, inside: Array, least: float) -> None:
        """Work out what a rig with its LEDs is worth and keep it if it is the best."""
        recipes = self.hunt.recipes(rig, inside, np.full(len(self.hunt.variants), least))
        value = min(found.value for found in recipes.values())
        if value > (0.0 if self.best is None else self.best.value):
            self.best = Found(rig, inside, value, recipes)
            self.hunt.any_found = True

    def pursue(self, rig: int) -> None:
        """Look for better and better sets of LEDs on a rig until it is closed."""
        easy, step = self.best is not None, LEVEL_STEP
        while self.proven[rig] > self.aim and not self.hunt.over():
            if self.progress is not None:
                self.progress(0.0 if self.best is None else self.best.value, float(self.proven.max()))
            level = self.aim if easy else max(self.aim, step * self.proven[rig])
            easy, step = False, step**2
            inside = self.hunt.serving(rig, np.full(len(self.hunt.variants), level))
            if inside is not None:
                self.offer(rig, inside, float(level))
                step = LEVEL_STEP
            elif not self.hunt.over():
                self.proven[rig] = min(self.proven[rig], self._shown(rig, level))
                if self.proven[rig] > level:
                    return  # some proof falls short; more of the same would not help

    def _shown(self, rig: int, level: float) -> float:
        """Least level from this one on that the cuts of a rig show not to be exceeded."""
        room = self.hunt.space.room(rig)
        for trial in (level, *(value * (1 + 1e-12) for value in self.hunt.doubtful(rig) if value >= level)):
            needs = self.hunt.needs(rig, np.full(len(self.hunt.variants), trial), strict=True)
            if cheapest_set([cut for own in needs for cut in own], room) is None:
                return trial
        return np.inf

    def run(self, start: tuple[int, Array] | None) -> Outcome:
        """First some promising rigs for a good value, then all that are open."""
        if start is not None:
            self.offer(*start, 0.0)
        if self.best is None:
            for rig in self.sift(FIRST_RIGS)[:FIRST_TRIED]:
                self.pursue(int(rig))
        self.sift()
        for rig in self.open():
            self.pursue(int(rig))
        stopped = bool(self.open().size)
        self.tighten()
        return Outcome(self.best, self.proven, stopped)

    def tighten(self) -> None:
        """Lower what each rig was asked not to exceed to what its cuts show."""
        room, count = self.hunt.space.room, len(self.hunt.variants)
        for rig in map(int, np.flatnonzero(self.proven > (0.0 if self.best is None else self.best.value))):
            levels = {value for _, cut, _ in self.hunt.cuts.get(rig, ()) if (value := cut.level) < self.proven[rig]}
            for trial in sorted(value * (1 + 1e-12) for value in levels):
                needs = self.hunt.needs(rig, np.full(count, trial), strict=True)
                if cheapest_set([cut for own in needs for cut in own], room(rig)) is None:
                    self.proven[rig] = trial
                    break


def best_worst(
    hunt: Hunt,
    gap: float,
    start: tuple[int, Array] | None = None,
    progress: Callable[[float, float], None] | None = None,
) -> Outcome:
    """Rig and LEDs of the greatest worst CNR, and what no rig exceeds.

    Parameters
    ----------
    hunt : Hunt
    gap : float
        Relative gap to prove. [1]
    start : (int, (L,) bool array), optional
        A rig and LEDs to begin with.
    progress : callable, optional
        Called with (worst CNR so far, bound so far).
    """
    return _Worst(hunt, gap, progress).run(start)
