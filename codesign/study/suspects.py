"""What may be wrong with a rig whose readings no set of deliveries explains.

Each hypothesis adds columns to the least-squares fit; noise alone would lower chi-square by as much only with the
probability stated (chi-square of as many degrees as columns). Two LEDs swapped are tried by fitting all readings anew
with each in the other's place; the deliveries then needed are weighed too, since a rig is hardly ever built so that one
LED brings a fraction and another a multiple of the light planned.
"""

from __future__ import annotations

import itertools
from collections.abc import Collection, Iterator
from dataclasses import dataclass

import numpy as np
from scipy import stats

from codesign.problem import Problem
from codesign.program import Array
from codesign.study.least_squares import Fit, fitted
from codesign.study.observations import Observations, observe
from codesign.study.readings import Reading

#: A cause is named when noise alone would mimic it with less than this probability, all hypotheses counted.
SIGNIFICANT = 1e-3
#: How far deliveries commonly are from what is stated: standard deviation of their logarithm.
USUAL_SPREAD = 0.3
#: Least factor taken seriously in that.
LEAST_FACTOR = 0.02
#: Readings that noise explains with this probability, and deliveries within this factor, leave nothing to explain.
PLAUSIBLE, FAR_OFF = 0.05, 1.5
#: Causes named at most.
MOST = 4

Hypothesis = tuple[str, str, tuple[str, ...], Array]


@dataclass(frozen=True, slots=True, kw_only=True)
class Suspect:
    """What could explain the residuals: ``kind`` in a word, ``probability`` that noise alone does it."""

    kind: str
    text: str
    probability: float
    leds: tuple[str, ...] = ()


def suspects(
    problem: Problem, readings: tuple[Reading, ...], seen: Observations, best: Fit, fit: Collection[str]
) -> tuple[Suspect, ...]:
    """Causes that explain the residuals better than noise does, most likely first."""
    found, hypotheses = [], list(_hypotheses(seen, best))
    strongest = max((_tried(best, best.design, each, len(hypotheses))[0] for each in hypotheses), default=-np.inf)
    swap = _swapped(problem, readings, seen, best, fit)
    # Any wrong spectrum looks a little like another LED's: the swap has to explain more than that.
    if swap is not None and swap[0] > strongest:
        _, named, seen, best = swap
        found, hypotheses = [named], list(_hypotheses(seen, best))
    design = best.design
    while hypotheses and len(found) < MOST:
        tried = [_tried(best, design, each, len(hypotheses)) for each in hypotheses]
        _, suspect, columns = max(tried, key=lambda item: item[0])
        if suspect.probability * len(hypotheses) >= SIGNIFICANT:
            break
        # What the first cause explains is no evidence for a second.
        found.append(suspect)
        design = np.concatenate([design, columns], axis=1)
        hypotheses = [each for each in hypotheses if each[1] != suspect.text]
    return tuple(found)


def _tried(best: Fit, design: Array, hypothesis: Hypothesis, count: int) -> tuple[float, Suspect, Array]:
    """Evidence for a hypothesis beside the columns already there, and its whitened columns."""
    kind, text, leds, columns = hypothesis
    drop, new, white = _drop(best, design, columns)
    probability = float(stats.chi2.sf(drop, new)) if new else 1.0
    suspect = Suspect(kind=kind, text=text, probability=probability, leds=leds)
    # Causes that explain nothing significantly come last, whatever their number of columns.
    evidence = drop - new * np.log(best.right.size) if probability * count < SIGNIFICANT else -np.inf
    return evidence, suspect, white


def _hypotheses(seen: Observations, best: Fit) -> Iterator[Hypothesis]:
    """Kind, what it means, LEDs meant, and columns (M, k) in grey values."""
    theta = dict(zip(best.names, best.theta, strict=True))
    surfaces = list(dict.fromkeys(seen.surface))
    if len(surfaces) > 1:
        masks = np.array([[float(name == own) for own in surfaces] for name in seen.surface])
        for j, led in enumerate(seen.leds):
            own = (seen.gain * seen.electrons[:, j] * theta[led])[:, None] * masks
            text = f"{led} looks brighter on some surfaces and darker on others: its spectrum is not the one stated"
            yield "wrong spectrum", text, (led,), own
    cameras = list(dict.fromkeys(seen.camera))
    if "gain" not in best.names:
        signal = best.fitted - seen.black
        for camera in cameras if len(cameras) > 1 else ():
            own = np.array([float(name == camera) for name in seen.camera])
            text = f"grey values of {camera} are off in proportion: its conversion gain is not the one stated"
            yield "gain", text, (), (signal * own)[:, None]
    if np.any(seen.ambient):
        text = "readings are off in proportion to the ambient light: it, or the gain, is not as stated"
        yield "ambient light", text, (), (seen.gain * seen.ambient)[:, None]
    text = "an offset that rises with the exposure: stray light or ambient light not stated, or more dark current"
    yield "stray light", text, (), np.stack([seen.gain * seen.exposure_s * seen.speed], axis=1)
    if not any(name.startswith("offset") for name in best.names):
        for camera in cameras:
            own = np.array([[float(name == camera)] for name in seen.camera])
            text = f"a constant offset at {camera}: the black level is not the one stated; --fit offset measures it"
            yield "black level", text, (), own


