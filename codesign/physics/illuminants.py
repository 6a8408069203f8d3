"""Ambient light: thermal radiation and the illuminants of the CIE.

Relative spectra unless stated otherwise; `spectral_irradiance` puts one on an absolute scale.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from codesign.errors import ProblemError, nearest
from codesign.physics._tables import Array, integrate, require_range, shipped_table
from codesign.physics.light import (
    BOLTZMANN,
    HC,
    LIGHT_SPEED,
    MAX_LUMINOUS_EFFICACY,
    luminous_efficacy_function,
)

STEFAN_BOLTZMANN = 5.670374419e-8  # W m⁻² K⁻⁴, SI 2019
WIEN_DISPLACEMENT = 2.897771955e-3  # m K, SI 2019

_TABLES = {"D65": "d65", "fluorescent": "fl2"}
_ADVICE = {
    "D65": "use 'planck-5800' for daylight further out, or give a measured curve",
    "fluorescent": "give a measured curve: such lamps have lines there that differ from one to the next",
}
NAMES = ("A", "D65", "E", "fluorescent", "planck-<K>")


def planck_radiance(wavelength_nm: ArrayLike, temperature_k: ArrayLike) -> Array:
    """Spectral radiance of a black body, ``2 h c² / λ⁵ / (exp(h c / λ k T) - 1)``.

    Parameters
    ----------
    wavelength_nm : array
        Vacuum wavelength. [nm]
    temperature_k : array
        [K]

    Returns
    -------
    array
        [W m⁻² sr⁻¹ nm⁻¹]

    References
    ----------
    .. [1] M. Planck (1901); constants of the SI 2019.
    """
    metres = np.asarray(wavelength_nm, dtype=float) * 1e-9
    # Clipped: past 700 the radiance is below 1e-290 and the exponential would overflow.
    exponent = np.minimum(HC / (metres * BOLTZMANN * np.asarray(temperature_k, dtype=float)), 700.0)
    per_metre = 2.0 * HC * LIGHT_SPEED / metres**5 / np.expm1(exponent)
    return per_metre * 1e-9


def planck_exitance(wavelength_nm: ArrayLike, temperature_k: ArrayLike) -> Array:
    """Spectral exitance of a black body, ``π`` times its radiance. [W m⁻² nm⁻¹]"""
    return np.pi * planck_radiance(wavelength_nm, temperature_k)


def cie_a(wavelength_nm: ArrayLike) -> Array:
    """CIE standard illuminant A (incandescent light), 100 at 560 nm.

    Defined by a formula, so it may be used at any wavelength:
    ``100 (560/λ)⁵ (exp(1.435e7 / (2848 · 560)) - 1) / (exp(1.435e7 / (2848 λ)) - 1)``.

    Parameters
    ----------
    wavelength_nm : array
        [nm]

    Returns
    -------
    array
        Relative power. [1]

    References
    ----------
    .. [1] CIE 015, Colorimetry; ISO/CIE 11664-2, definition of standard illuminant A.
    """
    wavelength = np.asarray(wavelength_nm, dtype=float)
    at_reference = np.expm1(1.435e7 / (2848.0 * 560.0))
    return 100.0 * (560.0 / wavelength) ** 5 * at_reference / np.expm1(1.435e7 / (2848.0 * wavelength))


def named_illuminant(name: str, wavelength_nm: ArrayLike, *, outside: str = "error") -> Array:
    """Relative spectrum of an illuminant given by name.

    Parameters
    ----------
    name : str
        ``A`` incandescent, ``D65`` daylight (300 to 780 nm), ``E`` equal energy, ``fluorescent`` (CIE FL2,
        380 to 780 nm) or ``planck-<K>`` black body, for example ``planck-5800``.
    wavelength_nm : (n,) array
        [nm]
    outside : {"error", "zero"}
        What a tabulated illuminant does outside its table.

    Returns
    -------
    (n,) array
        Any scale. [1/nm]

    Raises
    ------
    ProblemError
        Unknown name.
    CoverageError
        Tabulated illuminant asked for outside its table, unless ``outside`` is ``"zero"``.

    References
    ----------
    .. [1] CIE 015, Colorimetry; shipped tables ``data/d65.csv`` and ``data/fl2.csv``.
    """
    wavelength = np.asarray(wavelength_nm, dtype=float)
    if name == "A":
        return cie_a(wavelength)
    if name == "E":
        return np.ones(wavelength.shape)
    if name.startswith("planck-"):
        return planck_exitance(wavelength, _temperature(name))
    if name not in _TABLES:
        raise ProblemError(f"illuminant {name!r} is unknown; {nearest(name, NAMES)}")
    table_nm, power = shipped_table(_TABLES[name])
    if outside == "error":
        require_range(wavelength, table_nm, f"illuminant {name!r}", _ADVICE[name])
    return np.interp(wavelength, table_nm, power, left=0.0, right=0.0)


def spectral_irradiance(
    name: str,
    wavelength_nm: ArrayLike,
    *,
    illuminance_lx: float | None = None,
    irradiance_w_per_m2: float | None = None,
    outside: str = "error",
) -> Array:
    """Spectral irradiance of a named illuminant, scaled by what a light meter shows.

    An illuminance is matched over the whole visible range even when ``wavelength_nm`` lies elsewhere; an
    irradiance is the integral over ``wavelength_nm`` itself.

    Parameters
    ----------
    name : str
        As in `named_illuminant`.
    wavelength_nm : (n,) array
        [nm]
    illuminance_lx : float or None
        [lx]
    irradiance_w_per_m2 : float or None
        Exactly one of the two. [W/m²]
    outside : {"error", "zero"}
        As in `named_illuminant`.

    Returns
    -------
    (n,) array
        [W m⁻² nm⁻¹]
    """
    if (illuminance_lx is None) == (irradiance_w_per_m2 is None):
        raise ProblemError(f"ambient light {name!r}: give exactly one of illuminance_lx and irradiance_w_per_m2")
    relative = named_illuminant(name, wavelength_nm, outside=outside)
    if irradiance_w_per_m2 is not None:
        return relative * (irradiance_w_per_m2 / integrate(relative, wavelength_nm))
    return relative * (illuminance_lx / relative_illuminance(name))


def relative_illuminance(name: str) -> float:
    """Illuminance of a named illuminant on its own relative scale, ``683 ∫ V S dλ``, 360 to 830 nm. [lx]

    Past the end of a tabulated illuminant V(λ) is below 2e-5, so that the missing tail is taken as zero.
    """
    visible = np.arange(360.0, 831.0)
    seen = named_illuminant(name, visible, outside="zero") * luminous_efficacy_function(visible)
    return float(MAX_LUMINOUS_EFFICACY * integrate(seen, visible))


def _temperature(name: str) -> float:
    """Temperature in ``planck-<K>``. [K]"""
    try:
        kelvin = float(name.removeprefix("planck-"))
    except ValueError:
        kelvin = float("nan")
    if not 100.0 <= kelvin <= 100_000.0:
        raise ProblemError(f"illuminant {name!r}: write the temperature in kelvin, for example 'planck-2856'")
    return kelvin
