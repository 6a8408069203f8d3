"""What a report is made from: the result, and what was worked out beside it."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from codesign.design import Performance
from codesign.limit_use import LimitUse
from codesign.problem import Problem
from codesign.report.layout import number
from codesign.report.page.html import Html, element
from codesign.report.text import REACHED, UNITS

if TYPE_CHECKING:
    from codesign.least_cost import LeastCost
    from codesign.solve import Solution
    from codesign.study.plain_light import PlainLight
    from codesign.study.sensitivity import Sensitivities
    from codesign.study.trade import Trade
    from codesign.verify import Verdict


@dataclass(frozen=True, slots=True, kw_only=True)
class Subject:
    """One recipe to report on; without ``solution`` it is one that somebody typed, and nothing was searched.

    Attributes
    ----------
    problem : Problem
    performance : Performance
        Of the recipe in whole setting steps.
    solution : Solution, optional
        The search that found it.
    verdict : Verdict, optional
    sensitivities : Sensitivities, optional
    trade : tuple of Trade
        Trade-off curves.
    cost : LeastCost, optional
        Where something else than the CNR was to be best.
    plain : PlainLight, optional
        What one white LED without a filter reaches, to compare with.
    notes : mapping
        Why a part of the report is not there, by section.
    command : str
        Command line that makes the report again.
    source : str
        Text of the problem file, empty where there is none.
    made : str
        Date.
    """

    problem: Problem
    performance: Performance
    solution: Solution | None = None
    verdict: Verdict | None = None
    sensitivities: Sensitivities | None = None
    trade: tuple[Trade, ...] = ()
    cost: LeastCost | None = None
    plain: PlainLight | None = None
    notes: dict[str, str]
    command: str = ""
    source: str = ""
    made: str = ""

    @property
    def binding(self) -> tuple[str, ...]:
        """Limits that stop the CNR from rising; of a typed recipe, those that are reached."""
        if self.solution is not None:
            return self.solution.binding
        return tuple(limit.name for limit in self.performance.limits if limit.share >= REACHED)

    def by_use(self) -> list[LimitUse]:
        """Limits, the most used first, those missed before all."""
        return sorted(self.performance.limits, key=lambda limit: (limit.met, -limit.share))


@dataclass(frozen=True, slots=True, kw_only=True)
class Section:
    """One part of the page; ``short`` names it in the table of contents, ``screen_only`` is not printed."""

    id: str
    title: str
    body: Html
    short: str
    screen_only: bool = False


def quantity(value: float, unit: str, digits: int = 4) -> str:
    """Return a number with its unit as set in text."""
    return f"{number(value, digits)} {UNITS.get(unit, unit)}".rstrip()


def state(word: str, kind: str) -> Html:
    """Return a word that says how something stands; ``kind`` is met, near or missed."""
    return element("strong", word, class_=f"state {kind}")


def root_mean_square(pair: Iterable[float]) -> float:
    """Return the standard deviation that two variances give together."""
    a, b = pair
    return math.sqrt((a + b) / 2)
