"""The fewest filters with which one camera, one f-number and one set of LEDs serve all variants, and a lower bound.

A variant is served when one filter of the wheel serves it, so each has a choice of filters, each with its own cuts. For
ever larger wheels all choices of filters are gone through until one serves all: the smaller ones are thereby ruled out.
Most go at once, because some variant cannot be served behind any of their filters whatever the LEDs.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from math import comb

import numpy as np

from codesign.certificate_shared import Mask, bits
from codesign.certificate_shared_sets import serving_set
from codesign.program import Array
from codesign.search.shared_rig import Hunt
from codesign.search.shared_space import RigSpace
from codesign.search.shared_variant import Variant

#: Choices of filters for one camera and f-number at most; larger wheels are not gone through.
MOST_CHOICES = 400_000


@dataclass(frozen=True, slots=True, eq=False)
class FoundWheel:
    """First rig number of a camera and f-number, LEDs (L,), filters, and the filter of each variant. (V,)"""

    first: int
    leds: Mask
    filters: tuple[int, ...]
    uses: np.ndarray

    @property
    def value(self) -> float:
        """Number of filters."""
        return float(len(self.filters))

    def places(self, count: int) -> list[tuple[int, Mask]]:
        """Rig and LEDs of each variant."""
        return [(self.first + int(use), self.leds) for use in self.uses[:count]]

    def boards(self, count: int) -> list[int]:
        """Which variants have their LEDs in common: all."""
        return [0] * count

    def with_boards(self, leds: Sequence[Mask]) -> FoundWheel:
        """The same with other LEDs."""
        return replace(self, leds=leds[0])


@dataclass(slots=True, eq=False)
class WheelOutcome:
    """The smallest wheel found, and that no wheel with fewer than ``bound`` filters serves all."""

    best: FoundWheel | None
    bound: int
    stopped: bool


def choices_left(
    variants: Sequence[Variant], space: RigSpace, levels: Array, order: Sequence[int], size: int
) -> Iterator[tuple[int, np.ndarray]]:
    """For every camera and f-number the wheels of a size behind which each variant may be served. (N, size)

    A variant that stays below its level with all LEDs behind every filter of a wheel rules it out.
    """
    filters = len(space.problem.filters)
    every = np.array(list(itertools.combinations(range(filters), size)), dtype=np.intp).reshape(-1, size)
    for first in range(0, len(space), filters):
        left = every
        for place in order:
            if not len(left):
                break
            wanted = np.zeros(len(space), dtype=bool)
            wanted[first + np.unique(left)] = True
            variants[place].look(wanted)
            able = variants[place].upper[first : first + filters] >= levels[place]
            left = left[able[left].any(axis=1)]
        yield first, left


class _Wheel:
    """Wheels gone through so far."""

    def __init__(self, hunt: Hunt, levels: Array, progress: Callable[[float, float], None] | None) -> None:
        self.hunt, self.levels, self.progress = hunt, levels, progress
        self.filters = len(hunt.space.problem.filters)
        self.room = hunt.space.room(0)
        self.best: FoundWheel | None = None
        self.doubt = False

    def needs(self, first: int, filters: Sequence[int], *, strict: bool = False) -> list[list[list[int]]]:
        """Of each variant its cuts behind each filter."""
        found: list[list[list[int]]] = [[] for _ in self.hunt.variants]
        for place in filters:
            for own, cuts in zip(found, self.hunt.needs(first + place, self.levels, strict=strict), strict=True):
                own.append(cuts)
        return found

    def chosen(self, needs: Sequence[Sequence[Sequence[int]]]) -> int | None:
        """A set of LEDs that meets all cuts of a choice of each variant."""
        return serving_set([[own for own in each if 0 not in own] for each in needs], self.room, self.hunt.missed)

    def serving(self, first: int, filters: Sequence[int]) -> FoundWheel | None:
        """LEDs with which a wheel serves all variants; None where there are none, or no time."""
        while not self.hunt.over():
            needs = self.needs(first, filters)
            chosen = self.chosen(needs)
            if chosen is None:
                self.doubt |= self.chosen(self.needs(first, filters, strict=True)) is not None
                return None
            inside = self.hunt.filled(chosen, self.room)
            uses = self._used(first, filters, inside, needs)
            if uses is not None:
                self.hunt.any_found = True
                used = sorted(set(uses.tolist()))
                return FoundWheel(first, inside, tuple(used), uses)
        return None

    def _used(
        self, first: int, filters: Sequence[int], inside: Mask, needs: Sequence[Sequence[Sequence[int]]]
    ) -> np.ndarray | None:
        """The filter that serves each variant; None, and further cuts, as soon as none does."""
        own, used, uses = bits(inside), set(), np.zeros(len(self.hunt.variants), dtype=np.intp)
        for v in self.hunt.in_order():
            able = [f for f, cuts in zip(filters, needs[v], strict=True) if all(cut & own for cut in cuts)]
            likely = sorted(able, key=lambda f: (f not in used, -self.hunt.variants[v].upper[first + f]))
            served = next((f for f in likely if not self.hunt.short(first + f, inside, self.levels, [v])), None)
            if served is None:
                return None
            uses[v] = served
            used.add(served)
        return uses

    def any_wheel(self) -> bool:
        """Find a wheel of whatever size; False where all filters together do not serve all variants."""
        for first, left in choices_left(
            self.hunt.variants, self.hunt.space, self.levels, self.hunt.in_order(), self.filters
        ):
            if len(left):
                self.best = self.serving(first, range(self.filters))
            if self.best is not None:
                return True
        return False

    def run(self, start: FoundWheel | None) -> WheelOutcome:
        """Wheels of one filter, of two, and so on until one serves all."""
        if start is not None:
            self.best = self.serving(start.first, start.filters)
        if self.best is None and not self.any_wheel():
            return WheelOutcome(None, 1, self.hunt.over())
        size = 1
        while size < len(self.best.filters) and comb(self.filters, size) <= MOST_CHOICES:
            smaller = self._of_size(size)
            if smaller is not None:
                self.best = smaller
                break
            if self.hunt.over() or self.doubt:
                return WheelOutcome(self.best, size, self.hunt.over())
            size += 1
        return WheelOutcome(self.best, min(size, len(self.best.filters)), False)

    def _of_size(self, size: int) -> FoundWheel | None:
        order = self.hunt.in_order()
        for first, left in choices_left(self.hunt.variants, self.hunt.space, self.levels, order, size):
            for filters in left:
                if self.progress is not None:
                    self.progress(float(len(self.best.filters)), float(size))
                for place in filters.tolist():
                    self.hunt.recall(first + place, self.levels)
                found = self.serving(first, filters.tolist())
                if found is not None:
                    return found
                if self.hunt.over():
                    return None
        return None


def smallest_wheel(
    hunt: Hunt,
    levels: Array,
    start: FoundWheel | None = None,
    progress: Callable[[float, float], None] | None = None,
) -> WheelOutcome:
    """Fewest filters, each variant behind one of them, with which a camera and a set of LEDs serve all variants.

    Parameters
    ----------
    hunt : Hunt
    levels : (V,) array
        CNR from which a variant counts as served.
    start : FoundWheel, optional
        What was found at other junction temperatures.
    progress : callable, optional
        Called with (number of filters so far, bound so far).
    """
    return _Wheel(hunt, levels, progress).run(start)
