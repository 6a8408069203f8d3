"""Delivery factors, black level and conversion gain from grey values measured with known recipes.

Each factor multiplies the delivery that the problem states; how it is fitted is in `codesign.study.least_squares`. What
the readings cannot tell is said, never guessed.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, field

import numpy as np
from scipy import stats

from codesign.display import Displayed
from codesign.errors import ProblemError, nearest
from codesign.problem import Problem
from codesign.program import Array
from codesign.study.least_squares import Fit, fitted
from codesign.study.observations import Observations, observe
from codesign.study.readings import Reading, with_surfaces
from codesign.study.suspects import Suspect, suspects

EXTRAS = ("offset", "gain")
#: Standard error of a factor above which it is called hardly determined. [1]
HARDLY = 0.3
#: Correlation from which on two parameters are called the same.
TWIN = 0.9
#: Quantile of a 95 % interval of a normal variable.
Z95 = 1.959964


@dataclass(frozen=True, slots=True, kw_only=True)
class Estimate:
    """One fitted number with its standard error; ``trouble`` says why it is not (or hardly) determined."""

    name: str
    value: float
    error: float
    trouble: str = ""

    @property
    def interval(self) -> tuple[float, float]:
        """95 % interval."""
        return self.value - Z95 * self.error, self.value + Z95 * self.error

    @property
    def determined(self) -> bool:
        """Whether the readings say anything about it."""
        return bool(np.isfinite(self.error))


@dataclass(frozen=True, slots=True, kw_only=True)
class Residual:
    """One grey value measured and fitted; ``pull`` is the difference in standard deviations."""

    where: str
    surface: str
    measured_dn: float
    fitted_dn: float
    error_dn: float
    pull: float


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Calibration(Displayed):
    """What readings say about a rig.

    Attributes
    ----------
    factors : tuple of Estimate
        By LED id: delivery relative to the one stated. [1]
    delivery_per_m2 : mapping
        Fitted delivery of one emitter, of the LEDs determined. [1/m²]
    offsets : tuple of Estimate
        Black level by camera and gain, where asked for. [DN]
    gain : Estimate or None
        Conversion gain relative to the one stated, where asked for. [1]
    chi_square, degrees_of_freedom : float, int
    probability : float
        That noise alone gives a larger chi-square; NaN where nothing is left to check.
    correlation : array
        Of the factors, in their order; NaN for those not determined.
    residuals : tuple of Residual
    suspects : tuple of Suspect
        Most likely first.
    dropped : tuple of str
        Values not used, and why.
    """

    problem: Problem = field(repr=False)
    factors: tuple[Estimate, ...]
    delivery_per_m2: Mapping[str, float]
    offsets: tuple[Estimate, ...]
    gain: Estimate | None
    chi_square: float
    degrees_of_freedom: int
    probability: float
    correlation: Array = field(repr=False)
    residuals: tuple[Residual, ...] = field(repr=False)
    suspects: tuple[Suspect, ...]
    dropped: tuple[str, ...]

    def factor(self, led: str) -> Estimate:
        """The delivery factor of one LED."""
        return next(factor for factor in self.factors if factor.name == led)

    def table(self):
        """Fitted factors as a pandas DataFrame."""
        import pandas as pd

        return pd.DataFrame(
            {
                "LED": [f.name for f in self.factors],
                "factor [1]": [f.value for f in self.factors],
                "standard error [1]": [f.error for f in self.factors],
                "delivery [1/m2]": [self.delivery_per_m2.get(f.name, np.nan) for f in self.factors],
                "trouble": [f.trouble for f in self.factors],
            }
        )


def calibrate(problem: Problem, readings: Collection[Reading], fit: Collection[str] = ()) -> Calibration:
    """Fit the delivery of each LED to measured grey values.

    Parameters
    ----------
    problem : Problem
    readings : collection of Reading
        As `codesign.study.readings.load_readings` returns them.
    fit : collection of str
        "offset" for the black level, "gain" for the conversion gain, besides the deliveries.

    Returns
    -------
    Calibration

    Raises
    ------
    ProblemError
        When the readings cannot tell anything: all clipped, no LED lit, several cameras for one gain.
    """
    readings = tuple(readings)
    problem = with_surfaces(problem, readings)
    seen = observe(problem, readings)
    _check(seen, fit)
    best = fitted(seen, fit)
    factors, gain = _factors(problem, seen, best)
    offsets = tuple(_estimate(best, name, name.partition(" ")[2]) for name in best.names if name.startswith("offset"))
    freedom = best.right.size - int(np.linalg.matrix_rank(best.design))
    sigma = np.sqrt(np.diag(best.root @ best.root.T))[: seen.grey.size]
    determined = {f.name: f for f in factors if f.determined}
    channels = {led: problem.channel(led) for led in determined}
    return Calibration(
        problem=problem,
        factors=factors,
        delivery_per_m2={led: c.delivery / c.emitters * determined[led].value for led, c in channels.items()},
        offsets=offsets,
        gain=gain,
        chi_square=best.chi_square,
        degrees_of_freedom=freedom,
        probability=float(stats.chi2.sf(best.chi_square, freedom)) if freedom > 0 else float("nan"),
        correlation=_correlation(seen, best, [f.name for f in factors]),
        residuals=tuple(
            Residual(
                where=seen.where[m],
                surface=seen.surface[m],
                measured_dn=float(seen.grey[m]),
                fitted_dn=float(best.fitted[m]),
                error_dn=float(sigma[m]),
                pull=float((seen.grey[m] - best.fitted[m]) / sigma[m]),
            )
            for m in range(seen.grey.size)
        ),
        suspects=suspects(problem, readings, seen, best, fit),
        dropped=seen.dropped,
    )


def _check(seen: Observations, fit: Collection[str]) -> None:
    for name in fit:
        if name not in EXTRAS:
            raise ProblemError(f"fit is {name!r}, must be among {', '.join(EXTRAS)}; {nearest(name, EXTRAS)}")
    if not seen.grey.size:
        raise ProblemError(f"readings: all grey values are clipped, e.g. {seen.dropped[0]}; measure with less light")
    if not seen.leds:
        raise ProblemError("readings: no LED is lit in any row; fill the drive_ma.<LED id> columns")
    if "gain" in fit and len({name.partition(" at ")[0] for name in seen.camera}) > 1:
        raise ProblemError("fit is 'gain', which needs readings of one camera only; calibrate each camera by itself")


def _estimate(best: Fit, name: str, shown: str) -> Estimate:
    index = best.names.index(name)
    if best.open[index]:
        return Estimate(name=shown, value=float("nan"), error=float("inf"), trouble="not determined by these readings")
    return Estimate(name=shown, value=float(best.theta[index]), error=float(np.sqrt(best.covariance[index, index])))


def _factors(problem: Problem, seen: Observations, best: Fit) -> tuple[tuple[Estimate, ...], Estimate | None]:
    """Delivery factors of all candidates, and the gain where fitted; with it the slopes are products of both."""
    gain = _estimate(best, "gain", "conversion gain") if "gain" in best.names else None
    if gain is not None and gain.determined and gain.value < 3 * gain.error:
        trouble = "not told from the deliveries: add noise_dn columns, or readings with much ambient light"
        gain = Estimate(name=gain.name, value=float("nan"), error=float("inf"), trouble=trouble)
    found = []
    for channel in problem.channels:
        if channel.id not in seen.leds:
            found.append(_unknown(channel.id, "not lit in any reading"))
            continue
        slope = _estimate(best, channel.id, channel.id)
        if not slope.determined:
            found.append(_unknown(channel.id, _twins(best, channel.id)))
        elif gain is not None and not gain.determined:
            found.append(_unknown(channel.id, "not told from the conversion gain"))
        else:
            found.append(_checked(slope if gain is None else _ratio(best, channel.id)))
    return tuple(found), gain


def _unknown(name: str, trouble: str) -> Estimate:
    return Estimate(name=name, value=float("nan"), error=float("inf"), trouble=trouble)


def _ratio(best: Fit, led: str) -> Estimate:
    """Slope over gain, with its error to first order."""
    at = [best.names.index(led), best.names.index("gain")]
    slope, gain = best.theta[at]
    gradient = np.array([1 / gain, -slope / gain**2])
    variance = gradient @ best.covariance[np.ix_(at, at)] @ gradient
    return Estimate(name=led, value=float(slope / gain), error=float(np.sqrt(variance)))


def _checked(estimate: Estimate) -> Estimate:
    trouble = ""
    if estimate.value <= 0:
        trouble = "not positive: is it wired, or another LED?"
    elif estimate.error > HARDLY * estimate.value:
        trouble = "hardly determined: measure it brighter or alone"
    return Estimate(name=estimate.name, value=estimate.value, error=estimate.error, trouble=trouble)


def _twins(best: Fit, led: str) -> str:
    """Why a column tells nothing: hardly any light, or the same light as another's."""
    own = best.names.index(led)
    error = np.sqrt(np.diag(best.covariance))
    if not np.any(best.design[:, own]) or not error[own] > 0:
        return "brings no light to any reading"
    correlation = best.covariance[own] / np.maximum(error[own] * error, 1e-300)
    twins = [name for k, name in enumerate(best.names) if k != own and abs(correlation[k]) > TWIN]
    if twins:
        return f"not told from {' and '.join(twins)}: light it alone in one reading"
    return "brings too little light to be told: measure it brighter"


def _correlation(seen: Observations, best: Fit, leds: list[str]) -> Array:
    """Correlation of the factors, the part they have through the gain included."""
    found = np.full((len(leds), len(leds)), np.nan)
    known = [led for led in leds if led in seen.leds and not best.open[best.names.index(led)]]
    slopes = np.zeros((len(known), len(best.names)))
    for row, led in enumerate(known):
        at = best.names.index(led)
        slopes[row, at] = 1.0
        if "gain" in best.names:
            slopes[row, best.names.index("gain")] = -best.theta[at] / best.theta[best.names.index("gain")]
    covariance = slopes @ best.covariance @ slopes.T
    error = np.sqrt(np.diag(covariance))
    at = [leds.index(led) for led in known]
    found[np.ix_(at, at)] = covariance / np.outer(error, error)
    return found
