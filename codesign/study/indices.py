"""Variance-based sensitivity indices: which causes make a result vary, alone and together with others.

First order ``S_i = Var(E(Y | z_i)) / Var(Y)``, total ``T_i = E(Var(Y | all but z_i)) / Var(Y)``, by the pick-freeze
method: two samples A and B, and A with one column taken from B for each cause.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: Resamplings behind the intervals, and the range they span.
RESAMPLINGS, CONFIDENCE = 200, 0.95


@dataclass(frozen=True, slots=True, kw_only=True)
class CauseShare:
    """How much of the variance a cause explains: alone, and with all its interactions; each with a 95 % interval."""

    cause: str
    first_order: float
    first_order_interval: tuple[float, float]
    total: float
    total_interval: tuple[float, float]


def variance_shares(
    model: Callable[[dict[str, Array]], Array], causes: Sequence[str], count: int, seed: int
) -> tuple[CauseShare, ...]:
    """Indices of all causes, the largest total first.

    Parameters
    ----------
    model : callable
        Takes standard normal values of each cause, name → (N,), and returns (N,) results.
    causes : sequence of str
    count : int
        Size of a sample, a power of two; the model is evaluated at ``count (D + 2)`` points.
    seed : int

    Returns
    -------
    tuple of CauseShare
        Empty where the result does not vary.

    References
    ----------
    .. [1] A. Saltelli et al., Comput. Phys. Commun. 181, 259 (2010): estimator of the first order, table 2 (b).
    .. [2] M. J. W. Jansen, Comput. Phys. Commun. 117, 35 (1999): estimator of the total.
    """
    if not causes:
        return ()
    a, b = _two_samples(len(causes), count, seed)
    mixed = [a, b]
    for i in range(len(causes)):
        one = a.copy()
        one[:, i] = b[:, i]
        mixed.append(one)
    # Points that differ in one cause only side by side: models may share what does not depend on it.
    points = np.stack(mixed, axis=1).reshape(-1, len(causes))
    y = model({name: points[:, i] for i, name in enumerate(causes)}).reshape(count, -1).T
    if not np.ptp(y[:2]) > 0:
        return ()
    first, total = _estimates(y[:, None, :])
    rows = np.random.default_rng([seed, 1]).integers(count, size=(RESAMPLINGS, count))
    spread = _estimates(y[:, rows])
    ends = [(1 - CONFIDENCE) / 2, (1 + CONFIDENCE) / 2]
    low, high = np.moveaxis(np.quantile(np.stack(spread), ends, axis=2), 0, 0)
    found = [
        CauseShare(
            cause=name,
            first_order=float(first[i, 0]),
            first_order_interval=(float(low[0, i]), float(high[0, i])),
            total=float(total[i, 0]),
            total_interval=(float(low[1, i]), float(high[1, i])),
        )
        for i, name in enumerate(causes)
    ]
    return tuple(sorted(found, key=lambda share: -share.total))


def _two_samples(causes: int, count: int, seed: int) -> tuple[Array, Array]:
    """Two independent samples of standard normal values, from one scrambled Sobol' sequence. (count, D) each"""
    from scipy.special import ndtri
    from scipy.stats import qmc

    points = qmc.Sobol(2 * causes, scramble=True, rng=np.random.default_rng(seed)).random(count)
    normal = ndtri(np.clip(points, 1e-12, 1 - 1e-12))
    return normal[:, :causes], normal[:, causes:]


def _estimates(y: Array) -> tuple[Array, Array]:
    """First order and total of each cause, from results (D + 2, R, N) of A, B and the mixed samples. (D, R) each"""
    a, b, mixed = y[0], y[1], y[2:]
    both = np.concatenate([a, b], axis=-1)
    variance = np.var(both, axis=-1)
    centre = np.mean(both, axis=-1, keepdims=True)
    first = np.mean((b - centre) * (mixed - a), axis=-1) / variance
    total = np.mean((a - mixed) ** 2, axis=-1) / (2 * variance)
    return first, total
