"""Find the configuration and settings of provably greatest CNR, consistent with the LEDs' own warming."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from codesign.assemble import Assembly, flipped
from codesign.assemble_conflicts import no_step_fits, nothing_seen, require_usable_leds
from codesign.certificate import check_point
from codesign.design import Design, Performance, evaluate
from codesign.problem import Problem
from codesign.program import Array
from codesign.recipe import design_at, settable
from codesign.search.frontier import Certified, certify
from codesign.search.walk import Configuration, Evidence, Tally, Walk

#: Junction temperatures assumed and reached agree to this. [K]
JUNCTION_TOLERANCE_K = 0.02
#: The winner itself is worked out to this gap, so that its settings do not depend on luck.
POLISH_GAP = 1e-5
#: Gap of the first round.
SCOUT_GAP = 0.03
#: Rounds of the outer and inner loop over junction temperatures.
LARGEST_NUMBER_OF_ROUNDS = 8


@dataclass(frozen=True, slots=True, kw_only=True)
class Certificate:
    """What is proven: no configuration, at the junction temperatures stated, has a CNR above ``bound``.

    ``junction_residual_k`` is the largest difference between a lit LED's temperature assumed and reached,
    ``cnr_residual`` what that changes of the CNR (relative), ``forward_residual`` how far the forward model is from
    the optimiser's arrays at equal temperatures (relative).
    """

    value: float
    bound: float
    configurations: int
    refined: int
    certified: int
    junction_c: Mapping[str, float]
    junction_residual_k: float
    cnr_residual: float
    forward_residual: float

    @property
    def gap(self) -> float:
        """Relative distance from value to bound."""
        return self.bound / self.value - 1 if self.value > 0 else np.inf


@dataclass(frozen=True, slots=True, kw_only=True)
class Alternative:
    """A certified runner-up with another camera or filter: its optimum, before rounding."""

    design: Design
    cnr: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Solution:
    """The optimum, the settable recipe near it, and the proof.

    ``optimum`` is the continuous optimum, ``recipe`` the same in whole setting steps (what to dial in). ``winner``,
    ``point`` and ``evidence`` are what `codesign.verify` re-derives the proof from.
    """

    problem: Problem = field(repr=False)
    optimum: Performance
    recipe: Performance
    certificate: Certificate
    alternatives: tuple[Alternative, ...]
    seconds: float
    winner: int = field(repr=False)
    point: Array = field(repr=False)
    evidence: tuple[Evidence, ...] = field(repr=False)

    @property
    def rounding_loss(self) -> float:
        """How far the settable recipe may be below the best possible: 1 − CNR / proven bound."""
        return 1 - self.recipe.cnr / self.certificate.bound

    @property
    def binding(self) -> tuple[str, ...]:
        """Limits the optimum touches."""
        return tuple(limit.name for limit in self.optimum.limits if limit.share >= 0.999)


def solve(
    problem: Problem,
    *,
    gap: float | None = None,
    alternatives: int | None = None,
    progress: Callable[[float, float], None] | None = None,
) -> Solution:
    """Find the recipe of greatest CNR over all configurations, with a checked proof.

    Parameters
    ----------
    problem : Problem
    gap : float, optional
        Relative gap to prove; the problem's own by default. [1]
    alternatives : int, optional
        Number of certified runners-up; the problem's own by default.
    progress : callable, optional
        Called with (best CNR so far, bound so far).

    Returns
    -------
    Solution

    Raises
    ------
    InfeasibleError
        When the limits cannot be met together, or no light can be brought to the object; names the limits.
    CertificateError
        When a result fails its check.

    Examples
    --------
    >>> from codesign import load_problem, solve
    >>> solve(load_problem("yellow-stain")).certificate.gap < 1e-3
    True
    """
    started = time.perf_counter()
    require_usable_leds(problem)
    gap = problem.spec.solver.gap if gap is None else gap
    wanted = problem.spec.solver.alternatives if alternatives is None else alternatives
    junction = np.full(len(problem.channels), problem.spec.temperature.air_c)
    known: Configuration | None = None
    for attempt in range(LARGEST_NUMBER_OF_ROUNDS):
        # The first round only has to find the temperatures; a later one proves.
        walk = Walk(Assembly(problem, junction), max(gap, SCOUT_GAP) if attempt == 0 else gap, progress)
        if known is not None:
            walk.seed(known)
        best = walk.best()
        if best is None:
            raise nothing_seen(walk.assembly)
        known = walk.configuration(best)
        result = walk.found[best]
        residual, settled = settle(problem, known, junction, min(gap, POLISH_GAP))
        if residual <= JUNCTION_TOLERANCE_K and walk.gap <= gap:
            break
        junction = settled
    result = walk.polish(best, min(gap, POLISH_GAP))
    design = design_at(walk.assembly, known.setting, known.filter, result.point)
    optimum = evaluate(problem, design)
    rounded = settable(problem, design)
    if rounded is None or (optimum.leds and not rounded[1].leds):
        raise no_step_fits(problem)
    return Solution(
        problem=problem,
        optimum=optimum,
        recipe=rounded[1],
        certificate=_certificate(walk, best, known, result, design, optimum),
        alternatives=tuple(_alternatives(walk, best, wanted)),
        seconds=time.perf_counter() - started,
        winner=best,
        point=result.point,
        evidence=tuple(walk.evidence),
    )


def settle(problem: Problem, configuration: Configuration, junction: Array, gap: float) -> tuple[float, Array]:
    """Iterate one configuration's junction temperatures to self-consistency.

    Returns how far ``junction`` is from what its own optimum leads to [K], and the settled temperatures (L,). LEDs
    that are off keep the temperature they last had when lit, so that none looks cooler than it would be in use.
    """
    first = None
    for _ in range(LARGEST_NUMBER_OF_ROUNDS):
        assembly = Assembly(problem, junction)
        program = assembly.program(configuration.setting, np.array([configuration.filter]))
        result = certify(program if configuration.sign > 0 else flipped(program), gap)
        design = design_at(assembly, configuration.setting, configuration.filter, result.point)
        reached = _reached(problem, evaluate(problem, design), junction)
        residual = float(np.max(np.abs(reached - junction), initial=0.0))
        first = residual if first is None else first
        if residual <= 0.1 * JUNCTION_TOLERANCE_K:
            break
        junction = reached
    return first, junction


def _reached(problem: Problem, performance: Performance, junction: Array) -> Array:
    """Junction temperatures of a recipe; LEDs that are off keep those assumed."""
    states = {state.id: state.junction_c for state in performance.leds}
    return np.array([states.get(c.id, t) for c, t in zip(problem.channels, junction, strict=True)])


def _certificate(walk: Walk, best: int, known, result: Certified, design: Design, optimum: Performance) -> Certificate:
    """Check the winner with code that knows no solver, and put the numbers of the proof together."""
    problem = walk.assembly.problem
    check_point(walk.programs(np.array([best]), coarse=False), result.point, result.value)
    assumed = {c.id: float(t) for c, t in zip(problem.channels, walk.assembly.junction_c, strict=True)}
    same = evaluate(problem, design, junction_c=assumed)
    tally: Tally = walk.tally
    return Certificate(
        value=result.value,
        bound=max(float(walk.upper.max()), result.value),
        configurations=tally.configurations,
        refined=tally.refined,
        certified=tally.certified,
        junction_c=assumed,
        junction_residual_k=max((abs(s.junction_c - assumed[s.id]) for s in optimum.leds), default=0.0),
        cnr_residual=abs(optimum.cnr / result.value - 1),
        forward_residual=abs(same.cnr / result.value - 1),
    )


def _alternatives(walk: Walk, best: int, count: int):
    """Best configurations with a camera and filter pair not yet listed."""
    allowed = np.ones(walk.upper.size, dtype=bool)
    listed = best
    for _ in range(count):
        allowed &= ~walk.same_parts(listed)
        found = walk.best(allowed)
        if found is None:
            return
        chosen = walk.configuration(found)
        result = walk.found[found]
        yield Alternative(
            design=design_at(walk.assembly, chosen.setting, chosen.filter, result.point), cnr=result.value
        )
        listed = found
