"""Optical radiation on eye and skin: published hazard weightings, and when published exposure limits are reached.

A warning aid and never a classification. The primary texts (IEC 62471:2006; ICNIRP 2004 and 2013) were not readable
when this was written: each function says how far its numbers could be checked. "Confidence A" means that two
independent sources agree, "B" one secondary source or an exact re-derivation, "C" memory only.

Times are those after which a steady exposure reaches a published limit; infinity where it never does.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from codesign.physics._tables import Array, integrate, shipped_table

#: Bands of the weightings. [nm] IEC 62471:2006, 4.3; confidence A-B.
ACTINIC_NM, UVA_NM, BLUE_NM = (180.0, 400.0), (315.0, 400.0), (300.0, 700.0)
RETINAL_NM, RETINAL_INFRARED_NM, INFRARED_EYE_NM = (380.0, 1400.0), (780.0, 1400.0), (780.0, 3000.0)

#: Longest exposures the limits speak of. [s] IEC 62471:2006, 4.3.1 to 4.3.7; confidence A-B.
DAY_S, LONG_BLUE_S, LONG_SMALL_S, LONG_UVA_S, LONG_INFRARED_S, LONG_RETINAL_S = 28800.0, 1e4, 100.0, 1e3, 1e3, 10.0
#: Doses and the levels that hold for longer; confidence A-B, read in secondary sources.
ACTINIC_DOSE = 30.0  # J/m², in 8 h
UVA_DOSE, UVA_LEVEL = 1e4, 10.0  # J/m² to 1000 s, W/m² beyond
BLUE_DOSE, BLUE_LEVEL = 1e6, 100.0  # J/m²/sr to 10,000 s, W/m²/sr beyond
SMALL_DOSE, SMALL_LEVEL = 100.0, 1.0  # J/m² to 100 s, W/m² beyond; sources below 11 mrad
RETINAL_FACTOR = 5e4  # W/m²/sr rad s^¼, 10 µs to 10 s
RETINAL_INFRARED_FACTOR = 6000.0  # W/m²/sr rad, beyond 10 s
INFRARED_FACTOR, INFRARED_LEVEL = 18000.0, 100.0  # W/m² s^¾ to 1000 s, W/m² beyond

#: Smallest angle a source is taken to have: at a glance, and in exposures beyond 10 s, where the eye moves; the
#: largest that counts. [rad] IEC 62471:2006, 4.2 and 5.2; confidence B, partly read.
GLANCE_RAD, GAZE_RAD, LARGEST_RAD = 0.0017, 0.011, 0.1


def actinic_weight(wavelength_nm: ArrayLike) -> Array:
    """Actinic ultraviolet weighting S(λ) of eye and skin, 1 at 270 nm, zero outside 180 to 400 nm.

    The table's own short formula is up to 49 % high (at 323 nm), so the table is used, log-linear in between
    (the kind of interpolation is a value from memory).

    Parameters
    ----------
    wavelength_nm : array
        [nm]

    Returns
    -------
    array
        [1]

    References
    ----------
    .. [1] ICNIRP, Guidelines on limits of exposure to ultraviolet radiation, Health Phys. 87(2) (2004), table 1;
       IEC 62471:2006, table 4.1. Confidence B; the rows from memory are named in ``data/hazard_actinic.csv``.
    """
    return _table_weight("hazard_actinic", wavelength_nm)


def blue_light_weight(wavelength_nm: ArrayLike) -> Array:
    """Blue-light weighting B(λ) of the retina, 1 at 435 to 440 nm, zero outside 300 to 700 nm; log-linear.

    References
    ----------
    .. [1] IEC 62471:2006, table 4.2; ICNIRP 2013, table 2. Confidence A: two public copies agree.
    """
    return _table_weight("hazard_blue_light", wavelength_nm)


def retinal_thermal_weight(wavelength_nm: ArrayLike) -> Array:
    """Thermal weighting R(λ) of the retina, 10 at 435 to 440 nm, zero outside 380 to 1400 nm.

    ``10 B(λ)`` to 500 nm, 1 to 700 nm, ``10^((700 - λ)/500)`` to 1050 nm, 0.2 to 1150 nm,
    ``0.2 · 10^(0.02 (1150 - λ))`` to 1200 nm, 0.02 to 1400 nm. The later ICNIRP 2013 form, capped at 1, is lower.

    References
    ----------
    .. [1] IEC 62471:2006, table 4.2. Confidence A-B: read in one public analysis.
    """
    nm = np.asarray(wavelength_nm, dtype=float)
    pieces = (
        (nm < 500.0, 10.0 * blue_light_weight(nm)),
        (nm < 700.0, 1.0),
        (nm < 1050.0, 10.0 ** ((700.0 - nm) / 500.0)),
        (nm < 1150.0, 0.2),
        (nm < 1200.0, 0.2 * 10.0 ** (0.02 * (1150.0 - nm))),
    )
    weight = np.select([where for where, _ in pieces], [value for _, value in pieces], default=0.02)
    return np.where(in_band(nm, RETINAL_NM) > 0, weight, 0.0)


def in_band(wavelength_nm: ArrayLike, band_nm: tuple[float, float]) -> Array:
    """Weight of hazards that take a band as it is: 1 inside, ends included, 0 outside. [1]"""
    nm = np.asarray(wavelength_nm, dtype=float)
    return ((nm >= band_nm[0]) & (nm <= band_nm[1])).astype(float)


def weighted(spectrum: ArrayLike, weight: ArrayLike, wavelength_nm: ArrayLike) -> Array:
    """Weighted quantity ``∫ X(λ) weight(λ) dλ``.

    Parameters
    ----------
    spectrum : (..., n) array
        Spectral irradiance, radiance or flux. [x/nm]
    weight : (n,) array
        [1]
    wavelength_nm : (n,) array
        Strictly increasing. [nm]

    Returns
    -------
    (...) array
        [x]
    """
    return integrate(np.asarray(spectrum, dtype=float) * weight, wavelength_nm)


def _table_weight(name: str, wavelength_nm: ArrayLike) -> Array:
    table_nm, weight = shipped_table(name)
    nm = np.asarray(wavelength_nm, dtype=float)
    inside = (nm >= table_nm[0]) & (nm <= table_nm[-1])
    return np.where(inside, np.exp(np.interp(nm, table_nm, np.log(weight))), 0.0)


# --- times to published limits ---------------------------------------------------------------------------------


def actinic_time(irradiance: float) -> float:
    """Time to the actinic ultraviolet limit of 30 J/m²; it holds for exposures to 8 h, so infinity beyond. [s]

    Parameters
    ----------
    irradiance : float
        Weighted by S(λ). [W/m²]

    References
    ----------
    .. [1] IEC 62471:2006, 4.3.1; ICNIRP 2004. Confidence A-B: 30 J/m² read on a legal page.
    """
    return _by_dose(irradiance, ACTINIC_DOSE, DAY_S, ACTINIC_DOSE / DAY_S)


def ultraviolet_a_time(irradiance: float) -> float:
    """Time to the UV-A limit of the eye: 10 kJ/m² to 1000 s, 10 W/m² beyond. [s]

    Parameters
    ----------
    irradiance : float
        Unweighted, 315 to 400 nm. [W/m²]

    References
    ----------
    .. [1] IEC 62471:2006, 4.3.2. Confidence A-B: read in a secondary source.
    """
    return _by_dose(irradiance, UVA_DOSE, LONG_UVA_S, UVA_LEVEL)


def blue_light_time(radiance: float) -> float:
    """Time to the blue-light limit of an extended source: 1 MJ/m²/sr to 10,000 s, 100 W/m²/sr beyond. [s]

    Parameters
    ----------
    radiance : float
        Weighted by B(λ). [W m⁻² sr⁻¹]

    References
    ----------
    .. [1] IEC 62471:2006, 4.3.3. Confidence A-B: read in secondary sources.
    """
    return _by_dose(radiance, BLUE_DOSE, LONG_BLUE_S, BLUE_LEVEL)


def blue_light_small_time(irradiance: float) -> float:
    """Time to the blue-light limit of a source below 11 mrad: 100 J/m² to 100 s, 1 W/m² beyond. [s]

    Serves sources of any size as a bound: the radiance limit is meant for radiance averaged over a field of view
    (11 mrad, growing with the movements of the eye to 100 mrad), which holds at most all the light of the source.
    Where this limit is not reached, that one is not either (to 5 % up to 100 s, to a fifth beyond).

    Parameters
    ----------
    irradiance : float
        Weighted by B(λ). [W/m²]

    References
    ----------
    .. [1] IEC 62471:2006, 4.3.4. Confidence A-B: read in a secondary source.
    """
    return _by_dose(irradiance, SMALL_DOSE, LONG_SMALL_S, SMALL_LEVEL)


def _by_dose(level: float, dose: float, longest_s: float, steady: float) -> float:
    """A dose up to a time, a level for longer exposures. The two agree where they meet."""
    if level <= steady:
        return float("inf")
    return min(dose / level, longest_s)


def retinal_thermal_limit(subtense_rad: float, seconds: float) -> float:
    """Retinal thermal limit ``5e4 / (α t^¼)`` of weighted radiance, 10 µs to 10 s; constant beyond. [W m⁻² sr⁻¹]

    Parameters
    ----------
    subtense_rad : float
        Angle of the source, taken as 1.7 to 100 mrad. [rad]
    seconds : float
        [s]

    References
    ----------
    .. [1] IEC 62471:2006, 4.3.5. Confidence B: risk limits of its table 6.1 re-derived from it exactly.
    """
    seconds = min(max(seconds, 1e-5), LONG_RETINAL_S)
    return RETINAL_FACTOR / (_angle(subtense_rad, GLANCE_RAD) * seconds**0.25)


def retinal_thermal_time(radiance: float, subtense_rad: float) -> float:
    """Time to the retinal thermal limit, 10 µs where it is reached at once; infinity where not within 10 s. [s]

    Parameters
    ----------
    radiance : float
        Weighted by R(λ). [W m⁻² sr⁻¹]
    subtense_rad : float
        [rad]
    """
    if radiance <= retinal_thermal_limit(subtense_rad, LONG_RETINAL_S):
        return float("inf")
    return max((RETINAL_FACTOR / (_angle(subtense_rad, GLANCE_RAD) * radiance)) ** 4, 1e-5)


def retinal_infrared_limit(subtense_rad: float) -> float:
    """Retinal limit ``6000 / α`` of R-weighted radiance, 780 to 1400 nm, for exposures beyond 10 s. [W m⁻² sr⁻¹]

    Meant for sources that hardly look bright, so that nobody turns away.

    Parameters
    ----------
    subtense_rad : float
        Angle of the source, taken as 11 to 100 mrad. [rad]

    References
    ----------
    .. [1] IEC 62471:2006, 4.3.6. Confidence A-B: read in a secondary source. ICNIRP 2013 has 6300.
    """
    return RETINAL_INFRARED_FACTOR / _angle(subtense_rad, GAZE_RAD)


def infrared_eye_time(irradiance: float) -> float:
    """Time to the infrared limit of cornea and lens: ``18000 t^-¾`` W/m² to 1000 s, 100 W/m² beyond. [s]

    Parameters
    ----------
    irradiance : float
        Unweighted, 780 to 3000 nm. [W/m²]

    References
    ----------
    .. [1] IEC 62471:2006, 4.3.7. Confidence A-B: read in a secondary source.
    """
    if irradiance <= INFRARED_LEVEL:
        return float("inf")
    return min((INFRARED_FACTOR / irradiance) ** (4 / 3), LONG_INFRARED_S)


def seen_radiance(radiance: float, irradiance: float, least_rad: float) -> float:
    """Radiance averaged over the smallest field of view that counts: no more than all light spread over it.

    Parameters
    ----------
    radiance : float
        True radiance, infinity where not known. [W m⁻² sr⁻¹]
    irradiance : float
        Of the whole source at the eye. [W/m²]
    least_rad : float
        Diameter of the field of view. [rad]

    References
    ----------
    .. [1] Definition of radiance; averaging as in IEC 62471:2006, 5.2. Confidence B.
    """
    return min(radiance, irradiance / (np.pi / 4 * least_rad**2))


def _angle(subtense_rad: float, least_rad: float) -> float:
    return min(max(subtense_rad, least_rad), LARGEST_RAD)
