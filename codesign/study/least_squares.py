"""Generalised linear least squares of grey values, with the noise of the light that comes out of the fit.

Grey values are linear in the deliveries, black level and gain (see `codesign.study.observations`); the covariance holds
sensor and shot noise, and the departure of each measured piece from its surface's mean, common to all its readings.

The gain is told from the deliveries by light that the fit does not scale (ambient light, dark current), and by the
noise of a pixel over time, where measured: its variance grows by K per grey value (photon transfer, EMVA Standard
1288, Release 4.0 Linear).
"""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass

import numpy as np
from scipy.linalg import solve_triangular

from codesign.physics.sensor import QUANTIZATION_VARIANCE_DN2
from codesign.program import Array
from codesign.study.observations import Observations

#: Rounds of fitting with the noise of the light fitted, at most, and change of the factors that ends them.
ROUNDS, SETTLED = 5, 1e-3
#: Singular values below this share of the largest carry no information, and what they leave open. [1]
NO_INFORMATION, OPEN = 1e-7, 1e-4


@dataclass(frozen=True, slots=True)
class Fit:
    """One least-squares fit: parameters by name, and what further hypotheses need.

    ``root`` is the lower square root of the covariance of the readings, ``whiten`` its inverse; ``design`` and
    ``right`` are whitened.
    """

    names: tuple[str, ...]
    theta: Array
    covariance: Array
    open: np.ndarray
    design: Array
    right: Array
    root: Array
    whiten: Array
    fitted: Array
    chi_square: float


def fitted(seen: Observations, fit: Collection[str] = ()) -> Fit:
    """Least squares with the noise of the light that comes out of it."""
    factors, gain, black = np.ones(len(seen.leds)), 1.0, seen.black
    for _ in range(ROUNDS):
        names, design = _design(seen, fit)
        right, whiten = _right(seen, fit, factors, gain, black, design)
        found = _solved(names, design[: right.size], right, whiten, seen)
        theta = dict(zip(found.names, found.theta, strict=True))
        gain = float(np.clip(theta.get("gain", 1.0), 0.05, 20.0))
        # Deliveries not determined stay as stated, so that their noise is not forgotten.
        before = factors
        factors = np.where(found.open[: len(seen.leds)], 1.0, found.theta[: len(seen.leds)] / gain)
        black = seen.black + np.array([theta.get(f"offset {name}", 0.0) for name in seen.camera])
        if np.max(np.abs(factors - before)) <= SETTLED:
            break
    return found


def _design(seen: Observations, fit: Collection[str]) -> tuple[tuple[str, ...], Array]:
    """Columns of all parameters: LEDs, offsets, gain. Rows: grey values, then variances of pixels."""
    names, columns = list(seen.leds), [seen.gain * seen.electrons[:, j] for j in range(len(seen.leds))]
    if "offset" in fit:
        for camera in dict.fromkeys(seen.camera):
            names.append(f"offset {camera}")
            columns.append(np.array([float(name == camera) for name in seen.camera]))
    if "gain" in fit:
        names.append("gain")
        columns.append(seen.gain * (seen.ambient + seen.dark))
    design = np.stack(columns, axis=1)
    measured = np.flatnonzero(~np.isnan(seen.noise)) if "gain" in fit else np.zeros(0, dtype=int)
    transfer = np.zeros((measured.size, len(names)))
    return tuple(names), np.concatenate([design, transfer])


def _right(
    seen: Observations, fit: Collection[str], factors: Array, gain: float, black: Array, design: Array
) -> tuple[Array, Array]:
    """Right side and square root of its covariance at the light of the last round; fills in the rows of variances."""
    led_e = seen.electrons @ factors
    true_gain = seen.gain * gain
    own = np.diag(seen.variance(led_e, true_gain))
    amplitude = np.einsum("mjr,j->mr", seen.spread, np.append(factors, 1.0)) * true_gain[:, None]
    same = np.array([[a == b for b in seen.surface] for a in seen.surface])
    covariance = own + (amplitude @ amplitude.T) * same
    right = seen.grey - seen.black
    if "gain" not in fit:
        right = right - seen.gain * (seen.ambient + seen.dark)
        return right, np.linalg.cholesky(covariance)
    measured = np.flatnonzero(~np.isnan(seen.noise))
    read = np.array([sensor.read_noise_e for sensor in seen.sensors])[measured]
    squared = seen.noise[measured] ** 2
    design[seen.grey.size :, -1] = seen.gain[measured] * (seen.grey - black)[measured]
    right = np.append(right, squared - QUANTIZATION_VARIANCE_DN2 - (true_gain[measured] * read) ** 2)
    full = np.zeros((right.size, right.size))
    full[: seen.grey.size, : seen.grey.size] = covariance
    tail = np.arange(seen.grey.size, right.size)
    expected = true_gain[measured] * (led_e + seen.ambient + seen.dark)[measured] * true_gain[measured]
    expected = expected + (true_gain[measured] * read) ** 2 + QUANTIZATION_VARIANCE_DN2
    full[tail, tail] = 2 * expected**2 / np.maximum(seen.pixels[measured] - 1, 1)
    return right, np.linalg.cholesky(full)


def _solved(names: tuple[str, ...], design: Array, right: Array, whiten: Array, seen: Observations) -> Fit:
    """Least squares through the singular values of the whitened columns, each scaled to length 1."""
    inverse = solve_triangular(whiten, np.eye(right.size), lower=True)
    white, target = inverse @ design, inverse @ right
    length = np.linalg.norm(white, axis=0)
    scale = np.where(length > 0, length, 1.0)
    left, singular, rows = np.linalg.svd(white / scale, full_matrices=True)
    kept = singular > NO_INFORMATION * singular.max(initial=0.0)
    count = int(kept.sum())
    theta = rows[:count].T @ ((left[:, :count].T @ target) / singular[:count]) / scale
    covariance = (rows[:count].T / singular[:count] ** 2) @ rows[:count] / np.outer(scale, scale)
    unknown = np.linalg.norm(rows[count:], axis=0) > OPEN
    error = np.sqrt(np.diag(covariance))
    # A delivery not known to better than itself, or than the one stated, is not known.
    unknown[: len(seen.leds)] |= (error > np.maximum(np.abs(theta), 1.0))[: len(seen.leds)]
    model = (design @ theta)[: seen.grey.size]
    return Fit(
        names=names,
        theta=theta,
        covariance=covariance,
        open=unknown | (length == 0),
        design=white,
        right=target,
        root=whiten,
        whiten=inverse,
        fitted=seen.black + model + (0.0 if "gain" in names else seen.gain * (seen.ambient + seen.dark)),
        chi_square=float(np.sum((target - white @ theta) ** 2)),
    )
