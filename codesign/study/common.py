"""Certified re-solves of related problems: each starts from what a neighbour found and is proven on its own.

The neighbour gives a configuration likely to be best, junction temperatures likely to be right and multipliers likely
to prove it. None of them is trusted: the configuration is certified anew, the temperatures are iterated until they
agree with the recipe, and each bound is worked out from the arrays of the problem at hand.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from types import SimpleNamespace

import numpy as np

from codesign.assemble import Assembly
from codesign.assemble_conflicts import nothing_seen, require_usable_leds
from codesign.build import choosing, require_buildable
from codesign.certificate_build import check_recipe
from codesign.design import Design, Performance, evaluate
from codesign.errors import InfeasibleError
from codesign.problem import Problem
from codesign.problem.choices import FilterChoices
from codesign.program import Array
from codesign.recipe import design_at, settable
from codesign.search.walk import Configuration, Evidence, Walk
from codesign.solve import Certificate, Solution
from codesign.solve_rounds import JUNCTION_TOLERANCE_K, LARGEST_NUMBER_OF_ROUNDS, POLISH_GAP, search_rounds, settle
from codesign.study.multipliers import Multipliers

#: So few configurations left open go to the last rung at once: cheaper than a batch.
FEW = 12


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
    known : Known
        Where related problems may start.
    multipliers : Multipliers
        What proved this one, to prove related ones.
    """

    problem: Problem = field(repr=False)
    optimum: Performance
    certificate: Certificate
    known: Known
    multipliers: Multipliers = field(repr=False)
    winner: int = field(repr=False)
    point: Array = field(repr=False)
    units: np.ndarray | None = field(repr=False)
    evidence: tuple[Evidence, ...] = field(repr=False)

    @property
    def cnr(self) -> float:
        """CNR of the optimum."""
        return self.optimum.cnr

    @property
    def bound(self) -> float:
        """No configuration has a CNR above this."""
        return self.certificate.bound

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
    gap = problem.spec.solver.gap if gap is None else gap
    known = known_of(near) if isinstance(near, Solution) else near.known if isinstance(near, Resolved) else near
    carried = near.multipliers if isinstance(near, Resolved) else Multipliers()
    if known is None:
        return _cold(problem, gap, carried)
    require_usable_leds(problem)
    require_buildable(problem)
    air = problem.spec.temperature.air_c
    junction = np.array([known.junction_c.get(channel.id, air) for channel in problem.channels])
    seed = _find(problem, junction, known)
    if seed is None:
        return _cold(problem, gap, carried)
    units = _units(problem, known)
    junction = _settled(problem, junction, seed, units, gap)
    for _ in range(LARGEST_NUMBER_OF_ROUNDS):
        walk = Walk(Assembly(problem, junction), gap)
        start = _start(walk, seed, units, carried)
        best = walk.best()
        if best is None:
            raise nothing_seen(walk.assembly)
        carried = carried.learned(walk, walk.evidence[start:])
        walk.polish(best, min(gap, POLISH_GAP))
        if _residual(walk, best) <= JUNCTION_TOLERANCE_K:
            break
        seed, found = walk.configuration(best), walk.found[best]
        junction = settle(problem, seed, found, junction, min(gap, POLISH_GAP))[1]
        units = getattr(found, "units", None)
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


def _find(problem: Problem, junction: Array, known: Known) -> Configuration | None:
    """The configuration of those names among those of the problem, at the pulse level that allows the exposure."""
    part = next((i for i, each in enumerate(problem.filters) if each.id == known.filter), None)
    wanted = (known.camera, known.channel, known.gain_db, known.f_number)
    settings = [
        setting
        for setting in Assembly(problem, junction).settings
        if (setting.camera.id, setting.channel, setting.gain.gain_db, setting.f_number) == wanted
    ]
    if part is None or not settings:
        return None
    long_enough = [s for s in settings if s.level.longest_s * 1e6 >= known.exposure_us * (1 - 1e-9)]
    return Configuration(long_enough[0] if long_enough else settings[-1], part, known.sign)


def _units(problem: Problem, known: Known) -> np.ndarray | None:
    return None if known.units is None else np.array([known.units.get(c.id, 0) for c in problem.channels])


def _settled(problem: Problem, junction: Array, seed: Configuration, units: np.ndarray | None, gap: float) -> Array:
    """Junction temperatures at which the configuration agrees with itself."""
    walk = Walk.blank(Assembly(problem, junction))
    walk.gap = gap
    found = None
    if walk.pairs > 1 or choosing(problem):
        walk.seed(seed, SimpleNamespace(units=units))
        found = walk.found[walk.number(seed)]
    return settle(problem, seed, found, junction, min(gap, POLISH_GAP))[1]


def _start(walk: Walk, seed: Configuration, units: np.ndarray | None, carried: Multipliers) -> int:
    """Certify the configuration likely best, drop others by multipliers known; return how much evidence that is."""
    gap = walk.gap
    if walk.pairs == 1 and not choosing(walk.assembly.problem):
        walk.gap = min(gap, POLISH_GAP)  # then nothing is left to polish
    walk.seed(seed, SimpleNamespace(units=units))
    walk.gap = gap
    number = walk.number(seed)
    value = walk.found[number].value
    own = walk.evidence[:]
    walk.evidence.clear()
    carried.apply(walk, value)
    count = len(walk.evidence)
    walk.evidence.extend(own)
    open_ = np.flatnonzero(walk.upper > value * (1 + gap))
    if open_.size <= FEW:
        walk.refined[open_] = True
    return count


def _design(walk: Walk, best: int) -> Design:
    """What to dial in for a configuration as certified."""
    chosen, result = walk.configuration(best), walk.found[best]
    return design_at(walk.assembly, chosen.setting, chosen.filter, result.point, getattr(result, "units", None))


def _residual(walk: Walk, best: int) -> float:
    """How far the junction temperatures assumed are from those the recipe leads to. [K]"""
    problem = walk.assembly.problem
    assumed = dict(zip((c.id for c in problem.channels), walk.assembly.junction_c, strict=True))
    leds = evaluate(problem, _design(walk, best)).leds
    return max((abs(state.junction_c - assumed[state.id]) for state in leds), default=0.0)


def _finished(walk: Walk, best: int, gap: float, multipliers: Multipliers) -> Resolved:
    """Check the winner with code that knows no solver, and put the result together."""
    problem = walk.assembly.problem
    result = walk.polish(best, min(gap, POLISH_GAP))
    units = getattr(result, "units", None)
    design = _design(walk, best)
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
