"""Reflection at surfaces and a physical model of the quantum efficiency of silicon pixels."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from codesign.errors import ProblemError
from codesign.physics._tables import Array, require_range, shipped_table
from codesign.physics.light import HC_EV_NM

_CM_PER_UM = 1e-4
_ADVICE = "give a measured quantum-efficiency curve for such wavelengths"


def fresnel_reflectance(n: ArrayLike, k: ArrayLike = 0.0, n_ambient: float = 1.0) -> Array:
    """Reflectance of a surface at normal incidence, ``((n - n₀)² + k²) / ((n + n₀)² + k²)``.

    Parameters
    ----------
    n, k : array
        Refractive index and extinction coefficient of the medium behind the surface. [1]
    n_ambient : float
        Index of the medium in front. [1]

    Returns
    -------
    array
        [1]

    References
    ----------
    .. [1] Fresnel's equations; M. Born and E. Wolf, Principles of Optics.
    """
    n, k = np.asarray(n, dtype=float), np.asarray(k, dtype=float)
    return ((n - n_ambient) ** 2 + k**2) / ((n + n_ambient) ** 2 + k**2)


def quarter_wave_reflectance(n_layer: ArrayLike, n_substrate: ArrayLike) -> Array:
    """Reflectance in air of a quarter-wave layer at its wavelength, ``((n₁² - n_s)/(n₁² + n_s))²``. [1]

    References
    ----------
    .. [1] H. A. Macleod, Thin-Film Optical Filters, single-layer antireflection coating.
    """
    square = np.asarray(n_layer, dtype=float) ** 2
    return ((square - n_substrate) / (square + n_substrate)) ** 2


def single_layer_reflectance(
    wavelength_nm: ArrayLike, n_layer: ArrayLike, thickness_nm: float, n_substrate: ArrayLike
) -> Array:
    """Reflectance of one thin layer on a thick substrate, in air at normal incidence.

    ``r = (r₀₁ + r₁₂ e^{2iδ}) / (1 + r₀₁ r₁₂ e^{2iδ})``, ``δ = 2π n₁ d / λ``.

    Parameters
    ----------
    wavelength_nm : (n,) array
        [nm]
    n_layer : array
        Index of the layer, ``n + ik``. [1]
    thickness_nm : float
        [nm]
    n_substrate : array
        Index of the substrate, ``n + ik``. [1]

    Returns
    -------
    (n,) array
        [1]

    References
    ----------
    .. [1] Airy summation; H. A. Macleod, Thin-Film Optical Filters.
    """
    layer: NDArray[np.complex128] = np.asarray(n_layer, dtype=complex)
    substrate = np.asarray(n_substrate, dtype=complex)
    turn = np.exp(4j * np.pi * layer * thickness_nm / np.asarray(wavelength_nm, dtype=float))
    front = (1.0 - layer) / (1.0 + layer)
    back = (layer - substrate) / (layer + substrate) * turn
    return np.abs((front + back) / (1.0 + front * back)) ** 2


def silicon_absorption_per_cm(wavelength_nm: ArrayLike) -> Array:
    """Absorption coefficient of silicon at 300 K; its logarithm is linear between table rows.

    Parameters
    ----------
    wavelength_nm : array
        250 to 1450. [nm]

    Returns
    -------
    array
        [1/cm]

    Raises
    ------
    CoverageError
        Outside the table.

    References
    ----------
    .. [1] M. A. Green, Sol. Energy Mater. Sol. Cells 92, 1305 (2008); shipped table ``data/silicon.csv``.
    """
    wavelength = np.asarray(wavelength_nm, dtype=float)
    table_nm, _, _, absorption = shipped_table("silicon")
    require_range(wavelength, table_nm, "absorption of silicon", _ADVICE)
    return np.exp(np.interp(wavelength, table_nm, np.log(absorption)))


def silicon_index(wavelength_nm: ArrayLike) -> NDArray[np.complex128]:
    """Complex refractive index ``n + ik`` of silicon at 300 K; source as `silicon_absorption_per_cm`. [1]"""
    wavelength = np.asarray(wavelength_nm, dtype=float)
    table_nm, n, _, _ = shipped_table("silicon")
    # k from the absorption, which varies over many decades and is interpolated in its logarithm
    k = silicon_absorption_per_cm(wavelength) * wavelength * 1e-7 / (4.0 * np.pi)
    return np.interp(wavelength, table_nm, n) + 1j * k


def band_gap_cutoff_nm(gap_ev: ArrayLike) -> Array:
    """Longest wavelength whose photons still cross a band gap, ``h c / E_g``. [nm]"""
    return HC_EV_NM / np.asarray(gap_ev, dtype=float)


def internal_quantum_efficiency(
    absorption_per_cm: ArrayLike, dead_layer_um: float, collection_depth_um: float
) -> Array:
    """Share of the photons inside the silicon that become collected electrons.

    ``exp(-α d) (1 - exp(-α L))``: lost in a dead layer at the surface, collected over the depth L below it,
    lost deeper.

    Parameters
    ----------
    absorption_per_cm : array
        α. [1/cm]
    dead_layer_um, collection_depth_um : float
        d and L. [µm]

    Returns
    -------
    array
        [1]

    References
    ----------
    .. [1] Beer-Lambert law; S. M. Sze and K. K. Ng, Physics of Semiconductor Devices, photodiodes.
    """
    per_um = np.asarray(absorption_per_cm, dtype=float) * _CM_PER_UM
    # Clipped at the far ultraviolet end, where the exponential would underflow.
    reaching = np.exp(-np.minimum(per_um * dead_layer_um, 700.0))
    return -reaching * np.expm1(-np.minimum(per_um * collection_depth_um, 700.0))


def silicon_quantum_efficiency(
    wavelength_nm: ArrayLike,
    *,
    dead_layer_um: float,
    collection_depth_um: float,
    pixel: Literal["photodiode", "mos"] = "photodiode",
    gate_layer_um: float = 0.0,
    coating_index: float | None = None,
    coating_thickness_nm: float | None = None,
    band_gap_ev: float = 1.12,
    fill_factor: float = 1.0,
) -> Array:
    """Quantum efficiency of a silicon pixel from its layers.

    Reflection of the (coated) surface, absorption in a polysilicon gate when the pixel is a MOS
    capacitor, dead layer, collection depth, and nothing beyond the band gap. Polysilicon is taken with the
    absorption of the crystal, and its index is so close that only the outer surface reflects.

    Parameters
    ----------
    wavelength_nm : (n,) array
        [nm]
    dead_layer_um, collection_depth_um : float
        As in `internal_quantum_efficiency`. [µm]
    pixel : {"photodiode", "mos"}
    gate_layer_um : float
        Thickness of the gate; must be 0 for a photodiode. [µm]
    coating_index, coating_thickness_nm : float or None
        Antireflection layer; both or none. [1], [nm]
    band_gap_ev : float
        [eV]
    fill_factor : float
        Share of the pixel that collects, micro-lenses included. [1]

    Returns
    -------
    (n,) array
        Electrons per photon on the pixel. [1]

    Raises
    ------
    ProblemError
        If the options contradict each other.
    CoverageError
        Below 250 nm, where the table ends.
    """
    if pixel not in ("photodiode", "mos"):
        raise ProblemError(f"pixel must be 'photodiode' or 'mos', is {pixel!r}")
    if pixel == "photodiode" and gate_layer_um != 0.0:
        raise ProblemError(f"a photodiode has no gate, but gate_layer_um is {gate_layer_um:g}; use pixel 'mos'")
    if (coating_index is None) != (coating_thickness_nm is None):
        raise ProblemError("coating_index and coating_thickness_nm must be given together")
    wavelength = np.asarray(wavelength_nm, dtype=float)
    absorbing = wavelength <= band_gap_cutoff_nm(band_gap_ev)
    efficiency = np.zeros(wavelength.shape)
    seen = wavelength[absorbing]
    if seen.size == 0:
        return efficiency
    entering = 1.0 - _surface_reflectance(seen, coating_index, coating_thickness_nm)
    internal = internal_quantum_efficiency(
        silicon_absorption_per_cm(seen), dead_layer_um + gate_layer_um, collection_depth_um
    )
    efficiency[absorbing] = fill_factor * entering * internal
    return efficiency


def _surface_reflectance(wavelength: Array, coating_index: float | None, thickness_nm: float | None) -> Array:
    """Reflectance of bare or coated silicon."""
    index = silicon_index(wavelength)
    if coating_index is None or thickness_nm is None:
        return fresnel_reflectance(index.real, index.imag)
    return single_layer_reflectance(wavelength, coating_index, thickness_nm, index)
