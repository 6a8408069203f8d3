"""Rounds of the walk: until the junction temperatures assumed agree with the best recipe, or it is time to stop."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from codesign.assemble import Assembly
from codesign.assemble_conflicts import require_usable_leds
from codesign.build import choosing, require_buildable
from codesign.design import Design
from codesign.problem import Problem
from codesign.problem.choices import FilterChoices
from codesign.program import Array
from codesign.recipe import Found
from codesign.search.carry import carry
from codesign.search.walk import Configuration, Walk
from codesign.solve_settle import JUNCTION_TOLERANCE_K, Settled, offer, settle

#: The winner itself is worked out to this gap, so that its settings do not depend on luck.
POLISH_GAP = 1e-6
#: Gap of the first round, and where each configuration takes long.
SCOUT_GAP, ROUGH_SCOUT_GAP = 0.003, 0.03
#: Rounds over junction temperatures.
LARGEST_NUMBER_OF_ROUNDS = 8


@dataclass(slots=True)
class Clock:
    """When to stop: at a time, or once interrupted."""

    end: float = np.inf
    interrupted: bool = False

    @classmethod
    def lasting(cls, seconds: float | None) -> Clock:
        """Start now."""
        return cls() if seconds is None else cls(time.perf_counter() + seconds)

    def __call__(self) -> bool:
        """Whether it is time to stop."""
        return self.interrupted or time.perf_counter() >= self.end


@dataclass(frozen=True, slots=True)
class Search:
    """Where the rounds over junction temperatures ended: the last walk, its best configuration (None: no contrast)."""

    walk: Walk
    best: int | None
    stopped: bool

    @property
    def known(self) -> Configuration:
        """The best configuration."""
        return self.walk.configuration(self.best)

    @property
    def gap(self) -> float:
        """Relative gap of the best."""
        return float(self.walk.upper.max()) / self.walk.found[self.best].value - 1


def search_rounds(
    problem: Problem,
    gap: float,
    *,
    progress: Callable[[float, float], None] | None = None,
    clock: Clock | None = None,
    enough: float | None = None,
    start: Search | None = None,
) -> Search:
    """Walk over all configurations, again at the junction temperatures found until these agree with the best recipe.

    ``enough`` ends the walk at that CNR; ``start`` is a search of a similar problem, for its temperatures and its
    best. An interrupt keeps what is known, once anything is.
    """
    require_usable_leds(problem)
    require_buildable(problem)
    junction = np.full(len(problem.channels), problem.spec.temperature.air_c)
    rounds = _Rounds(problem, gap, progress, Clock() if clock is None else clock, enough, junction)
    if start is not None and start.best is not None:
        rounds.junction = start.walk.assembly.junction_c
        rounds.seed = Seed(start.known, start.walk.found[start.best])
    for attempt in range(LARGEST_NUMBER_OF_ROUNDS):
        # The first round only has to find the temperatures; a later one proves.
        done = rounds.next(scout=attempt == 0 and rounds.seed is None)
        if done is not None:
            return done
    return rounds.last


@dataclass(frozen=True, slots=True)
class Seed:
    """A configuration likely to be best, what is known of it, and its recipe where that is settled."""

    known: Configuration
    found: Found | None
    design: Design | None = None

    def plant(self, walk: Walk, gap: float) -> None:
        """Certify it first, so that others are dropped sooner."""
        walk.seed(self.known, self.found)
        if self.design is not None:
            offer(walk, walk.number(self.known), self.design, gap)


@dataclass(slots=True)
class _Rounds:
    """Where to go on: temperatures, what to look at first, the last walk, and the configurations settled so far."""

    problem: Problem
    gap: float
    progress: Callable[[float, float], None] | None
    clock: Clock
    enough: float | None
    junction: Array
    seed: Seed | None = None
    before: Walk | None = None
    last: Search | None = None
    settled: dict[Configuration, Settled] = field(default_factory=dict)

    def next(self, *, scout: bool) -> Search | None:
        """Walk once more; return the search where it ends."""
        walk, best = self._walk(scout=scout)
        self.before = walk
        partly = scout and walk is not None and walk.assembly.problem is not self.problem
        if best is None:
            if partly:
                return None
            return self.last if self.clock() and self.last is not None else Search(walk, None, self.clock())
        found = Search(walk, best, self.clock())
        if found.stopped and partly:  # the bounds of all pairs must still be worked out
            self.seed = Seed(found.known, walk.found[best])
            return None
        if found.stopped and self.last is not None and self.last.gap < found.gap:
            return Search(self.last.walk, self.last.best, True)
        if found.stopped:
            return found
        self.last = None if partly else found
        return self._agreed(found, scout=scout)

    def _walk(self, *, scout: bool) -> tuple[Walk | None, int | None]:
        """A walk at the present temperatures and its best configuration; what is known so far at an interrupt."""
        walk, before = None, self.before
        try:
            problem = _singles(self.problem) if scout else self.problem
            near = before is not None and before.assembly.problem is problem
            assembly = before.assembly.at(self.junction, hand_over=True) if near else Assembly(problem, self.junction)
            gap = max(self.gap, scout_gap(self.problem)) if scout else self.gap
            walk = Walk(assembly, gap, self.progress, self.clock, self.enough)
            if self.seed is not None:
                self.seed.plant(walk, min(self.gap, POLISH_GAP))
            if before is not None and walk.leader is not None:
                carry(walk, before, walk.aim)
            return walk, walk.best()
        except KeyboardInterrupt:
            self.clock.interrupted = True
            best = None if walk is None else walk.leader
            if self.last is None and best is None:
                raise
            return walk, best

    def _agreed(self, found: Search, *, scout: bool) -> Search | None:
        """Return the search where its temperatures agree with its best recipe, else go on to others."""
        walk, best = found.walk, found.best
        if walk.settled and best not in walk.settled and found.known in self.settled:
            return self._champion(walk)  # each heats the other's way
        own = settle(self.problem, found.known, walk.found[best], self.junction, min(self.gap, POLISH_GAP))
        if own.residual_k <= JUNCTION_TOLERANCE_K and not scout:
            most = max((known.value for known in self.settled.values()), default=0.0)
            return found if most <= walk.found[best].value * (1 + POLISH_GAP) else self._champion(walk)
        self.settled[found.known] = own
        self.junction, self.seed = own.junction_c, Seed(found.known, walk.found[best], own.design)
        return None

    def _champion(self, walk: Walk) -> Search | None:
        """End with the configuration that does best at its own temperatures, once the walk has been there."""
        known = max(self.settled, key=lambda one: self.settled[one].value)
        number = walk.number(known)
        if number in walk.settled:
            return Search(walk, number, False)
        self.junction = self.settled[known].lit_at(self.problem, self.junction)
        self.seed = Seed(known, walk.found.get(number), self.settled[known].design)
        return None


def scout_gap(problem: Problem) -> float:
    """Gap of the first round: small where what it proves is carried on, else just small enough to find the best."""
    return ROUGH_SCOUT_GAP if len(problem.pairs) > 1 or choosing(problem) else SCOUT_GAP


def _singles(problem: Problem) -> Problem:
    """The problem without filter pairs, which come after the single filters: enough to find the temperatures."""
    choices = FilterChoices.of(problem.filters)
    single = int(np.sum(choices.members[:, 1] < 0))
    return problem if single in (0, len(choices)) else replace(problem, filters=choices[:single])
