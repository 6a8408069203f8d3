"""Rounds of the search for a rig in common, until the junction temperatures assumed are those its recipes lead to.

The proof of each round holds at stated junction temperatures, of every variant its own. The recipes of the best rig
lead to others; the next round starts from these, and from what the last one found worth trying. LEDs that are off count
as cool as the air, or as warm as they last were when lit.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from codesign.assemble_conflicts import nothing_seen, require_usable_leds
from codesign.build import require_buildable
from codesign.certificate_shared import Mask, mask_of
from codesign.errors import InfeasibleError
from codesign.problem import Problem
from codesign.program import Array
from codesign.search.shared import Judge, Reached
from codesign.search.shared_rig import Hunt, Outcome, Placed
from codesign.search.shared_space import Rig, RigSpace
from codesign.solve_rounds import JUNCTION_TOLERANCE_K, Clock
from codesign.study.common import Known, Resolved, resolve
from codesign.study.shared_rig_parts import on_rig

#: Rounds before the residual is stated as it is.
LARGEST_NUMBER_OF_ROUNDS = 8
#: Gap to which recipes on the rig found are proven.
RECIPE_GAP = 1e-4
#: Share of a CNR that leaving out LEDs may cost.
NO_LOSS = 1e-4

Search = Callable[[Hunt, Placed | None], Outcome]


@dataclass(frozen=True, slots=True, eq=False)
class Settled:
    """The last round: its hunt and outcome, the optimum of each variant on the rig found, and the residual. [K]

    A variant that shows nothing on that rig has None.
    """

    hunt: Hunt = field(repr=False)
    outcome: Outcome = field(repr=False)
    resolved: dict[str, Resolved | None] = field(repr=False)
    junction_c: dict[str, Array] = field(repr=False)
    rounds: int
    residual_k: float

    @property
    def largest_residual_k(self) -> float:
        """Largest difference of the junction temperatures the proof assumes from those that the optima lead to. [K]"""
        own = (found.certificate.junction_residual_k for found in self.resolved.values() if found is not None)
        return max([self.residual_k, *own])


def settled_search(
    problems: Mapping[str, Problem], search: Search, clock: Clock, levels: Array | None = None
) -> Settled:
    """Search again at the junction temperatures found until these agree with the best rig.

    Parameters
    ----------
    problems : mapping
        As `common_problems` returns them.
    search : callable
        Outcome from (hunt, what to start from).
    clock : Clock
    levels : (V,) array, optional
        CNR that each variant needs, for messages; any at all by default.

    Raises
    ------
    InfeasibleError
        Naming the variants that cannot be served.
    """
    first = next(iter(problems.values()))
    space = RigSpace(first)
    junction = {name: np.full(len(first.channels), p.spec.temperature.air_c) for name, p in problems.items()}
    hunt, start, resolved, residual = None, None, {}, np.inf
    for attempt in range(LARGEST_NUMBER_OF_ROUNDS):
        new = Hunt([_judge(name, p, junction[name], space) for name, p in problems.items()], space, clock)
        if hunt is not None:
            new.learn_from(hunt)
        found = search(new, start)
        if found.best is None and attempt and clock():
            break  # stopped before anything was worked out at these temperatures: the last round stands
        hunt, outcome = new, found
        if outcome.best is None:
            raise unserved(hunt, np.full(len(problems), 1e-9) if levels is None else levels)
        places = outcome.best.places(len(problems))
        if not (resolved and start is not None and _same(places, start.places(len(problems)))):
            resolved = _resolved(hunt, places)
            _trim(outcome, resolved, hunt, levels)
            places = outcome.best.places(len(problems))
        settled = {
            name: _reached(junction[name], place[1], one)
            for (name, one), place in zip(resolved.items(), places, strict=True)
        }
        residual = max(float(np.max(np.abs(settled[name] - junction[name]), initial=0.0)) for name in problems)
        stated = junction
        if attempt and (residual <= JUNCTION_TOLERANCE_K or clock()):
            break
        start, junction = outcome.best, settled
    return Settled(hunt, outcome, resolved, stated, attempt + 1, residual)


def _judge(name: str, problem: Problem, junction_c: Array, space: RigSpace) -> Judge:
    try:
        require_usable_leds(problem)
        require_buildable(problem)
        return Judge(name, problem, junction_c, space)
    except InfeasibleError as error:
        raise named(name, error) from None


def named(name: str, error: InfeasibleError) -> InfeasibleError:
    """The same error, with the name of its variant where it does not say."""
    text = str(error)
    return error if repr(name) in text else InfeasibleError(f"variant {name!r}: {text}", error.limits)


def _same(some: list[tuple[int, Mask]], others: list[tuple[int, Mask]]) -> bool:
    return all(a[0] == b[0] and (a[1] == b[1]).all() for a, b in zip(some, others, strict=True))


def _resolved(hunt: Hunt, places: list[tuple[int, Mask]]) -> dict[str, Resolved | None]:
    return {v.name: _on(hunt.space, place, v) for v, place in zip(hunt.variants, places, strict=True)}


def _trim(
    outcome: Outcome,
    resolved: dict[str, Resolved | None],
    hunt: Hunt,
    levels: Array | None,
) -> None:
    """Leave out LEDs that no variant lights by half a setting step, where no CNR suffers from that."""
    count, best, space = len(hunt.variants), outcome.best, hunt.space
    places, boards = best.places(count), best.boards(count)
    ids = [channel.id for channel in space.problem.channels]
    forced = mask_of(space.room(places[0][0]).forced, len(ids))
    lit = [forced.copy() for _ in range(max(boards) + 1)]
    for board, found in zip(boards, resolved.values(), strict=True):
        if found is not None:
            lit[board] |= np.isin(ids, list(found.drive_ma))
    if not all(own.any() for own in lit) or all((lit[b] == p[1]).all() for b, p in zip(boards, places, strict=True)):
        return
    trimmed = best.with_boards(lit)
    again = _resolved(hunt, trimmed.places(count))
    needed = np.zeros(count) if levels is None else levels
    for (name, old), level in zip(resolved.items(), needed, strict=True):
        new = again[name]
        if old is not None and (new is None or new.cnr < old.cnr * (1 - NO_LOSS) or new.cnr < level <= old.cnr):
            return
    outcome.best = trimmed
    resolved.update(again)


def _on(space: RigSpace, place: tuple[int, Mask], variant: Judge) -> Resolved | None:
    """Optimum of one variant on a rig with its LEDs, at temperatures that agree with it."""
    number, leds = place
    rig, problem = space.rig(number), variant.problem
    ids = [channel.id for channel in problem.channels]
    small = on_rig(problem, rig.camera, rig.filter, rig.f_number, [ids[led] for led in np.flatnonzero(leds)])
    variant.look(np.arange(len(space)) == number)
    found = variant.best(number, leds)
    try:
        return resolve(small, _known(variant, rig, found) if found.value > 0 else None, gap=RECIPE_GAP)
    except InfeasibleError:
        return None


def _known(variant: Judge, rig: Rig, found: Reached) -> Known:
    """Where the search for the settled optimum starts."""
    chosen = variant.walk.configuration(found.configuration)
    ids = [channel.id for channel in variant.problem.channels]
    return Known(
        camera=rig.camera,
        channel=chosen.setting.channel,
        gain_db=chosen.setting.gain.gain_db,
        f_number=rig.f_number,
        exposure_us=float(found.point[-1]) * 1e6,
        filter=rig.filter,
        sign=chosen.sign,
        junction_c=dict(zip(ids, variant.junction_c.tolist(), strict=True)),
    )


def _reached(assumed: Array, leds: Array, found: Resolved | None) -> Array:
    """Junction temperatures that the recipe of a variant leads to; those of other LEDs stay. (L,)"""
    if found is None:
        return assumed
    settled = assumed.copy()
    settled[leds] = [found.certificate.junction_c[channel.id] for channel in found.problem.channels]
    lit = {state.id for state in found.optimum.leds}
    off = [
        place
        for place, channel in zip(np.flatnonzero(leds), found.problem.channels, strict=True)
        if channel.id not in lit
    ]
    settled[off] = assumed[off]
    return settled


def unserved(hunt: Hunt, levels: Array) -> InfeasibleError:
    """Say which variants no rig can serve, or that no rig in common serves all."""
    everything = np.ones(len(hunt.space), dtype=bool)
    short = []
    for variant, level in zip(hunt.variants, levels, strict=True):
        variant.look(everything)
        top = float(variant.upper.max(initial=0.0))
        if top <= 0:
            return named(variant.name, nothing_seen(variant.walk.assembly))
        if top < level:
            short.append(f"{variant.name!r} has a CNR of {top:.4g} at most, {level:.4g} is required")
    if len(short) == len(hunt.variants) > 1:
        return InfeasibleError(f"shared rig: no variant can have the CNR required, e.g. {short[0]}", ["required_cnr"])
    if short:
        more = f" (and {len(short) - 1} more variants)" if len(short) > 1 else ""
        return InfeasibleError(
            f"shared rig: no rig serves all variants: {short[0]}{more}; lower required_cnr, or ask for the count",
            ["required_cnr"],
        )
    return InfeasibleError(
        "shared rig: nothing in common with so many LED channels serves all variants, though each alone can be served; "
        "allow more channels, lower required_cnr, or ask for the smallest set of rigs",
        ["required_cnr", "LED channels"],
    )
