"""Search for the rig in common: sets of LEDs that meet all cuts known, more cuts where they fall short.

The cuts of a rig say which LEDs each variant cannot do without. A set of LEDs that meets them all is put to the test;
variants that fall short of their level give further cuts, until a set passes or no set meets all cuts, which proves
that the rig cannot do it. Cuts found on one rig are tried on the next: similar rigs lack the same LEDs.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field, replace
from typing import Protocol

import numpy as np

from codesign.certificate_shared import Cut, Mask, bits, mask_of
from codesign.certificate_shared_sets import Room, cheapest_set
from codesign.program import Array
from codesign.search import never
from codesign.search.shared import REACHED, Judge, Reached
from codesign.search.shared_space import RigSpace

#: Variants that clearly fall short which give a cut each before the next set is tried.
CUTS_AT_ONCE = 3
#: Sets of LEDs of each variant's cuts that are tried on further rigs.
SETS_REMEMBERED = 6


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """A rig with its LEDs (L,), what it is worth to the goal, and recipes of variants looked at, by position."""

    rig: int
    leds: Mask
    value: float
    recipes: dict[int, Reached] = field(repr=False)

    def places(self, count: int) -> list[tuple[int, Mask]]:
        """Rig and LEDs of each of ``count`` variants."""
        return [(self.rig, self.leds)] * count

    def boards(self, count: int) -> list[int]:
        """Which of ``count`` variants have their LEDs in common: all."""
        return [0] * count

    def with_boards(self, leds: Sequence[Mask]) -> Found:
        """The same with other LEDs."""
        return replace(self, leds=leds[0])


class Placed(Protocol):
    """What a search can find: for each variant a rig and LEDs."""

    value: float

    def boards(self, count: int) -> list[int]:
        """Number of the board of LEDs that each of ``count`` variants uses."""
        ...

    def with_boards(self, leds: Sequence[Mask]) -> Placed:
        """The same with other LEDs on the boards."""
        ...

    def places(self, count: int) -> list[tuple[int, Mask]]:
        """Rig and LEDs of each of ``count`` variants."""
        ...


@dataclass(slots=True, eq=False)
class Outcome:
    """What a search ended with: the best rig found, what no rig exceeds (C,), and whether it ended early.

    For a price, what each rig costs at least.
    """

    best: Placed | None
    proven: Array
    stopped: bool


@dataclass(slots=True, eq=False)
class Hunt:
    """Cuts and sets known of all rigs, over all variants of a family at stated junction temperatures."""

    variants: Sequence[Judge]
    space: RigSpace
    stop: Callable[[], bool] = never
    #: Whether any rig was found that will do: only then may the hunt end early.
    any_found: bool = False
    #: Cuts of each rig, with the position of their variant and the level they were made for.
    cuts: dict[int, list[tuple[int, Cut, float]]] = field(default_factory=dict)
    #: LEDs that reached a level: of each rig and variant, bits and level.
    passed: dict[tuple[int, int], list[tuple[int, float]]] = field(default_factory=dict)
    sets: list[dict[bytes, Mask]] = field(init=False)
    #: How often each variant fell short, and how much each LED was missed.
    trouble: Array = field(init=False)
    missed: Array = field(init=False)

    def __post_init__(self) -> None:
        self.sets = [{} for _ in self.variants]
        self.trouble = np.zeros(len(self.variants))
        self.missed = np.zeros(self.leds)

    def over(self) -> bool:
        """Whether it is time to stop, and there is something to show."""
        return self.any_found and self.stop()

    @property
    def leds(self) -> int:
        """Number of LED channels there are to choose from."""
        return len(self.space.problem.channels)

    @property
    def everyone(self) -> range:
        """Positions of all variants."""
        return range(len(self.variants))

    def in_order(self, wanted: Sequence[int] | None = None) -> list[int]:
        """Variants, those that fell short most often first."""
        wanted = self.everyone if wanted is None else wanted
        return sorted(wanted, key=lambda v: -self.trouble[v])

    def uppers(self) -> Array:
        """Bound of every variant on every rig with all LEDs, infinite where unknown. (V, C)"""
        return np.stack([variant.upper for variant in self.variants])

    def learn_from(self, other: Hunt) -> None:
        """Start with what a hunt at other junction temperatures found worth trying."""
        self.sets = [dict(known) for known in other.sets]
        self.trouble, self.missed = other.trouble.copy(), other.missed.copy()

    def needs(self, rig: int, levels: Array, *, strict: bool = False) -> list[list[int]]:
        """Of each variant the LEDs of which it needs one at least, as bit masks; 0 where it cannot reach its level.

        ``strict`` leaves out cuts whose proof falls short of the level: they are good for a search, but no proof.
        """
        any_led = (1 << self.leds) - 1  # a rig has one LED at least
        found = [
            [0 if variant.upper[rig] < level else any_led] for variant, level in zip(self.variants, levels, strict=True)
        ]
        for place, cut, asked in self.cuts.get(rig, ()):
            if cut.level < levels[place] or (not strict and asked <= levels[place]):
                found[place].append(cut.outside)
        return found

    def doubtful(self, rig: int) -> list[float]:
        """Levels of the cuts of a rig whose proof fell short of what was asked, ascending."""
        return sorted(cut.level for _, cut, asked in self.cuts.get(rig, ()) if cut.level >= asked)

    def recalled(self, rig: int, levels: Array) -> Iterator[None]:
        """Try the sets of cuts found elsewhere on a rig not looked at yet; yields after each that holds here too."""
        if rig in self.cuts:
            return
        self.cuts[rig] = []
        for place in self.in_order():
            variant, level = self.variants[place], float(levels[place])
            if self.trouble[place] == 0 or variant.upper[rig] < level:
                continue
            for inside in reversed(list(self.sets[place].values())):
                cut = variant.tried(rig, inside, level)
                if cut is not None:
                    self.cuts[rig].append((place, cut, level))
                    self._freshen(place, inside)
                    yield
                    break

    def recall(self, rig: int, levels: Array) -> None:
        """Try the sets of cuts found elsewhere, all of them."""
        for _ in self.recalled(rig, levels):
            pass

    def filled(self, chosen: int, room: Room) -> Mask:
        """A set of LEDs with as many more as find room, those missed most first."""
        left = room.left(chosen)
        for led in map(int, np.argsort(-self.missed, kind="stable")):
            if not chosen >> led & 1 and room.fits(led, left):
                chosen |= 1 << led
                left = room.left(chosen)
        return mask_of(chosen, self.leds)

    def short(self, rig: int, inside: Mask, levels: Array, wanted: Sequence[int]) -> bool:
        """Whether any of the variants wanted falls short of its level; what they lack is added to the cuts.

        Variants that never fell short come last. Of either group, first those that the closed form shows to fall
        short; else one after the other until one does.
        """
        own = bits(inside)
        wanted = [v for v in self.in_order(wanted) if not self._known(rig, v, own, levels[v])]
        known = [v for v in wanted if self.trouble[v] > 0]
        return any(self._short(rig, inside, levels, group) for group in (known, [v for v in wanted if v not in known]))

    def _short(self, rig: int, inside: Mask, levels: Array, wanted: Sequence[int]) -> bool:
        one = np.arange(len(self.space)) == rig
        bounds = {}
        for v in wanted:
            self.variants[v].look(one)
            bounds[v] = float(self.variants[v].closed_of_rig(rig, inside[None], levels[v])[0])
        clear = sorted((v for v in wanted if bounds[v] < levels[v]), key=lambda v: bounds[v] / levels[v])
        for place in clear[:CUTS_AT_ONCE] or wanted:
            found = self.variants[place].cut(rig, inside, float(levels[place]))
            if isinstance(found, Reached):
                self.remember(rig, place, inside, found)
                continue
            self.keep(rig, place, found, float(levels[place]))
            if not clear:
                return True
        return bool(clear)

    def _known(self, rig: int, place: int, own: int, level: float) -> bool:
        """Whether a recipe is known that reaches a level with some of these LEDs."""
        return any(known & own == known and value >= level for known, value in self.passed.get((rig, place), ()))

    def keep(self, rig: int, place: int, cut: Cut, asked: float) -> None:
        """Note a cut, for this rig and those to come."""
        self.cuts.setdefault(rig, []).append((place, cut, asked))
        self.trouble[place] += 1
        outside = ~cut.inside
        self.missed += outside / max(int(outside.sum()), 1)
        self._freshen(place, cut.inside)

    def _freshen(self, place: int, inside: Mask) -> None:
        """Put a set of LEDs first among those to try."""
        known, key = self.sets[place], inside.tobytes()
        known.pop(key, None)
        known[key] = inside
        if len(known) > SETS_REMEMBERED:
            known.pop(next(iter(known)))

    def remember(self, rig: int, place: int, inside: Mask, found: Reached) -> None:
        """Note the LEDs a recipe lights: no other set with them falls short of its CNR."""
        program = self.variants[place].programs(rig, found.configuration, coarse=False)[0]
        lit = np.zeros(self.leds, dtype=bool)
        lit[program.led[inside[program.led]][found.point[:-1] > 0]] = True
        self.passed.setdefault((rig, place), []).append((bits(lit), found.value * (1 + 2 * REACHED)))

    def serving(self, rig: int, levels: Array) -> Mask | None:
        """A set of LEDs with which every variant reaches its level on a rig; None where there is none, or no time."""
        room = self.space.room(rig)
        for _ in self.recalled(rig, levels):
            if self._meeting(rig, levels, room) is None:
                return None
        while not self.over():
            chosen = self._meeting(rig, levels, room)
            if chosen is None:
                return None
            inside = self.filled(chosen, room)
            if not self.short(rig, inside, levels, self.everyone):
                return inside
        return None

    def _meeting(self, rig: int, levels: Array, room: Room) -> int | None:
        """A set of LEDs that meets all cuts."""
        needs = [cut for own in self.needs(rig, levels) for cut in own]
        return cheapest_set(needs, room, liking=self.missed)

    def recipes(self, rig: int, inside: Mask, least: Array) -> dict[int, Reached]:
        """Best recipe of every variant on a rig with its LEDs; ``least`` (V,) are levels known to be reached."""
        one = np.arange(len(self.space)) == rig
        found = {}
        for v, variant in enumerate(self.variants):
            variant.look(one)
            found[v] = variant.best(rig, inside, float(least[v]))
        return found
