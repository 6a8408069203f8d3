"""How the certified optimum answers to its limits and to the tolerances of its parts.

*Shadow price*: what CNR is gained per unit by which a limit is loosened. *Elasticity*: relative change of CNR per
relative change of a data-sheet quantity (or per nm, degree, kelvin), once with the recipe tuned again, once with it
held fixed. Prices and re-tuned elasticities come from the multipliers of the optimum (`codesign.study.tangent`).

Junction temperatures are those the recipe leads to: a nudge that changes heat or flux is met by temperatures that
settle again, in both columns and in the shadow prices. LEDs that are off keep the temperature assumed for them.

A derivative holds as long as the same limits bind. So each quantity is also moved by its whole tolerance to either
side and the problem solved again with proof, over all configurations: which limits then start or stop to bind, which
LEDs join or leave, whether other parts win, and from about which change on.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np

from codesign.design import evaluate
from codesign.display import Displayed
from codesign.errors import CatalogError, InfeasibleError, ProblemError, SolveError
from codesign.problem import Problem
from codesign.problem.choices import JOINT
from codesign.problem.nudge import NUDGES, Parameter, nudged
from codesign.problem.tolerances import SPREADS
from codesign.recipe_choice import choice_of
from codesign.solve import Solution
from codesign.solve_joint import Optimum, Rig, optimum_near, point_of_rig, settled
from codesign.study.binding import what_binds
from codesign.study.common import Resolved, resolve
from codesign.study.limit_moves import WELL_HEADROOM, WHOLE, moved
from codesign.study.tangent import Tangent

if TYPE_CHECKING:
    import pandas as pd

#: Steps of differences by unit; relative ones and those of bounds are shares.
STEPS = {"1": 1e-4, "nm": 0.01, "deg": 0.01, "K": 0.01}
#: Halvings that locate a change of what binds.
HALVINGS = 5


@dataclass(frozen=True, slots=True, kw_only=True)
class LimitPrice:
    """Shadow price of one limit.

    ``price`` is the gain of CNR per unit of the bound (0 where the limit does not bind, None where it only moves in
    whole steps); ``share`` how much of the bound is used.
    """

    name: str
    unit: str
    bound: float
    share: float
    binds: bool
    price: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Shifted:
    """One quantity moved by its whole tolerance to one side.

    ``cnr_retuned`` is proven over all configurations (None where the limits cannot be met any more); ``cnr_fixed`` is
    that of the unchanged recipe, which then misses the limits ``missed``. ``starts`` and ``stops`` say what begins and
    ends to bind (limits, LEDs lit, pair that counts), ``at`` from about which change on, ``other`` which configuration
    wins instead, if another does.
    """

    amount: float
    cnr_retuned: float | None
    cnr_fixed: float
    starts: tuple[str, ...] = ()
    stops: tuple[str, ...] = ()
    at: float | None = None
    other: str | None = None
    missed: tuple[str, ...] = ()
    note: str = ""

    @property
    def changed(self) -> bool:
        """Whether the derivative does not hold as far as this."""
        return bool(self.starts or self.stops or self.other or self.cnr_retuned is None)


@dataclass(frozen=True, slots=True, kw_only=True)
class Elasticity:
    """Answer of the optimum to one quantity.

    ``retuned`` and ``fixed`` are relative changes of CNR per unit (unit "1": per relative change).
    """

    parameter: str
    part: str | None
    unit: str
    tolerance: float
    retuned: float
    fixed: float
    low: Shifted | None
    high: Shifted | None


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Sensitivities(Displayed):
    """Shadow prices and elasticities at one certified optimum."""

    problem: Problem = field(repr=False)
    cnr: float
    configuration: str
    binding: tuple[str, ...]
    limits: tuple[LimitPrice, ...]
    parameters: tuple[Elasticity, ...]

    def limit_table(self) -> pd.DataFrame:
        """Shadow prices as a table; each price is per the unit in its row."""
        import pandas as pd

        rows = [(x.name, x.unit, x.bound, x.share, x.binds, x.price) for x in self.limits]
        return pd.DataFrame(rows, columns=["limit", "unit", "bound", "share used", "binds", "price [CNR/unit]"])

    def parameter_table(self) -> pd.DataFrame:
        """Elasticities as a table; each is per the unit in its row."""
        import pandas as pd

        rows = []
        for x in self.parameters:
            ends = [None if end is None else end.cnr_retuned for end in (x.low, x.high)]
            fixed = [None if end is None else end.cnr_fixed for end in (x.low, x.high)]
            rows.append((x.parameter, x.part, x.unit, x.tolerance, x.retuned, x.fixed, *ends, *fixed))
        names = ["parameter", "part", "unit", "tolerance [unit]", "re-tuned [1/unit]", "fixed [1/unit]"]
        names += [f"CNR {how} at {sign} tolerance" for how in ("re-tuned", "fixed") for sign in ("-", "+")]
        return pd.DataFrame(rows, columns=names)


def sensitivities(
    solution: Solution, *, tolerances: Mapping[str, float] | None = None, parameters: Sequence[str] | None = None,
    changes: bool = True, progress: Callable[[int, int], None] | None = None,
) -> Sensitivities:  # fmt: skip
    """Shadow prices of all limits and elasticities of all quantities with a tolerance, at a solution.

    Parameters
    ----------
    solution : Solution
    tolerances : mapping, optional
        Standard deviation by parameter, in its unit; else that of the problem's section ``[tolerance]``, else the usual
        one of `codesign.problem.nudge`.
    parameters : sequence of str, optional
        Names of `codesign.problem.nudge.NUDGES`; all by default.
    changes : bool
        Whether to solve again at either end of each tolerance.
    progress : callable, optional
        Called with (quantities done, quantities in all).

    Returns
    -------
    Sensitivities

    Raises
    ------
    SolveError
        When the multipliers cannot be worked out: several readings combined, or no contrast.

    Examples
    --------
    >>> from codesign import load_problem, solve
    >>> found = sensitivities(solve(load_problem("yellow-stain")), parameters=["LED flux"], changes=False)
    >>> [x.part for x in found.parameters][0]
    'violet-405-a'
    """
    for name in (*(tolerances or ()), *(parameters or ())):
        nudged(solution.problem, name, 0.0)  # raises for unknown names
    study = _Study(solution, dict(tolerances or {}))
    wanted = [NUDGES[name] for name in parameters or NUDGES]
    pieces = [(x, part) for x in wanted for part in study.parts(x)]
    rows = []
    for done, (x, part) in enumerate(pieces):
        if progress is not None:
            progress(done, len(pieces))
        rows.append(study.elasticity(x, part, changes=changes))
    return Sensitivities(
        problem=solution.problem,
        cnr=study.optimum.cnr,
        configuration=study.choice.words,
        binding=tuple(sorted(study.binding)),
        limits=tuple(study.prices()),
        parameters=tuple(rows),
    )


class _Study:
    """One optimum and what all its sensitivities share."""

    def __init__(self, solution: Solution, tolerances: dict[str, float]) -> None:
        self.solution, self.problem, self.tolerances = solution, solution.problem, tolerances
        self.choice = choice_of(self.problem, solution.optimum)
        self.gap = max(solution.certificate.gap, self.problem.spec.solver.gap)
        self.optimum = optimum_near(self.problem, self.choice, solution.optimum.design, solution.certificate.junction_c)
        self.rig = self.optimum.rig
        #: Junction temperatures of all LEDs; those that are off as assumed. [deg C]
        self.junction_c = {
            **solution.certificate.junction_c,
            **dict(zip(self.rig.leds, self.optimum.state.junction_c, strict=True)),
        }
        self.tangent = Tangent(self.optimum)
        self.binding = what_binds(self.optimum)
        self.near: Resolved | None = None

    # --- limits

    def prices(self) -> list[LimitPrice]:
        """Shadow prices of all limits of the recipe, and of the headroom of all wells together."""
        setting, found = self.rig.setting, []
        headroom = self.problem.spec.limits.well_headroom
        wells = [x for x in self.solution.optimum.limits if x.name.startswith("well, ")]
        for x in self.solution.optimum.limits:
            price = self._price(x.name, setting, x.bound) if x.name in self.binding else 0.0
            binds = x.name in self.binding or (x.name in WHOLE and x.share >= 1 - 1e-9)
            found.append(
                LimitPrice(
                    name=x.name, unit=x.unit, bound=x.bound, share=x.share, binds=binds,
                    price=None if x.name in WHOLE else price,
                )
            )  # fmt: skip
        price = self._price(WELL_HEADROOM, setting, 100 * headroom)
        binds = any(x.name in self.binding for x in wells)
        share = max((x.share for x in wells), default=0.0)
        found.append(
            LimitPrice(name=WELL_HEADROOM, unit="%", bound=100 * headroom, share=share, binds=binds, price=price)
        )
        return found

    def _price(self, name: str, setting, bound: float) -> float:
        if name in self.optimum.state.programs[0].row_names and name.startswith("well, "):
            return self.optimum.cnr * self.tangent.row_price(name)
        step, own = STEPS["1"] * max(abs(bound), 1e-9), self.rig.problem
        low, high = (self._moved(setting, name, sign * step) for sign in (-1, 1))
        # Where a data sheet or a corner of the droop curve ends at the limit only one side has the same shape.
        for ends, span in (((low, high), 2 * step), ((low, own), step), ((own, high), step)):
            if None not in ends and not np.isnan(slope := self.tangent.slope(*ends, span)):
                return self.optimum.cnr * slope
        return float("nan")

    def _moved(self, setting, name: str, amount: float) -> Problem | None:
        """The narrowed problem with a bound moved, None where the part's data sheet ends there."""
        try:
            return moved(self.rig.problem, setting, name, amount)
        except (CatalogError, ProblemError):
            return None

    # --- quantities

    def parts(self, parameter: Parameter) -> list[str | None]:
        """Parts of the recipe a quantity belongs to: each piece strays on its own."""
        if parameter.owner == "led":
            return [name for name in self.rig.leds if f"LED {name} lit" in self.binding]
        if parameter.owner == "camera":
            return [self.choice.camera]
        if parameter.owner == "filter":
            return [] if self.choice.filter == "none" else list(self.choice.filter.split(JOINT))
        return [None]

    def tolerance(self, name: str) -> float:
        """Standard deviation of a quantity."""
        if name in self.tolerances:
            return self.tolerances[name]
        stated = getattr(self.problem.spec, "tolerance", None)
        for key, meant in SPREADS.items():
            value = getattr(stated, key, None)
            if meant == name and value is not None:
                return value / 100 if key.endswith("_percent") else value
        return NUDGES[name].sigma

    def elasticity(self, parameter: Parameter, part: str | None, *, changes: bool) -> Elasticity:
        """Both columns of one quantity, and what happens at the ends of its tolerance."""
        step, tolerance = STEPS[parameter.unit], self.tolerance(parameter.name)
        ends = [nudged(self.rig.problem, parameter.name, sign * step, part) for sign in (-1, 1)]
        fixed = [evaluate(end, self.solution.optimum.design).cnr for end in ends]
        sides = (None, None)
        if changes and tolerance > 0:
            sides = tuple(self.shifted(parameter, part, sign * tolerance) for sign in (-1, 1))
        return Elasticity(
            parameter=parameter.name,
            part=part,
            unit=parameter.unit,
            tolerance=tolerance,
            retuned=self.tangent.slope(*ends, 2 * step),
            fixed=float((fixed[1] - fixed[0]) / (2 * step * self.optimum.cnr)),
            low=sides[0],
            high=sides[1],
        )

    def shifted(self, parameter: Parameter, part: str | None, amount: float) -> Shifted:
        """Solve again with a quantity moved by ``amount``."""
        own = nudged(self.rig.problem, parameter.name, amount, part)
        held = evaluate(own, self.solution.optimum.design)
        missed = tuple(x.name for x in evaluate(own, self.solution.recipe.design).violated)
        plain = Shifted(amount=amount, cnr_retuned=None, cnr_fixed=held.cnr, missed=missed)
        self.near = self.near or resolve(self.problem, self.solution)
        problem = nudged(self.problem, parameter.name, amount, part)
        try:
            found = resolve(problem, self.near)
        except InfeasibleError as error:
            return replace(plain, note=str(error))
        plain = replace(plain, cnr_retuned=found.cnr)
        try:
            choice = choice_of(problem, found.optimum)
            if not choice.same_parts(self.choice):
                own = optimum_near(problem, self.choice, self.solution.optimum.design, self.junction_c)
                if found.cnr > own.cnr * (1 + self.gap):
                    return replace(plain, other=choice.words)
                end = own  # as good within the gap of the proof: other parts are no gain
            else:
                end = optimum_near(problem, choice, found.optimum.design, found.certificate.junction_c)
            binding = what_binds(end)
        except SolveError as error:
            return replace(plain, note=str(error))
        result = replace(
            plain,
            cnr_retuned=max(end.cnr, found.cnr),
            starts=tuple(sorted(binding - self.binding)),
            stops=tuple(sorted(self.binding - binding)),
        )
        return replace(result, at=self._change(parameter, part, amount, end)) if result.changed else result

    def _change(self, parameter: Parameter, part: str | None, amount: float, end: Optimum) -> float:
        """About the amount from which on other limits bind, by halving."""
        leds = list(dict.fromkeys((*self.rig.leds, *end.rig.leds)))
        rig = Rig.of(self.problem, self.choice, leds)
        known = {**dict(zip(end.rig.leds, end.state.junction_c, strict=True)), **self.junction_c}
        junction = np.array([known[name] for name in rig.leds])
        design = self.solution.optimum.design
        low, high = 0.0, 1.0
        for _ in range(HALVINGS):
            middle = (low + high) / 2
            try:
                there = rig.at(nudged(rig.problem, parameter.name, middle * amount, part))
                same = what_binds(settled(there, point_of_rig(there, design, junction), junction)) == self.binding
            except SolveError:
                same = False
            low, high = (middle, high) if same else (low, middle)
        return (low + high) / 2 * amount
