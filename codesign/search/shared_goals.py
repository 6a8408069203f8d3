"""The rig in common that serves most variants, and the cheapest one that serves all."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from codesign.certificate_shared import bits, members
from codesign.certificate_shared_sets import EQUAL, cheapest_set, most_served
from codesign.program import Array
from codesign.search.shared_rig import Found, Hunt, Outcome

Progress = Callable[[float, float], None]


class _Goal:
    """What both goals share: levels that count as served, and rigs bounded one variant after the other."""

    def __init__(self, hunt: Hunt, levels: Array, progress: Progress | None) -> None:
        self.hunt, self.levels, self.progress = hunt, levels, progress
        self.best: Found | None = None
        self.proven = np.zeros(len(hunt.space))

    def open(self) -> np.ndarray:
        """Rigs that could still be better than the best, most promising first."""
        raise NotImplementedError

    def failing(self, place: int, rigs: np.ndarray) -> None:
        """Take note that a variant cannot be served on some rigs."""
        raise NotImplementedError

    def sift(self) -> None:
        """Bound one variant after the other on the rigs left open."""
        for place in self.hunt.in_order():
            wanted = np.zeros(self.proven.size, dtype=bool)
            wanted[self.open()] = True
            variant = self.hunt.variants[place]
            variant.look(wanted)
            self.failing(place, np.flatnonzero(wanted & (variant.upper < self.levels[place])))

    def tell(self, bound: float) -> None:
        """Report progress."""
        if self.progress is not None:
            self.progress(0.0 if self.best is None else self.best.value, bound)


class _Most(_Goal):
    """Greatest total weight of the variants served."""

    def __init__(self, hunt: Hunt, levels: Array, weight: Array, progress: Progress | None) -> None:
        super().__init__(hunt, levels, progress)
        self.weight = weight
        self.proven = np.full(len(hunt.space), float(weight.sum()))

    @property
    def value(self) -> float:
        """Total weight served by the best."""
        return 0.0 if self.best is None else self.best.value

    def open(self) -> np.ndarray:
        """Rigs that may serve more."""
        found = np.flatnonzero(self.proven > self.value + EQUAL)
        return found[np.argsort(-self.proven[found], kind="stable")]

    def failing(self, place: int, rigs: np.ndarray) -> None:
        """These rigs do without the variant's weight."""
        self.proven[rigs] -= self.weight[place]

    def pursue(self, rig: int) -> None:
        """Find the most a rig serves, as far as it is more than the best."""
        self.hunt.recall(rig, self.levels)
        room = self.hunt.space.room(rig)
        while not self.hunt.over():
            self.tell(float(self.proven.max()))
            needs = self.hunt.needs(rig, self.levels)
            found = most_served(needs, self.weight, room, self.value, self.hunt.missed)
            if found is None:
                self._close(rig)
                return
            inside = self.hunt.filled(found[1], room)
            served = self._served(needs, bits(inside))
            if not self.hunt.short(rig, inside, self.levels, served):
                self.best = Found(rig, inside, float(self.weight[served].sum()), {})
                self.hunt.any_found = True

    def _served(self, needs: Sequence[Sequence[int]], chosen: int) -> list[int]:
        return [v for v, own in enumerate(needs) if self.weight[v] > 0 and all(cut & chosen for cut in own)]

    def _close(self, rig: int) -> None:
        """The best total is what the rig is shown not to exceed, or more where some proof falls short."""
        needs = self.hunt.needs(rig, self.levels, strict=True)
        more = most_served(needs, self.weight, self.hunt.space.room(rig), self.value)
        self.proven[rig] = min(self.proven[rig], self.value if more is None else more[0])

    def run(self, start: tuple[int, Array] | None) -> Outcome:
        """The rig to begin with, then all that are open."""
        if start is not None:
            self._try(*start)
        self.sift()
        for rig in self.open():
            if self.proven[rig] > self.value + EQUAL:
                self.pursue(int(rig))
        return Outcome(
            self.best, np.maximum(self.proven, self.value), bool(self.hunt.over()) and bool(self.open().size)
        )

    def _try(self, rig: int, inside: Array) -> None:
        recipes = self.hunt.recipes(rig, inside, np.zeros(len(self.hunt.variants)))
        served = [v for v in self.hunt.everyone if recipes[v].value >= self.levels[v]]
        total = float(self.weight[served].sum())
        if total > 0:
            self.best = Found(rig, inside, total, {})
            self.hunt.any_found = True


