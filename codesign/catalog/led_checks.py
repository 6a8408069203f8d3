"""Cross-checks of LED fields: each raises ValueError with what is wrong, what is allowed and what to do."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from codesign.catalog.led import Led

FloatArray = NDArray[np.float64]

FLUX_FIELDS = ("radiant_flux_mw", "radiant_flux_w", "luminous_flux_lm")
# A printed curve is read off a graph: 0.5 % at the rated point, 5 % between its voltage and the rated one.
RATED_TOLERANCE = 0.005
VOLTAGE_TOLERANCE = 0.05


def check_spectrum_fields(led: Led) -> None:
    if led.curve is None and (led.peak_nm is None or led.fwhm_nm is None):
        missing = "fwhm_nm" if led.peak_nm is not None else "peak_nm"
        raise ValueError(f"{missing} is missing; give peak_nm and fwhm_nm, or a measured curve")
    if led.curve is not None and (led.peak_nm is not None or led.fwhm_nm is not None):
        raise ValueError(f"curve is {led.curve!r} and peak_nm or fwhm_nm too; give either, not both")


def check_flux_fields(led: Led) -> None:
    given = [name for name in FLUX_FIELDS if getattr(led, name) is not None]
    if not given:
        raise ValueError(f"no flux is stated; give one of {', '.join(FLUX_FIELDS)} at rated_current_ma")
    if len(given) > 1:
        values = " and ".join(f"{name} {getattr(led, name):g}" for name in given)
        raise ValueError(f"{values} are both stated, must be exactly one; remove the others")
    if led.luminous_flux_lm is None:
        light = led.radiant_flux_w if led.radiant_flux_w is not None else led.radiant_flux_mw * 1e-3
        electrical = led.rated_current_ma * led.forward_voltage_v * 1e-3
        if light >= electrical:
            raise ValueError(
                f"{given[0]} is {getattr(led, given[0]):g}, must be below the {electrical:.3g} W that "
                "rated_current_ma times forward_voltage_v puts in; check the unit"
            )


def check_currents(led: Led) -> None:
    widths = [bracket.max_width_us for bracket in led.pulse]
    if any(b <= a for a, b in pairwise(widths)):
        raise ValueError(f"pulse widths {widths} must be increasing; sort the brackets by max_width_us")
    currents = [bracket.max_current_ma for bracket in led.pulse]
    if any(b > a for a, b in pairwise(currents)):
        raise ValueError(f"pulse currents {currents} rise with the width, must not; check max_current_ma")
    if currents and currents[-1] < led.continuous_current_ma:
        raise ValueError(
            f"pulse[{len(currents) - 1}].max_current_ma is {currents[-1]:g}, must be >= the continuous "
            f"{led.continuous_current_ma:g} mA; remove the bracket"
        )


def check_flux_curve(led: Led) -> None:
    rows = led.flux_curve or ()
    sizes = {len(row) for row in rows}
    if sizes not in ({2}, {3}):
        raise ValueError(
            f"flux_curve rows have {sorted(sizes)} numbers, must be all 2 or all 3: "
            "[current_ma, relative_flux] or [current_ma, relative_flux, voltage_v]"
        )
    current, flux, power = led.operating_points()
    if not (np.diff(current) > 0).all():
        i = int(np.argmin(np.diff(current) > 0))
        raise ValueError(
            f"flux_curve[{i}] current is {current[i + 1] * 1e3:g} mA, must be above {current[i] * 1e3:g}; "
            "sort by current and leave out zero"
        )
    _check_slopes(current, flux, power)
    _check_rated_point(led, current, flux, power)


def _check_slopes(current: FloatArray, flux: FloatArray, power: FloatArray) -> None:
    """Flux must rise and bend down, power bend up: else the segments would not fill in order."""
    slope = np.diff(flux) / np.diff(current)
    if not (slope > 0).all():
        i = int(np.argmin(slope > 0))
        raise ValueError(
            f"flux_curve[{i}] relative_flux is {flux[i + 1]:g}, must be above {flux[i]:g}; "
            "end the curve where more current gives no more light"
        )
    bend = np.diff(slope) > 1e-9 * slope[0]
    if bend.any():
        i = int(np.argmax(bend)) + 1
        raise ValueError(
            f"flux_curve[{i}] relative_flux is {flux[i + 1]:g}, must be concave (slope rises "
            f"from {slope[i - 1] / 1e3:.3g} to {slope[i] / 1e3:.3g} per mA); smooth it or drop the low points"
        )
    power_slope = np.diff(power) / np.diff(current)
    if (np.diff(power_slope) < -1e-9 * power_slope[0]).any() or not (power > -1e-12).all():
        i = int(np.argmax(np.diff(power_slope) < 0)) + 1
        raise ValueError(
            f"flux_curve[{i}] voltage_v makes current times voltage bend down, must bend up; smooth the voltages"
        )


def _check_rated_point(led: Led, current: FloatArray, flux: FloatArray, power: FloatArray) -> None:
    rated = led.rated_current_ma * 1e-3
    if current[-1] * 1e3 < led.largest_current_ma * (1 - 1e-9):
        raise ValueError(
            f"flux_curve ends at {current[-1] * 1e3:g} mA, must reach the largest allowed current "
            f"{led.largest_current_ma:g} mA; add a point or lower the rating"
        )
    at_rated = float(np.interp(rated, current, flux))
    if abs(at_rated - 1) > RATED_TOLERANCE:
        raise ValueError(
            f"flux_curve gives {at_rated:.4g} at rated_current_ma {led.rated_current_ma:g}, must be 1; "
            "divide the curve by that value or correct the rated current"
        )
    voltage = float(np.interp(rated, current, power)) / rated
    if abs(voltage / led.forward_voltage_v - 1) > VOLTAGE_TOLERANCE:
        raise ValueError(
            f"flux_curve gives {voltage:.3g} V at rated current, must agree with forward_voltage_v "
            f"{led.forward_voltage_v:g} within 5 %"
        )
