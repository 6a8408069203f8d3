"""What CNR costs: the certified frontier of CNR against exposure, rig heat, number of LEDs or price.

With a tighter limit on the quantity the greatest CNR never rises. So every problem solved says something of all
limits: what its recipe reaches is reached wherever the quantity it uses is allowed, and what its proof excludes is
excluded under every tighter limit. The curve is made of these two, and can neither fall nor cross.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np

from codesign.design import Performance
from codesign.display import Displayed
from codesign.errors import ProblemError, nearest
from codesign.least_cost import FIELDS, WHOLE
from codesign.problem import Problem, solver_settings
from codesign.study.trade_curve import ENOUGH_GAP, JUST_LESS, Curve, Solved
from codesign.study.vary import Point, point_of

if TYPE_CHECKING:
    import pandas as pd

#: Points of a curve at most, and unless asked otherwise.
LARGEST_CURVE, POINTS = 100, 10
#: Share of the greatest CNR whose least cost is told beside that of the CNR required.
MOST = 0.95


@dataclass(frozen=True, slots=True, kw_only=True)
class Quantity:
    """What CNR is traded against: its name, how people call it, its unit, and whether it changes in steps only."""

    name: str
    label: str
    unit: str
    steps: bool = False

    @property
    def field(self) -> str:
        """The field of a problem that limits it."""
        return ".".join(FIELDS[self.name])

    @property
    def whole(self) -> bool:
        """Whether it comes in whole numbers."""
        return self.name in WHOLE


#: By the name used on the command line, in the order of a combined figure.
AGAINST: Mapping[str, Quantity] = {
    "exposure": Quantity(name="exposure", label="exposure", unit="us"),
    "heat": Quantity(name="heat", label="rig heat", unit="W"),
    "leds": Quantity(name="leds", label="LED channels", unit="", steps=True),
    "price": Quantity(name="price", label="price", unit="", steps=True),
}


@dataclass(frozen=True, slots=True, kw_only=True)
class TradePoint:
    """One point of the frontier.

    Attributes
    ----------
    used : float
        What the optimum uses of the quantity; what it reaches is reached from here on.
    limit : float
        The limit solved under; no recipe that uses this or less has a CNR above the bound of ``optimum``.
    optimum : Point
        The best there is, before rounding to setting steps.
    recipe : Performance or None
        The best found in whole setting steps; None where no step fits.
    mark : str
        "own" for the problem's own limit, "enough" for the least that reaches the CNR required, else empty.
    """

    used: float
    limit: float
    optimum: Point
    recipe: Performance | None = field(repr=False)
    mark: str = ""

    @property
    def recipe_cnr(self) -> float:
        """CNR of the settable recipe, NaN where there is none."""
        return float("nan") if self.recipe is None else self.recipe.cnr


@dataclass(frozen=True, slots=True, kw_only=True)
class Enough:
    """The least of the quantity that reaches a CNR: a settable recipe does with ``value``, none with ``bound``.

    ``value`` is infinite where no recipe reaches it, ``bound`` 0 where nothing is proven.
    """

    cnr: float
    value: float
    bound: float

    @property
    def reached(self) -> bool:
        """Whether any recipe of the curve reaches the CNR."""
        return bool(np.isfinite(self.value))


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Trade(Displayed):
    """The frontier of CNR against one quantity, least first.

    Attributes
    ----------
    title, where : str
        Of the problem.
    quantity : Quantity
    required_cnr : float or None
    own_limit : float or None
        The limit the problem itself sets on the quantity; the curve also looks beyond.
    points : tuple of TradePoint
        CNR, bound and recipe CNR never fall from one to the next.
    enough : Enough or None
        For the CNR required, where one is.
    most : Enough
        For `MOST` of the greatest recipe CNR.
    gap : float
        Relative gap proven at each point. [1]
    resolves : int
        Problems solved with proof.
    """

    title: str
    where: str
    quantity: Quantity
    required_cnr: float | None
    own_limit: float | None
    points: tuple[TradePoint, ...]
    enough: Enough | None
    most: Enough
    gap: float
    resolves: int

    @property
    def possible(self) -> tuple[TradePoint, ...]:
        """Points at which the limits can be met."""
        return tuple(point for point in self.points if point.optimum.possible)

    def table(self) -> pd.DataFrame:
        """One row per point, all curves with the same columns; ``unit`` is that of ``limit`` and ``used``."""
        import pandas as pd

        rows = [
            {
                "against": self.quantity.name,
                "unit": self.quantity.unit,
                "limit": point.limit,
                "used": point.used,
                "cnr": point.optimum.cnr,
                "cnr_bound": point.optimum.bound,
                "recipe_cnr": point.recipe_cnr,
                "mark": point.mark,
                "camera": point.optimum.camera,
                "channel": point.optimum.channel,
                "gain_db": point.optimum.gain_db,
                "filter": point.optimum.filter,
                "f_number": point.optimum.f_number,
                "exposure_us": point.optimum.exposure_us,
                "drive_ma": "; ".join(f"{led} {ma:.6g}" for led, ma in point.optimum.drive_ma.items()),
                "binding": "; ".join(point.optimum.binding),
                "reason": point.optimum.reason,
            }
            for point in self.points
        ]
        return pd.DataFrame(rows)


def trade(
    problem: Problem,
    against: str,
    *,
    points: int = POINTS,
    required_cnr: float | None = None,
    gap: float | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> Trade:
    """Find what CNR costs in one quantity: few points, where the curve bends, each re-solved with proof.

    The problem's own limit on the quantity is put aside, so that the curve also shows what a looser one would bring;
    all other limits stay.

    Parameters
    ----------
    problem : Problem
    against : {"exposure", "heat", "leds", "price"}
        Exposure [us]; mean heat of all LEDs [W]; number of LED channels in use; price of camera, filters and emitters.
        Parts of unknown price are left out of the last.
    points : int
        Points of the curve at most, 2 to `LARGEST_CURVE`. Looking for the least that is enough takes some more.
    required_cnr : float, optional
        The problem's own ``required_cnr`` by default.
    gap : float, optional
        Relative gap to prove at each point, the problem's own by default. [1]
    progress : callable, optional
        Called with (problems solved, about how many in all).

    Returns
    -------
    Trade

    Raises
    ------
    ProblemError
        When the quantity is unknown, has no meaning for the problem, or an argument is out of range.
    InfeasibleError
        When the limits cannot be met even with all of the quantity.

    Examples
    --------
    >>> from codesign import load_problem
    >>> curve = trade(load_problem("fast-web"), "leds")
    >>> [round(point.used) for point in curve.points]
    [1, 2, 3, 4, 5]
    """
    quantity = _quantity(problem, against)
    if not 2 <= points <= LARGEST_CURVE:
        raise ProblemError(f"points is {points}, must be from 2 to {LARGEST_CURVE}")
    required = problem.spec.required_cnr if required_cnr is None else required_cnr
    if required is not None and not 0 < required < np.inf:
        raise ProblemError(f"CNR required is {required:g}, must be above 0 and finite")
    gap = solver_settings(problem, gap=gap).gap
    section, key = FIELDS[against]
    own = getattr(getattr(problem.spec, section), key)
    curve = Curve.of(problem, quantity.name, steps=quantity.steps, gap=gap, progress=progress)
    curve.trace(points, required, None if own is None else float(own))
    return Trade(
        title=problem.spec.title,
        where=problem.where,
        quantity=quantity,
        required_cnr=required,
        own_limit=None if own is None else float(own),
        points=_frontier(curve, own, required),
        enough=None if required is None else Enough(cnr=required, **curve.bracket(required)),
        most=_most(curve),
        gap=gap,
        resolves=curve.resolves,
    )


def _quantity(problem: Problem, against: str) -> Quantity:
    """The quantity of that name, where the problem can be solved against it."""
    if against not in AGAINST:
        raise ProblemError(f"no trade-off against {against!r}; {nearest(against, AGAINST)}")
    if problem.combined:
        raise ProblemError(
            f"{problem.where}: readings combined by weights have no trade-off curve; set detection to one reading"
        )
    return AGAINST[against]


def _most(curve: Curve) -> Enough:
    greatest = max((solved.recipe_cnr for solved in curve.ordered() if solved.recipe is not None), default=np.nan)
    return Enough(cnr=MOST * greatest, **curve.bracket(MOST * greatest))


def _frontier(curve: Curve, own: float | None, required: float | None) -> tuple[TradePoint, ...]:
    """The points to show: what is reached with less is also reached with more, what is excluded with more, with less.

    Where a tighter limit led to a better result (within the gap of the proofs), that result stands for both.
    """
    shown, enough = _shown(curve, required)
    bounds = np.minimum.accumulate([solved.bound for solved in reversed(shown)])[::-1]
    found: list[TradePoint] = []
    best = recipe = shown[0]
    for solved, bound in zip(shown, bounds, strict=True):
        best = max(solved, best, key=lambda each: each.cnr)
        recipe = max(solved, recipe, key=lambda each: each.recipe_cnr)
        mark = "enough" if solved is enough else "own" if own is not None and solved.limit == own else ""
        point = _point(best, recipe, solved.limit, float(bound), mark)
        if found and np.isclose(found[-1].used, point.used, rtol=JUST_LESS, atol=0):
            point = replace(point, mark=found.pop().mark or mark)
        found.append(point)
    return tuple(found)


def _shown(curve: Curve, required: float | None) -> tuple[list[Solved], Solved | None]:
    """The solves that make the curve, and the one that is just enough; those as near to it as it is known give way."""
    shown = curve.shown()
    enough = None if required is None else curve.cheapest(required)
    if enough is None or not enough.recipe_used > 0:
        return shown, None
    ends = shown[0], shown[-1]
    same = next((each for each in shown if np.isclose(each.used, enough.used, rtol=JUST_LESS, atol=0)), None)
    if same is not None:
        return shown, same
    far = [s for s in shown if s in ends or curve.steps or abs(np.log(s.limit / enough.limit)) > ENOUGH_GAP]
    return sorted([*far, enough], key=lambda solved: solved.limit), enough


def _point(best: Solved, recipe: Solved, limit: float, bound: float, mark: str) -> TradePoint:
    if best.found is None:
        optimum, spent = Point(values=(limit,), reason=best.reason, limits=best.limits), limit
    else:
        spent = float(np.nanmax([best.used, recipe.recipe_used]))
        optimum = replace(point_of(best.found, (spent,)), bound=max(bound, best.cnr))
    return TradePoint(used=spent, limit=limit, optimum=optimum, recipe=recipe.recipe, mark=mark)
