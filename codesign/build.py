"""What may be built: integer limits on the LED channels, the board and the price, without any solver.

Each LED has a whole number of *units* in use: its channel as a whole where the number of emitters is fixed (0 or 1
unit), single emitters where it is free. Every build limit is ``Σ_i cost_i(units_i) ≤ bound`` with
``cost_i(u) = first_i·[u > 0] + each_i·u``.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Camera
from codesign.errors import InfeasibleError
from codesign.problem import Problem
from codesign.problem.choices import FilterChoices

Array = NDArray[np.float64]
Units = NDArray[np.int64]

#: Sums of prices may exceed their bound by this share: round-off.
ROUND_OFF = 1e-9


@dataclass(frozen=True, slots=True, kw_only=True)
class BuildLimit:
    """``Σ_i first_i·[u_i > 0] + each_i·u_i ≤ bound``, value and bound in ``unit``; ``first``, ``each`` are (L,)."""

    name: str
    unit: str
    first: Array
    each: Array
    bound: float

    def cost(self, units: Units) -> Array:
        """What each LED uses. (L,)"""
        return np.where(units > 0, self.first + self.each * units, 0.0)


@dataclass(frozen=True, slots=True)
class Box:
    """Integer choices still open: ``low ≤ units ≤ high``, both (L,)."""

    low: Units
    high: Units

    def split(self, led: int, at: int) -> tuple[Box, Box]:
        """At most ``at`` units of an LED, or more."""
        below, above = self.high.copy(), self.low.copy()
        below[led], above[led] = at, at + 1
        return Box(self.low, below), Box(above, self.high)


def free(problem: Problem) -> bool:
    """Whether the numbers of emitters are to be chosen."""
    return problem.spec.build.emitters == "free"


def choosing(problem: Problem) -> bool:
    """Whether there is any integer choice of LEDs to make beyond lighting them."""
    return problem.spec.build.limited


def most_units(problem: Problem) -> Units:
    """Units of each LED there can be. (L,)"""
    if not free(problem):
        return np.ones(len(problem.channels), dtype=np.int64)
    return np.array([channel.emitters for channel in problem.channels], dtype=np.int64)


def root_box(problem: Problem) -> Box:
    """All choices: must-have LEDs have a unit at least."""
    needed = np.array([channel.id in problem.spec.build.must_have for channel in problem.channels])
    return Box(needed.astype(np.int64), most_units(problem))


@lru_cache(maxsize=8)
def filter_prices(problem: Problem) -> Array:
    """Price of each filter choice, NaN where unknown. (F,)"""
    choices = FilterChoices.of(problem.filters)
    base = np.array([part_price(problem, part) for part in choices.base])
    first, second = choices.members.T
    return base[first] + np.where(second >= 0, base[second], 0.0)


def part_price(problem: Problem, part) -> float:
    """Price of a part, of a stack the sum of its parts unless it has its own; NaN where unknown."""
    if part.price is not None:
        return part.price
    kind = getattr(part, "kind", None)
    if kind == "stack":
        return float(sum(part_price(problem, problem.catalog.part("filter", name)) for name in part.parts))
    return 0.0 if kind == "none" else np.nan


def build_limits(problem: Problem, other_price: float = 0.0) -> tuple[BuildLimit, ...]:
    """Build limits of a problem; ``other_price`` is what camera and filter cost already."""
    build, count = problem.spec.build, len(problem.channels)
    per_unit = np.ones(count) if free(problem) else np.array([float(c.emitters) for c in problem.channels])
    nothing, found = np.zeros(count), []
    if build.max_led_channels is not None:
        bound = float(build.max_led_channels)
        found.append(BuildLimit(name="LED channels", unit="", first=np.ones(count), each=nothing, bound=bound))
    if build.board_slots is not None:
        bound = float(build.board_slots)
        found.append(BuildLimit(name="board slots", unit="", first=nothing, each=per_unit, bound=bound))
    if build.price_budget is not None:
        price = np.array([part_price(problem, channel.led) for channel in problem.channels])
        bound = build.price_budget - other_price
        found.append(BuildLimit(name="price", unit="", first=nothing, each=per_unit * price, bound=bound))
    return tuple(found)


def other_prices(problem: Problem, camera: Camera) -> Array:
    """Price of a camera with each filter choice, 0 where no budget asks. (F,)"""
    if problem.spec.build.price_budget is None:
        return np.zeros(len(problem.filters))
    return filter_prices(problem) + part_price(problem, camera)


def affordable(problem: Problem, camera: Camera) -> NDArray[np.bool_]:
    """Whether camera and filter leave enough of the budget for the must-have LEDs. (F,)"""
    low = root_box(problem).low
    found = np.ones(len(problem.filters), dtype=bool)
    for limit in build_limits(problem):
        other = other_prices(problem, camera) if limit.name == "price" else 0.0
        found &= other + limit.cost(low).sum() <= limit.bound * (1 + ROUND_OFF)
    return found


def require_buildable(problem: Problem) -> None:
    """Raise InfeasibleError when the must-have LEDs or the cheapest parts alone exceed a limit."""
    low = root_box(problem).low
    for limit in build_limits(problem):
        used, rest = float(limit.cost(low).sum()), ""
        if limit.name == "price":
            used += min(float(np.min(other_prices(problem, camera))) for camera in problem.cameras)
            rest = "the cheapest camera and filter and "
        if used > limit.bound * (1 + ROUND_OFF):
            raise InfeasibleError(
                f"{problem.where}: {rest}the must-have LEDs take {limit.name} {used:g}, "
                f"the limit is {limit.bound:g}; loosen build",
                [limit.name],
            )


def tightened(limits: tuple[BuildLimit, ...], box: Box) -> Box | None:
    """Cut each LED's range to what the limits leave beside the least of all others; None when nothing is left."""
    high = box.high
    if (box.low > high).any():
        return None
    for limit in limits:
        least = limit.cost(box.low)
        room = limit.bound + ROUND_OFF * abs(limit.bound) - (least.sum() - least)
        if (least > room).any():
            return None
        # Room for the LED to be in use at all, then for so many units.
        with np.errstate(divide="ignore", invalid="ignore"):
            most = np.where(limit.each > 0, np.floor((room - limit.first) / limit.each * (1 + 1e-12)), np.inf)
        most = np.where(room < limit.first, 0.0, np.maximum(most, box.low))
        high = np.minimum(high, np.minimum(most, 2**62).astype(np.int64))
    return Box(box.low, high) if (box.low <= high).all() else None


def units_in_use(problem: Problem, drive_ma: Mapping[str, float], emitters: Mapping[str, int] | None) -> Units:
    """Units a recipe uses: of each lit LED what it states or all, and one at least of each must-have LED. (L,)"""
    most, low = most_units(problem), root_box(problem).low
    lit = np.array([drive_ma.get(channel.id, 0.0) > 0 for channel in problem.channels])
    stated = np.array([(emitters or {}).get(c.id, int(m)) for c, m in zip(problem.channels, most, strict=True)])
    known = np.array([channel.id in (emitters or {}) for channel in problem.channels])
    units = np.where(lit | known, stated if free(problem) else most, 0)
    return np.maximum(units, low).astype(np.int64)
