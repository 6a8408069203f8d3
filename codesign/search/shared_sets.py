"""The smallest set of rigs that serves all variants, each variant on one of them, and a lower bound on their number.

Columns are rigs with their LEDs and the variants they serve. The linear relaxation of the covering problem over the
columns known prices the variants; the rig that serves the greatest total price is the next column. With Z the largest
total that any rig serves at prices π, no fewer than ``Σ π / Z`` rigs can serve all: each serves Z at most. That bound
holds for any prices, so neither the linear program nor the choice of columns has to be trusted.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from codesign.certificate_shared import Mask
from codesign.program import Array
from codesign.search.shared_goals import most_variants
from codesign.search.shared_rig import Hunt

#: Rounds of pricing at most; the gap is then stated as it is.
LARGEST_NUMBER_OF_PRICINGS = 60
#: Round-off in sums of prices.
SLACK = 1e-7


@dataclass(frozen=True, slots=True, eq=False)
class Column:
    """A rig with its LEDs (L,) and the variants it serves (V,)."""

    rig: int
    leds: Mask
    serves: Mask


@dataclass(frozen=True, slots=True, eq=False)
class FoundSet:
    """Rigs that together serve all variants, and the one of them that each variant uses. (V,)"""

    columns: tuple[Column, ...]
    uses: np.ndarray
    known: tuple[Column, ...] = field(repr=False)

    @property
    def value(self) -> float:
        """Number of rigs."""
        return float(len(self.columns))

    def places(self, count: int) -> list[tuple[int, Mask]]:
        """Rig and LEDs of each variant."""
        return [(self.columns[use].rig, self.columns[use].leds) for use in self.uses[:count]]

    def boards(self, count: int) -> list[int]:
        """Number of the rig that each variant uses."""
        return self.uses[:count].tolist()

    def with_boards(self, leds: Sequence[Mask]) -> FoundSet:
        """The same rigs with other LEDs."""
        return replace(self, columns=tuple(replace(c, leds=own) for c, own in zip(self.columns, leds, strict=True)))


@dataclass(slots=True, eq=False)
class SetOutcome:
    """The smallest set found; prices (V,) of the variants and the largest total that any rig serves at them."""

    best: FoundSet | None
    prices: Array
    largest: float
    stopped: bool

    @property
    def bound(self) -> int:
        """No fewer rigs serve all variants."""
        return least_number(self.prices, self.largest)


def least_number(prices: Array, largest: float) -> int:
    """Least number of rigs when each serves a total price of ``largest`` at most."""
    return int(np.ceil(float(prices.sum()) / largest * (1 - SLACK))) if largest > 0 else 0


class _Cover:
    """Columns known, the best prices so far, and the smallest set of columns."""

    def __init__(self, hunt: Hunt, levels: Array, progress: Callable[[float, float], None] | None) -> None:
        self.hunt, self.levels, self.progress = hunt, levels, progress
        self.columns: list[Column] = []
        self.prices, self.largest = np.zeros(len(hunt.variants)), 1.0

    @property
    def bound(self) -> int:
        """Proven so far."""
        return least_number(self.prices, self.largest)

    def add(self, rig: int, inside: Mask) -> None:
        """Work out which variants a rig serves and keep it."""
        serves = np.array([not self.hunt.short(rig, inside, self.levels, [v]) for v in self.hunt.everyone], dtype=bool)
        self.columns.append(Column(rig, inside, serves))

    def price(self, prices: Array) -> float | None:
        """Add the rig that serves the greatest total price and note the bound; that total, None when stopped."""
        outcome = most_variants(self.hunt, self.levels, prices)
        if outcome.best is not None:
            self.add(outcome.best.rig, outcome.best.leds)
        if outcome.stopped:
            return None
        largest = float(outcome.proven.max())
        if largest > 0 and least_number(prices, largest) > self.bound:
            self.prices, self.largest = prices, largest
        return largest

    def greedy(self) -> bool:
        """Cover the variants one rig after the other; False when one of them cannot be served at all."""
        while True:
            left = ~np.any([column.serves for column in self.columns], axis=0) if self.columns else self._everyone()
            if not left.any():
                return True
            count = len(self.columns)
            self.price(left.astype(float))
            if len(self.columns) == count or not (self.columns[-1].serves & left).any():
                return False

    def _everyone(self) -> Mask:
        return np.ones(len(self.hunt.variants), dtype=bool)

    def relaxed(self) -> tuple[Array, float]:
        """Prices of the variants at the optimum of the linear relaxation over the columns known, and its value."""
        from scipy.optimize import linprog

        matrix = np.array([column.serves for column in self.columns], dtype=float).T
        count = matrix.shape[1]
        found = linprog(np.ones(count), A_ub=-matrix, b_ub=-np.ones(len(matrix)), bounds=(0, None), method="highs")
        return np.maximum(-found.ineqlin.marginals, 0.0), float(found.fun)

    def smallest(self) -> list[Column]:
        """Fewest of the columns known that serve all."""
        from scipy.optimize import Bounds, LinearConstraint, milp

        matrix = np.array([column.serves for column in self.columns], dtype=float).T
        count = matrix.shape[1]
        covered = LinearConstraint(matrix, lb=1.0)
        found = milp(np.ones(count), constraints=covered, integrality=np.ones(count), bounds=Bounds(0, 1))
        return [column for column, use in zip(self.columns, found.x, strict=True) if use > 0.5]

    def run(self, known: Sequence[Column]) -> SetOutcome:
        """Columns known, a greedy cover, then pricing until the bound is reached or nothing is left to price in."""
        for column in known:
            self.add(column.rig, column.leds)
        self.price(np.ones(len(self.hunt.variants)))
        if not self.greedy():
            return SetOutcome(None, self.prices, self.largest, self.hunt.over())
        chosen = self.smallest()
        for _ in range(LARGEST_NUMBER_OF_PRICINGS):
            if self.progress is not None:
                self.progress(float(len(chosen)), float(self.bound))
            if len(chosen) <= self.bound or self.hunt.over():
                break
            prices, _ = self.relaxed()
            largest = self.price(prices)
            chosen = min(chosen, self.smallest(), key=len)
            if largest is None or largest <= 1 + SLACK:
                break
        return SetOutcome(self._assigned(chosen), self.prices, self.largest, self.hunt.over())

    def _assigned(self, chosen: Sequence[Column]) -> FoundSet:
        """Each variant on the rig on which it does best."""
        value = np.zeros((len(chosen), len(self.hunt.variants)))
        for row, column in enumerate(chosen):
            for v in np.flatnonzero(column.serves):
                variant = self.hunt.variants[v]
                value[row, v] = variant.best(column.rig, column.leds, float(self.levels[v])).value
        uses = np.argmax(value, axis=0)
        used = np.unique(uses)
        return FoundSet(tuple(chosen[k] for k in used), np.searchsorted(used, uses), tuple(self.columns))


def smallest_cover(
    hunt: Hunt,
    levels: Array,
    start: FoundSet | None = None,
    progress: Callable[[float, float], None] | None = None,
) -> SetOutcome:
    """Fewest rigs that serve all variants, and a bound on their number; ``best`` is None where no rigs serve all.

    Parameters
    ----------
    hunt : Hunt
    levels : (V,) array
        CNR from which a variant counts as served.
    start : FoundSet, optional
        What was found at other junction temperatures.
    progress : callable, optional
        Called with (number of rigs so far, bound so far).
    """
    return _Cover(hunt, levels, progress).run(() if start is None else start.columns)
