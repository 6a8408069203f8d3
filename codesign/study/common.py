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
from codesign.limits import sum_limits
from codesign.problem import Problem
from codesign.problem.choices import FilterChoices
from codesign.program import Array
from codesign.radiometry import reflectances
from codesign.recipe import design_at, settable
from codesign.search.frontier import Certified, Hint
from codesign.search.walk import FULLY, Configuration, Evidence, Walk
from codesign.solve import Certificate, Solution, solve
from codesign.solve_rounds import JUNCTION_TOLERANCE_K, LARGEST_NUMBER_OF_ROUNDS, POLISH_GAP, search_rounds
from codesign.study.multipliers import Multipliers

#: So few configurations left open go to the last rung at once: cheaper than a batch.
FEW = 12
#: Relative change of the CNR below which junction temperatures that toggle between equal recipes are left as they are.
INDIFFERENT = 1e-6
#: Junction temperatures may be off by this much where it makes no difference. [K]
LARGEST_RESIDUAL_K = 2.0
#: Rounds over junction temperatures before it is asked whether they make a difference.
PATIENCE = 3


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
    seed = _find(assembly, known)
    if seed is None:
        return _cold(problem, gap, carried)
    units = _units(problem, known)
    shape = _shape(assembly)
    hint = near.hint if isinstance(near, Resolved) and near.shape == shape else None
    for _ in range(LARGEST_NUMBER_OF_ROUNDS):
        first = _settled(assembly, seed, units, gap, hint)
        walk = Walk(first.assembly, gap)
        start = _start(walk, first, walk.number(seed), carried)
        best = walk.best()
        if best is None:
            raise nothing_seen(walk.assembly)
        carried = carried.learned(walk, walk.evidence[start:])
        walk.polish(best, min(gap, POLISH_GAP))
        if walk.configuration(best) == seed or _settles(walk, best, indifferent=True)[0]:
            break
        seed, units, hint = walk.configuration(best), getattr(walk.found[best], "units", None), _hint(walk, best)
        assembly = walk.assembly
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


def _find(assembly: Assembly, known: Known) -> Configuration | None:
    """The configuration of those names among those of the problem, at the pulse level that allows the exposure."""
    part = next((i for i, each in enumerate(assembly.problem.filters) if each.id == known.filter), None)
    wanted = (known.camera, known.channel, known.gain_db, known.f_number)
    settings = [
        setting
        for setting in assembly.settings
        if (setting.camera.id, setting.channel, setting.gain.gain_db, setting.f_number) == wanted
    ]
    if part is None or not settings:
        return None
    long_enough = [s for s in settings if s.level.longest_s * 1e6 >= known.exposure_us * (1 - 1e-9)]
    return Configuration(long_enough[0] if long_enough else settings[-1], part, known.sign)


def _units(problem: Problem, known: Known) -> np.ndarray | None:
    return None if known.units is None else np.array([known.units.get(c.id, 0) for c in problem.channels])


def _settled(assembly: Assembly, seed: Configuration, units: np.ndarray | None, gap: float, hint: Hint | None) -> Walk:
    """Certify one configuration at junction temperatures that agree with its own recipe: a walk of that one alone."""
    before: tuple[Array, Array] | None = None
    for attempt in range(LARGEST_NUMBER_OF_ROUNDS):
        walk = Walk.blank(assembly)
        number = walk.number(seed)
        # With one pair and no choice of LEDs a small gap is cheap, and nothing is left to polish.
        walk.gap = gap if walk.pairs > 1 or choosing(assembly.problem) else min(gap, POLISH_GAP)
        if hint is not None:
            walk.hints[number] = hint
        walk.seed(seed, SimpleNamespace(units=units))
        walk.polish(number, min(gap, POLISH_GAP))
        done, reached = _settles(walk, number, indifferent=attempt >= PATIENCE)
        if done or attempt == LARGEST_NUMBER_OF_ROUNDS - 1:
            break
        hint, units = _hint(walk, number), getattr(walk.found[number], "units", None)
        assumed = assembly.junction_c
        assembly = assembly.at(_extrapolated(before, assumed, reached))
        before = assumed, reached
    return walk


def _extrapolated(before: tuple[Array, Array] | None, assumed: Array, reached: Array) -> Array:
    """Junction temperatures to try next: what was reached, carried on where two rounds show how it depends. (L,)"""
    if before is None:
        return reached
    step = assumed - before[0]
    slope = np.divide(reached - before[1], step, out=np.zeros_like(step), where=np.abs(step) > 1e-6)
    slope = np.where(np.abs(slope) < 0.5, slope, 0.0)
    return assumed + (reached - assumed) / (1 - slope)


def _settles(walk: Walk, number: int, *, indifferent: bool) -> tuple[bool, Array]:
    """Whether the junction temperatures assumed agree with the recipe's; and those reached. (L,)

    ``indifferent`` also takes those that disagree without effect: recipes of equal CNR may toggle for ever.
    """
    problem, found = walk.assembly.problem, walk.found[number]
    if found.value <= 0:
        return True, walk.assembly.junction_c
    performance = evaluate(problem, _design(walk, number))
    states = {state.id: state.junction_c for state in performance.leds}
    assumed = walk.assembly.junction_c
    reached = np.array([states.get(c.id, t) for c, t in zip(problem.channels, assumed, strict=True)])
    residual = float(np.max(np.abs(reached - assumed), initial=0.0))
    equal = indifferent and abs(performance.cnr / found.value - 1) <= INDIFFERENT and residual <= LARGEST_RESIDUAL_K
    return residual <= JUNCTION_TOLERANCE_K / 2 or equal, reached


def _shape(assembly: Assembly) -> tuple:
    """What the multipliers of a configuration are made for: limits, LEDs, noise of the problem."""
    problem = assembly.problem
    spread = [rows.stop - rows.start for rows in reflectances(problem).rows_of]
    capped = [np.isfinite(assembly.segments(setting).heat_cap).tobytes() for setting in assembly.settings[:1]]
    names = [each.id for each in (*problem.surfaces, *problem.channels)]
    return (*names, *spread, *capped, *(limit.name for limit in sum_limits(problem)), choosing(problem), problem.strobe)


def _hint(walk: Walk, number: int) -> Hint | None:
    """What a related search of the same configuration should start from."""
    result = walk.found[number]
    if not isinstance(result, Certified) or result.value <= 0:
        return None
    segments = walk.assembly.segments(walk.configuration(number).setting)
    lit = np.unique(segments.led[result.point[:-1] > 1e-6 * segments.width * result.point[-1]])
    return Hint(result.proof.ceiling, lit, result.value)


def _start(walk: Walk, first: Walk, number: int, carried: Multipliers) -> int:
    """Take over a certified configuration, drop others by multipliers known; return how much evidence these are."""
    value = first.found[number].value
    carried.apply(walk, value)
    count = len(walk.evidence)
    walk.found[number] = first.found[number]
    walk.tried[number] = first.tried[number]
    walk.upper[number] = min(walk.upper[number], first.upper[number])
    walk.evidence.extend(first.evidence)
    walk.tally.certified += first.tally.certified
    open_ = np.flatnonzero(walk.upper > value * (1 + walk.gap))
    if open_.size <= FEW:
        walk.refined[open_] = FULLY
    return count


def _design(walk: Walk, best: int) -> Design:
    """What to dial in for a configuration as certified."""
    chosen, result = walk.configuration(best), walk.found[best]
    return design_at(walk.assembly, chosen.setting, chosen.filter, result.point, getattr(result, "units", None))


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
        hint=_hint(walk, best),
        shape=_shape(walk.assembly),
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
