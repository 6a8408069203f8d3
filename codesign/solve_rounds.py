"""Rounds of the walk: until the junction temperatures assumed agree with the best recipe, or it is time to stop."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from codesign.assemble import Assembly, flipped
from codesign.assemble_conflicts import require_usable_leds
from codesign.build import require_buildable
from codesign.certificate_build import build_space
from codesign.design import evaluate
from codesign.problem import Problem
from codesign.problem.choices import FilterChoices
from codesign.program import Array
from codesign.recipe import design_at
from codesign.search.build import Built, polish_build
from codesign.search.frontier import Certified, certify
from codesign.search.pairs import CertifiedPairs, polish_pairs
from codesign.search.walk import Configuration, Walk

#: Junction temperatures assumed and reached agree to this. [K]
JUNCTION_TOLERANCE_K = 0.002
#: The winner itself is worked out to this gap, so that its settings do not depend on luck.
POLISH_GAP = 1e-5
#: Gap of the first round.
SCOUT_GAP = 0.03
#: Rounds before steps are halved.
PLAIN_ROUNDS = 3
#: Rounds of the outer and inner loop over junction temperatures.
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
    clock = Clock() if clock is None else clock
    junction = np.full(len(problem.channels), problem.spec.temperature.air_c)
    last, seed = None, None
    if start is not None and start.best is not None:
        junction, seed = start.walk.assembly.junction_c, (start.known, start.walk.found[start.best])
    for attempt in range(LARGEST_NUMBER_OF_ROUNDS):
        # The first round only has to find the temperatures; a later one proves.
        scout = attempt == 0 and seed is None
        walk = None
        try:
            assembly = Assembly(_singles(problem) if scout else problem, junction)
            walk = Walk(assembly, max(gap, SCOUT_GAP) if scout else gap, progress, clock, enough)
            if seed is not None:
                walk.seed(*seed)
            best = walk.best()
        except KeyboardInterrupt:
            clock.interrupted = True
            best = None if walk is None else walk.leader
            if last is None and best is None:
                raise
        partly = scout and walk is not None and walk.assembly.problem is not problem
        if best is None and partly:
            continue
        if best is None:
            return last if clock() and last is not None else Search(walk, None, clock())
        found = Search(walk, best, clock())
        if found.stopped and partly:  # the bounds of all pairs must still be worked out
            seed = (found.known, walk.found[best])
            continue
        if found.stopped and last is not None and last.gap < found.gap:
            return Search(last.walk, last.best, True)
        if found.stopped:
            return found
        last, seed = None if partly else found, (found.known, walk.found[best])
        residual, settled = settle(problem, *seed, junction, min(gap, POLISH_GAP))
        moved = float(np.max(np.abs(settled - junction), initial=0.0))
        if min(residual, moved) <= JUNCTION_TOLERANCE_K and not scout:
            break
        junction = settled
    return last


def _singles(problem: Problem) -> Problem:
    """The problem without filter pairs, which come after the single filters: enough to find the temperatures."""
    choices = FilterChoices.of(problem.filters)
    single = int(np.sum(choices.members[:, 1] < 0))
    return problem if single in (0, len(choices)) else replace(problem, filters=choices[:single])


def settle(
    problem: Problem,
    configuration: Configuration,
    found: Certified | CertifiedPairs | Built,
    junction: Array,
    gap: float,
) -> tuple[float, Array]:
    """Iterate one configuration's junction temperatures to self-consistency, from its optimum at ``junction``.

    Returns how far ``junction`` is from what its own optimum leads to [K], and the settled temperatures (L,). LEDs
    that are off keep the temperature they last had when lit, so that none looks cooler than it would be in use.
    """
    first, setting, part = None, configuration.setting, np.array([configuration.filter])
    for attempt in range(LARGEST_NUMBER_OF_ROUNDS):
        assembly = Assembly(problem, junction)
        programs = [assembly.program(setting, part, pair=pair) for pair in range(len(problem.pairs))]
        if configuration.sign < 0:
            programs = [flipped(program) for program in programs]
        if isinstance(found, Built):
            space = build_space(problem, setting.camera, configuration.filter)
            found = polish_build(programs, space, replace(found, value=0.0), gap)
        else:
            found = certify(programs[0], gap) if len(programs) == 1 else polish_pairs(programs, found)
        units = getattr(found, "units", None)
        design = design_at(assembly, setting, configuration.filter, found.point, units)
        reached = evaluate(problem, design).junctions(problem, junction)
        residual = float(np.max(np.abs(reached - junction), initial=0.0))
        first = residual if first is None else first
        if residual <= 0.1 * JUNCTION_TOLERANCE_K:
            break
        # Where two recipes are equally good each may heat the other's way; half-way they agree best.
        junction = reached if attempt < PLAIN_ROUNDS else (junction + reached) / 2
    return first, junction
