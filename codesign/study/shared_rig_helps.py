"""Which change to a rig in common helps most variants: one more LED channel, a second filter, or one of the levers.

Candidates for LED and filter are ranked by closed form. That a variant is helped is shown by a recipe, the worst CNR
then by solving with proof.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import replace

import numpy as np

from codesign.certificate_shared import Mask
from codesign.design import evaluate
from codesign.errors import InfeasibleError
from codesign.problem import Problem
from codesign.program import Array
from codesign.search import never
from codesign.search.shared_rig import Hunt
from codesign.study.common import Resolved, resolve
from codesign.study.levers import Lever, applicable
from codesign.study.shared_rig_parts import on_rig
from codesign.study.shared_rig_result import Help

#: Step of a lever: this much more (or less, where less is better), whole numbers by one at least. [1]
STEP = 1.25
#: Gain from which a variant counts as helped, and least gain of the worst CNR that is worth telling. [1]
HELPED, WORTH_TELLING = 0.01, 1e-3
#: LEDs and filters of the best closed-form estimates that are worked out.
TRIED = 3
#: Changes of the worst CNR below this are none. [1]
ROUND_OFF = 1e-6
#: CNR that stands for none.
NEXT_TO_NOTHING = 1e-9
#: Gap to which each change is proven.
GAP = 1e-3
#: Levers that would change what the rig has in common in another way for each variant.
NOT_IN_COMMON = ("f-number",)
#: Limits that a lever loosens, by the start of their names: where none of them binds it does not help.
LOOSENED: Mapping[str, tuple[str, ...]] = {
    "exposure": ("motion blur", "wanted longest exposure"),
    "frame rate": ("frame period", "pulse duty", "rig heat", "supply power"),
    "rig heat": ("rig heat",),
    "supply": ("supply",),
    "driver current": ("current",),
    "full well": ("well",),
}

Change = tuple[str, Callable[[str, Problem], Problem]]


def helpful_changes(
    hunt: Hunt,
    rig: int,
    leds: Mask,
    problems: Mapping[str, Problem],
    resolved: Mapping[str, Resolved | None],
    stop: Callable[[], bool] = never,
) -> tuple[Help, ...]:
    """Changes that help some variants, those that help most of them first, then by the gain of the worst CNR.

    Parameters
    ----------
    hunt : Hunt
        At the junction temperatures of the rig found.
    rig : int
        Its number.
    leds : (L,) bool array
    problems : mapping
        Variants with all parts in common.
    resolved : mapping
        Optimum of each variant on the rig.
    stop : callable
        Asked between changes.
    """
    found = []
    for name, change in _changes(hunt, rig, leds, problems, resolved):
        if stop():
            break
        told = _worked_out(name, change, problems, resolved)
        if told is not None:
            found.append(told)
    return tuple(sorted(found, key=lambda one: (-one.helped, -one.worst_gain)))


def _changes(
    hunt: Hunt, rig: int, leds: Mask, problems: Mapping[str, Problem], resolved: Mapping[str, Resolved | None]
) -> Iterator[Change]:
    """Names of changes and what they make of a variant's problem on the rig; by name and problem."""
    now = np.array([0.0 if one is None else one.cnr for one in resolved.values()])
    parts, ids = hunt.space.rig(rig), [channel.id for channel in hunt.space.problem.channels]
    own = [ids[place] for place in np.flatnonzero(leds)]
    for led in _promising(_with_led(hunt, rig, leds), now, np.flatnonzero(~leds)):

        def more(name: str, problem: Problem, led: str = ids[led]) -> Problem:
            return on_rig(problems[name], parts.camera, parts.filter, parts.f_number, [*own, led])

        yield f"one more LED channel, {ids[led]}", more
    others = np.array([place for place, part in enumerate(hunt.space.problem.filters) if part.id != parts.filter])
    for place in _promising(_with_filter(hunt, rig, leds), now, others):

        def wheel(name: str, problem: Problem, place: int = int(place)) -> Problem:
            other = hunt.space.problem.filters[place].id
            second = on_rig(problems[name], parts.camera, other, parts.f_number, own)
            return replace(problem, filters=(*problem.filters, *second.filters))

        yield f"a second filter to change to, {hunt.space.problem.filters[place].id}", wheel
    for lever in _levers(problems):
        yield _step_of(lever, next(iter(problems.values())))


def _with_led(hunt: Hunt, rig: int, leds: Mask) -> Array:
    """Closed-form CNR of every variant with each LED besides, relative to now. (V, L)"""
    masks = np.vstack([leds | np.eye(leds.size, dtype=bool), leds])
    one = np.arange(len(hunt.space)) == rig
    found = []
    for variant in hunt.variants:
        variant.look(one)
        found.append(variant.closed_of_rig(rig, masks, 0.0))
    return _ratios(np.array(found)[:, :-1], np.array(found)[:, -1])


