"""Least price, rig heat, exposure or number of LEDs that still reaches a required CNR, with a proven lower bound.

The best CNR never falls when the limit on the quantity is loosened, so bisection finds where it crosses what is
required: at the upper end a settable recipe reaches it, at the lower end no recipe can.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from codesign.build import part_price, units_in_use
from codesign.design import Performance
from codesign.display import Displayed
from codesign.errors import InfeasibleError, ProblemError
from codesign.limit_use import recipe_price
from codesign.problem import Problem
from codesign.solve import Solution, solution_of
from codesign.solve_rounds import Clock, Search, search_rounds

#: What can be made least, and its unit.
QUANTITIES = {"price": "", "heat": "W", "exposure": "us", "leds": ""}
#: Where the problem keeps its limit on each, and how that limit is called.
FIELDS = {
    "price": ("build", "price_budget"),
    "heat": ("limits", "rig_heat_w"),
    "exposure": ("timing", "exposure_max_us"),
    "leds": ("build", "max_led_channels"),
}
LIMIT_NAMES = {
    "price": "price", "heat": "rig heat", "exposure": "wanted longest exposure", "leds": "LED channels",
}  # fmt: skip
#: Those that come in whole numbers.
WHOLE = frozenset({"leds"})
#: Bisection ends when value and proven bound agree to this share.
DEFAULT_GAP = 1e-2
#: Gap of the CNR in each step: a small one, so that few limits are left undecided.
CNR_GAP = 1e-3
LARGEST_NUMBER_OF_STEPS = 60
#: The CNR aimed at is above the one required by what rounding to setting steps costs, at most by this share.
LARGEST_MARGIN = 0.1
#: Share of the value below which no bound is looked for.
NEXT_TO_NOTHING = 1e-6


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class LeastCost(Displayed):
    """The least value found and what is proven.

    ``value`` is what the settable recipe of ``solution`` uses, in ``unit``; no recipe that uses ``bound`` or less
    reaches ``required_cnr`` (at the junction temperatures of its proof). ``status`` is "proven", or "stopped" when
    time ran out first. Where setting steps are coarse the two differ by more than the gap asked for.
    """

    quantity: str
    unit: str
    value: float
    bound: float
    required_cnr: float
    status: str
    steps: int
    seconds: float
    solution: Solution = field(repr=False)

    @property
    def gap(self) -> float:
        """Relative distance of the value above the bound."""
        return self.value / self.bound - 1 if self.bound > 0 else np.inf


def least_cost(
    problem: Problem,
    minimise: str,
    required_cnr: float | None = None,
    *,
    gap: float = DEFAULT_GAP,
    time_limit: float | None = None,
    progress: Callable[[float, float], None] | None = None,
) -> LeastCost:
    """Find the least price, rig heat, exposure or number of LED channels that still reaches a CNR.

    Parameters
    ----------
    problem : Problem
        Its own limits stay.
    minimise : {"price", "heat", "exposure", "leds"}
        Price of camera, filters and emitters; mean heat of all LEDs [W]; exposure [us]; number of LED channels.
    required_cnr : float, optional
        The problem's own ``required_cnr`` by default.
    gap : float
        Relative gap to prove. [1]
    time_limit : float, optional
        Stop about then with the best so far. [s]
    progress : callable, optional
        Called with (value reached so far, proven bound so far).

    Returns
    -------
    LeastCost

    Raises
    ------
    InfeasibleError
        When the CNR cannot be reached at all; says the greatest that can.
    ProblemError
        When nothing says which CNR is required, or what to make least is unknown.
    """
    started = time.perf_counter()
    if minimise not in QUANTITIES:
        raise ProblemError(f"least cost: {minimise!r} cannot be minimised, must be one of {', '.join(QUANTITIES)}")
    required = problem.spec.required_cnr if required_cnr is None else required_cnr
    if required is None or not required > 0:
        raise ProblemError(f"{problem.where}: required_cnr is {required}, must be above 0; say which CNR is needed")
    problem = priced(problem) if minimise == "price" else problem
    return _Bisection(problem, minimise, required, Clock.lasting(time_limit)).run(gap, started, progress)


@dataclass(slots=True)
class _Bisection:
    """Both ends: a recipe that reaches the CNR, and a limit at which none does."""

    problem: Problem
    quantity: str
    required: float
    clock: Clock
    best: Solution | None = None
    value: float = np.inf
    bound: float = 0.0
    near: Search | None = None
    steps: int = 0
    margin: float = CNR_GAP

    def run(self, gap: float, started: float, progress: Callable[[float, float], None] | None) -> LeastCost:
        """Narrow the interval from above, by settable recipes, then from below, by proofs."""
        self._open()
        try:
            self._narrow(gap, progress)
        except KeyboardInterrupt:
            self.clock.interrupted = True
        return LeastCost(
            quantity=self.quantity,
            unit=QUANTITIES[self.quantity],
            value=float(self.value),
            bound=float(self.bound),
            required_cnr=self.required,
            status="stopped" if self.clock() and self.value > self.bound * (1 + gap) else "proven",
            steps=self.steps,
            seconds=time.perf_counter() - started,
            solution=self.best,
        )

    def _narrow(self, gap: float, progress: Callable[[float, float], None] | None) -> None:
        floor, open_ = 0.0, self.value
        for from_below in (False, True):
            while self.steps < LARGEST_NUMBER_OF_STEPS and not self.clock():
                low, high = (self.bound, open_) if from_below else (floor, self.value)
                if high <= low * (1 + gap) or high < NEXT_TO_NOTHING * self.value:
                    break
                limit = float(np.sqrt(low * high)) if low > 0 else high / 4
                if self.quantity in WHOLE:
                    if high - low <= 1:
                        break
                    limit = min(max(float(round(limit)), low + 1), high - 1)
                reached, proven = self._step(limit, 0.0 if from_below else self.margin)
                if proven:
                    self.bound = max(self.bound, limit)
                elif not reached:  # an optimum may reach it, its settable recipe does not
                    open_ = min(open_, limit)
                floor = floor if reached else max(floor, limit)
                open_ = min(open_, self.value)
                if progress is not None:
                    progress(self.value, self.bound)

    def _open(self) -> None:
        """Reach the CNR without a limit on the quantity, or say the greatest CNR there is."""
        reached, _ = self._step(np.inf, self.margin)
        if reached:
            return
        search = search_rounds(self.problem, CNR_GAP, clock=self.clock, start=self.near)
        best = None if search.best is None else solution_of(search, CNR_GAP, time.perf_counter())
        if best is not None and best.recipe.cnr >= self.required:
            self._take(best)
            return
        greatest = 0.0 if best is None else best.recipe.cnr
        top = 0.0 if best is None else best.certificate.bound
        raise InfeasibleError(
            f"{self.problem.where}: CNR {self.required:g} cannot be reached; the greatest reached is {greatest:.5g}, "
            f"none is above {top:.5g}; loosen "
            + (", ".join(best.binding) if best is not None and best.binding else "the limits"),
            list(best.binding) if best is not None else ["candidates"],
        )

    def _step(self, limit: float, margin: float) -> tuple[bool, bool]:
        """Search under a limit: whether a settable recipe reaches the CNR, and whether it is proven that none can.

        ``margin`` raises the CNR looked for, to leave room for setting steps; what stays below it is looked at no
        further, so a proof wants none.
        """
        self.steps += 1
        try:
            limited = limited_to(self.problem, self.quantity, limit)
            aim = self.required * (1 + margin)
            search = search_rounds(limited, CNR_GAP, clock=self.clock, enough=aim, start=self.near)
        except InfeasibleError:
            return False, True
        if search.best is None:
            return False, not search.stopped
        highest = float(search.walk.upper.max())
        if highest < self.required:
            return False, True
        self.near = search
        try:
            found = solution_of(search, CNR_GAP, time.perf_counter())
        except InfeasibleError:
            return False, False
        if found.recipe.cnr < self.required:
            loss = found.certificate.value / max(found.recipe.cnr, 1e-300) - 1
            self.margin = min(max(self.margin, loss), LARGEST_MARGIN)
            return False, False
        self._take(found)
        return True, False

    def _take(self, found: Solution) -> None:
        value = used(found.problem, self.quantity, found.recipe)
        if value < self.value:
            self.value, self.best = value, found


def used(problem: Problem, quantity: str, recipe: Performance) -> float:
    """What a recipe uses of a quantity."""
    if quantity == "exposure":
        return recipe.design.exposure_us
    if quantity == "heat":
        return sum(s.emitters * (s.electrical_w - s.optical_w) for s in recipe.leds) * recipe.duty
    if quantity == "leds":
        return float(np.count_nonzero(units_in_use(problem, recipe.design.drive_ma, recipe.design.emitters)))
    return recipe_price(problem, recipe.design)


def limited_to(problem: Problem, quantity: str, limit: float) -> Problem:
    """The problem with a (tighter) limit on a quantity; ``inf`` leaves it as it is."""
    if not np.isfinite(limit):
        return problem
    section, key = FIELDS[quantity]
    own = getattr(getattr(problem.spec, section), key)
    return with_limit(problem, quantity, limit if own is None else min(own, limit))


def with_limit(problem: Problem, quantity: str, limit: float | None) -> Problem:
    """The problem with that limit on a quantity in place of its own; None for none."""
    spec, (section, key) = problem.spec, FIELDS[quantity]
    value = int(limit) if quantity in WHOLE and limit is not None else limit
    changed = getattr(spec, section).model_copy(update={key: value})
    return replace(problem, spec=spec.model_copy(update={section: changed}))


def priced(problem: Problem) -> Problem:
    """The problem without parts of unknown price."""
    cameras = tuple(camera for camera in problem.cameras if not np.isnan(part_price(problem, camera)))
    channels = tuple(channel for channel in problem.channels if not np.isnan(part_price(problem, channel.led)))
    filters = problem.filters
    prices = np.array([part_price(problem, part) for part in filters]) if len(filters) < 10_000 else np.zeros(1)
    if np.isnan(prices).any():
        filters = tuple(part for part, price in zip(filters, prices, strict=True) if not np.isnan(price))
    for kind, parts in (("cameras", cameras), ("LEDs", channels), ("filters", filters)):
        if not len(parts):
            raise ProblemError(f"{problem.where}: none of the candidate {kind} has a price; give prices")
    return replace(problem, cameras=cameras, channels=channels, filters=filters)
