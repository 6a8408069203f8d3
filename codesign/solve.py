"""Find the configuration and settings of provably greatest CNR, consistent with the LEDs' own warming."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from codesign.assemble_conflicts import no_step_fits, nothing_seen
from codesign.build import Units
from codesign.certificate_build import check_recipe
from codesign.design import Design, Performance, evaluate
from codesign.display import Displayed
from codesign.problem import Problem
from codesign.program import Array
from codesign.recipe import design_at, lit_only, settable
from codesign.search.walk import Evidence, Tally, Walk
from codesign.solve_rounds import POLISH_GAP, Clock, Search, search_rounds

#: Default time limit where channels or shots are combined. [s]
COMBINED_SECONDS = 60.0


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


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Solution(Displayed):
    """The optimum, the settable recipe near it, and the proof.

    ``optimum`` is the continuous optimum, ``recipe`` the same in whole setting steps (what to dial in). ``winner``,
    ``point``, ``units`` (of each LED, under build limits) and ``evidence`` are what `codesign.verify` re-derives the
    proof from. ``status`` is "proven", or "stopped" when time limit or interrupt ended the search before the gap asked
    for was reached.
    """

    problem: Problem = field(repr=False)
    optimum: Performance
    recipe: Performance
    certificate: Certificate
    alternatives: tuple[Alternative, ...]
    seconds: float
    status: str
    winner: int = field(repr=False)
    point: Array = field(repr=False)
    units: Units | None = field(repr=False)
    evidence: tuple[Evidence, ...] = field(repr=False)

    @property
    def rounding_loss(self) -> float:
        """How far the settable recipe may be below the best possible: 1 − CNR / proven bound, at least 0.

        The recipe is at its own junction temperatures, the bound at those of the proof, which differ by the residual.
        """
        return max(1 - self.recipe.cnr / self.certificate.bound, 0.0)

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
    time_limit: float | None = None,
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
    time_limit : float, optional
        Stop about then with the best so far; its certificate states the gap that is proven. An interrupt does the
        same. None by default, but `COMBINED_SECONDS` where readings are combined, whose bounds close slowly. [s]

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
    if problem.combined:
        from codesign.solve_combined import solve_combined

        return solve_combined(problem, gap, Clock.lasting(COMBINED_SECONDS if time_limit is None else time_limit))
    gap = problem.spec.solver.gap if gap is None else gap
    wanted = problem.spec.solver.alternatives if alternatives is None else alternatives
    clock = Clock.lasting(time_limit)
    search = search_rounds(problem, gap, progress=progress, clock=clock)
    if search.best is None:
        raise nothing_seen(search.walk.assembly)
    return solution_of(search, gap, started, wanted)


def solution_of(search: Search, gap: float, started: float, alternatives: int = 0) -> Solution:
    """Recipe, certificate and runners-up of a search that found something."""
    walk, best, known = search.walk, search.best, search.known
    problem = walk.assembly.problem
    result = walk.polish(best, min(gap, POLISH_GAP))
    units = getattr(result, "units", None)
    design = design_at(walk.assembly, known.setting, known.filter, result.point, units)
    result = lit_only(walk.assembly, known.setting, result, design, walk.every_pair(best))
    optimum = evaluate(problem, design)
    rounded = settable(problem, design)
    if rounded is None or (optimum.leds and not rounded[1].leds):
        raise no_step_fits(problem)
    certificate = _certificate(walk, best, known, result, design, optimum)
    return Solution(
        problem=problem,
        optimum=optimum,
        recipe=rounded[1],
        certificate=certificate,
        alternatives=() if search.stopped else tuple(_alternatives(walk, best, alternatives)),
        seconds=time.perf_counter() - started,
        status="stopped" if search.stopped and certificate.gap > gap else "proven",
        winner=best,
        point=result.point,
        units=units,
        evidence=tuple(walk.evidence),
    )


def _certificate(walk: Walk, best: int, known, result, design: Design, optimum: Performance) -> Certificate:
    """Check the winner with code that knows no solver, and put the numbers of the proof together."""
    problem = walk.assembly.problem
    check_recipe(walk.every_pair(best), result.point, result.value, walk.space(best), getattr(result, "units", None))
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
            design=design_at(
                walk.assembly, chosen.setting, chosen.filter, result.point, getattr(result, "units", None)
            ),
            cnr=result.value,
        )
        listed = found
