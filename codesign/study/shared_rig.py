"""One rig for all variants of a family: camera, filter, f-number and LED channels in common, with proof.

Shared are the parts that are bought and set by hand once: camera, filter, f-number (set on the lens and locked) and the
set of LED channels. What is electronic follows the variant: gain, camera channel, pulse level, exposure, the current of
each channel, and whether the target is to be brighter or darker than the background.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping

import numpy as np

from codesign.assemble_conflicts import no_step_fits
from codesign.design import evaluate
from codesign.errors import ProblemError
from codesign.problem import Problem
from codesign.program import Array
from codesign.recipe import settable
from codesign.search.shared import REACHED
from codesign.search.shared_goals import least_price, most_variants
from codesign.search.shared_rig import Hunt, Outcome, Placed
from codesign.search.shared_worst import best_worst
from codesign.solve_rounds import Clock
from codesign.study.common import Resolved, resolve
from codesign.study.shared_rig_helps import helpful_changes
from codesign.study.shared_rig_parts import common_problems
from codesign.study.shared_rig_result import GOALS, Goal, Help, SharedProof, SharedRig, VariantOutcome, relative_gap
from codesign.study.shared_rig_rounds import Search, Settled, named, settled_search
from codesign.study.shared_rig_verify import SharedVerdict, single_threaded, verify_shared

__all__ = ["Goal", "Help", "SharedProof", "SharedRig", "SharedVerdict", "VariantOutcome", "shared_rig", "verify_shared"]

#: Default gap. [1]
DEFAULT_GAP = 0.02


def shared_rig(
    variants: Mapping[str, Problem],
    *,
    max_led_channels: int | None = None,
    goal: Goal = "worst",
    required_cnr: float | None = None,
    gap: float = DEFAULT_GAP,
    time_limit: float | None = None,
    progress: Callable[[float, float], None] | None = None,
    own: Mapping[str, float] | None = None,
    helps: bool = True,
) -> SharedRig:
    """Find the best rig that all variants have in common, with proof.

    Camera, filter, f-number and LED channels are shared; gain, camera channel, pulse level, exposure, currents and
    contrast sign are set anew for each variant.

    Parameters
    ----------
    variants : mapping
        Problem of each variant by name. Parts that not all of them have are no choice.
    max_led_channels : int, optional
        LED channels of the rig at most; what the problems say by default, else any number.
    goal : {"worst", "count", "cost"}
        Greatest CNR of the worst variant, most variants with the CNR required, or lowest price of camera, filter and
        emitters with which all have it.
    required_cnr : float, optional
        CNR that every variant needs; that of its problem by default.
    gap : float
        Relative gap to prove; a count is proven exactly. [1]
    time_limit : float, optional
        Stop about then with the best so far and the bound proven so far. [s]
    progress : callable, optional
        Called with (value so far, bound so far).
    own : mapping, optional
        CNR of each variant's own best rig, for the regret; worked out by default, which takes a solve each.

    helps : bool
        Whether to look for changes that help most variants.

    Returns
    -------
    SharedRig

    Raises
    ------
    ProblemError
        One line naming the variant: combined readings, free numbers of emitters, other parts by the same id, no CNR
        required where the goal needs one.
    InfeasibleError
        When a variant cannot be served at all, naming it, or no rig in common serves all where the goal asks for it.

    Examples
    --------
    >>> from codesign import load_problem
    >>> from codesign.study.fields import varied
    >>> base = load_problem("yellow-stain")
    >>> pair = {"near": base, "far": varied(base, {"lighting.distance_mm": 500})}
    >>> found = shared_rig(pair, max_led_channels=2)
    >>> found.limiting, found.gap < 0.02
    ('far', True)
    """
    started = time.perf_counter()
    if goal not in GOALS:
        raise ProblemError(f"shared rig: goal is {goal!r}, must be one of {', '.join(GOALS)}")
    problems, left_out = common_problems(variants, max_led_channels)
    required = {name: p.spec.required_cnr if required_cnr is None else required_cnr for name, p in problems.items()}
    levels = np.zeros(len(required)) if goal == "worst" else levels_of(required)
    clock = Clock.lasting(time_limit)
    with single_threaded():
        settled = settled_search(
            problems, _search(goal, levels, gap, progress), clock, None if goal == "worst" else levels
        )
        own = own_cnrs(variants) if own is None else own
        best = settled.outcome.best.places(1)[0]
        told = helpful_changes(settled.hunt, *best, problems, settled.resolved, clock) if helps else ()
        return _result(settled, problems, goal, required, levels, gap, own, left_out, told, started)


def levels_of(required: Mapping[str, float | None]) -> Array:
    """CNR that each variant needs. (V,) Raises ProblemError naming the first variant that states none."""
    for name, value in required.items():
        if value is None or not value > 0:
            raise ProblemError(
                f"shared rig: variant {name!r}: required_cnr is {value}, must be above 0; say which CNR is needed"
            )
    return np.array(list(required.values()), dtype=float)


def _search(goal: Goal, levels: Array, gap: float, progress) -> Search:
    def search(hunt: Hunt, best: Placed | None) -> Outcome:
        start = None if best is None else best.places(1)[0]
        if goal == "worst":
            return best_worst(hunt, gap, start, progress)
        if goal == "count":
            return most_variants(hunt, levels, None, start, progress)
        return least_price(hunt, levels, gap, start, progress)

    return search


def own_cnrs(variants: Mapping[str, Problem]) -> dict[str, float]:
    """CNR of the best rig of each variant alone, as its problem states it."""
    return {name: resolve(problem, gap=max(problem.spec.solver.gap, 1e-3)).cnr for name, problem in variants.items()}


def _result(
    settled: Settled,
    problems: Mapping[str, Problem],
    goal: Goal,
    required: Mapping[str, float | None],
    levels: Array,
    gap: float,
    own: Mapping[str, float],
    left_out: tuple[str, ...],
    helps: tuple[Help, ...],
    started: float,
) -> SharedRig:
    hunt, best = settled.hunt, settled.outcome.best
    rig, ids = hunt.space.rig(best.rig), [channel.id for channel in hunt.space.problem.channels]
    nan = float("nan")
    outcomes = {
        name: outcome_of(name, problems[name], found, own.get(name, nan), required[name], needed=goal != "count")
        for name, found in settled.resolved.items()
    }
    value = _value(goal, settled, outcomes, best.value)
    bound = _bound(goal, settled, value)
    share = {name: _optimum(one) / (1.0 if goal == "worst" else required[name]) for name, one in outcomes.items()}
    return SharedRig(
        camera=rig.camera,
        filter=rig.filter,
        f_number=rig.f_number,
        leds=tuple(ids[place] for place in np.flatnonzero(best.leds)),
        goal=goal,
        value=value,
        bound=bound,
        status="proven" if relative_gap(value, bound) <= (0.0 if goal == "count" else gap) * (1 + 1e-6) else "stopped",
        outcomes=outcomes,
        limiting=min(share, key=lambda name: share[name]),
        helps=helps,
        seconds=time.perf_counter() - started,
        residual_k=settled.largest_residual_k,
        left_out=left_out,
        evidence=_evidence(settled, problems, levels),
    )


def _optimum(outcome: VariantOutcome) -> float:
    return 0.0 if outcome.optimum is None else outcome.optimum.cnr


def outcome_of(
    name: str, problem: Problem, found: Resolved | None, own: float, required: float | None, *, needed: bool
) -> VariantOutcome:
    """What a variant gets, with its recipe in whole setting steps; ``needed`` raises where no step fits."""
    if found is None:
        return VariantOutcome(name=name, problem=problem, optimum=None, recipe=None, own_cnr=own, required_cnr=required)
    rounded = settable(found.problem, found.optimum.design)
    if rounded is None and needed:
        raise named(name, no_step_fits(found.problem))
    return VariantOutcome(
        name=name,
        problem=found.problem,
        optimum=found.optimum,
        recipe=None if rounded is None else rounded[1],
        own_cnr=own,
        required_cnr=required,
    )


def _value(goal: Goal, settled: Settled, outcomes: Mapping[str, VariantOutcome], found: float) -> float:
    """Value of the goal at the junction temperatures of the proof."""
    if goal == "cost":
        return found
    reached = {name: stated_cnr(outcome, settled.junction_c[name], settled) for name, outcome in outcomes.items()}
    if goal == "worst":
        return min(reached.values())
    return float(sum(reached[n] >= (outcomes[n].required_cnr or 0.0) * (1 - 2 * REACHED) for n in outcomes))


def stated_cnr(outcome: VariantOutcome, junction_c: Array, settled: Settled) -> float:
    """CNR of a variant's optimum at the junction temperatures of the proof, by the forward model."""
    if outcome.optimum is None:
        return 0.0
    ids = [channel.id for channel in settled.hunt.space.problem.channels]
    stated = {name: float(t) for name, t in zip(ids, junction_c, strict=True) if name in outcome.problem.channel_index}
    return evaluate(outcome.problem, outcome.optimum.design, junction_c=stated).cnr


def _bound(goal: Goal, settled: Settled, value: float) -> float:
    proven = settled.outcome.proven
    if goal == "cost":
        return float(min(proven.min(initial=np.inf), value))
    return float(max(proven.max(initial=0.0), value))


def _evidence(settled: Settled, problems: Mapping[str, Problem], levels: Array) -> SharedProof:
    hunt = settled.hunt
    return SharedProof(
        problems=dict(problems),
        junction_c=settled.junction_c,
        levels=levels,
        order=tuple(hunt.in_order()),
        cuts={rig: tuple((place, cut) for place, cut, _ in own) for rig, own in hunt.cuts.items() if own},
        proven=settled.outcome.proven,
    )
