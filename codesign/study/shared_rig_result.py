"""What the search for a rig in common returns: the rig, what each variant gets from it, and what proves it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from codesign.certificate_shared import Cut
from codesign.design import Performance
from codesign.problem import Problem
from codesign.program import Array
from codesign.search.shared import REACHED

Goal = Literal["worst", "count", "cost"]
GOALS: tuple[Goal, ...] = ("worst", "count", "cost")


def relative_gap(value: float, bound: float) -> float:
    """Relative distance between a value and its bound, whichever is larger. [1]"""
    low, high = sorted((value, bound))
    return high / low - 1 if low > 0 else (0.0 if high <= 0 else np.inf)


@dataclass(frozen=True, slots=True, kw_only=True)
class VariantOutcome:
    """What one variant gets from the rig in common.

    Attributes
    ----------
    name : str
    problem : Problem
        The variant with the parts of the rig alone.
    optimum : Performance or None
        Best settings before rounding; None where the rig shows nothing of this variant.
    recipe : Performance or None
        The same in whole setting steps, at the junction temperatures it leads to: what to dial in.
    own_cnr : float
        CNR of the variant's own best rig, NaN where unknown.
    required_cnr : float or None
    """

    name: str
    problem: Problem = field(repr=False)
    optimum: Performance | None = field(repr=False)
    recipe: Performance | None = field(repr=False)
    own_cnr: float
    required_cnr: float | None

    @property
    def cnr(self) -> float:
        """CNR of the recipe, 0 where there is none."""
        return 0.0 if self.recipe is None else self.recipe.cnr

    @property
    def regret(self) -> float:
        """Share of the CNR of its own best rig that the variant gives up, at least 0; NaN where that is unknown."""
        if np.isnan(self.own_cnr):
            return float("nan")
        best = 0.0 if self.optimum is None else self.optimum.cnr
        return max(1 - best / self.own_cnr, 0.0) if self.own_cnr > 0 else 0.0

    @property
    def met(self) -> bool | None:
        """Whether the optimum has the CNR required; None where none is."""
        if self.required_cnr is None:
            return None
        return self.optimum is not None and self.optimum.cnr >= self.required_cnr * (1 - 2 * REACHED)


@dataclass(frozen=True, slots=True, eq=False)
class SharedProof:
    """What `verify_shared` re-derives the bound from.

    Attributes
    ----------
    problems : mapping
        Variants with the parts in common and the build limits of the rig.
    junction_c : mapping
        Junction temperatures of each variant at which the proof holds. (L,) [deg C]
    levels : (V,) array
        CNR that each variant needs, for the goals that ask for one.
    order : tuple of int
        Variants in the order in which they close most rigs.
    cuts : mapping
        By rig number, cuts with the position of their variant.
    proven : (C,) array
        What no rig exceeds (or, for a price, goes below).
    """

    problems: Mapping[str, Problem]
    junction_c: Mapping[str, Array]
    levels: Array
    order: tuple[int, ...]
    cuts: Mapping[int, tuple[tuple[int, Cut], ...]]
    proven: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class Help:
    """A change to the rig in common: how many variants gain more than 1 %, and the worst CNR then. (`worst_gain`: 1)"""

    change: str
    helped: int
    worst_cnr: float
    worst_gain: float


@dataclass(frozen=True, slots=True, kw_only=True)
class SharedRig:
    """The rig in common, what each variant gets from it, and how sure that is.

    Attributes
    ----------
    camera, filter : str
    f_number : float
    leds : tuple of str
        LED channels to build in.
    goal : {"worst", "count", "cost"}
    value, bound : float
        Of the goal: worst CNR and what no rig exceeds; number of variants served and what no rig exceeds; price and
        what every rig that serves all costs at least.
    status : str
        "proven", or "stopped" when time ran out before the gap asked for was reached.
    outcomes : mapping
        By variant.
    limiting : str
        Variant with the lowest CNR, or with the lowest share of what it needs.
    helps : tuple of Help
        Changes that would help, those that help most variants first.
    seconds : float
    residual_k : float
        Largest difference between a junction temperature assumed and reached. [K]
    left_out : tuple of str
        Parts that not all variants have, and which are therefore no choice.
    evidence : SharedProof
    """

    camera: str
    filter: str
    f_number: float
    leds: tuple[str, ...]
    goal: Goal
    value: float
    bound: float
    status: str
    outcomes: Mapping[str, VariantOutcome]
    limiting: str
    helps: tuple[Help, ...] = ()
    seconds: float = 0.0
    residual_k: float = 0.0
    left_out: tuple[str, ...] = ()
    evidence: SharedProof = field(repr=False)

    @property
    def gap(self) -> float:
        """Relative distance between value and bound."""
        return relative_gap(self.value, self.bound)

    @property
    def worst_cnr(self) -> float:
        """Least CNR of any variant's recipe."""
        return min(outcome.cnr for outcome in self.outcomes.values())

    @property
    def served(self) -> int:
        """Number of variants whose optimum has the CNR they require."""
        return sum(bool(outcome.met) for outcome in self.outcomes.values())
