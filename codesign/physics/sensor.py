"""Linear camera model of EMVA Standard 1288, dark current, signal-to-noise ratio.

All signals and noises in electrons. ``K`` is the conversion gain in DN per electron. Equation numbers are
those of Release 4.0 Linear.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from codesign.physics._tables import Array
from codesign.physics.light import BOLTZMANN, ELEMENTARY_CHARGE, photons_per_joule

QUANTIZATION_VARIANCE_DN2 = 1.0 / 12.0


def mean_photons(
    pixel_area_m2: ArrayLike, irradiance: ArrayLike, exposure_s: ArrayLike, wavelength_nm: ArrayLike
) -> Array:
    """Mean photons on one pixel during the exposure, ``A E t λ / (h c)``.

    Parameters
    ----------
    pixel_area_m2 : array
        [m²]
    irradiance : array
        On the sensor. [W/m²]
    exposure_s : array
        [s]
    wavelength_nm : array
        [nm]

    Returns
    -------
    array
        [photons]

    References
    ----------
    .. [1] EMVA Standard 1288, linear signal model; numeric form with the constant 50.34.
    """
    energy = np.asarray(pixel_area_m2, dtype=float) * irradiance * exposure_s
    return energy * photons_per_joule(wavelength_nm)


def quantization_variance_e2(conversion_gain: ArrayLike) -> Array:
    """Variance of rounding to whole grey values, ``1 / (12 K²)``. [e⁻²]"""
    return QUANTIZATION_VARIANCE_DN2 / np.asarray(conversion_gain, dtype=float) ** 2


def grey_value_variance(mean_electrons: ArrayLike, *, dark_noise_e: ArrayLike, conversion_gain: ArrayLike) -> Array:
    """Temporal variance of the grey value, ``K² (σ_d² + μ_e) + 1/12`` (photon transfer, eq. 15). [DN²]"""
    gain = np.asarray(conversion_gain, dtype=float)
    electrons = np.asarray(dark_noise_e, dtype=float) ** 2 + mean_electrons
    return gain**2 * electrons + QUANTIZATION_VARIANCE_DN2


def signal_to_noise(
    mean_electrons: ArrayLike,
    *,
    dark_noise_e: ArrayLike,
    conversion_gain: ArrayLike = np.inf,
    dsnu_e: ArrayLike = 0.0,
    prnu: ArrayLike = 0.0,
) -> Array:
    """Signal-to-noise ratio of one pixel.

    ``μ_e / sqrt(σ_d² + DSNU² + PRNU² μ_e² + 1/(12 K²) + μ_e)``. With DSNU = PRNU = 0 it is the
    temporal ratio (eq. 21), with them the total one (eq. 69).

    Parameters
    ----------
    mean_electrons : array
        Photo-electrons μ_e. [e⁻]
    dark_noise_e : array
        Temporal dark noise σ_d. [e⁻]
    conversion_gain : array
        K; infinite leaves out quantisation. [DN/e⁻]
    dsnu_e : array
        Spread of the dark signal between pixels. [e⁻]
    prnu : array
        Relative spread of the response between pixels, a fraction. [1]

    Returns
    -------
    array
        [1]

    References
    ----------
    .. [1] EMVA Standard 1288 Release 4.0 Linear, eqs. 21 and 69.
    """
    signal = np.asarray(mean_electrons, dtype=float)
    dark = np.asarray(dark_noise_e, dtype=float) ** 2 + np.asarray(dsnu_e, dtype=float) ** 2
    spatial = (np.asarray(prnu, dtype=float) * signal) ** 2
    return signal / np.sqrt(dark + spatial + quantization_variance_e2(conversion_gain) + signal)


def electrons_for_signal_to_noise(
    ratio: ArrayLike, *, dark_noise_e: ArrayLike, conversion_gain: ArrayLike = np.inf
) -> Array:
    """Photo-electrons that give a wanted temporal signal-to-noise ratio: inverse of eq. 21.

    ``SNR²/2 (1 + sqrt(1 + 4 (σ_d² + 1/(12 K²)) / SNR²))``.

    Parameters
    ----------
    ratio : array
        Above zero. [1]
    dark_noise_e, conversion_gain
        As in `signal_to_noise`.

    Returns
    -------
    array
        [e⁻]
    """
    half_square = 0.5 * np.asarray(ratio, dtype=float) ** 2
    floor = np.asarray(dark_noise_e, dtype=float) ** 2 + quantization_variance_e2(conversion_gain)
    return half_square * (1.0 + np.sqrt(1.0 + 2.0 * floor / half_square))


def sensitivity_threshold_e(*, dark_noise_e: ArrayLike, conversion_gain: ArrayLike = np.inf) -> Array:
    """Photo-electrons that give a ratio of 1, ``sqrt(σ² + 1/4) + 1/2`` (eq. 27). [e⁻]"""
    floor = np.asarray(dark_noise_e, dtype=float) ** 2 + quantization_variance_e2(conversion_gain)
    return np.sqrt(floor + 0.25) + 0.5


def saturation_signal_to_noise(saturation_e: ArrayLike) -> Array:
    """Best possible temporal ratio, that of shot noise at saturation, ``sqrt(μ_e.sat)``. [1]"""
    return np.sqrt(np.asarray(saturation_e, dtype=float))


def dynamic_range(saturation_e: ArrayLike, *, dark_noise_e: ArrayLike, conversion_gain: ArrayLike = np.inf) -> Array:
    """Saturation over sensitivity threshold, both in photo-electrons. [1]"""
    threshold = sensitivity_threshold_e(dark_noise_e=dark_noise_e, conversion_gain=conversion_gain)
    return np.asarray(saturation_e, dtype=float) / threshold


def decibels(ratio: ArrayLike) -> Array:
    """A signal ratio on the amplitude scale, ``20 log₁₀``. [dB]"""
    return 20.0 * np.log10(np.asarray(ratio, dtype=float))


def dark_noise_at_exposure(read_noise_e: ArrayLike, dark_current_e_per_s: ArrayLike, exposure_s: ArrayLike) -> Array:
    """Temporal dark noise with the shot noise of dark electrons, ``sqrt(σ_d0² + μ_I t)`` (eq. 30). [e⁻]"""
    electrons = np.asarray(dark_current_e_per_s, dtype=float) * exposure_s
    return np.sqrt(np.asarray(read_noise_e, dtype=float) ** 2 + electrons)


def dark_current_at(
    reference_e_per_s: ArrayLike, temperature_c: ArrayLike, reference_c: float, doubling_k: float
) -> Array:
    """Dark current at another temperature, ``D_ref 2^((T - T_ref) / T_double)``.

    Parameters
    ----------
    reference_e_per_s : array
        Per pixel at the reference temperature. [e⁻/s]
    temperature_c, reference_c : array
        [°C]
    doubling_k : float
        Temperature step that doubles it, 6 to 9 K for silicon in practice. [K]

    Returns
    -------
    array
        [e⁻/s]

    References
    ----------
    .. [1] EMVA Standard 1288 Release 4.0 Linear, temperature dependence of the dark current.
    """
    step = (np.asarray(temperature_c, dtype=float) - reference_c) / doubling_k
    return np.asarray(reference_e_per_s, dtype=float) * 2.0**step


def dark_current_from_density(na_per_cm2: ArrayLike, pixel_area_m2: ArrayLike) -> Array:
    """Dark electrons per second in one pixel from a current density.

    Parameters
    ----------
    na_per_cm2 : array
        [nA/cm²]
    pixel_area_m2 : array
        [m²]

    Returns
    -------
    array
        [e⁻/s]
    """
    # 1 nA/cm² = 1e-5 A/m²
    return np.asarray(na_per_cm2, dtype=float) * 1e-5 * pixel_area_m2 / ELEMENTARY_CHARGE


def thermal_doubling_step(
    temperature_c: float, *, gap_ev: float = 1.12, mechanism: str = "generation", prefactor: bool = True
) -> float:
    """Temperature rise that doubles the dark current of one mechanism, from the physics of the band gap.

    Generation in the depleted layer goes as ``T^1.5 exp(-E_g / 2kT)``, diffusion from the bulk as
    ``T³ exp(-E_g / kT)``. The fixed step of `dark_current_at` lies between the two.

    Parameters
    ----------
    temperature_c : float
        Starting temperature. [°C]
    gap_ev : float
        Band gap. [eV]
    mechanism : {"generation", "diffusion"}
    prefactor : bool
        False leaves out the power of T.

    Returns
    -------
    float
        [K]

    References
    ----------
    .. [1] S. M. Sze and K. K. Ng, Physics of Semiconductor Devices, 3rd ed. (2007).
    .. [2] J. R. Janesick, Scientific Charge-Coupled Devices (2001).
    """
    from scipy.optimize import brentq

    order = {"generation": 1.0, "diffusion": 2.0}[mechanism]
    start = temperature_c + 273.15
    energy = order * gap_ev * ELEMENTARY_CHARGE / (2.0 * BOLTZMANN)
    power = 1.5 * order if prefactor else 0.0

    def excess(rise: float) -> float:
        hot = start + rise
        return power * np.log(hot / start) + energy * (1.0 / start - 1.0 / hot) - np.log(2.0)

    return float(brentq(excess, 0.0, start))