class _Cheapest(_Goal):
    """Least price of a rig that serves all variants."""

    def __init__(self, hunt: Hunt, levels: Array, gap: float, progress: Progress | None) -> None:
        super().__init__(hunt, levels, progress)
        self.gap = gap
        space = hunt.space
        self.base = np.array([space.price(rig) for rig in range(len(space))])
        self.base[np.isnan(self.base)] = np.inf
        self.led = np.where(np.isnan(space.led_prices()), np.inf, space.led_prices())
        self.proven = self.base.copy()

    @property
    def aim(self) -> float:
        """Price that another rig must stay below to matter."""
        return np.inf if self.best is None else self.best.value / (1 + self.gap)

    def open(self) -> np.ndarray:
        """Rigs that may be cheaper."""
        found = np.flatnonzero(self.proven < self.aim)
        return found[np.argsort(self.proven[found], kind="stable")]

    def failing(self, place: int, rigs: np.ndarray) -> None:
        """These rigs do not serve all at any price."""
        self.proven[rigs] = np.inf

    def pursue(self, rig: int) -> None:
        """Find the cheapest set of LEDs that serves all, as far as it is cheaper than the best."""
        self.hunt.recall(rig, self.levels)
        room = self.hunt.space.room(rig)
        while not self.hunt.over():
            self.tell(float(self.proven.min()))
            needs = [cut for own in self.hunt.needs(rig, self.levels) for cut in own]
            chosen = cheapest_set(needs, room, self.led, self.aim - self.base[rig], self.hunt.missed)
            if chosen is None:
                self._close(rig, room)
                return
            inside = np.isin(np.arange(self.hunt.leds), members(chosen))
            if not self.hunt.short(rig, inside, self.levels, self.hunt.everyone):
                self.best = Found(rig, inside, float(self.base[rig] + self.led[inside].sum()), {})
                self.hunt.any_found = True

    def _close(self, rig: int, room) -> None:
        """The price aimed at is what the rig costs at least, or less where some proof falls short."""
        needs = [cut for own in self.hunt.needs(rig, self.levels, strict=True) for cut in own]
        cheaper = cheapest_set(needs, room, self.led, self.aim - self.base[rig])
        least = self.aim if cheaper is None else self.base[rig] + self.led[members(cheaper)].sum()
        self.proven[rig] = max(self.proven[rig], least)

    def run(self, start: tuple[int, Array] | None) -> Outcome:
        """The rig to begin with, then all that are open."""
        if start is not None and not self.hunt.short(*start, self.levels, self.hunt.everyone):
            self.best = Found(*start, float(self.base[start[0]] + self.led[start[1]].sum()), {})
            self.hunt.any_found = True
        self.sift()
        for rig in self.open():
            if self.proven[rig] < self.aim:
                self.pursue(int(rig))
        return Outcome(self.best, self.proven, bool(self.hunt.over()) and bool(self.open().size))


def most_variants(
    hunt: Hunt,
    levels: Array,
    weight: Array | None = None,
    start: tuple[int, Array] | None = None,
    progress: Progress | None = None,
) -> Outcome:
    """Rig and LEDs that serve the greatest total weight of variants, and what no rig exceeds.

    Parameters
    ----------
    hunt : Hunt
    levels : (V,) array
        CNR from which a variant counts as served.
    weight : (V,) array, optional
        1 each by default.
    start : (int, (L,) bool array), optional
        A rig and LEDs to begin with.
    progress : callable, optional
        Called with (total so far, bound so far).
    """
    weight = np.ones(len(hunt.variants)) if weight is None else np.asarray(weight, dtype=float)
    return _Most(hunt, levels, weight, progress).run(start)


def least_price(
    hunt: Hunt,
    levels: Array,
    gap: float,
    start: tuple[int, Array] | None = None,
    progress: Progress | None = None,
) -> Outcome:
    """Cheapest rig and LEDs that serve all variants, and what each rig costs at least, infinite where it cannot.

    Parameters
    ----------
    hunt : Hunt
    levels : (V,) array
        CNR from which a variant counts as served.
    gap : float
        Relative gap to prove. [1]
    start, progress
        As of `most_variants`.
    """
    return _Cheapest(hunt, levels, gap, progress).run(start)
