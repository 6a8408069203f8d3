"""LEDs: spectrum, flux, current, heat and pulse rating, as on a data sheet."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any, ClassVar, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pydantic import Field, model_validator

from codesign.catalog.common import ABSOLUTE_ZERO_C, Part, Record
from codesign.catalog.led_checks import (
    check_currents,
    check_flux_curve,
    check_flux_fields,
    check_spectrum_fields,
)
from codesign.physics.light import ohno_led, radiant_flux_from_luminous
from codesign.spectra import Spectrum, trapezoid_weights

FloatArray = NDArray[np.float64]

# Ohno's model is below 1e-12 of its peak beyond 6 full widths at half maximum; 60 points per width.
SUPPORT_WIDTHS = 6.0
POINTS_PER_WIDTH = 60
# Share of the flux left out on either side of the support.
SUPPORT_TAIL = 0.0005
# A measured curve must fall to this share of its peak at both ends.
LARGEST_END = 0.1


class PulseBracket(Record):
    """One line of a pulse rating: currents up to this are allowed for pulses up to this long."""

    max_width_us: float = Field(gt=0, description="longest pulse of this bracket [us]")
    max_duty: float = Field(gt=0, le=1, description="largest on-time divided by period, 0 to 1")
    max_current_ma: float = Field(gt=0, description="largest pulse current [mA]")


@dataclass(frozen=True, slots=True, eq=False)
class _Kept:
    """Arrays worked out once, compared by identity: records compare all they hold, and arrays have no one answer."""

    points: tuple[FloatArray, FloatArray, FloatArray]


class Led(Part):
    """A light-emitting diode.

    Its spectrum is a measured curve or peak and width of Ohno's model; its flux is stated once, at the
    rated current and the reference junction temperature.
    """

    table_name: ClassVar[str] = "led"

    peak_nm: float | None = Field(default=None, ge=150, le=20000, description="peak wavelength [nm]")
    fwhm_nm: float | None = Field(default=None, gt=0, le=500, description="full width at half maximum [nm]")
    curve: str | None = Field(
        default=None, min_length=1, description="CSV with wavelength_nm and the relative spectrum"
    )
    column: str | None = Field(default=None, description="column of the curve file, when it has several")
    radiant_flux_mw: float | None = Field(default=None, gt=0, description="at rated current [mW]")
    radiant_flux_w: float | None = Field(default=None, gt=0, description="at rated current [W]")
    luminous_flux_lm: float | None = Field(default=None, gt=0, description="at rated current [lm]")
    rated_current_ma: float = Field(gt=0, description="current at which the flux is stated [mA]")
    forward_voltage_v: float = Field(gt=0, le=100, description="forward voltage at rated current [V]")
    max_current_ma: float | None = Field(
        default=None, gt=0, description="largest continuous current [mA]; the rated one by default"
    )
    flux_curve: tuple[tuple[float, ...], ...] | None = Field(
        default=None,
        description="droop: [current_ma, relative_flux] or [current_ma, relative_flux, voltage_v]",
    )
    pulse: tuple[PulseBracket, ...] = Field(default=(), description="pulse rating by width")
    thermal_resistance_k_per_w: float = Field(ge=0, description="junction to solder point [K/W]")
    max_junction_c: float = Field(gt=ABSOLUTE_ZERO_C, le=300, description="junction limit [deg C]")
    reference_junction_c: float = Field(
        default=25.0, gt=ABSOLUTE_ZERO_C, le=200, description="junction temperature of the flux [deg C]"
    )
    flux_temperature_coefficient_per_k: float = Field(
        default=0.0,
        gt=-0.03,
        lt=0.01,
        description="relative change per kelvin, e.g. -0.002; percent/K: divide by 100",
    )
    peak_shift_nm_per_k: float = Field(default=0.0, gt=-2, lt=2, description="shift of the peak [nm/K]")
    beam_half_angle_deg: float = Field(
        default=60.0,
        gt=0,
        lt=90,
        description="axis to half intensity [deg], 60 = Lambertian; full angle: halve it",
    )
    emitting_area_mm2: float | None = Field(default=None, gt=0, description="emitting area [mm2]")
    tags: tuple[str, ...] = Field(default=(), description="free words for selection")

    @model_validator(mode="after")
    def _check(self) -> Self:
        check_spectrum_fields(self)
        check_flux_fields(self)
        check_currents(self)
        if self.flux_curve is not None:
            check_flux_curve(self)
        if self.max_junction_c <= self.reference_junction_c:
            raise ValueError(
                f"max_junction_c is {self.max_junction_c:g}, must be above reference_junction_c "
                f"{self.reference_junction_c:g} deg C"
            )
        return self

    @property
    def continuous_current_ma(self) -> float:
        """Largest continuous current. [mA]"""
        return self.rated_current_ma if self.max_current_ma is None else self.max_current_ma

    @property
    def largest_current_ma(self) -> float:
        """Largest current of any rating, continuous or pulsed. [mA]"""
        return max([self.continuous_current_ma, *(bracket.max_current_ma for bracket in self.pulse)])

    @cached_property
    def _shape(self) -> Spectrum:
        """Spectrum of unit area on the LED's own fine support. [1/nm]"""
        relative = self._measured_shape() if self.curve else self._model_shape()
        area = relative.values @ trapezoid_weights(relative.wavelength_nm)
        return Spectrum(relative.wavelength_nm, relative.values / area, relative.label)

    def _measured_shape(self) -> Spectrum:
        table = self.read_single_curve(self.curve or "", self.column)
        table.require(table.spectrum.values >= 0, "must be >= 0; subtract the dark reading or clip noise")
        if not table.spectrum.values.max() > 0:
            raise self.error(f"{self.curve}: all values are 0, must hold some light")
        shape = table.column(table.names[0])
        self._check_whole(shape)
        return shape

    def _check_whole(self, shape: Spectrum) -> None:
        """Flux is stated for the whole emission, so a curve cut off inside it would be scaled up wrongly."""
        for end in (0, -1):
            share = shape.values[end] / shape.values.max()
            if share > LARGEST_END:
                raise self.error(
                    f"{self.curve}: curve is at {share:.2g} of its peak where it ends at "
                    f"{shape.wavelength_nm[end]:g} nm, must be <= {LARGEST_END:g}; measure the whole emission"
                )

    def _model_shape(self) -> Spectrum:
        reach = SUPPORT_WIDTHS * self.fwhm_nm
        points = int(2 * SUPPORT_WIDTHS * POINTS_PER_WIDTH) + 1
        grid = np.linspace(max(self.peak_nm - reach, 1.0), self.peak_nm + reach, points)
        return Spectrum(grid, ohno_led(grid, self.peak_nm, self.fwhm_nm), self.label)

    @property
    def shape(self) -> Spectrum:
        """Spectrum of unit area on the LED's own support. [1/nm]"""
        return self._shape

    def flux_w(self) -> float:
        """Return the radiant flux at rated current and reference junction temperature. [W]"""
        if self.radiant_flux_w is not None:
            return self.radiant_flux_w
        if self.radiant_flux_mw is not None:
            return self.radiant_flux_mw * 1e-3
        shape = self._shape
        with np.errstate(divide="ignore"):  # no visible light at all gives infinity, refused below
            flux = float(radiant_flux_from_luminous(self.luminous_flux_lm, shape.wavelength_nm, shape.values))
        electrical = self.forward_voltage_v * self.rated_current_ma * 1e-3
        if not flux < electrical:
            raise self.error(
                f"luminous_flux_lm is {self.luminous_flux_lm:g}, that is {flux:.3g} W of light, must be "
                f"below the {electrical:.3g} W that rated_current_ma times forward_voltage_v puts in; "
                "state radiant_flux_mw where the eye hardly sees"
            )
        return flux

    def spectrum(self, grid_nm: ArrayLike, peak_shift_nm: float = 0.0) -> FloatArray:
        """Return the spectral radiant flux at rated current on a grid.

        The curve is normalised on its own support, so a grid that cuts it loses that light, as it should.

        Parameters
        ----------
        grid_nm : (n,) array
            [nm]
        peak_shift_nm : float
            Shift of the whole spectrum, by junction temperature for instance. [nm]

        Returns
        -------
        (n,) array
            [W/nm]
        """
        grid = np.asarray(grid_nm, dtype=np.float64) - peak_shift_nm
        if self.curve:
            return self.flux_w() * self._shape.resample(grid, outside="zero")
        # The model itself rather than its interpolation: exact on any grid.
        peak_density = float(self._shape.values.max())
        return self.flux_w() * peak_density * ohno_led(grid, self.peak_nm, self.fwhm_nm)

    def support(self) -> tuple[float, float]:
        """Return the interval that holds 99.9 % of the flux, half of the rest on either side. [nm]"""
        shape = self._shape
        steps = np.diff(shape.wavelength_nm) * (shape.values[1:] + shape.values[:-1]) / 2
        cumulative = np.concatenate(([0.0], np.cumsum(steps)))
        lo, hi = np.interp([SUPPORT_TAIL, 1 - SUPPORT_TAIL], cumulative / cumulative[-1], shape.wavelength_nm)
        return float(lo), float(hi)

    def peak(self) -> float:
        """Return the peak wavelength, stated or read from the curve. [nm]"""
        if self.peak_nm is not None:
            return self.peak_nm
        return float(self._shape.wavelength_nm[np.argmax(self._shape.values)])

    def segments(self, max_current_ma: float) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return the droop curve up to a current as straight segments.

        Parameters
        ----------
        max_current_ma : float
            Largest current; at most the largest rating. [mA]

        Returns
        -------
        current_widths_a : (k,) array
            [A]
        flux_slopes : (k,) array
            Relative flux per ampere, falling; 1 is the flux at rated current. [1/A]
        power_slopes : (k,) array
            Electrical power per ampere, rising. [W/A]
        """
        current, flux, power = self.operating_points()
        limit = max_current_ma * 1e-3
        if not 0 < limit <= current[-1] * (1 + 1e-9):
            raise self.error(
                f"current {max_current_ma:g} mA is outside its ratings, must be > 0 and <= "
                f"{current[-1] * 1e3:g} mA; raise max_current_ma or add a pulse bracket"
            )
        inner = current[current < limit * (1 - 1e-12)]
        ends = np.append(inner, limit)
        widths = np.diff(ends)
        return (
            widths,
            np.diff(np.interp(ends, current, flux)) / widths,
            np.diff(np.interp(ends, current, power)) / widths,
        )

    def operating_points(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return current [A], relative flux and electrical power [W] at the nodes of the droop curve."""
        return self._kept.points

    @cached_property
    def _kept(self) -> _Kept:
        points = self._droop()
        for values in points:
            values.setflags(write=False)
        return _Kept(points)

    def _droop(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        if self.flux_curve is None:
            current = np.array([0.0, self.largest_current_ma]) * 1e-3
            return current, current / (self.rated_current_ma * 1e-3), current * self.forward_voltage_v
        rows = np.array(self.flux_curve)
        current = np.concatenate(([0.0], rows[:, 0] * 1e-3))
        flux = np.concatenate(([0.0], rows[:, 1]))
        voltage = rows[:, 2] if rows.shape[1] == 3 else np.full(len(rows), self.forward_voltage_v)
        return current, flux, current * np.concatenate(([0.0], voltage))

    def check(self) -> None:
        """Read the curve and work out the flux now."""
        _ = self._shape
        self.flux_w()

    def selectable(self) -> dict[str, Any]:
        """Fields, with the peak of measured curves, the flux in watts and the largest current filled in."""
        return {
            **super().selectable(),
            "peak_nm": self.peak_nm if self.peak_nm is not None or not self.curve else self.peak,
            "flux_w": self.flux_w,
            "max_current_ma": self.continuous_current_ma,
            "largest_current_ma": self.largest_current_ma,
        }
