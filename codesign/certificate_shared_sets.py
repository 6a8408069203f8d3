"""Which sets of LEDs meet all cuts: exhaustive branching, the last step of the proof of a rig in common.

Sets are small and a cut says of which LEDs one at least is needed, so branching on the LEDs of a cut not met yet, each
time without those tried before, runs through all sets that matter quickly. No solver is imported.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from codesign.build import ROUND_OFF, build_limits, root_box
from codesign.certificate_shared import bits, members
from codesign.errors import CertificateError
from codesign.problem import Problem

#: Branches after which the exhaustive search gives up rather than run for hours.
LARGEST_NUMBER_OF_BRANCHES = 400_000
#: Totals of weights that differ by less are equal.
EQUAL = 1e-9


@dataclass(frozen=True, slots=True)
class Room:
    """Sets of LEDs that may be built: ``Σ cost ≤ most`` for every row of ``cost`` (R, L); those ``forced`` are in."""

    cost: tuple[tuple[float, ...], ...]
    most: tuple[float, ...]
    forced: int
    leds: int

    @classmethod
    def of(cls, problem: Problem, other_price: float = 0.0) -> Room:
        """Room that the build limits of a problem leave beside a camera and a filter of that price."""
        limits = build_limits(problem, other_price)
        units = np.ones(len(problem.channels), dtype=np.int64)
        return cls(
            cost=tuple(tuple(limit.cost(units).tolist()) for limit in limits),
            most=tuple(limit.bound + ROUND_OFF * abs(limit.bound) for limit in limits),
            forced=bits(root_box(problem).low > 0),
            leds=len(problem.channels),
        )

    def left(self, chosen: int) -> tuple[float, ...]:
        """What a set leaves of each limit."""
        own = members(chosen)
        return tuple(most - sum(row[j] for j in own) for row, most in zip(self.cost, self.most, strict=True))

    def fits(self, led: int, left: Sequence[float]) -> bool:
        """Whether one more LED fits."""
        return all(row[led] <= rest for row, rest in zip(self.cost, left, strict=True))

    def allows(self, chosen: int) -> bool:
        """Whether a set may be built."""
        return chosen & self.forced == self.forced and all(rest >= 0 for rest in self.left(chosen))

    def count(self, left: Sequence[float]) -> int:
        """How many more LEDs can fit at most."""
        most = self.leds
        for row, rest in zip(self.cost, left, strict=True):
            least = min(row)
            if least > 0:
                most = min(most, int(rest / least * (1 + 1e-12)))
        return max(most, 0)


class _Branching:
    """What both searches share: which LEDs fit, and how many cuts can be met with those that do."""

    def __init__(self, room: Room, liking: Sequence[float] | None) -> None:
        self.room = room
        self.liking = [0.0] * room.leds if liking is None else [float(value) for value in liking]
        self.branches = 0

    def step(self) -> None:
        self.branches += 1
        if self.branches > LARGEST_NUMBER_OF_BRANCHES:
            raise CertificateError(
                f"certificate: more than {LARGEST_NUMBER_OF_BRANCHES} branches over sets of LEDs; allow fewer channels"
            )

    def barred(self, left: Sequence[float]) -> int:
        """LEDs that do not fit any more."""
        return sum(1 << led for led in range(self.room.leds) if not self.room.fits(led, left))

    def ordered(self, cut: int, unmet: Iterable[int]) -> list[int]:
        """LEDs of a cut, those that meet most of the unmet cuts first."""
        unmet = list(unmet)
        return sorted(members(cut), key=lambda j: (-sum(c >> j & 1 for c in unmet), -self.liking[j], j))


def apart(cuts: Iterable[int]) -> int:
    """A number of cuts without an LED in common: as many LEDs at least are needed to meet them all."""
    taken = count = 0
    for cut in sorted(cuts, key=int.bit_count):
        if not cut & taken:
            taken |= cut
            count += 1
    return count


def cheapest_set(
    cuts: Sequence[int],
    room: Room,
    price: Sequence[float] | None = None,
    below: float = np.inf,
    liking: Sequence[float] | None = None,
) -> int | None:
    """Set of LEDs of least price that meets every cut, by exhaustive branching.

    Parameters
    ----------
    cuts : sequence of int
        Bit masks of the LEDs of which one at least is needed.
    room : Room
    price : sequence of float, optional
        Price of each LED ≥ 0; all 0 by default, when any set will do.
    below : float
        Only sets of a lower price count.
    liking : sequence of float, optional
        Of LEDs that meet as many cuts those liked best are tried first.

    Returns
    -------
    int or None
        Bit mask of the set; None where there is none: a proof, since every set was ruled out.

    Raises
    ------
    CertificateError
        When there is too much to try.
    """
    search = _Branching(room, liking)
    price = [0.0] * room.leds if price is None else [float(value) for value in price]
    best: list = [below, None]

    def branch(chosen: int, barred: int, left: tuple[float, ...], spent: float, unmet: list[int]) -> None:
        search.step()
        barred |= search.barred(left)
        unmet = [open_ for cut in unmet if not cut & chosen for open_ in (cut & ~barred,)]
        least = spent
        for cut in unmet:
            if not cut:
                return
            least = max(least, spent + min(price[j] for j in members(cut)))
        if least >= best[0]:
            return
        if not unmet:
            best[:] = spent, chosen
            return
        if apart(unmet) > room.count(left):
            return
        cut = min(unmet, key=int.bit_count)
        for led in search.ordered(cut, unmet):
            rest = tuple(have - row[led] for have, row in zip(left, room.cost, strict=True))
            branch(chosen | 1 << led, barred, rest, spent + price[led], unmet)
            barred |= 1 << led

    left = room.left(room.forced)
    if all(rest >= 0 for rest in left):
        branch(room.forced, 0, left, sum(price[j] for j in members(room.forced)), list(dict.fromkeys(cuts)))
    return best[1]


def most_served(
    cuts: Sequence[Sequence[int]],
    weight: Sequence[float],
    room: Room,
    above: float = 0.0,
    liking: Sequence[float] | None = None,
) -> tuple[float, int] | None:
    """Greatest total weight of variants all of whose cuts one set of LEDs meets, by exhaustive branching.

    Parameters
    ----------
    cuts : sequence of sequences of int
        Of each variant the bit masks of the LEDs of which one at least is needed.
    weight : sequence of float
        Of each variant, ≥ 0.
    room : Room
    above : float
        Only larger totals count.
    liking : sequence of float, optional
        As of `cheapest_set`.

    Returns
    -------
    (float, int) or None
        Total and bit mask of the set; None where no total is larger: a proof.
    """
    search = _Branching(room, liking)
    best: list = [above, None]

    def branch(chosen: int, barred: int, left: tuple[float, ...], alive: list[tuple[float, list[int]]]) -> None:
        search.step()
        barred |= search.barred(left)
        most, now = room.count(left), []
        for own, unmet in alive:
            unmet = [cut & ~barred for cut in unmet if not cut & chosen]
            if all(unmet) and apart(unmet) <= most:
                now.append((own, unmet))
        total = sum(own for own, _ in now)
        if total <= best[0] + EQUAL:
            return
        waiting = [(own, unmet) for own, unmet in now if unmet]
        if not waiting:
            best[:] = total, chosen
            return
        _, unmet = max(waiting, key=lambda item: (item[0], -min(map(int.bit_count, item[1]))))
        cut = min(unmet, key=int.bit_count)
        for led in search.ordered(cut, (c for _, some in waiting for c in some)):
            rest = tuple(have - row[led] for have, row in zip(left, room.cost, strict=True))
            branch(chosen | 1 << led, barred, rest, now)
            barred |= 1 << led
        branch(chosen, barred, left, now)  # without any of them: the variant goes unserved

    left = room.left(room.forced)
    if all(rest >= 0 for rest in left):
        pairs = zip(weight, cuts, strict=True)
        branch(room.forced, 0, left, [(float(w), list(dict.fromkeys(own))) for w, own in pairs if w > 0])
    return None if best[1] is None else (best[0], best[1])


def serving_set(
    needs: Sequence[Sequence[Sequence[int]]], room: Room, liking: Sequence[float] | None = None
) -> int | None:
    """Set of LEDs with which every variant has a choice all of whose cuts are met, by exhaustive branching.

    Parameters
    ----------
    needs : sequence of sequences of sequences of int
        Of each variant its choices (filters of a wheel), of each choice the LEDs of which one at least is needed.
    room : Room
    liking : sequence of float, optional
        As of `cheapest_set`.

    Returns
    -------
    int or None
        Bit mask of the set; None where there is none: a proof.
    """
    search = _Branching(room, liking)

    def branch(chosen: int, barred: int, left: tuple[float, ...], waiting: list[list[list[int]]]) -> int | None:
        search.step()
        barred |= search.barred(left)
        most, unions, still = room.count(left), [], []
        for choices in waiting:
            unmet = [[cut & ~barred for cut in own if not cut & chosen] for own in choices]
            if not all(unmet):
                continue  # a choice has all its cuts met
            alive = [own for own in unmet if all(own) and apart(own) <= most]
            if not alive:
                return None
            # Whichever choice serves, an LED of its smallest cut is needed: one of all these together.
            unions.append(0)
            for own in alive:
                unions[-1] |= min(own, key=int.bit_count)
            still.append(alive)
        if not still:
            return chosen
        if apart(unions) > most:
            return None
        cut = min(unions, key=int.bit_count)
        for led in search.ordered(cut, unions):
            rest = tuple(have - row[led] for have, row in zip(left, room.cost, strict=True))
            found = branch(chosen | 1 << led, barred, rest, still)
            if found is not None:
                return found
            barred |= 1 << led
        return None

    left = room.left(room.forced)
    if not all(rest >= 0 for rest in left):
        return None
    return branch(room.forced, 0, left, [[list(own) for own in choices] for choices in needs])
