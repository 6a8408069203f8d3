"""Ambient light and lens of a problem, on its wavelength grid."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from codesign.catalog.common import check_share, percent_factor
from codesign.errors import ProblemError
from codesign.physics.illuminants import spectral_irradiance
from codesign.physics.light import luminous_efficacy
from codesign.problem.schema import Ambient, ProblemSpec
from codesign.spectra import read_table, trapezoid_weights

Array = NDArray[np.float64]


def ambient_irradiance(spec: ProblemSpec, folder: Path, where: str, grid: Array) -> Array:
    """Spectral irradiance of all ambient lights at the object. (n,) [W m⁻² nm⁻¹]"""
    total = np.zeros(grid.size)
    for index, light in enumerate(spec.scene.ambient):
        label = f"{where}: scene.ambient[{index}]"
        if light.curve is None:
            try:
                total += spectral_irradiance(
                    light.illuminant,
                    grid,
                    outside="zero",
                    illuminance_lx=light.illuminance_lx,
                    irradiance_w_per_m2=light.irradiance_w_per_m2,
                )
            except ValueError as error:
                raise ProblemError(f"{label}: {error}") from None
            continue
        total += _measured_ambient(light, folder, label, grid)
    return total


def _measured_ambient(light: Ambient, folder: Path, label: str, grid: Array) -> Array:
    table = read_table(folder / light.curve, label=f"{label}: {light.curve}")
    table.require(table.spectrum.values >= 0, "must be >= 0; subtract the dark reading")
    curve = table.column(table.names[0])
    if not curve.covers(grid[0], grid[-1]):
        curve.resample(grid)  # raises with both ranges
    relative = curve.resample(grid)
    if light.irradiance_w_per_m2 is not None:
        return relative * (light.irradiance_w_per_m2 / (relative @ trapezoid_weights(grid)))
    own = curve.wavelength_nm
    lumens = float(luminous_efficacy(own, curve.values)) * float(curve.values @ trapezoid_weights(own))
    if not lumens > 0:
        raise ProblemError(
            f"{label}: illuminance_lx is {light.illuminance_lx:g}, but {light.curve} holds no visible light; "
            "state irradiance_w_per_m2"
        )
    return relative * (light.illuminance_lx / lumens)


def lens_transmittance(spec: ProblemSpec, folder: Path, where: str, grid: Array) -> Array:
    """Transmittance of the lens. (n,) [1]"""
    optics = spec.optics
    lens = np.full(grid.size, optics.lens_transmittance)
    if optics.lens_curve is not None:
        table = read_table(folder / optics.lens_curve, label=f"{where}: optics.lens_curve: {optics.lens_curve}")
        check_share(table, optics.lens_unit)
        lens = lens * table.column(table.names[0]).resample(grid) * percent_factor(optics.lens_unit)
    return lens
