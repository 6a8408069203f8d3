"""Warm starts: what a related problem's result gives the search of the problem at hand, and how it is used.

Everything here is a suggestion that is worked out anew; a wrong one costs time only.
"""

from __future__ import annotations

from types import SimpleNamespace
from typing import TYPE_CHECKING

import numpy as np

from codesign.assemble import Assembly
from codesign.build import choosing
from codesign.design import Design, evaluate
from codesign.limits import junction_limit, sum_limits
from codesign.problem import Problem
from codesign.program import Array
from codesign.radiometry import reflectances
from codesign.recipe import design_at
from codesign.search.frontier import Certified, Hint
from codesign.search.walk import FULLY, Configuration, Walk
from codesign.solve_rounds import LARGEST_NUMBER_OF_ROUNDS, POLISH_GAP
from codesign.solve_settle import JUNCTION_TOLERANCE_K, offer, settle
from codesign.study.multipliers import Multipliers

if TYPE_CHECKING:
    from codesign.study.common import Known, Resolved

#: So few configurations left open go to the last rung at once: cheaper than a batch.
FEW = 12
#: Relative change of the CNR below which junction temperatures that toggle between equal recipes are left as they are.
INDIFFERENT = 1e-6
#: Junction temperatures may be off by this much where it makes no difference. [K]
LARGEST_RESIDUAL_K = 2.0
#: Rounds over junction temperatures before it is asked whether they make a difference.
PATIENCE = 3


def matching(assembly: Assembly, known: Known) -> Configuration | None:
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


def units_of(problem: Problem, known: Known) -> np.ndarray | None:
    """Units in use in the order of the problem's channels, None without build limits. (L,)"""
    return None if known.units is None else np.array([known.units.get(c.id, 0) for c in problem.channels])


def warmed(problem: Problem, near: Resolved, junction: Array) -> Array:
    """Junction temperatures to start from: those the neighbour's recipe leads to in this problem. (L,)"""
    known = {channel.id for channel in problem.channels}
    design = near.optimum.design
    if not known.issuperset(design.drive_ma) or problem.spec.build != near.problem.spec.build:
        return junction
    guess = evaluate(problem, design).junctions(problem, junction)
    top = np.array([junction_limit(problem, channel) for channel in problem.channels])
    return np.where(np.isfinite(guess) & (guess <= top), guess, junction)


def settled_certificate(
    assembly: Assembly, seed: Configuration, units: np.ndarray | None, gap: float, hint: Hint | None
) -> Walk:
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
        done, reached = settles(walk, number, indifferent=attempt >= PATIENCE)
        if done or attempt == LARGEST_NUMBER_OF_ROUNDS - 1:
            break
        if attempt == PATIENCE - 1 and (between := _between(walk, number, gap)) is not None:
            return between
        hint, units = hint_of(walk, number), getattr(walk.found[number], "units", None)
        assumed = assembly.junction_c
        assembly = assembly.at(_extrapolated(before, assumed, reached))
        before = assumed, reached
    return walk


def _between(walk: Walk, number: int, gap: float) -> Walk | None:
    """The certificate at a recipe that leads to its own temperatures, where the best recipes toggle; None without."""
    known, found = walk.configuration(number), walk.found[number]
    own = settle(walk.assembly.problem, known, found, walk.assembly.junction_c, min(gap, POLISH_GAP))
    if own.design is None:
        return None
    other = Walk.blank(walk.assembly.at(own.junction_c))
    other.gap = walk.gap
    other.seed(known, SimpleNamespace(units=getattr(found, "units", None)))
    offer(other, number, own.design, min(gap, POLISH_GAP))
    return other if settles(other, number, indifferent=False)[0] else None


def _extrapolated(before: tuple[Array, Array] | None, assumed: Array, reached: Array) -> Array:
    """Junction temperatures to try next: what was reached, carried on where two rounds show how it depends. (L,)"""
    if before is None:
        return reached
    step = assumed - before[0]
    slope = np.divide(reached - before[1], step, out=np.zeros_like(step), where=np.abs(step) > 1e-6)
    slope = np.where(slope < 0.5, np.maximum(slope, -20.0), 0.0)  # steeply falling: recipes that would toggle
    return assumed + (reached - assumed) / (1 - slope)


def settles(walk: Walk, number: int, *, indifferent: bool) -> tuple[bool, Array]:
    """Whether the junction temperatures assumed agree with the recipe's; and those reached. (L,)

    ``indifferent`` also takes those that disagree without effect: recipes of equal CNR may toggle for ever.
    """
    problem, found = walk.assembly.problem, walk.found[number]
    if found.value <= 0:
        return True, walk.assembly.junction_c
    performance = evaluate(problem, design_of(walk, number))
    assumed = walk.assembly.junction_c
    reached = performance.junctions(problem, assumed)
    residual = float(np.max(np.abs(reached - assumed), initial=0.0))
    equal = indifferent and abs(performance.cnr / found.value - 1) <= INDIFFERENT and residual <= LARGEST_RESIDUAL_K
    return residual <= JUNCTION_TOLERANCE_K / 2 or equal, reached


def shape_of(assembly: Assembly) -> tuple:
    """What the multipliers of a configuration are made for: limits, LEDs, noise of the problem."""
    problem = assembly.problem
    spread = [rows.stop - rows.start for rows in reflectances(problem).rows_of]
    capped = [np.isfinite(assembly.segments(setting).heat_cap).tobytes() for setting in assembly.settings[:1]]
    names = [each.id for each in (*problem.surfaces, *problem.channels)]
    return (*names, *spread, *capped, *(limit.name for limit in sum_limits(problem)), choosing(problem), problem.strobe)


def hint_of(walk: Walk, number: int) -> Hint | None:
    """What a related search of the same configuration should start from."""
    result = walk.found[number]
    if not isinstance(result, Certified) or result.value <= 0:
        return None
    segments = walk.assembly.segments(walk.configuration(number).setting)
    lit = np.unique(segments.led[result.point[:-1] > 1e-6 * segments.width * result.point[-1]])
    return Hint(result.proof.ceiling, lit, result.value)


def take_over(walk: Walk, first: Walk, number: int, carried: Multipliers) -> int:
    """Take over a certified configuration, drop others by multipliers known; return how much evidence these are."""
    value = first.found[number].value
    carried.apply(walk, value)
    count = len(walk.evidence)
    walk.found[number] = first.found[number]
    walk.tried[number] = first.tried[number]
    walk.settled |= first.settled
    walk.upper[number] = min(walk.upper[number], first.upper[number])
    walk.evidence.extend(first.evidence)
    walk.tally.certified += first.tally.certified
    open_ = np.flatnonzero(walk.upper > value * (1 + walk.gap))
    if open_.size <= FEW:
        walk.refined[open_] = FULLY
    return count


def design_of(walk: Walk, best: int) -> Design:
    """What to dial in for a configuration as certified."""
    chosen, result = walk.configuration(best), walk.found[best]
    return design_at(walk.assembly, chosen.setting, chosen.filter, result.point, getattr(result, "units", None))
