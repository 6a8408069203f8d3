"""Check a whole solution again, from the problem up, with code that knows no solver.

What is re-derived: the arrays of every configuration, the winner's feasibility and CNR (arrays and forward model),
the bound of every configuration from its multipliers, and that the configurations bounded are all there are.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from codesign.assemble import Assembly, flipped
from codesign.certificate import check_bound
from codesign.certificate_build import BuildLeaf, BuildSplit, check_recipe, tree_bound
from codesign.certificate_pairs import PairProof, pair_bound
from codesign.design import evaluate
from codesign.errors import CertificateError
from codesign.limits import Setting
from codesign.program import Array
from codesign.search.bounds import simple_proof
from codesign.search.closed_form import blocks
from codesign.search.walk import Evidence, Walk
from codesign.solve import Solution

#: Forward model and optimiser's arrays must agree to this at equal junction temperatures.
FORWARD_TOLERANCE = 1e-9
#: Bounds derived anew may exceed those claimed by this: arrays built in other batches differ by round-off. [1]
ROUND_OFF = 1e-9
#: Programs bounded at a time.
_BATCH = 256


@dataclass(frozen=True, slots=True, kw_only=True)
class Verdict:
    """What was checked: configurations, how many by multipliers kept, the largest bound, the winner's CNR."""

    configurations: int
    by_kept_multipliers: int
    largest_bound: float
    value: float


def verify(solution: Solution, progress: Callable[[int, int], None] | None = None) -> Verdict:
    """Re-derive the proof of a solution.

    Parameters
    ----------
    solution : Solution
    progress : callable, optional
        Called with (pieces of the proof checked, pieces in all).

    Raises
    ------
    CertificateError
        Naming the first thing that does not hold.
    """
    certificate, problem = solution.certificate, solution.problem
    if problem.combined:
        return _verdict_of_combined(solution)
    junction = np.array([certificate.junction_c[channel.id] for channel in problem.channels])
    walk = Walk.blank(Assembly(problem, junction))
    if walk.upper.size != certificate.configurations:
        raise CertificateError(
            f"certificate: {certificate.configurations} configurations were searched, the problem has {walk.upper.size}"
        )
    pieces = len(solution.evidence) + len(walk.assembly.settings)
    done = itertools.count(1)
    tick = (lambda: None) if progress is None else (lambda: progress(next(done), pieces))
    kept = _by_evidence(walk, solution.evidence, tick)
    open_ = kept > certificate.bound * (1 + ROUND_OFF)
    closed = _by_closed_form(walk, open_, tick)
    bounds = np.minimum(kept, closed)
    if not np.max(bounds) <= certificate.bound * (1 + ROUND_OFF):  # the search had no time for all closed forms
        bounds = np.minimum(bounds, np.repeat(walk.ceilings()[:, None], walk.filters, axis=1).ravel())
    if not np.max(bounds) <= certificate.bound * (1 + ROUND_OFF):
        worst = int(np.argmax(bounds))
        raise CertificateError(
            f"certificate: configuration {worst} is bounded by {bounds[worst]:.10g} only, "
            f"above the claimed {certificate.bound:.10g}"
        )
    value = _check_winner(walk, solution)
    return Verdict(
        configurations=bounds.size,
        by_kept_multipliers=int((~open_).sum()),
        largest_bound=float(np.max(bounds)),
        value=value,
    )


def _verdict_of_combined(solution: Solution) -> Verdict:
    from codesign.solve_combined import verify_combined

    bounds, value = verify_combined(solution)
    return Verdict(
        configurations=bounds.size,
        by_kept_multipliers=len({item.index for item in solution.evidence}),
        largest_bound=float(np.max(bounds)),
        value=value,
    )


def _by_evidence(walk: Walk, evidence: tuple[Evidence, ...], tick: Callable[[], None]) -> Array:
    """Bounds from the multipliers kept, ``inf`` where there are none."""
    bounds = np.full(walk.upper.size, np.inf)
    for item in evidence:
        bounds[item.index] = np.minimum(bounds[item.index], _bounds_of(walk, item))
        tick()
    return bounds


def _bounds_of(walk: Walk, item: Evidence) -> Array:
    """Bounds that one piece of evidence shows, in the order of its configurations."""
    if isinstance(item.proof, BuildLeaf | BuildSplit):
        return np.array([tree_bound(walk.every_pair(i), walk.space(i), item.proof) for i in item.index])
    if isinstance(item.proof, PairProof):
        return np.array([pair_bound(walk.every_pair(index), item.proof) for index in item.index])
    return check_bound(walk.programs(item.index, coarse=item.coarse, pair=item.pair), item.proof, np.inf)


def _by_closed_form(walk: Walk, wanted: np.ndarray, tick: Callable[[], None]) -> Array:
    """Bounds of the configurations that were dropped by the closed form, derived anew."""
    bounds = np.full(walk.upper.size, np.inf)
    per_setting = 2 * walk.filters
    for number, setting in enumerate(walk.assembly.settings):
        part = slice(number * per_setting, (number + 1) * per_setting)
        if wanted[part].any():
            bounds[part] = _of_setting(walk, setting)
        tick()
    return bounds


def _of_setting(walk: Walk, setting: Setting) -> Array:
    """Bounds of all filters and both signs of a setting, some filters at a time. (2 F,)"""
    found = np.empty((walk.filters, 2))
    for part in blocks(walk.filters):
        found[part] = np.min([_closed_form(walk, setting, part, pair) for pair in range(walk.pairs)], axis=0)
    return walk.buildable(setting, found).ravel()


def _closed_form(walk: Walk, setting: Setting, part: slice, pair: int) -> Array:
    program = walk.assembly.program(setting, part, coarse=True, pair=pair)
    both = [check_bound(side, simple_proof(side)[0], np.inf) for side in (program, flipped(program))]
    return np.stack(both, axis=1)


def _check_winner(walk: Walk, solution: Solution) -> float:
    """Winner's point against the arrays, and its recipe against the forward model."""
    certificate = solution.certificate
    winner = solution.winner
    value = check_recipe(walk.every_pair(winner), solution.point, certificate.value, walk.space(winner), solution.units)
    same = evaluate(solution.problem, solution.optimum.design, junction_c=certificate.junction_c)
    if not abs(same.cnr / value - 1) <= FORWARD_TOLERANCE:
        raise CertificateError(
            f"certificate: the forward model gives {same.cnr:.12g}, the optimiser's arrays {value:.12g}"
        )
    _check_temperatures(solution)
    again = evaluate(solution.problem, solution.recipe.design)
    if not again.feasible or abs(again.cnr - solution.recipe.cnr) > 1e-9 * again.cnr:
        raise CertificateError("certificate: the settable recipe is not feasible, or its CNR is not what is claimed")
    return value


def _check_temperatures(solution: Solution) -> None:
    """The optimum at the junction temperatures it leads to, against what is said about those assumed."""
    certificate = solution.certificate
    settled = evaluate(solution.problem, solution.optimum.design)
    residual = max((abs(led.junction_c - certificate.junction_c[led.id]) for led in settled.leds), default=0.0)
    if not residual <= certificate.junction_residual_k + 1e-6:
        raise CertificateError(
            f"certificate: LEDs come to {residual:.4g} K from the junction temperatures the proof assumes, "
            f"not the claimed {certificate.junction_residual_k:.4g} K"
        )
    if not abs(settled.cnr - solution.optimum.cnr) <= FORWARD_TOLERANCE * abs(settled.cnr):
        raise CertificateError(
            f"certificate: the optimum's CNR is {settled.cnr:.12g}, not the claimed {solution.optimum.cnr:.12g}"
        )
