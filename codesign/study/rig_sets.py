"""Between one rig for all variants and one for each: the smallest set of rigs, and the smallest filter wheel.

A set of rigs serves each variant on one of them; every rig has a camera, a filter, an f-number and LED channels of its
own. A filter wheel has one camera, one f-number and one set of LED channels, and changes the filter with the variant.
As for one rig in common, everything electronic is set anew for each variant.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from codesign.certificate_shared import Cut
from codesign.errors import ProblemError
from codesign.problem import Problem
from codesign.program import Array
from codesign.search.shared_rig import Hunt, Outcome, Placed
from codesign.search.shared_sets import FoundSet, smallest_cover
from codesign.search.shared_wheel import FoundWheel, smallest_wheel
from codesign.solve_rounds import Clock
from codesign.study.shared_rig import levels_of, outcome_of
from codesign.study.shared_rig_parts import common_problems
from codesign.study.shared_rig_result import VariantOutcome
from codesign.study.shared_rig_rounds import Search, Settled, settled_search
from codesign.study.shared_rig_verify import single_threaded

Progress = Callable[[float, float], None]


@dataclass(frozen=True, slots=True, eq=False)
class SetProof:
    """What the bound on the number of rigs or filters is re-derived from.

    ``problems``, ``junction_c``, ``levels``, ``order`` and ``cuts`` as in `SharedProof`; ``prices`` (V,) of the
    variants, and the largest total that any rig serves at them.
    """

    problems: Mapping[str, Problem]
    junction_c: Mapping[str, Array]
    levels: Array
    order: tuple[int, ...]
    cuts: Mapping[int, tuple[tuple[int, Cut], ...]]
    prices: Array
    largest: float


@dataclass(frozen=True, slots=True, kw_only=True)
class SetRig:
    """One rig of a set: its parts, and the variants that use it."""

    camera: str
    filter: str
    f_number: float
    leds: tuple[str, ...]
    variants: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class RigSet:
    """The smallest set of rigs found: no set of fewer than ``bound`` rigs serves all variants.

    ``status`` is "proven" where the number found is the bound; "open" where the proof leaves a gap, "stopped" where
    time ran out. ``outcomes`` and ``rig_of``, the position of the rig used, are by variant.
    """

    rigs: tuple[SetRig, ...]
    bound: int
    status: str
    outcomes: Mapping[str, VariantOutcome]
    rig_of: Mapping[str, int]
    seconds: float
    residual_k: float
    left_out: tuple[str, ...]
    evidence: SetProof = field(repr=False)

    @property
    def number(self) -> int:
        """Number of rigs."""
        return len(self.rigs)


@dataclass(frozen=True, slots=True, kw_only=True)
class FilterWheel:
    """The smallest filter wheel found: no wheel of fewer than ``bound`` filters serves all variants.

    ``status`` as of `RigSet`; ``outcomes`` and ``filter_of`` are by variant.
    """

    camera: str
    f_number: float
    leds: tuple[str, ...]
    filters: tuple[str, ...]
    bound: int
    status: str
    outcomes: Mapping[str, VariantOutcome]
    filter_of: Mapping[str, str]
    seconds: float
    residual_k: float
    left_out: tuple[str, ...]
    evidence: SetProof = field(repr=False)

    @property
    def number(self) -> int:
        """Number of filters."""
        return len(self.filters)


def smallest_rig_set(
    variants: Mapping[str, Problem],
    *,
    max_led_channels: int | None = None,
    required_cnr: float | None = None,
    time_limit: float | None = None,
    progress: Progress | None = None,
    own: Mapping[str, float] | None = None,
) -> RigSet:
    """Find the fewest rigs that serve all variants at the CNR they require, with a proven lower bound.

    Parameters
    ----------
    variants : mapping
        Problem of each variant by name. Parts that not all of them have are no choice.
    max_led_channels : int, optional
        LED channels of each rig at most; what the problems say by default, else any number.
    required_cnr : float, optional
        CNR that every variant needs; that of its problem by default.
    time_limit : float, optional
        Stop about then. [s]
    progress : callable, optional
        Called with (number of rigs so far, bound so far).
    own : mapping, optional
        CNR of each variant's own best rig, for the regret; unknown by default.

    Raises
    ------
    ProblemError, InfeasibleError
        As `codesign.study.shared_rig.shared_rig`; also when a variant cannot be served by any rig, naming it.

    Examples
    --------
    >>> from codesign import load_problem
    >>> from codesign.study.fields import varied
    >>> base = load_problem("yellow-stain")
    >>> pair = {"near": base, "far": varied(base, {"lighting.distance_mm": 500})}
    >>> smallest_rig_set(pair, max_led_channels=1).number
    1
    """
    started = time.perf_counter()

    def search(hunt: Hunt, levels: Array, start: Placed | None):
        return smallest_cover(hunt, levels, start if isinstance(start, FoundSet) else None, progress)

    settled, problems, left_out, levels = _settled(variants, max_led_channels, required_cnr, time_limit, search)
    best, space = settled.outcome.best, settled.hunt.space
    names, ids = list(problems), [channel.id for channel in space.problem.channels]
    rigs = []
    for place, column in enumerate(best.columns):
        parts = space.rig(column.rig)
        users = tuple(name for name, use in zip(names, best.uses, strict=True) if use == place)
        leds = tuple(ids[led] for led in np.flatnonzero(column.leds))
        rigs.append(
            SetRig(camera=parts.camera, filter=parts.filter, f_number=parts.f_number, leds=leds, variants=users)
        )
    return RigSet(
        rigs=tuple(rigs),
        bound=settled.outcome.bound,
        status=_status(len(rigs), settled),
        outcomes=_outcomes(settled, problems, levels, own),
        rig_of={name: int(use) for name, use in zip(names, best.uses, strict=True)},
        seconds=time.perf_counter() - started,
        residual_k=settled.largest_residual_k,
        left_out=left_out,
        evidence=_proof(settled, problems, levels, settled.outcome.prices, settled.outcome.largest),
    )


def smallest_filter_wheel(
    variants: Mapping[str, Problem],
    *,
    max_led_channels: int | None = None,
    required_cnr: float | None = None,
    time_limit: float | None = None,
    progress: Progress | None = None,
    own: Mapping[str, float] | None = None,
) -> FilterWheel:
    """Find the fewest filters with which one camera and one set of LED channels serve all variants.

    Camera, f-number and LED channels are shared; the filter is one of the wheel, for each variant the one that serves
    it. Parameters and errors as of `smallest_rig_set`; a price budget is refused, since it would have to pay for all
    filters of the wheel.

    Examples
    --------
    >>> from codesign import load_problem
    >>> from codesign.study.fields import varied
    >>> base = load_problem("yellow-stain")
    >>> pair = {"near": base, "far": varied(base, {"lighting.distance_mm": 500})}
    >>> smallest_filter_wheel(pair, max_led_channels=1).number
    1
    """
    started = time.perf_counter()
    for name, problem in variants.items():
        if problem.spec.build.price_budget is not None:
            raise ProblemError(f"filter wheel: variant {name!r} states build.price_budget; remove it for a wheel")

    def search(hunt: Hunt, levels: Array, start: Placed | None):
        return smallest_wheel(hunt, levels, start if isinstance(start, FoundWheel) else None, progress)

    settled, problems, left_out, levels = _settled(variants, max_led_channels, required_cnr, time_limit, search)
    best, space = settled.outcome.best, settled.hunt.space
    parts, filters = space.rig(best.first), space.problem.filters
    ids = [channel.id for channel in space.problem.channels]
    return FilterWheel(
        camera=parts.camera,
        f_number=parts.f_number,
        leds=tuple(ids[led] for led in np.flatnonzero(best.leds)),
        filters=tuple(filters[place].id for place in best.filters),
        bound=settled.outcome.bound,
        status=_status(len(best.filters), settled),
        outcomes=_outcomes(settled, problems, levels, own),
        filter_of={name: filters[int(use)].id for name, use in zip(problems, best.uses, strict=True)},
        seconds=time.perf_counter() - started,
        residual_k=settled.largest_residual_k,
        left_out=left_out,
        evidence=_proof(settled, problems, levels, np.zeros(len(problems)), 0.0),
    )


def _settled(
    variants: Mapping[str, Problem],
    max_led_channels: int | None,
    required_cnr: float | None,
    time_limit: float | None,
    find: Callable[[Hunt, Array, Placed | None], Outcome],
) -> tuple[Settled, dict[str, Problem], tuple[str, ...], Array]:
    """Rounds over junction temperatures of a search for several rigs."""
    problems, left_out = common_problems(variants, max_led_channels)
    required = {name: p.spec.required_cnr if required_cnr is None else required_cnr for name, p in problems.items()}
    levels = levels_of(required)

    def search(hunt: Hunt, start: Placed | None) -> Outcome:
        return find(hunt, levels, start)

    wanted: Search = search
    with single_threaded():
        return settled_search(problems, wanted, Clock.lasting(time_limit), levels), problems, left_out, levels


def _status(number: int, settled: Settled) -> str:
    if number <= settled.outcome.bound:
        return "proven"
    return "stopped" if settled.outcome.stopped else "open"


def _outcomes(
    settled: Settled, problems: Mapping[str, Problem], levels: Array, own: Mapping[str, float] | None
) -> dict[str, VariantOutcome]:
    return {
        name: outcome_of(name, problems[name], found, (own or {}).get(name, float("nan")), float(level), needed=True)
        for (name, found), level in zip(settled.resolved.items(), levels, strict=True)
    }


def _proof(settled: Settled, problems: Mapping[str, Problem], levels: Array, prices: Array, largest: float) -> SetProof:
    hunt = settled.hunt
    return SetProof(
        problems=dict(problems),
        junction_c=settled.junction_c,
        levels=levels,
        order=tuple(hunt.in_order()),
        cuts={rig: tuple((place, cut) for place, cut, _ in own) for rig, own in hunt.cuts.items() if own},
        prices=prices,
        largest=largest,
    )
