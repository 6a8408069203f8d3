"""Routes to a CNR that is out of reach: the least change of each single lever, and of the best two together.

Each change is found between two certified re-solves: at the smaller factor the proven bound stays below the CNR asked
for, at the larger the optimum reaches it. Two levers are changed by one common factor, and the pair that needs the
smallest is looked for by elimination: if not even a whole group of levers beside lever *a* reaches the CNR at a factor,
no pair of *a* with one of them does. That, and the search between two factors, takes more of a lever as never worse;
`Lever.monotone` says for which this is certain.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from codesign.design import Design
from codesign.display import Displayed
from codesign.errors import InfeasibleError, ProblemError
from codesign.problem import Problem
from codesign.study.ceiling import Ceiling, ceilings
from codesign.study.common import Resolved, resolve
from codesign.study.ideal import IdealPart, ideal_filters, ideal_led
from codesign.study.levers import Lever, applicable, pulled

#: A least factor f is found to this share of ln f, at least to this factor's excess over 1.
SHARE, EXCESS = 0.01, 5e-4
#: A pair counts when it needs less than this share of what one lever needs, in logarithms.
NOTICEABLE = 0.98
#: First factor tried between two.
PROBE = 1.2
#: Turns of narrowing a factor.
MOST_TURNS = 40
#: Gap that often tells already whether a CNR is reached, and the one that does where it is close.
QUICK_GAP, FINE_GAP = 0.02, 1e-5


@dataclass(frozen=True, slots=True, kw_only=True)
class Route:
    """The least change of one lever, or of two by one factor, that reaches a CNR.

    Attributes
    ----------
    levers : tuple of str
    factor : float or None
        Least factor found; None where no change considered is enough. [1]
    short_factor : float
        Largest factor proven not to be enough: the bound there is ``short_bound``. [1]
    short_bound : float
        Where ``factor`` is None: no more than this is to be had by these levers alone.
    cnr, bound : float or None
        Optimum at ``factor``, before rounding, and its proven bound.
    before, after : mapping
        What is set or bought, with units in the names.
    monotone : bool
        Whether more of each lever provably never hurts.
    design : Design or None
        The recipe at ``factor``.
    """

    levers: tuple[str, ...]
    factor: float | None
    short_factor: float
    short_bound: float
    cnr: float | None = None
    bound: float | None = None
    before: Mapping[str, float] = field(default_factory=dict)
    after: Mapping[str, float] = field(default_factory=dict)
    monotone: bool = True
    design: Design | None = field(default=None, repr=False)


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Routes(Displayed):
    """Everything that could be done about a CNR.

    ``pair`` is None where none reaches it with noticeably less than a single lever; ``pair_floor`` is the factor at
    which no (other) pair does, None where none does at all. ``without`` says why levers are not in the list.
    """

    problem: Problem = field(repr=False)
    required_cnr: float
    start: Resolved = field(repr=False)
    singles: tuple[Route, ...]
    pair: Route | None
    pair_floor: float | None
    without: Mapping[str, str]
    led: IdealPart | None
    filters: tuple[IdealPart, ...]
    ceilings: tuple[Ceiling, ...]
    resolves: int

    @property
    def met(self) -> bool:
        """Whether the optimum reaches the CNR as it is."""
        return self.start.cnr >= self.required_cnr

    @property
    def ceiling(self) -> float | None:
        """CNR that no light reaches with these surfaces and any of the candidate cameras; None where not known."""
        return self.ceilings[0].any_light if self.ceilings else None

    def table(self):
        """Routes as a pandas DataFrame, least change first."""
        import pandas as pd

        rows = [*self.singles, *([self.pair] if self.pair else [])]
        return pd.DataFrame(
            {
                "levers": [" + ".join(route.levers) for route in rows],
                "factor [1]": [np.nan if route.factor is None else route.factor for route in rows],
                "not enough up to [1]": [route.short_factor for route in rows],
                "CNR [1]": [route.short_bound if route.cnr is None else route.cnr for route in rows],
            }
        )


def routes(problem: Problem, cnr: float | None = None, *, progress: Callable[[str], None] | None = None) -> Routes:
    """Find what would have to change for a CNR.

    Parameters
    ----------
    problem : Problem
    cnr : float, optional
        The CNR to reach; the problem's own ``required_cnr`` by default, and 1.25 times the optimum without one.
    progress : callable, optional
        Called with what is being looked at.

    Returns
    -------
    Routes

    Raises
    ------
    ProblemError
        When the CNR is not above 0.
    InfeasibleError
        As `codesign.solve`.

    Examples
    --------
    >>> from codesign import load_problem
    >>> found = routes(load_problem("yellow-stain"), 4.0)
    >>> found.met, found.start.cnr < found.ceiling
    (True, True)
    """
    say = progress or (lambda text: None)
    say("optimum as it is")
    start = resolve(problem)
    wanted = next(each for each in (cnr, problem.spec.required_cnr, 1.25 * start.cnr) if each is not None)
    if not 0 < wanted < np.inf:
        raise ProblemError(f"required CNR is {wanted:g}, must be > 0")
    levers, without = applicable(problem)
    search = _Search(problem, start, wanted)
    singles, pair, floor = [], None, None
    if start.cnr < wanted:
        for lever in levers:
            say(lever.name)
            singles.append(search.single(lever))
        say("pairs of levers")
        pair, floor = search.best_pair(levers, singles)
    say("an ideal LED")
    led = ideal_led(problem, start)
    say("an ideal filter")
    return Routes(
        problem=problem,
        required_cnr=wanted,
        start=start,
        singles=tuple(sorted(singles, key=lambda r: (r.factor is None, r.factor or -r.short_bound))),
        pair=pair,
        pair_floor=floor,
        without=without,
        led=led,
        filters=ideal_filters(problem, start),
        ceilings=ceilings(problem),
        resolves=search.count,
    )


class _Search:
    """Certified re-solves of a problem with levers pulled, each done once."""

    def __init__(self, problem: Problem, start: Resolved, wanted: float) -> None:
        self.problem, self.start, self.wanted = problem, start, wanted
        self.count = 0
        self.known: dict[tuple, Resolved | None] = {}
        self.last = start

    def at(self, levers: tuple[Lever, ...], factor: float, *, fine: bool = False) -> Resolved | None:
        """The optimum with levers pulled; None where nothing is feasible.

        Known as closely as tells whether the CNR wanted is reached; ``fine`` to the problem's own gap at least.
        """
        if factor == 1.0:
            return self.start
        key = (*(lever.name for lever in levers), factor, fine)
        if key not in self.known:
            changed = pulled(self.problem, levers, factor)
            own = self.problem.spec.solver.gap
            try:
                for gap in (own, FINE_GAP) if fine else (max(QUICK_GAP, own), own, FINE_GAP):
                    self.count += 1
                    found = resolve(changed, self.last, gap=gap)
                    if not found.cnr < self.wanted <= found.bound:
                        break
                self.last = found
            except InfeasibleError:
                found = None
            self.known[key] = found
        return self.known[key]

    def gain(self, levers: tuple[Lever, ...], factor: float) -> float:
        """Logarithm of optimum over CNR wanted."""
        found = self.at(levers, factor)
        return -np.inf if found is None else float(np.log(max(found.cnr, 1e-300) / self.wanted))

    def reaches(self, levers: tuple[Lever, ...], factor: float) -> bool:
        """Whether the CNR is reached."""
        return self.gain(levers, factor) >= 0

    def single(self, lever: Lever) -> Route:
        """Least change of one lever."""
        most = lever.most(self.problem)
        whole = None if lever.whole is None else lever.whole(self.problem)
        for top in (most,) if lever.monotone else (most, most**0.5, most**0.25):
            if self.reaches((lever,), top):
                return self._route((lever,), *self._between((lever,), 1.0, top, whole))
        return self._out_of_reach((lever,), most)

    def _between(
        self, levers: tuple[Lever, ...], low: float, high: float, whole: int | None = None
    ) -> tuple[float, float]:
        """Narrow the factor at which the CNR is reached: false position in logarithms, halved when it drags."""
        ends, gains = [low, high], [self.gain(levers, low), self.gain(levers, high)]
        for turn in range(MOST_TURNS):
            room = float(np.log(ends[1] / ends[0]))
            if room <= max(SHARE * np.log(ends[1]), EXCESS):
                break
            share = -gains[0] / (gains[1] - gains[0]) if np.isfinite(gains).all() and turn % 3 < 2 else 0.5
            if turn == 0:
                share = min(share, np.log(PROBE / ends[0]) / room)
            factor = float(ends[0] * np.exp(np.clip(share, 0.02, 0.98) * room))
            if whole is not None:
                lower, upper = (round(whole * end) for end in ends)
                if upper - lower <= 1:
                    break
                factor = int(np.clip(round(whole * factor), lower + 1, upper - 1)) / whole
            gain = self.gain(levers, factor)
            side = int(gain >= 0)
            # Illinois: an end that stays counts half, so that the next guess goes past the root.
            gains[1 - side] *= 0.5
            ends[side], gains[side] = factor, gain
        return ends[0], ends[1]

    def _route(self, levers: tuple[Lever, ...], low: float, high: float) -> Route:
        short, enough = self.at(levers, low, fine=True), self.at(levers, high, fine=True)
        camera = enough.optimum.design.camera
        return Route(
            levers=tuple(lever.name for lever in levers),
            factor=high,
            short_factor=low,
            short_bound=0.0 if short is None else short.bound,
            cnr=enough.cnr,
            bound=enough.bound,
            before=_values(levers, self.problem, camera),
            after=_values(levers, enough.problem, camera),
            monotone=all(lever.monotone for lever in levers),
            design=enough.optimum.design,
        )

    def _out_of_reach(self, levers: tuple[Lever, ...], most: float) -> Route:
        found = self.at(levers, most, fine=True) or self.start
        camera = found.optimum.design.camera
        return Route(
            levers=tuple(lever.name for lever in levers),
            factor=None,
            short_factor=most,
            short_bound=max(found.bound, self.start.bound),
            before=_values(levers, self.problem, camera),
            after=_values(levers, found.problem, camera),
            monotone=all(lever.monotone for lever in levers),
        )

    def best_pair(self, levers: tuple[Lever, ...], singles: list[Route]) -> tuple[Route | None, float | None]:
        """The two levers that need the smallest common factor, and the factor at which no other pair reaches the CNR.

        (None, None) when no two levers reach it; no route when they need as much as one alone.
        """
        alone = {route.levers[0]: route.factor or np.inf for route in singles}
        ranked = sorted(levers, key=lambda lever: (alone[lever.name], -self.gain((lever,), lever.most(self.problem))))
        most = max(lever.most(self.problem) for lever in levers)
        bracket, best = (1.0, most), None
        first = tuple(ranked[:2])
        if len(first) == 2 and self.reaches(first, min(alone[first[0].name], most)):
            best, bracket = first, self._between(first, 1.0, min(alone[first[0].name], most))
        for i, lever in enumerate(ranked):
            waiting = [ranked[i + 1 :]]
            while waiting:
                group = [other for other in waiting.pop() if best is None or {lever, other} != set(best)]
                test = bracket[0] if best else most
                if not group or test <= 1.0 or not self.reaches((lever, *group), test):
                    continue
                if len(group) > 1:
                    half = len(group) // 2
                    waiting += [group[half:], group[:half]]
                    continue
                best = (lever, group[0])
                bracket = self._between(best, 1.0, test)
        if best is None:
            return None, None
        # Where one of the two has no part in it, the other alone is the route.
        helps = np.log(bracket[1]) < NOTICEABLE * np.log(min(alone.values()))
        return self._route(best, *bracket) if helps else None, bracket[0]


def _values(levers: tuple[Lever, ...], problem: Problem, camera: str) -> dict[str, float]:
    found: dict[str, float] = {}
    for lever in levers:
        found.update(lever.values(problem, camera))
    return found
