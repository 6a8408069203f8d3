"""Photons, LED spectra, photometry and LED temperature.

Wavelengths in nm, everything else in SI units and electrons.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from codesign.errors import ProblemError
from codesign.physics._tables import Array, integrate, shipped_table

# Exact by the definition of the SI (2019), so no library is loaded for them.
PLANCK = 6.62607015e-34  # J s
LIGHT_SPEED = 299_792_458.0  # m/s
ELEMENTARY_CHARGE = 1.602176634e-19  # C
BOLTZMANN = 1.380649e-23  # J/K
HC = PLANCK * LIGHT_SPEED  # J m
HC_EV_NM = HC / ELEMENTARY_CHARGE * 1e9  # eV nm, 1239.84...

MAX_LUMINOUS_EFFICACY = 683.0  # lm/W at 555 nm, CIE 018

# Full width at half maximum of Ohno's LED model in units of its width parameter w.
# (g + 2 g^5)/3 = 1/2 has the root g = 0.8086..., and the full width is 2 w sqrt(-ln g).
_OHNO_HALF_HEIGHT = 0.8086092632090855
OHNO_FWHM_FACTOR = float(2.0 * np.sqrt(-np.log(_OHNO_HALF_HEIGHT)))


def photon_energy(wavelength_nm: ArrayLike) -> Array:
    """Energy of one photon, ``h c / λ``.

    Parameters
    ----------
    wavelength_nm : array
        Vacuum wavelength. [nm]

    Returns
    -------
    array
        [J]

    References
    ----------
    .. [1] BIPM, The International System of Units, 9th edition (2019): h and c are exact.
    """
    return HC / (np.asarray(wavelength_nm, dtype=float) * 1e-9)


def photons_per_joule(wavelength_nm: ArrayLike) -> Array:
    """Number of photons in one joule of light, ``λ / (h c)``. [1/J]"""
    return np.asarray(wavelength_nm, dtype=float) * (1e-9 / HC)


def quantum_efficiency_from_responsivity(responsivity_a_per_w: ArrayLike, wavelength_nm: ArrayLike) -> Array:
    """Electrons per photon from spectral responsivity, ``η = R h c / (e λ)``.

    Parameters
    ----------
    responsivity_a_per_w : array
        Photocurrent per incident radiant power. [A/W]
    wavelength_nm : array
        [nm]

    Returns
    -------
    array
        Quantum efficiency. [1]

    References
    ----------
    .. [1] S. M. Sze and K. K. Ng, Physics of Semiconductor Devices, 3rd ed. (2007), photodetectors.
    """
    return np.asarray(responsivity_a_per_w, dtype=float) * HC_EV_NM / np.asarray(wavelength_nm, dtype=float)


def responsivity_from_quantum_efficiency(quantum_efficiency: ArrayLike, wavelength_nm: ArrayLike) -> Array:
    """Spectral responsivity ``R = η e λ / (h c)``, from electrons per photon. [A/W]"""
    return np.asarray(quantum_efficiency, dtype=float) * np.asarray(wavelength_nm, dtype=float) / HC_EV_NM


def ohno_led(wavelength_nm: ArrayLike, peak_nm: float, fwhm_nm: float) -> Array:
    """Relative spectrum of a single-colour LED, 1 at its peak.

    ``S = (g + 2 g⁵) / 3`` with ``g = exp(-((λ - λp) / w)²)``. Data sheets state the full width at half
    maximum, which is ``0.92182 w`` (`OHNO_FWHM_FACTOR`), not ``w``.

    Parameters
    ----------
    wavelength_nm : (n,) array
        [nm]
    peak_nm : float
        Peak wavelength. [nm]
    fwhm_nm : float
        Full width at half maximum. [nm]

    Returns
    -------
    (n,) array
        [1]

    References
    ----------
    .. [1] Y. Ohno, Spectral design considerations for white LED color rendering, Opt. Eng. 44(11),
       111302 (2005).
    """
    width = fwhm_nm / OHNO_FWHM_FACTOR
    # Clipped so that exp never underflows to a denormal far from the peak.
    exponent = np.minimum(((np.asarray(wavelength_nm, dtype=float) - peak_nm) / width) ** 2, 700.0)
    g = np.exp(-exponent)
    return (g + 2.0 * np.exp(-np.minimum(5.0 * exponent, 700.0))) / 3.0


def luminous_efficacy_function(wavelength_nm: ArrayLike) -> Array:
    """Photopic luminous efficiency V(λ): how bright the eye sees each wavelength, 1 at 555 nm.

    Linear between the 1 nm rows of the table. Zero outside 360 to 830 nm, by definition of the observer.

    References
    ----------
    .. [1] CIE 018, The Basis of Physical Photometry; shipped table ``data/photopic.csv``.
    """
    table_nm, efficiency = shipped_table("photopic")
    return np.interp(np.asarray(wavelength_nm, dtype=float), table_nm, efficiency, left=0.0, right=0.0)


def luminous_efficacy(wavelength_nm: ArrayLike, relative_spectrum: ArrayLike) -> Array:
    """Lumens per watt of radiant flux, ``683 ∫ V S dλ / ∫ S dλ``.

    The axis must hold the whole spectrum: flux outside it counts neither as light nor as power.

    Parameters
    ----------
    wavelength_nm : (n,) array
        [nm]
    relative_spectrum : (..., n) array
        Any scale.

    Returns
    -------
    (...) array
        [lm/W]

    References
    ----------
    .. [1] CIE 018, The Basis of Physical Photometry.
    """
    spectrum = np.asarray(relative_spectrum, dtype=float)
    seen = integrate(spectrum * luminous_efficacy_function(wavelength_nm), wavelength_nm)
    return MAX_LUMINOUS_EFFICACY * seen / integrate(spectrum, wavelength_nm)


def radiant_flux_from_luminous(flux_lm: ArrayLike, wavelength_nm: ArrayLike, relative_spectrum: ArrayLike) -> Array:
    """Radiant flux of a source stated in lumens: ``flux / luminous_efficacy``. [W]"""
    return np.asarray(flux_lm, dtype=float) / luminous_efficacy(wavelength_nm, relative_spectrum)


def delivery_from_beam(half_angle_deg: float, distance_m: float) -> float:
    """On-axis irradiance per watt of radiant flux from a beam ``I(θ) = I₀ cosᵐ θ``.

    ``m = -ln 2 / ln cos θ½`` makes the intensity fall to half at the stated angle; the hemisphere
    then holds ``2π I₀ / (m + 1)`` watts, hence ``κ = (m + 1) / (2π d²)``. 60° is a Lambertian emitter, m = 1.
    The distance is assumed large against the emitter.

    Parameters
    ----------
    half_angle_deg : float
        Half-intensity angle from the axis, above 0 and below 90. [deg]
    distance_m : float
        [m]

    Returns
    -------
    float
        Delivery factor κ. [1/m²]

    References
    ----------
    .. [1] Integral of the cosine-power beam; inverse square law.
    """
    if not 0.0 < half_angle_deg < 90.0:
        raise ProblemError(f"half-intensity angle must lie between 0 and 90 deg, is {half_angle_deg:g}")
    # ln cos via log1p keeps precision for pencil beams, where the cosine is almost 1.
    log_cosine = 0.5 * np.log1p(-(np.sin(np.radians(half_angle_deg)) ** 2))
    power = -np.log(2.0) / log_cosine
    return float((power + 1.0) / (2.0 * np.pi * distance_m**2))


def varshni_gap_ev(temperature_k: ArrayLike, e0: float, alpha: float, beta: float) -> Array:
    """Band gap against temperature, ``E₀ - α T² / (T + β)``.

    Parameters
    ----------
    temperature_k : array
        [K]
    e0 : float
        Gap at 0 K. [eV]
    alpha : float
        [eV/K]
    beta : float
        [K]

    Returns
    -------
    array
        [eV]

    References
    ----------
    .. [1] Y. P. Varshni, Physica 34, 149 (1967).
    """
    temperature = np.asarray(temperature_k, dtype=float)
    return e0 - alpha * temperature**2 / (temperature + beta)


def varshni_peak_shift_nm_per_k(temperature_k: ArrayLike, e0: float, alpha: float, beta: float) -> Array:
    """Shift of the gap wavelength, ``-(h c / E²) dE/dT`` by the law of `varshni_gap_ev`. [nm/K]"""
    temperature = np.asarray(temperature_k, dtype=float)
    slope = -alpha * temperature * (temperature + 2.0 * beta) / (temperature + beta) ** 2
    return -HC_EV_NM / varshni_gap_ev(temperature, e0, alpha, beta) ** 2 * slope


def junction_temperature(
    ambient_c: ArrayLike,
    thermal_resistance: ArrayLike,
    electrical_w: ArrayLike,
    optical_w: ArrayLike,
    duty: ArrayLike = 1.0,
) -> Array:
    """Mean junction temperature ``T_amb + R_th (P_el - P_opt) duty``.

    The light that leaves takes its power along: R_th is the real (optical power removed) resistance.

    Parameters
    ----------
    ambient_c : array
        Temperature at the far end of the thermal resistance. [°C]
    thermal_resistance : array
        [K/W]
    electrical_w, optical_w : array
        Electrical and radiant power while the LED is on. [W]
    duty : array
        Share of time the LED is on. [1]

    Returns
    -------
    array
        [°C]

    References
    ----------
    .. [1] JEDEC JESD51-51, real thermal resistance of LEDs.
    """
    heat = np.asarray(electrical_w, dtype=float) - np.asarray(optical_w, dtype=float)
    return np.asarray(ambient_c, dtype=float) + np.asarray(thermal_resistance, dtype=float) * heat * duty


def flux_at_temperature(junction_c: ArrayLike, coefficient_per_k: ArrayLike, reference_c: ArrayLike = 25.0) -> Array:
    """Flux relative to that at the reference junction temperature, ``1 + c (T - T_ref)``, never below 0.

    The straight line of data sheets; see `flux_at_temperature_exponential` for the physical trend.

    Parameters
    ----------
    junction_c : array
        [°C]
    coefficient_per_k : array
        Relative change per kelvin, negative for loss when hot. [1/K]
    reference_c : array
        [°C]

    Returns
    -------
    array
        [1]
    """
    rise = np.asarray(junction_c, dtype=float) - reference_c
    return np.maximum(0.0, 1.0 + np.asarray(coefficient_per_k, dtype=float) * rise)


def flux_at_temperature_exponential(
    junction_c: ArrayLike, characteristic_k: ArrayLike, reference_c: ArrayLike = 25.0
) -> Array:
    """Flux relative to that at the reference temperature, ``exp(-(T - T_ref) / T₁)``.

    Parameters
    ----------
    junction_c, reference_c : array
        [°C]
    characteristic_k : array
        Characteristic temperature T₁ of the LED. [K]

    Returns
    -------
    array
        [1]

    References
    ----------
    .. [1] E. F. Schubert, Light-Emitting Diodes, 2nd ed. (2006), chapter 6.
    """
    rise = np.asarray(junction_c, dtype=float) - reference_c
    return np.exp(-rise / np.asarray(characteristic_k, dtype=float))


def pulse_peak_rise(power: ArrayLike, resistance: float, tau: float, pulse: float, period: float) -> Array:
    """Highest temperature rise of a pulse train through one thermal RC stage, once it has settled.

    ``P R (1 - exp(-t_p/τ)) / (1 - exp(-T/τ))``.

    Parameters
    ----------
    power : array
        Heat during the pulse. [W]
    resistance : float
        [K/W]
    tau : float
        Thermal time constant. [s]
    pulse, period : float
        Pulse width and repetition period. [s]

    Returns
    -------
    array
        [K]

    References
    ----------
    .. [1] First-order response; geometric sum over the pulses before.
    """
    share = np.expm1(-pulse / tau) / np.expm1(-period / tau)
    return np.asarray(power, dtype=float) * resistance * share
