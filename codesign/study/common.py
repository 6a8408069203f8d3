"""Certified re-solves of related problems: each starts from what a neighbour found and is proven on its own.

The neighbour gives a configuration likely to be best, junction temperatures likely to be right and multipliers likely
to prove it. None of them is trusted: the configuration is certified anew, the temperatures are iterated until they
agree with the recipe, and each bound is worked out from the arrays of the problem at hand.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from codesign.assemble import Assembly
from codesign.assemble_conflicts import nothing_seen, require_usable_leds
from codesign.build import require_buildable
from codesign.certificate_build import check_recipe
from codesign.design import Performance, evaluate
from codesign.errors import InfeasibleError
from codesign.problem import Problem
from codesign.problem.choices import FilterChoices
from codesign.program import Array
from codesign.recipe import lit_only, settable
from codesign.search.frontier import Hint
from codesign.search.walk import Evidence, Walk
from codesign.solve import Certificate, Solution, solve
from codesign.solve_rounds import LARGEST_NUMBER_OF_ROUNDS, POLISH_GAP, search_rounds
from codesign.study.multipliers import Multipliers
from codesign.study.warm import (
    design_of,
    hint_of,
    matching,
    settled_certificate,
    settles,
    shape_of,
    take_over,
    units_of,
    warmed,
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Known:
    """A configuration by names, and what goes with it: where the search of a related problem starts.

    ``units`` are the emitters or channels in use under build limits, by LED id. [1]
    """

    camera: str
    channel: str
    gain_db: float
    f_number: float
    exposure_us: float
    filter: str
    sign: int
    junction_c: Mapping[str, float]
    units: Mapping[str, int] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Resolved:
    """A certified optimum of one problem, before rounding.

    Attributes
    ----------
    problem : Problem
    optimum : Performance
        What the forward model says of it.
    certificate : Certificate
        As of `codesign.solve`.
    known : Known or None
        Where related problems may start; None for combined readings, which are solved afresh each time.
    multipliers : Multipliers
        What proved this one, to prove related ones.
    hint : Hint or None
        Where a search of the same configuration may start, in problems of the same ``shape``.
    """

    problem: Problem = field(repr=False)
    optimum: Performance
    certificate: Certificate
    known: Known | None
    multipliers: Multipliers = field(repr=False)
    hint: Hint | None = field(repr=False)
    shape: tuple = field(repr=False)
    winner: int = field(repr=False)
    point: Array = field(repr=False)
    units: np.ndarray | None = field(repr=False)
    evidence: tuple[Evidence, ...] = field(repr=False)

    @property
    def cnr(self) -> float:
        """CNR of the optimum."""
        return self.optimum.cnr

    @property
    def drive_ma(self) -> dict[str, float]:
        """Currents of the LEDs that matter: half a setting step at least. [mA]"""
        least = 0.5 * self.problem.spec.lighting.drive_step_ma
        return {led: ma for led, ma in self.optimum.design.drive_ma.items() if ma >= least}

    @property
    def bound(self) -> float:
        """No configuration has a CNR above this, but for what the residual of the junction temperatures changes."""
        return max(self.certificate.bound, self.cnr)

    @property
    def binding(self) -> tuple[str, ...]:
        """Limits the optimum touches."""
        return tuple(limit.name for limit in self.optimum.limits if limit.share >= 0.999)

    def solution(self) -> Solution | None:
        """The same in whole setting steps, as `codesign.solve` returns it; None when no step fits."""
        rounded = settable(self.problem, self.optimum.design)
        if rounded is None:
            return None
        return Solution(
            problem=self.problem,
            optimum=self.optimum,
            recipe=rounded[1],
            certificate=self.certificate,
            alternatives=(),
            seconds=0.0,
            status="proven",
            winner=self.winner,
            point=self.point,
            units=self.units,
            evidence=self.evidence,
        )


def resolve(problem: Problem, near: Resolved | Known | Solution | None = None, *, gap: float | None = None) -> Resolved:
    """Find the optimum of a problem with proof, starting from that of a related problem.

    Parameters
    ----------
    problem : Problem
    near : Resolved, Known or Solution, optional
        Result for a related problem; a wrong guess costs time only.
    gap : float, optional
        Relative gap to prove, the problem's own by default. [1]

    Returns
    -------
    Resolved

    Raises
    ------
    InfeasibleError
        As `codesign.solve`.

    Examples
    --------
    >>> from codesign import load_problem
    >>> first = resolve(load_problem("yellow-stain"))
    >>> again = resolve(load_problem("yellow-stain"), first)
    >>> abs(again.cnr / first.cnr - 1) < 1e-4
    True
    """
    if problem.combined:
        return _combined(problem, gap)
    gap = problem.spec.solver.gap if gap is None else gap
    if isinstance(near, Solution) and near.problem.combined:
        near = None
    known = known_of(near) if isinstance(near, Solution) else near.known if isinstance(near, Resolved) else near
    carried = near.multipliers if isinstance(near, Resolved) else Multipliers()
    if known is None:
        return _cold(problem, gap, carried)
    require_usable_leds(problem)
    require_buildable(problem)
    air = problem.spec.temperature.air_c
    assembly = Assembly(problem, np.array([known.junction_c.get(c.id, air) for c in problem.channels]))
    seed = matching(assembly, known)
    if seed is None:
        return _cold(problem, gap, carried)
    units = units_of(problem, known)
    shape = shape_of(assembly)
    hint = near.hint if isinstance(near, Resolved) and near.shape == shape else None
    if isinstance(near, Resolved):
        assembly = assembly.at(warmed(problem, near, assembly.junction_c))
    for _ in range(LARGEST_NUMBER_OF_ROUNDS):
        first = settled_certificate(assembly, seed, units, gap, hint)
        walk = Walk(first.assembly, gap)
        start = take_over(walk, first, walk.number(seed), carried)
        best = walk.best()
        if best is None:
            raise nothing_seen(walk.assembly)
        carried = carried.learned(walk, walk.evidence[start:])
        walk.polish(best, min(gap, POLISH_GAP))
        if walk.configuration(best) == seed or settles(walk, best, indifferent=True)[0]:
            break
        seed, units, hint = walk.configuration(best), getattr(walk.found[best], "units", None), hint_of(walk, best)
        assembly = walk.assembly
    if not settles(walk, best, indifferent=True)[0]:
        return _cold(problem, gap, carried)
    return _finished(walk, best, gap, carried)


def known_of(solution: Solution) -> Known:
    """Names of the winner of a solution."""
    certificate, problem = solution.certificate, solution.problem
    junction = np.array([certificate.junction_c[channel.id] for channel in problem.channels])
    walk = Walk.blank(Assembly(problem, junction))
    return _known(walk, solution.winner, solution.optimum, solution.units)


def without_part(problem: Problem, kind: str, name: str) -> Problem:
    """Return the problem with one candidate ("led", "filter" or "camera") not in stock.

    Raises InfeasibleError when nothing of the kind is left.
    """
    if kind == "filter":
        left = _filters_without(problem, name)
    elif kind == "led":
        left = tuple(channel for channel in problem.channels if channel.id != name)
    else:
        left = tuple(part for part in problem.cameras if part.id != name)
    if not len(left):
        raise InfeasibleError(f"{problem.where}: without {kind} {name!r} no {kind} is left to choose", ["candidates"])
    return replace(problem, **{"channels" if kind == "led" else f"{kind}s": left})


def _filters_without(problem: Problem, name: str):
    """Filters and stacks that do without one filter."""
    choices = FilterChoices.of(problem.filters)
    used = np.array([part.id == name or name in (part.parts or ()) for part in choices.base])
    second = np.where(choices.members[:, 1] >= 0, used[choices.members[:, 1]], False)
    kept = FilterChoices(choices.base, choices.members[~(used[choices.members[:, 0]] | second)])
    return kept if isinstance(problem.filters, FilterChoices) else tuple(kept)


def _cold(problem: Problem, gap: float, carried: Multipliers) -> Resolved:
    """Solve as if nothing were known."""
    search = search_rounds(problem, gap)
    if search.best is None:
        raise nothing_seen(search.walk.assembly)
    return _finished(search.walk, search.best, gap, carried.learned(search.walk, search.walk.evidence))


def _combined(problem: Problem, gap: float | None) -> Resolved:
    """Solve a problem of combined readings."""
    solution = solve(problem, gap=gap, alternatives=0)
    names = ("problem", "optimum", "certificate", "winner", "point", "units", "evidence")
    return Resolved(
        known=None, multipliers=Multipliers(), hint=None, shape=(), **{name: getattr(solution, name) for name in names}
    )


def _finished(walk: Walk, best: int, gap: float, multipliers: Multipliers) -> Resolved:
    """Check the winner with code that knows no solver, and put the result together."""
    problem = walk.assembly.problem
    result = walk.polish(best, min(gap, POLISH_GAP))
    units = getattr(result, "units", None)
    design = design_of(walk, best)
    result = lit_only(walk.assembly, walk.configuration(best).setting, result, design, walk.every_pair(best))
    optimum = evaluate(problem, design)
    check_recipe(walk.every_pair(best), result.point, result.value, walk.space(best), units)
    assumed = {c.id: float(t) for c, t in zip(problem.channels, walk.assembly.junction_c, strict=True)}
    same = evaluate(problem, design, junction_c=assumed)
    certificate = Certificate(
        value=result.value,
        bound=max(float(walk.upper.max()), result.value),
        configurations=walk.tally.configurations,
        refined=walk.tally.refined,
        certified=walk.tally.certified,
        junction_c=assumed,
        junction_residual_k=max((abs(s.junction_c - assumed[s.id]) for s in optimum.leds), default=0.0),
        cnr_residual=abs(optimum.cnr / result.value - 1),
        forward_residual=abs(same.cnr / result.value - 1),
    )
    return Resolved(
        problem=problem,
        optimum=optimum,
        certificate=certificate,
        known=_known(walk, best, optimum, units),
        multipliers=multipliers,
        hint=hint_of(walk, best),
        shape=shape_of(walk.assembly),
        winner=best,
        point=result.point,
        units=units,
        evidence=tuple(walk.evidence),
    )


def _known(walk: Walk, winner: int, optimum: Performance, units: np.ndarray | None) -> Known:
    chosen, ids = walk.configuration(winner), [channel.id for channel in walk.assembly.problem.channels]
    return Known(
        camera=chosen.setting.camera.id,
        channel=chosen.setting.channel,
        gain_db=chosen.setting.gain.gain_db,
        f_number=chosen.setting.f_number,
        exposure_us=optimum.design.exposure_us,
        filter=walk.assembly.problem.filters[chosen.filter].id,
        sign=chosen.sign,
        junction_c=dict(zip(ids, walk.assembly.junction_c.tolist(), strict=True)),
        units=None if units is None else dict(zip(ids, map(int, units), strict=True)),
    )
