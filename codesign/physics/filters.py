"""Filters: shapes, tilt in the cone of light that reaches the sensor, absorbing glass, stacks."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import ArrayLike

from codesign.physics._tables import Array

_MAX_NODES = 12
# A logistic edge climbs from 10 % to 90 % over 2 ln 9 of its scale.
_EDGE_PER_SCALE = 2.0 * np.log(9.0)
_EXP_LIMIT = 700.0


def tilt_factor(angle_deg: ArrayLike, effective_index: float) -> Array:
    """Wavelength of an interference filter at an angle, relative to that at normal incidence.

    ``sqrt(1 - (sin θ / n*)²)``: the pass band moves to the blue when tilted.

    Parameters
    ----------
    angle_deg : array
        Angle in air. [deg]
    effective_index : float
        n* of the filter's cavity, at least 1. [1]

    Returns
    -------
    array
        [1]

    References
    ----------
    .. [1] C. R. Pidgeon and S. D. Smith, J. Opt. Soc. Am. 54, 1459 (1964).
    .. [2] H. A. Macleod, Thin-Film Optical Filters, narrow-band filters at oblique incidence.
    """
    return np.sqrt(1.0 - (np.sin(np.radians(angle_deg)) / effective_index) ** 2)


def cavity_effective_index(high_index: float, low_index: float, order: int = 1, spacer: str = "low") -> float:
    """First-order effective index of an all-dielectric cavity filter built of two materials.

    With ``x = n_L / n_H`` and order m, a low-index spacer gives
    ``n_L sqrt((m - (m-1) x) / (m - m x + x²))`` and a high-index one
    ``n_H sqrt((m - (m-1) x) / ((m-1) - (m-1) x + 1/x))``.

    Parameters
    ----------
    high_index, low_index : float
        Indices of the two materials. [1]
    order : int
        Half waves in the spacer.
    spacer : {"low", "high"}
        Material of the spacer.

    References
    ----------
    .. [1] C. R. Pidgeon and S. D. Smith, J. Opt. Soc. Am. 54, 1459 (1964).
    """
    x, m = low_index / high_index, order
    top = m - (m - 1) * x
    if spacer == "low":
        return float(low_index * np.sqrt(top / (m - m * x + x**2)))
    return float(high_index * np.sqrt(top / ((m - 1) - (m - 1) * x + 1.0 / x)))


def cone_quadrature(half_angle_deg: float, chief_angle_deg: float = 0.0) -> tuple[Array, Array]:
    """Angles and weights that stand for the cone of light through a filter in front of a sensor point.

    Assumes a pupil of uniform radiance, so that a ray at angle α from the chief ray counts with
    ``sin α cos α dα``. When the chief ray itself is tilted by θ₀ the ray meets the filter at
    ``cos θ = cos θ₀ cos α + sin θ₀ sin α cos φ``. Rays are sorted by sin² θ (which the shift of the filter
    follows) and pooled into at most 12 groups of equal weight, enough for steps of about 1 nm.

    Parameters
    ----------
    half_angle_deg : float
        Half angle of the cone. [deg]
    chief_angle_deg : float
        Tilt of the chief ray against the filter's normal. [deg]

    Returns
    -------
    angles_deg : (k,) array
        Angle against the filter's normal, rising. [deg]
    weights : (k,) array
        Sum 1.

    References
    ----------
    .. [1] Radiometric projected solid angle, sin α cos α dα dφ.
    """
    if half_angle_deg <= 0.0:
        return np.array([abs(float(chief_angle_deg))]), np.ones(1)
    pupil = np.sin(np.radians(half_angle_deg)) ** 2
    chief = np.radians(abs(chief_angle_deg))
    # The spread of sin² over the pupil decides the number of groups: 220 puts them about 1 nm
    # apart for an effective index of 1.5 at 1000 nm.
    spread = pupil + 2.0 * np.sin(chief) * np.sqrt(pupil)
    groups = int(np.clip(np.ceil(1.0 + 220.0 * spread), 3, _MAX_NODES))
    sine_squared = (np.arange(2 * groups) + 0.5) * pupil / (2 * groups)  # equal steps = equal weight
    azimuth = (np.arange(2 * groups) + 0.5) * np.pi / (2 * groups)
    cosine = np.cos(chief) * np.sqrt(1.0 - sine_squared)[:, None] + (
        np.sin(chief) * np.sqrt(sine_squared)[:, None] * np.cos(azimuth)
    )
    pooled = np.sort((1.0 - cosine**2).ravel()).reshape(groups, -1).mean(axis=1)
    angles = np.degrees(np.arcsin(np.sqrt(np.clip(pooled, 0.0, 1.0))))
    return angles, np.full(groups, 1.0 / groups)


def tilted_transmittance(
    curve_nm: Array,
    curve_values: Array,
    grid_nm: Array,
    angles_deg: Array,
    weights: Array,
    effective_index: float | None,
) -> Array:
    """Transmittance of an interference filter averaged over a cone, ``Σ w T₀(λ / tilt_factor(θ))``.

    Outside the curve its edge value is held: whether the curve covers the grid is the caller's check.

    Parameters
    ----------
    curve_nm, curve_values : (m,) array
        Curve at normal incidence. [nm], [1]
    grid_nm : (n,) array
        [nm]
    angles_deg, weights : (k,) array
        From `cone_quadrature`.
    effective_index : float or None
        None for a filter that does not shift (absorbing glass).

    Returns
    -------
    (n,) array
        [1]
    """
    if effective_index is None or (len(angles_deg) == 1 and angles_deg[0] == 0.0):
        return np.interp(grid_nm, curve_nm, curve_values)
    factors = tilt_factor(angles_deg, effective_index)
    total = np.zeros(np.shape(grid_nm))
    for factor, weight in zip(factors, weights, strict=True):
        total += weight * np.interp(grid_nm / factor, curve_nm, curve_values)
    return total


def bandpass(
    wavelength_nm: ArrayLike,
    center_nm: float,
    fwhm_nm: float,
    edge_width_nm: float,
    peak: float,
    blocking_od: float,
) -> Array:
    """Model of a band-pass filter with logistic edges.

    ``T = floor + (peak - floor) (B - 1) / (B - 2 + cosh(x/s))``, ``B = cosh(fwhm / 2s)``,
    ``x = λ - centre``, ``s = edge / (2 ln 9)``, ``floor = 10^-OD``. It is a difference of two logistic steps
    written so that the peak and both half-height points are exact for every edge width. For edges much
    narrower than the band each edge is a logistic step.

    Parameters
    ----------
    wavelength_nm : (n,) array
        [nm]
    center_nm, fwhm_nm : float
        Centre and full width at half of the peak. [nm]
    edge_width_nm : float
        Width of each edge from 10 % to 90 % of the peak. [nm]
    peak : float
        Peak transmittance. [1]
    blocking_od : float
        Optical density far from the band. [1]

    Returns
    -------
    (n,) array
        [1]
    """
    scale = edge_width_nm / _EDGE_PER_SCALE
    half = 0.5 * fwhm_nm / scale
    offset = np.abs(np.asarray(wavelength_nm, dtype=float) - center_nm) / scale
    # Numerator and denominator are multiplied by exp(-half) so that steep edges do not overflow.
    small = np.exp(-min(half, 0.4 * _EXP_LIMIT))  # squared below
    top = 0.5 * (1.0 + small**2) - small
    rise = np.exp(np.clip(offset - half, -_EXP_LIMIT, _EXP_LIMIT))
    fall = np.exp(-np.minimum(offset + half, _EXP_LIMIT))
    shape = top / (top - small + 0.5 * (rise + fall))
    return _above_floor(shape, peak, blocking_od)


def longpass(wavelength_nm: ArrayLike, cut_nm: float, edge_width_nm: float, peak: float, blocking_od: float) -> Array:
    """Model of a long-pass filter: a logistic edge, half of the peak at ``cut_nm``.

    Parameters
    ----------
    wavelength_nm : (n,) array
        [nm]
    cut_nm, edge_width_nm : float
        Half-height wavelength; 10 % to 90 % width. [nm]
    peak : float
        Transmittance of the open side. [1]
    blocking_od : float
        Optical density of the closed side. [1]

    Returns
    -------
    (n,) array
        [1]
    """
    distance = (np.asarray(wavelength_nm, dtype=float) - cut_nm) * (_EDGE_PER_SCALE / edge_width_nm)
    return _above_floor(1.0 / (1.0 + np.exp(np.clip(-distance, -_EXP_LIMIT, _EXP_LIMIT))), peak, blocking_od)


def shortpass(wavelength_nm: ArrayLike, cut_nm: float, edge_width_nm: float, peak: float, blocking_od: float) -> Array:
    """Model of a short-pass filter; the mirror image of `longpass` about ``cut_nm``."""
    mirrored = 2.0 * cut_nm - np.asarray(wavelength_nm, dtype=float)
    return longpass(mirrored, cut_nm, edge_width_nm, peak, blocking_od)


def neutral(optical_density: ArrayLike) -> Array:
    """Transmittance of a neutral density, ``10^-OD``. [1]"""
    return 10.0 ** -np.asarray(optical_density, dtype=float)


def reflection_factor_plate(n: ArrayLike) -> Array:
    """Share of light left after the reflections of both faces of a clear plate, ``2 n / (n² + 1)``.

    Normal incidence, thick plate (no interference), all internal reflections summed.

    References
    ----------
    .. [1] Sum of the Fresnel series; M. Born and E. Wolf, Principles of Optics.
    """
    n = np.asarray(n, dtype=float)
    return 2.0 * n / (n**2 + 1.0)


def glass_transmittance(internal_at_reference: ArrayLike, thickness_ratio: float, index: ArrayLike) -> Array:
    """Total transmittance of absorbing glass at another thickness, ``P(n) τ^(d/d_ref)``.

    Parameters
    ----------
    internal_at_reference : (n,) array
        Internal transmittance (no reflection) at the reference thickness. [1]
    thickness_ratio : float
        Thickness over reference thickness. [1]
    index : array
        Refractive index; 1 leaves out the reflections. [1]

    Returns
    -------
    (n,) array
        [1]

    References
    ----------
    .. [1] Bouguer-Lambert law of absorption.
    """
    return reflection_factor_plate(index) * np.asarray(internal_at_reference, dtype=float) ** thickness_ratio


def stack_transmittance(transmittances: Iterable[ArrayLike]) -> Array:
    """Transmittance of filters one behind another: the product; no reflections between them. [1]"""
    total = np.ones(())
    for transmittance in transmittances:
        total = total * np.asarray(transmittance, dtype=float)
    return total


def _above_floor(shape: Array, peak: float, blocking_od: float) -> Array:
    """Scale a 0..1 shape between the blocking floor and the peak."""
    floor = 10.0**-blocking_od
    return floor + (peak - floor) * shape
