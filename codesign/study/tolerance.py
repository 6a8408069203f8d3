"""How many rigs built from real parts reach the CNR that is required: seeded Monte Carlo over data-sheet spreads.

The recipe is set on every rig as it stands, or with the exposure set anew on each (`retune`): the longest inside the
limits of that rig, which is the best with the drive held. A rig passes when it reaches the required CNR and keeps all
limits.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from codesign.design import Design, Performance
from codesign.display import Displayed
from codesign.errors import ProblemError
from codesign.problem import Problem
from codesign.study.draws import Spread, cause_names, draws_from, filters_in, spreads, standard_normal
from codesign.study.fleet import RIGS_TOGETHER, Fleet
from codesign.study.fleet_limits import broken, limit_shares, longest_exposure
from codesign.study.indices import CauseShare, variance_shares

Array = NDArray[np.float64]

#: Draws unless asked otherwise, and the most that fit the memory comfortably.
DRAWS, MOST_DRAWS = 10_000, 1_000_000
#: Size of each sample behind the variance shares, a power of two.
SHARE_SAMPLE = 512
#: Quantiles of the CNR that reports show.
QUANTILES = (0.01, 0.05, 0.25, 0.5, 0.75, 0.95, 0.99)


@dataclass(frozen=True, slots=True, kw_only=True)
class Rate:
    """A share of draws, with its exact 95 % confidence interval."""

    share: float
    low: float
    high: float

    @classmethod
    def of(cls, hits: int, count: int, confidence: float = 0.95) -> Rate:
        """Estimate from counts.

        References
        ----------
        .. [1] C. J. Clopper and E. S. Pearson, Biometrika 26, 404 (1934).
        """
        from scipy.special import betaincinv

        tail = (1 - confidence) / 2
        low = float(betaincinv(hits, count - hits + 1, tail)) if hits else 0.0
        high = float(betaincinv(hits + 1, count - hits, 1 - tail)) if hits < count else 1.0
        return cls(share=hits / count, low=low, high=high)


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """What a recipe does on B rigs: CNR and exposure [s] of each (B,), and which limits each misses."""

    cnr: Array
    exposure_s: Array
    missed: Mapping[str, NDArray[np.bool_]]

    @property
    def within(self) -> NDArray[np.bool_]:
        """Which rigs keep all limits. (B,)"""
        kept = np.ones(self.cnr.size, dtype=bool)
        for missed in self.missed.values():
            kept &= ~missed
        return kept


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Tolerance(Displayed):
    """Spread of the CNR over rigs, and the yield.

    Attributes
    ----------
    nominal : Performance
        The recipe on the rig as stated.
    draws, seed : int
    retuned : bool
        Whether each rig had its own exposure.
    required : float or None
    spreads : tuple of Spread
        What varies, and how much.
    outcome : Outcome
        Every draw.
    passed : Rate or None
        Rigs that reach the required CNR and keep all limits; None without a required CNR.
    reached : Rate or None
        Rigs that reach it, whatever their limits.
    within : Rate
        Rigs that keep all limits.
    missed : mapping
        Share of rigs that miss each limit, those some rig misses, most missed first.
    causes : tuple of CauseShare
        What makes the CNR vary, the most important first.
    """

    problem: Problem = field(repr=False)
    nominal: Performance
    draws: int
    seed: int
    retuned: bool
    required: float | None
    spreads: tuple[Spread, ...]
    outcome: Outcome = field(repr=False)
    passed: Rate | None
    reached: Rate | None
    within: Rate
    missed: Mapping[str, float]
    causes: tuple[CauseShare, ...]

    def quantile(self, share: float) -> float:
        """CNR that this share of rigs stays below."""
        return float(np.quantile(self.outcome.cnr, share))

    def table(self):
        """Every draw as a pandas DataFrame: ``cnr``, ``exposure_us``, ``within_limits``."""
        import pandas

        outcome = self.outcome
        return pandas.DataFrame(
            {"cnr": outcome.cnr, "exposure_us": outcome.exposure_s * 1e6, "within_limits": outcome.within}
        )


def tolerance(
    problem: Problem,
    design: Design,
    *,
    draws: int = DRAWS,
    seed: int = 1,
    required: float | None = None,
    retune: bool = False,
    progress: Callable[[int, int], None] | None = None,
) -> Tolerance:
    """Set a recipe on many rigs built from real parts.

    Parameters
    ----------
    problem : Problem
        Its ``[tolerance]`` section says what varies; usual spreads by default.
    design : Design
    draws : int
    seed : int
        The same seed gives the same rigs.
    required : float, optional
        CNR a rig must reach; that of the problem by default.
    retune : bool
        Set the exposure anew on each rig.
    progress : callable, optional
        Called with (rigs worked out, rigs in all, those that part the variance included).

    Returns
    -------
    Tolerance

    Examples
    --------
    >>> from codesign import load_problem, solve
    >>> problem = load_problem("yellow-stain")
    >>> found = tolerance(problem, solve(problem, alternatives=0).recipe.design, draws=1000)
    >>> 0 < found.quantile(0.05) < found.quantile(0.5) < found.nominal.cnr * 1.1
    True
    """
    _check(problem, draws, seed, required)
    required = problem.spec.required_cnr if required is None else required
    listed = spreads_of(problem, design)
    names = cause_names(listed)

    def rigs(z: dict[str, Array], count: int) -> Fleet:
        return Fleet(problem, design, draws_from(listed, z, count))

    total = draws + (SHARE_SAMPLE * (len(names) + 2) if names else 0)
    done = itertools.accumulate(itertools.repeat(RIGS_TOGETHER))
    tick = (lambda: None) if progress is None else (lambda: progress(min(next(done), total), total))
    fleet = rigs(standard_normal(names, draws, seed), draws)
    outcome = run(fleet, retune=retune, tick=tick)
    causes = variance_shares(
        lambda z: run(rigs(z, len(z[names[0]])), retune=retune, limits=False, tick=tick).cnr, names, SHARE_SAMPLE, seed
    )
    above = outcome.cnr >= (required or 0.0)
    shares = {name: float(np.mean(missed)) for name, missed in outcome.missed.items() if np.any(missed)}
    return Tolerance(
        problem=problem,
        nominal=fleet.nominal,
        draws=draws,
        seed=seed,
        retuned=retune,
        required=required,
        spreads=listed,
        outcome=outcome,
        passed=None if required is None else Rate.of(int(np.sum(above & outcome.within)), draws),
        reached=None if required is None else Rate.of(int(np.sum(above)), draws),
        within=Rate.of(int(np.sum(outcome.within)), draws),
        missed=dict(sorted(shares.items(), key=lambda item: -item[1])),
        causes=causes,
    )


def spreads_of(problem: Problem, design: Design) -> tuple[Spread, ...]:
    """What varies on a rig with one recipe."""
    leds = [led for led, ma in design.drive_ma.items() if ma > 0]
    return spreads(problem, leds, filters_in(problem, design.filter))


def run(fleet: Fleet, *, retune: bool = False, limits: bool = True, tick: Callable[[], None] = lambda: None) -> Outcome:
    """Evaluate all rigs of a fleet; ``limits`` False leaves them out, ``tick`` is called after each block of rigs."""
    cnr, exposure = np.empty(fleet.rigs.size), np.empty(fleet.rigs.size)
    missed: list[Mapping[str, NDArray[np.bool_]]] = []
    for part, block in fleet.blocks():
        now = np.full(block.rigs.size, fleet.design.exposure_us * 1e-6)
        light = longest_exposure(block) if retune else block.light(now)
        cnr[part], exposure[part] = block.contrast(light), light.exposure_s
        missed += [broken(limit_shares(block, light))] if limits else []
        tick()
    names: Sequence[str] = tuple(missed[0]) if missed else ()
    return Outcome(
        cnr=cnr, exposure_s=exposure, missed={name: np.concatenate([each[name] for each in missed]) for name in names}
    )


def _check(problem: Problem, draws: int, seed: int, required: float | None) -> None:
    if not 1 <= draws <= MOST_DRAWS:
        raise ProblemError(f"{problem.where}: draws is {draws}, must be 1 to {MOST_DRAWS}")
    if seed < 0:
        raise ProblemError(f"{problem.where}: seed is {seed}, must be >= 0")
    if required is not None and not 0 < required < np.inf:
        raise ProblemError(f"{problem.where}: required CNR is {required:g}, must be > 0")
