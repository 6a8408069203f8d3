"""Detection theory: from a contrast-to-noise ratio to error rates.

The detectability index d' is the distance of two Gaussian signals in units of their standard deviation. For
signals of unequal variance the contrast-to-noise ratio ``|μ_t - μ_b| / sqrt((σ_t² + σ_b²) / 2)`` takes its
place.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from codesign.physics._tables import Array


def error_rate(cnr: ArrayLike) -> Array:
    """Share of misses, equal to the share of false alarms, with the threshold midway: ``Φ(-CNR / 2)``.

    Parameters
    ----------
    cnr : array
        Contrast-to-noise ratio of one decision. [1]

    Returns
    -------
    array
        [1]

    References
    ----------
    .. [1] D. M. Green and J. A. Swets, Signal Detection Theory and Psychophysics (1966).
    """
    cnr = np.asarray(cnr, dtype=float)
    if cnr.ndim == 0:  # one recipe: Φ(−x) = erfc(x/√2)/2, without loading a special-function library
        return np.float64(math.erfc(cnr / math.sqrt(8.0)) / 2)
    from scipy.special import ndtr

    return ndtr(-0.5 * cnr)


def auc(dprime: ArrayLike) -> Array:
    """Area under the ROC curve, ``Φ(d' / √2)``: chance to rank a target above a background. [1]

    References
    ----------
    .. [1] Green and Swets (1966); H. H. Barrett and K. J. Myers, Foundations of Image Science (2004).
    """
    from scipy.special import ndtr

    return ndtr(np.asarray(dprime, dtype=float) / np.sqrt(2.0))


def detection_probability(dprime: ArrayLike, false_alarm: ArrayLike) -> Array:
    """Share of targets found at a given false-alarm rate, ``Φ(d' + Φ⁻¹(P_fa))``: the ROC curve. [1]

    References
    ----------
    .. [1] Green and Swets (1966), equal-variance Gaussian model.
    """
    from scipy.special import ndtr, ndtri

    return ndtr(np.asarray(dprime, dtype=float) + ndtri(np.asarray(false_alarm, dtype=float)))


def required_dprime(false_alarm: ArrayLike, miss: ArrayLike) -> Array:
    """Detectability needed for a false-alarm rate and a miss rate, ``-Φ⁻¹(P_fa) - Φ⁻¹(P_miss)``. [1]

    References
    ----------
    .. [1] Green and Swets (1966), equal-variance Gaussian model.
    """
    from scipy.special import ndtri

    return -ndtri(np.asarray(false_alarm, dtype=float)) - ndtri(np.asarray(miss, dtype=float))


def expected_false_alarms(decisions: ArrayLike, threshold_sigma: ArrayLike) -> Array:
    """Mean number of false alarms of many independent decisions, ``n Φ(-k)``.

    Parameters
    ----------
    decisions : array
        For example the pixels of an image.
    threshold_sigma : array
        Distance of the threshold from the background mean in its standard deviations. [1]
    """
    from scipy.special import ndtr

    return np.asarray(decisions, dtype=float) * ndtr(-np.asarray(threshold_sigma, dtype=float))


def rose(contrast: ArrayLike, photons_per_area: ArrayLike, area: ArrayLike) -> Array:
    """Rose's signal-to-noise ratio of a detail in shot noise, ``C sqrt(Φ A)``; about 5 is needed to see it.

    Parameters
    ----------
    contrast : array
        Relative difference to the background. [1]
    photons_per_area : array
        Detected photons of the background. [1/m²]
    area : array
        Of the detail. [m²]

    Returns
    -------
    array
        [1]

    References
    ----------
    .. [1] A. Rose, J. Opt. Soc. Am. 38, 196 (1948).
    """
    photons = np.asarray(photons_per_area, dtype=float) * area
    return np.abs(np.asarray(contrast, dtype=float)) * np.sqrt(photons)


def averaged(dprime: ArrayLike, count: ArrayLike) -> Array:
    """Detectability after averaging ``count`` independent pixels or frames, ``d' √N``.

    Only for noise that is new in each; fixed pattern and surface clutter do not average out. [1]
    """
    return np.asarray(dprime, dtype=float) * np.sqrt(np.asarray(count, dtype=float))


def combined(dprimes: ArrayLike) -> Array:
    """Detectability of independent channels used together, ``sqrt(Σ d'²)`` over the last axis. [1]"""
    return np.sqrt(np.sum(np.asarray(dprimes, dtype=float) ** 2, axis=-1))


def hotelling(delta_mean: ArrayLike, covariance: ArrayLike) -> tuple[float, Array]:
    """Best linear detector of a known difference in correlated noise.

    Parameters
    ----------
    delta_mean : (n,) array
        Mean of the target minus mean of the background.
    covariance : (n, n) array
        Symmetric, positive definite.

    Returns
    -------
    dprime : float
        ``sqrt(Δᵀ S⁻¹ Δ)``. [1]
    weights : (n,) array
        ``S⁻¹ Δ``, scaled to length 1 (zero for a zero difference).

    References
    ----------
    .. [1] H. Hotelling (1931); R. A. Fisher (1936); Barrett and Myers (2004).
    """
    delta = np.asarray(delta_mean, dtype=float)
    weights = np.linalg.solve(np.asarray(covariance, dtype=float), delta)
    length = float(np.linalg.norm(weights))
    return float(np.sqrt(max(float(delta @ weights), 0.0))), weights / length if length > 0.0 else weights
