"""The recipe that holds up best when parts and surroundings stray: greatest CNR in the worst of seeded scenarios.

Limits hold in every scenario; a scenario in which a recipe misses a limit counts as CNR 0. The worst case is searched
over all configurations with a proven bound (`codesign.study.scenarios`). With a quantile q the CNR exceeded in all but
a share q of the scenarios counts: the search drops the scenarios it serves worst and is repeated for the others, which
gives a good recipe, and the bound is looser: the certified optimum for each scenario alone, limits of all still held.
All but the ``⌊q K⌋`` scenarios that may fall short must reach the value, so it cannot exceed the next one up.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from codesign.design import Design, evaluate
from codesign.display import Displayed
from codesign.errors import InfeasibleError, ProblemError
from codesign.limits import junction_limit
from codesign.problem import Problem
from codesign.problem.choices import FilterChoices
from codesign.recipe import design_at
from codesign.search.pairs import polish_pairs
from codesign.solve import Solution, solve
from codesign.study.draws import Draws, cause_names, draws_from, scenario, spreads, standard_normal
from codesign.study.robust_settings import Trial, cautious, on_scenarios, settable_in_all
from codesign.study.scenarios import ScenarioAssembly, ScenarioWalk

Array = NDArray[np.float64]

SCENARIOS, MOST_SCENARIOS = 20, 200
#: Relative gap asked for over scenarios.
GAP = 1e-2
#: Rounds over junction temperatures, and how well these must agree in the end. [K]
LARGEST_NUMBER_OF_ROUNDS, JUNCTION_TOLERANCE_K = 4, 0.5
#: Times the worst scenarios of a quantile are chosen anew.
CHOICES = 3


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Robust(Displayed):
    """A robust recipe next to the nominal one.

    Attributes
    ----------
    nominal : Trial
        The recipe best on the rig as stated.
    cautious : Trial or None
        The same parts with less exposure or current, so that all limits hold in every scenario; None where that takes
        all the light.
    robust : Trial
        The recipe found, in whole setting steps, all limits met in every scenario.
    quantile : float
        Share of scenarios that may fall short; 0 is the worst case.
    bound : float
        No recipe exceeds this CNR in the worst scenario, or in all but the share ``quantile``; proven at the junction
        temperatures of the last round.
    bound_by : str
        "joint search" or "single scenarios".
    junction_residual_k : float
        Largest difference of a lit LED's temperature assumed and reached, any scenario. [K]
    """

    problem: Problem = field(repr=False)
    nominal: Trial
    cautious: Trial | None
    robust: Trial
    scenarios: int
    seed: int
    quantile: float
    bound: float
    bound_by: str
    junction_residual_k: float

    @property
    def value(self) -> float:
        """CNR of the robust recipe that counts: worst case or quantile."""
        return self.robust.level(self.quantile)

    @property
    def gap(self) -> float:
        """Relative distance from value to bound, rounding to setting steps included."""
        return self.bound / self.value - 1 if self.value > 0 else np.inf

    @property
    def price(self) -> float:
        """CNR given up on the rig as stated, relative to the nominal recipe."""
        return 1 - self.robust.performance.cnr / self.nominal.performance.cnr


def robust(
    problem: Problem,
    *,
    scenarios: int = SCENARIOS,
    seed: int = 1,
    quantile: float = 0.0,
    gap: float = GAP,
    progress: Callable[[str, int, int], None] | None = None,
) -> Robust:
    """Find the recipe of greatest CNR in the worst of many scenarios, or in all but a share of them.

    Parameters
    ----------
    problem : Problem
        Its ``[tolerance]`` section says what varies.
    scenarios : int
        Number of scenarios drawn.
    seed : int
    quantile : float
        Share of scenarios that may fall short of the CNR; 0 for the worst case.
    gap : float
        Relative gap to prove in the worst case. [1]
    progress : callable, optional
        Called with (what is being done, equal pieces of it done, pieces in all or 0 where these are not known).

    Returns
    -------
    Robust

    Raises
    ------
    InfeasibleError
        When the limits cannot hold in all scenarios together.
    """
    _check(problem, scenarios, seed, quantile)
    say = progress or (lambda what, done, total: None)
    say("drawing scenarios", 0, 0)
    draws = scenario_draws(problem, scenarios, seed)
    worlds = [scenario(problem, draws, k) for k in range(scenarios)]
    _require_cool_air(problem, worlds)
    say("solving the rig as stated", 0, 0)
    nominal = solve(problem, alternatives=0)
    say("searching in all scenarios", 0, 0)
    search = _Search(problem, worlds, draws, nominal, gap)
    spare = int(np.floor(quantile * scenarios + 1e-9))
    everything = list(range(scenarios))
    best, bound, residual = search.over(everything)
    by = "joint search"
    if spare:
        say("leaving out the worst", 0, 0)
        best, residual = _without_worst(search, best, residual, spare, everything)
        alone = []
        for k in everything:
            say("bounding each scenario", k, scenarios)
            alone.append(search.bound_of(k))
        bound, by = float(np.sort(alone)[spare]), "single scenarios"
    say("trying the recipes", 0, 0)
    trials = [search.trial(nominal.recipe.design), search.derated(), best]
    candidates = [t for t in trials if t is not None]
    chosen = max(reversed(candidates), key=lambda t: t.level(quantile))
    if not chosen.level(quantile) > 0:
        raise InfeasibleError(
            f"{problem.where}: no recipe keeps all limits in all {scenarios} scenarios with any contrast; "
            "narrow [tolerance] or loosen the limits",
            ["tolerance"],
        )
    return Robust(
        problem=problem,
        nominal=trials[0],
        cautious=trials[1],
        robust=chosen,
        scenarios=scenarios,
        seed=seed,
        quantile=quantile,
        bound=max(bound, chosen.level(quantile)),
        bound_by=by,
        junction_residual_k=residual,
    )


def scenario_draws(problem: Problem, count: int, seed: int) -> Draws:
    """Seeded scenarios for all candidate parts of a problem."""
    filters = [part.id for part in FilterChoices.of(problem.filters).base]
    listed = spreads(problem, [channel.id for channel in problem.channels], filters)
    return draws_from(listed, standard_normal(cause_names(listed), count, seed), count)


class _Search:
    """Searches over some of the scenarios, each starting from what the last one found."""

    def __init__(self, problem: Problem, worlds: Sequence[Problem], draws: Draws, nominal: Solution, gap: float):
        self.problem, self.worlds, self.draws, self.nominal, self.gap = problem, worlds, draws, nominal, gap
        assumed = np.array([nominal.certificate.junction_c[channel.id] for channel in problem.channels])
        warmer = np.array([w.spec.temperature.air_c - problem.spec.temperature.air_c for w in worlds])
        self.junction_c = assumed + warmer[:, None]
        self.last: tuple | None = None

    def trial(self, design: Design) -> Trial:
        """A recipe on all scenarios."""
        return on_scenarios(self.problem, design, self.draws)

    def derated(self) -> Trial | None:
        """The nominal recipe with less light, so that it keeps all limits."""
        design = cautious(self.problem, self.nominal.recipe.design, self.draws)
        return None if design is None else self.trial(design)

    def over(self, chosen: list[int]) -> tuple[Trial | None, float, float]:
        """Best recipe for the worst of the chosen scenarios, its bound, and how well the junctions agree."""
        seed = None
        for _ in range(LARGEST_NUMBER_OF_ROUNDS):
            walk = self._walk(chosen, seed)
            best = walk.best()
            if best is None:
                return None, 0.0, 0.0
            found = polish_pairs(walk.every_pair(best), walk.found[best])
            known = walk.configuration(best)
            design = design_at(walk.assembly, known.setting, known.filter, found.point, getattr(found, "units", None))
            residual = self._settle(design)
            seed = self.last = known, found
            if residual <= JUNCTION_TOLERANCE_K:
                break
        settled = settable_in_all(self.problem, design, self.draws)
        return None if settled is None else self.trial(settled), float(walk.upper.max()), residual

    def bound_of(self, k: int) -> float:
        """No recipe that keeps the limits of all scenarios exceeds this CNR in scenario k."""
        walk = self._walk([k], self.last)
        return float(walk.upper.max()) if walk.best() is not None else 0.0

    def _walk(self, chosen: list[int], seed) -> ScenarioWalk:
        # Limits hold in all scenarios, those allowed to fall short included; contrasts count in the chosen ones.
        assembly = ScenarioAssembly(self.problem, self.worlds, self.junction_c, chosen)
        walk = ScenarioWalk(assembly, self.gap)
        if seed is not None:
            walk.seed(*seed)
        return walk

    def _settle(self, design: Design) -> float:
        """Take over the junction temperatures the recipe leads to; return how far they were off."""
        worst, index = 0.0, self.problem.channel_index
        for k, world in enumerate(self.worlds):
            for state in evaluate(world, replace(design, where="robust recipe")).leds:
                worst = max(worst, abs(self.junction_c[k, index[state.id]] - state.junction_c))
                self.junction_c[k, index[state.id]] = state.junction_c
        return worst


def _without_worst(
    search: _Search, best: Trial | None, residual: float, spare: int, everything: list[int]
) -> tuple[Trial | None, float]:
    """Improve a recipe for all scenarios but the ``spare`` that it serves worst, chosen anew each time."""
    share = spare / len(everything)
    for _ in range(CHOICES):
        start = best if best is not None else search.derated()
        if start is None:
            return None, residual
        kept = sorted(np.argsort(start.cnr)[spare:].tolist())
        found, _, own = search.over(kept)
        if found is None or not found.level(share) > start.level(share) * (1 + 1e-6):
            return best, residual
        best, residual = found, own
    return best, residual


def _require_cool_air(problem: Problem, worlds: Sequence[Problem]) -> None:
    """Raise InfeasibleError where some scenario leaves no LED any current."""
    hottest = max(world.spec.temperature.air_c for world in worlds)
    top = max(junction_limit(problem, channel) for channel in problem.channels)
    if hottest >= top:
        raise InfeasibleError(
            f"{problem.where}: air reaches {hottest:.1f} deg C in one of {len(worlds)} scenarios, no LED junction may "
            f"exceed {top:g} deg C; narrow tolerance.air_k or air_c_range, or raise limits.junction_max_c",
            ["junction"],
        )


def _check(problem: Problem, scenarios: int, seed: int, quantile: float) -> None:
    where = problem.where
    if problem.combined:
        raise ProblemError(f"{where}: readings combined by weights have no robust search; set detection to one reading")
    if not 1 <= scenarios <= MOST_SCENARIOS:
        raise ProblemError(f"{where}: scenarios is {scenarios}, must be 1 to {MOST_SCENARIOS}")
    if seed < 0:
        raise ProblemError(f"{where}: seed is {seed}, must be >= 0")
    if not 0 <= quantile <= 0.5:
        raise ProblemError(f"{where}: quantile is {quantile:g}, must be 0 to 0.5")
    if quantile and quantile * scenarios < 1 - 1e-9:
        raise ProblemError(
            f"{where}: quantile is {quantile:g}: of {scenarios} scenarios none may fall short then; draw at least "
            f"{int(np.ceil(1 / quantile - 1e-9))}"
        )
