"""Where to look at a trade-off: limits put on a quantity one after another, each problem solved with proof.

What is known after some solves is a band: below it recipes that are there, above it nothing that could be. New limits
go where the band is high and wide and the curve seems to bend, and round the least that is enough.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from codesign.assemble_conflicts import no_step_fits
from codesign.build import build_limits, other_prices, root_box
from codesign.design import Performance
from codesign.errors import InfeasibleError
from codesign.least_cost import WHOLE, priced, used, with_limit
from codesign.problem import Problem
from codesign.study.common import Resolved, resolve

#: Factor from limit to limit on the way down, where the least worth showing is not known.
DESCENT = 4.0
#: The way down ends at this share of the greatest CNR, or after so many limits.
LEAST_SHARE, LONGEST_DESCENT = 0.1, 5
#: Limits tried below, each lower by the square of the factor, where even that is more than enough.
FURTHER_DOWN = 4
#: Bands lower than this share of the greatest CNR are known well enough.
CLEAR = 3e-3
#: What the height of a band counts beside what the curve bends there.
HEIGHT_COUNTS = 0.15
#: A limit this much tighter excludes what uses the whole of it; well above round-off, below any price step.
JUST_LESS = 1e-6
#: Ends this near to each other are one.
NEXT_TO = 1e-3
#: The least that is enough is found to this share, in so many solves at most.
ENOUGH_GAP, LONGEST_SEARCH, LAST_SEARCH = 1e-2, 14, 3


@dataclass(slots=True, eq=False)
class Solved:
    """The problem under one limit: the optimum with its proof and the settable recipe, and what they use.

    ``passing`` marks solves on the way to the least that is enough.
    """

    limit: float
    found: Resolved | None = None
    recipe: Performance | None = None
    used: float = np.nan
    recipe_used: float = np.nan
    reason: str = ""
    limits: tuple[str, ...] = ()
    passing: bool = False

    @property
    def cnr(self) -> float:
        """CNR of the optimum, 0 where the limits cannot be met."""
        return 0.0 if self.found is None else self.found.cnr

    @property
    def bound(self) -> float:
        """No recipe within the limit has a CNR above this."""
        return 0.0 if self.found is None else self.found.bound

    @property
    def recipe_cnr(self) -> float:
        """CNR of the settable recipe, 0 where there is none."""
        return 0.0 if self.recipe is None else self.recipe.cnr


@dataclass(slots=True)
class Curve:
    """Problems solved so far along one quantity; ``problem`` has no limit of its own on it."""

    problem: Problem
    quantity: str
    steps: bool
    gap: float
    progress: Callable[[int, int], None] | None = None
    expected: int = 0
    resolves: int = 0
    solved: list[Solved] = field(default_factory=list)

    @classmethod
    def of(cls, problem: Problem, quantity: str, *, steps: bool, gap: float, progress=None) -> Curve:
        """Nothing solved yet."""
        problem = with_limit(problem, quantity, None)
        return cls(priced(problem) if quantity == "price" else problem, quantity, steps, gap, progress)

    def trace(self, points: int, required: float | None, own: float | None) -> None:
        """Solve the ends, the problem's own limit, round what is enough, and where the curve bends."""
        self.expected = points + (0 if required is None or self.whole else LONGEST_SEARCH // 2)
        top = self._open()
        if own is not None and self._least() <= own < top.limit:
            self._at(own)
        self._down(required, points)
        if required is not None:
            self._further_down(required)
            self._close_in(required)
        while len(self.shown()) < points and len(self.solved) < 2 * self.expected:
            limit = self._next()
            if limit is None:
                break
            self._at(limit)

    @property
    def whole(self) -> bool:
        """Whether the quantity comes in whole numbers."""
        return self.quantity in WHOLE

    def ordered(self) -> list[Solved]:
        """Everything solved, the tightest limit first."""
        return sorted(self.solved, key=lambda solved: solved.limit)

    def shown(self) -> list[Solved]:
        """What makes the curve: of all that use the same the one under the loosest limit, the tightest limit first."""
        found: dict[str, Solved] = {}
        for solved in self.ordered():
            if not solved.passing:
                found["" if solved.found is None else f"{solved.used:.9g}"] = solved
        return list(found.values())

    def cheapest(self, cnr: float) -> Solved | None:
        """The solve whose settable recipe reaches a CNR with the least."""
        reached = [solved for solved in self.solved if solved.recipe_cnr >= cnr]
        return min(reached, key=lambda solved: (solved.recipe_used, solved.limit), default=None)

    def bracket(self, cnr: float) -> dict[str, float]:
        """What a settable recipe of that CNR uses at least so far, and the limit under which none reaches it."""
        enough, least = self.cheapest(cnr), self._least()
        impossible = least - 1 if self.whole else least * (1 - JUST_LESS)
        short = [impossible, *(solved.limit for solved in self.solved if solved.bound < cnr)]
        return {"value": np.inf if enough is None else enough.recipe_used, "bound": max(short)}

    # --- solving --------------------------------------------------------------------------------------------

    def _open(self) -> Solved:
        """The problem without a limit; what it uses is the end of the curve."""
        found = self._solve(self.problem)
        recipe = self._recipe(found)
        if recipe is None:
            raise no_step_fits(self.problem)
        top = self._kept(found, recipe, 0.0)
        top.limit = max(top.used, top.recipe_used)
        return top

    def _at(self, limit: float, *, passing: bool = False) -> Solved:
        """Solve under a limit, starting from the nearest result."""
        limited = with_limit(self.problem, self.quantity, limit)
        try:
            found = self._solve(limited, self._nearest(limit))
        except InfeasibleError as error:
            text = str(error).removeprefix(f"{self.problem.where}: ")
            self.solved.append(Solved(limit, reason=text, limits=error.limits, passing=passing))
            return self.solved[-1]
        kept = self._kept(found, self._recipe(found), limit)
        kept.passing = passing
        for other in self.solved:  # rounding to steps is not the best there is; what is known to be better stands
            if other.recipe_used <= limit and other.recipe_cnr > kept.recipe_cnr:
                kept.recipe, kept.recipe_used = other.recipe, other.recipe_used
        return kept

    def _solve(self, problem: Problem, near: Resolved | None = None) -> Resolved:
        try:
            return resolve(problem, near, gap=self.gap)
        finally:
            self.resolves += 1
            if self.progress is not None:
                self.progress(self.resolves, max(self.expected, self.resolves + 1))

    def _recipe(self, found: Resolved) -> Performance | None:
        solution = found.solution()
        return None if solution is None or not solution.recipe.cnr > 0 else solution.recipe

    def _kept(self, found: Resolved, recipe: Performance | None, limit: float) -> Solved:
        # LEDs lit by less than half a setting step are dust of the search: nobody would buy them.
        design = replace(found.optimum.design, drive_ma=found.drive_ma)
        optimum = replace(found.optimum, design=design) if self.steps else found.optimum
        spent = [float(used(found.problem, self.quantity, each)) for each in (optimum, recipe or optimum)]
        self.solved.append(Solved(limit, found, recipe, *spent))
        return self.solved[-1]

    def _nearest(self, limit: float) -> Resolved | None:
        """The result under the nearest limit, by ratio."""
        usable = [solved for solved in self.solved if solved.found is not None]
        return min(usable, key=lambda solved: abs(math.log(solved.limit / limit)) if limit > 0 else 0.0).found

    # --- where to look --------------------------------------------------------------------------------------

    def _least(self) -> float:
        """The tightest limit that can be met at all, as far as it is known without solving."""
        if self.quantity == "exposure":
            shortest = min(camera.exposure_min_us for camera in self.problem.cameras)
            return max(shortest, self.problem.spec.timing.exposure_min_us or 0.0)
        if self.quantity == "leds":
            return float(max(1, root_box(self.problem).low.sum()))
        return _least_price(self.problem) if self.quantity == "price" else 0.0

    def _down(self, required: float | None, points: int) -> None:
        """The lower end of the curve."""
        top, least = self.solved[0], self._least()
        if self.steps:
            if least < top.limit * (1 - NEXT_TO):
                self._at(least)
            return
        low = LEAST_SHARE * top.cnr if required is None else min(LEAST_SHARE * top.cnr, required)
        limit = top.limit
        for _ in range(min(LONGEST_DESCENT, max(points - len(self.solved), 1))):
            limit = max(limit / DESCENT, least)
            if not 0 < limit < top.limit * (1 - NEXT_TO) or self._at(limit).bound <= low or limit == least:
                return

    def _next(self) -> float | None:
        """The limit that tells most about the curve, None where it is known well enough everywhere."""
        known = self.shown()
        if len(known) < 2:
            return None
        span = self._place(known[-1].limit) - self._place(known[0].limit)
        best, where = 0.0, None
        for k, (low, high) in enumerate(itertools.pairwise(known)):
            limit, width = self._between(low, high, span)
            height = high.bound - max(solved.cnr for solved in known[: k + 1])
            if limit is None or height <= (0.0 if self.whole else CLEAR * known[-1].cnr):
                continue
            bend = 1.0 if self.steps else self._bend(known, k) / height + HEIGHT_COUNTS
            if width * height * bend > best:
                best, where = width * height * bend, limit
        return where

    def _between(self, low: Solved, high: Solved, span: float) -> tuple[float | None, float]:
        """A limit inside an interval about which nothing is known, and how wide that is in the figure."""
        start, end = low.limit, high.used if high.found is not None else high.limit
        if self.whole:
            middle = math.floor((start + high.limit) / 2)
            return (float(middle) if start < middle < high.limit else None), (high.limit - start) / span
        width = (self._place(end) - self._place(start)) / span if end > start else 0.0
        if end <= start * (1 + 10 * JUST_LESS) or width <= 0:
            return None, 0.0
        if self.steps:
            # What held on so far is likely to hold on up to the step; that nothing cheaper is better closes the gap.
            holds_on = start - low.used >= end - start
            return end * (1 - JUST_LESS) if holds_on else (start + end) / 2, width
        return math.sqrt(start * end), width

    def _bend(self, known: list[Solved], k: int) -> float:
        """How far the middle of an interval may be off its chord, by the slopes to either side."""
        x, y = np.array([(self._place(solved.limit), solved.cnr) for solved in known[max(k - 1, 0) : k + 3]]).T
        here = k - max(k - 1, 0)
        middle, chord = (x[here] + x[here + 1]) / 2, (y[here] + y[here + 1]) / 2
        off = 0.0
        for a, b in ((here - 1, here), (here + 1, here + 2)):
            if a >= 0 and b < len(x) and x[b] > x[a]:
                nearer = b if a < here else a
                expected = y[nearer] + (y[b] - y[a]) / (x[b] - x[a]) * (middle - x[nearer])
                off = max(off, abs(expected - chord))
        return min(off, (y[here + 1] - y[here]) / 2) if len(x) > 2 else (y[here + 1] - y[here]) / 2

    def _place(self, value: float) -> float:
        """Where a value stands in the figure."""
        return value if self.steps else math.log(value)

    # --- what is enough -------------------------------------------------------------------------------------

    def _close_in(self, required: float) -> None:
        """Find the least that reaches a CNR, from both sides."""
        for count in range(LONGEST_SEARCH):
            limit = self._narrowed(required, halve=count % 3 == 2)
            if limit is None:
                break
            self._at(limit, passing=True)
        for _ in range(LAST_SEARCH):
            enough = self.cheapest(required)
            if enough is None or not 0 < enough.recipe_used * (1 + ENOUGH_GAP) < enough.limit:
                return
            self._at(enough.recipe_used, passing=True)  # what is best with just that much

    def _further_down(self, required: float) -> None:
        """Below the curve, where even its lower end reaches the CNR required."""
        for _ in range(FURTHER_DOWN):
            low = self.ordered()[0]
            limit = max(low.limit / DESCENT**2, self._least())
            if self.steps or low.bound < required or not 0 < limit < low.limit * (1 - NEXT_TO):
                return
            self._at(limit, passing=True)

    def _narrowed(self, required: float, *, halve: bool) -> float | None:
        """The next limit to try, None when value and bound agree or nothing more can be told.

        Between them may lie limits under which the optimum reaches the CNR but no settable recipe, or which the gap
        of the proofs leaves open: above these a recipe is looked for, below these a proof.
        """
        bracket = self.bracket(required)
        value, bound = bracket["value"], bracket["bound"]
        if not np.isfinite(value) or bound <= 0 or value <= bound * (1 + ENOUGH_GAP):
            return None
        open_ = [s.limit for s in self.solved if bound < s.limit < value and s.recipe_cnr < required <= s.bound]
        for low, high, side in ((max([bound, *open_]), value, 1), (bound, min([value, *open_]), -1)):
            if self.whole:
                if high - low > 1:
                    return float(math.floor((low + high) / 2))
            elif self.steps:
                if high > low * (1 + ENOUGH_GAP):
                    return math.sqrt(low * high) if high > low * (1 + 10 * ENOUGH_GAP) else high * (1 - JUST_LESS)
            elif high > low * (1 + ENOUGH_GAP):
                guess = math.sqrt(low * high) if halve else self._guess(required, low, high)
                aim = guess * (1 + side * ENOUGH_GAP / 3)
                # Next to an end that is already known there is nothing to learn; the other side comes next.
                if low * (1 + ENOUGH_GAP / 10) < aim < high * (1 - ENOUGH_GAP / 10):
                    return aim
                return math.sqrt(low * high)
        return None

    def _guess(self, required: float, low: float, high: float) -> float:
        """Where the line between the results to either side meets the CNR."""
        ordered = [solved for solved in self.ordered() if solved.cnr > 0]
        below = [s for s in ordered if s.cnr < required]
        above = [s for s in ordered if s.cnr >= required]
        if not below or not above:
            return math.sqrt(low * high)
        a, b = below[-1], above[0]
        share = (math.log(required / a.cnr) / math.log(b.cnr / a.cnr)) if b.cnr > a.cnr else 0.5
        return math.exp(math.log(a.limit) + share * (math.log(b.limit) - math.log(a.limit)))


def _least_price(problem: Problem) -> float:
    """What the cheapest camera and filter cost with the LEDs that are bought in any case, or the cheapest one."""
    budget = with_limit(problem, "price", 1.0)  # only to have prices worked out
    (limit,) = (limit for limit in build_limits(budget) if limit.name == "price")
    others = min(float(np.min(other_prices(budget, camera))) for camera in budget.cameras)
    bought = root_box(problem).low
    own = float(limit.cost(bought).sum())
    dark = not problem.ambient.any() and not bought.any()
    return others + (float((limit.first + limit.each).min()) if dark else own)