def _drop(best: Fit, design: Array, columns: Array) -> tuple[float, int, Array]:
    """By how much columns lower chi-square beside those of a design, how many of them are new, and they whitened."""
    full = np.zeros((best.right.size, columns.shape[1]))
    full[: len(columns)] = columns
    white = best.whiten @ full
    length = np.linalg.norm(white, axis=0)
    white = fresh = white[:, length > 0] / length[length > 0]
    basis = _basis(design)
    residual = best.right - basis @ (basis.T @ best.right)
    # Twice: what is left of nearly dependent columns must be free of the old ones.
    for _ in range(2):
        fresh = fresh - basis @ (basis.T @ fresh)
    new = _basis(fresh, least=1e-5)
    return float(np.sum((new.T @ residual) ** 2)), new.shape[1], white


def _basis(columns: Array, least: float = 0.0) -> Array:
    """Orthonormal columns that span the same; directions shorter than ``least`` left out."""
    if not columns.size:
        return np.zeros((len(columns), 0))
    left, singular, _ = np.linalg.svd(columns, full_matrices=False)
    return left[:, singular > max(least, 1e-9 * singular.max())]


def _swapped(
    problem: Problem, readings: tuple[Reading, ...], seen: Observations, best: Fit, fit: Collection[str]
) -> tuple[float, Suspect, Observations, Fit] | None:
    """The pair of LEDs that explains the readings best in each other's place, if much better than as stated."""
    if _plausible(seen, best):
        return None
    base, found = _misfit(seen, best), []
    for first, second in itertools.combinations(seen.leds, 2):
        other = observe(problem, readings, {first: second, second: first})
        swapped = fitted(other, fit)
        found.append((_misfit(other, swapped) - base, first, second, other, swapped))
    if not found:
        return None
    change, first, second, other, swapped = min(found, key=lambda item: item[0])
    probability = float(np.exp(min(change, 0.0) / 2))
    if not probability * len(found) < SIGNIFICANT:
        return None
    theta = dict(zip(swapped.names, swapped.theta, strict=True))
    needed = " and ".join(f"{theta[led] / theta.get('gain', 1.0):.3g}" for led in (first, second))
    text = (
        f"{first} and {second} are swapped: with each in the other's place chi-square is {swapped.chi_square:.4g} "
        f"instead of {best.chi_square:.4g}, delivery factors {needed}"
    )
    suspect = Suspect(kind="swapped LEDs", text=text, probability=probability, leds=(first, second))
    return -change, suspect, other, swapped


def _plausible(seen: Observations, best: Fit) -> bool:
    """Whether noise explains the readings and no two deliveries are far off in opposite senses."""
    freedom = best.right.size - int(np.linalg.matrix_rank(best.design))
    explained = freedom > 0 and stats.chi2.sf(best.chi_square, freedom) > PLAUSIBLE
    off = _factors(seen, best)
    return explained and not (off.min(initial=1.0) < 1 / FAR_OFF and off.max(initial=1.0) > FAR_OFF)


def _factors(seen: Observations, best: Fit) -> Array:
    """Delivery factors that the fit determines."""
    theta = dict(zip(best.names, best.theta, strict=True))
    open_ = dict(zip(best.names, best.open, strict=True))
    gain = theta.get("gain", 1.0) if not open_.get("gain", False) else 1.0
    return np.array([theta[led] / gain for led in seen.leds if not open_[led]])


def _misfit(seen: Observations, best: Fit) -> float:
    """Twice the negative logarithm of how likely readings and deliveries are together."""
    unusual = np.log(np.maximum(_factors(seen, best), LEAST_FACTOR)) / USUAL_SPREAD
    return best.chi_square + 2 * float(np.sum(np.log(np.diag(best.root)))) + float(np.sum(unusual**2))