def _with_filter(hunt: Hunt, rig: int, leds: Mask) -> Array:
    """Closed-form CNR of every variant with each filter instead, relative to now. (V, F)"""
    found = np.array([variant.closed_of_filters(rig, leds) for variant in hunt.variants])
    return _ratios(found, found[:, rig % found.shape[1]])


def _ratios(found: Array, now: Array) -> Array:
    """Estimates (V, N) relative to those of the rig as it is (V,), at least 1; infinite where it shows nothing."""
    return np.maximum(np.divide(found, now[:, None], out=np.full_like(found, np.inf), where=now[:, None] > 0), 1.0)


def _promising(estimate: Array, now: Array, choices: np.ndarray) -> list[int]:
    """The choices that raise the worst CNR most and that help most variants, by estimates relative to now (V, N)."""
    if not choices.size:
        return []
    best = estimate[:, choices] * np.maximum(now, NEXT_TO_NOTHING)[:, None]
    worst = best.min(axis=0)
    helped = (estimate[:, choices] > 1 + HELPED).sum(axis=0)
    by_worst, by_count = np.lexsort((-helped, -worst)), np.lexsort((-worst, -helped))
    picked = dict.fromkeys(int(k) for pair in zip(by_worst, by_count, strict=True) for k in pair)
    useful = [k for k in picked if helped[k] or worst[k] > now.min() * (1 + WORTH_TELLING)]
    return [int(choices[k]) for k in useful[:TRIED]]


def _levers(problems: Mapping[str, Problem]) -> Sequence[Lever]:
    """Levers that every variant has."""
    sets = [applicable(problem)[0] for problem in problems.values()]
    names = set.intersection(*({lever.name for lever in levers} for levers in sets)) - set(NOT_IN_COMMON)
    return [lever for lever in sets[0] if lever.name in names]


def _step_of(lever: Lever, problem: Problem) -> Change:
    """A lever pulled by a modest step, and how that is told."""
    factor = STEP
    if lever.whole is not None:
        factor = max(STEP, (lever.whole(problem) + 1) / lever.whole(problem))
    elif lever.name == "emitters":
        fewest = min(channel.emitters for channel in problem.channels)
        factor = max(STEP, (fewest + 1) / fewest)

    def change(name: str, own: Problem) -> Problem:
        return lever.change(own, min(factor, lever.most(own)))

    return f"{lever.name}, better by {factor - 1:.0%}", change


def _worked_out(
    name: str,
    change: Callable[[str, Problem], Problem],
    problems: Mapping[str, Problem],
    resolved: Mapping[str, Resolved | None],
) -> Help | None:
    """What a change does to the variants; None where it helps nobody.

    The recipe as it is may already do better on the changed rig, which is quick to say. Re-solved is who is not helped
    by that, and who may be the worst then.
    """
    before = {variant: 0.0 if old is None else old.cnr for variant, old in resolved.items()}
    least, exact = {}, set()
    for variant, old in resolved.items():
        least[variant] = 0.0 if old is None else max(old.cnr, _as_it_is(change(variant, old.problem), old))
        if old is None:
            exact.add(variant)
    while True:
        lowest = min(least, key=lambda variant: least[variant])
        doubtful = [v for v in least if v not in exact and least[v] <= before[v] * (1 + HELPED)]
        doubtful = [v for v in doubtful if _matters(name, resolved[v])]
        wanted = lowest if lowest not in exact else next(iter(doubtful), None)
        if wanted is None:
            break
        least[wanted] = _solved(change(wanted, resolved[wanted].problem), resolved[wanted])
        exact.add(wanted)
    helped = sum(least[v] > before[v] * (1 + HELPED) for v in before)
    worst, now = min(least.values()), min(before.values())
    gain = worst / now - 1 if now > 0 else (np.inf if worst > 0 else 0.0)
    gain = 0.0 if abs(gain) < ROUND_OFF else gain
    if not helped and gain <= WORTH_TELLING:
        return None
    return Help(change=name, helped=helped, worst_cnr=worst, worst_gain=float(gain))


def _matters(name: str, old: Resolved) -> bool:
    """Whether a change may help: a lever that only loosens limits does where one of these binds."""
    loosened = LOOSENED.get(name.split(", ")[0])
    return loosened is None or any(limit.startswith(loosened) for limit in old.binding)


def _as_it_is(changed: Problem, old: Resolved) -> float:
    """CNR of the old settings on the changed rig; 0 where they exceed a limit there."""
    found = evaluate(changed, old.optimum.design)
    return found.cnr if found.feasible else 0.0


def _solved(changed: Problem, old: Resolved) -> float:
    try:
        return resolve(changed, old, gap=GAP).cnr
    except InfeasibleError:
        return 0.0
