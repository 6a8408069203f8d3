"""Cameras: pixel, noise, gain, exposure and the quantum efficiency of each channel."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar, Literal, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pydantic import Field, model_validator

from codesign.catalog.common import ABSOLUTE_ZERO_C, Part, Record, check_share, percent_factor
from codesign.errors import nearest
from codesign.physics.light import quantum_efficiency_from_responsivity
from codesign.physics.sensor import dark_current_at, dark_current_from_density
from codesign.physics.silicon import silicon_quantum_efficiency
from codesign.spectra import Spectrum, Table

FloatArray = NDArray[np.float64]

#: Joins the names of channels that are read together, so no single channel may hold it in its name.
JOINT = "+"


class Silicon(Record):
    """The physical silicon model of a channel, instead of a measured curve."""

    pixel: Literal["photodiode", "mos"] = Field(description="what lies above the silicon: nothing, or a gate")
    dead_layer_um: float = Field(ge=0, description="surface layer that collects nothing [um]")
    collection_depth_um: float = Field(gt=0, description="depth from which electrons are collected [um]")
    gate_layer_um: float = Field(default=0.0, ge=0, description="poly-silicon gate of a MOS pixel [um]")
    coating_index: float | None = Field(default=None, ge=1, le=4, description="index of the coating")
    coating_thickness_nm: float | None = Field(default=None, gt=0, description="thickness of the coating [nm]")
    band_gap_ev: float = Field(default=1.12, gt=0.1, lt=10, description="band gap, sets the cut-off [eV]")
    fill_factor: float = Field(default=1.0, gt=0, le=1, description="light-sensitive share of the pixel")

    @model_validator(mode="after")
    def _check(self) -> Self:
        if (self.coating_index is None) != (self.coating_thickness_nm is None):
            raise ValueError("coating_index and coating_thickness_nm go together; give both or none")
        if self.pixel == "photodiode" and self.gate_layer_um:
            raise ValueError(f"gate_layer_um is {self.gate_layer_um:g}, must be 0 unless pixel is 'mos'")
        return self


class Channel(Record):
    """One colour channel: a measured curve or the silicon model."""

    name: str = Field(min_length=1, description="'mono', 'red', ...")
    curve: str | None = Field(default=None, min_length=1, description="CSV with wavelength_nm and the response")
    column: str | None = Field(default=None, description="column of the curve file, when it has several")
    quantity: Literal["quantum_efficiency", "responsivity_a_per_w"] | None = Field(
        default=None, description="what the curve holds"
    )
    unit: Literal["percent", "fraction", "a_per_w"] | None = Field(default=None, description="unit of the curve")
    outside: Literal["error", "zero"] = Field(
        default="error", description="'zero' states that the channel is blind beyond the ends of its curve"
    )
    silicon: Silicon | None = Field(default=None, description="silicon model, instead of a curve")

    @model_validator(mode="after")
    def _check(self) -> Self:
        if JOINT in self.name:
            raise ValueError(
                f"channel {self.name!r}: name must not hold {JOINT!r}, which joins channels read together; write 'and'"
            )
        if (self.curve is None) == (self.silicon is None):
            raise ValueError(f"channel {self.name!r} must have either curve or silicon, one of the two")
        if self.silicon is not None and (self.quantity or self.unit or self.column):
            raise ValueError(f"channel {self.name!r}: quantity, unit and column belong to a curve, not to silicon")
        if self.curve is not None:
            allowed = {"quantum_efficiency": ("percent", "fraction"), "responsivity_a_per_w": ("a_per_w",)}
            if self.quantity is None:
                raise ValueError(f"channel {self.name!r}: quantity is missing, must be {' or '.join(allowed)}")
            if self.unit not in allowed[self.quantity]:
                raise ValueError(
                    f"channel {self.name!r}: unit is {self.unit!r}, must be "
                    f"{' or '.join(map(repr, allowed[self.quantity]))} for {self.quantity}"
                )
        return self


class Gain(Record):
    """One analogue gain; what is left out follows from the camera's values at 0 dB."""

    gain_db: float = Field(ge=-40, le=80, description="gain relative to the stated conversion gain [dB]")
    conversion_gain_dn_per_e: float | None = Field(default=None, gt=0, description="at this gain [DN/e-]")
    read_noise_e: float | None = Field(default=None, ge=0, description="at this gain [e-]")
    full_well_e: float | None = Field(default=None, gt=0, description="at this gain [e-]")


@dataclass(frozen=True, slots=True, kw_only=True)
class GainSetting:
    """A gain with all its values resolved."""

    gain_db: float
    conversion_gain_dn_per_e: float
    read_noise_e: float
    full_well_e: float


class Camera(Part):
    """A camera as its EMVA 1288 data sheet states it."""

    table_name: ClassVar[str] = "camera"

    pixel_pitch_um: float = Field(gt=0, le=1000, description="square pixel [um]")
    full_well_e: float = Field(gt=0, description="saturation capacity [e-]")
    bits: int = Field(ge=1, le=32, description="bits of the grey value")
    read_noise_e: float = Field(ge=0, description="temporal dark noise [e-]")
    conversion_gain_dn_per_e: float = Field(gt=0, description="overall system gain K [DN/e-]")
    black_level_dn: float = Field(default=0.0, ge=0, description="grey value without light [DN]")
    dark_current_e_per_s: float | None = Field(default=None, ge=0, description="per pixel [e-/s]")
    dark_current_na_per_cm2: float | None = Field(default=None, ge=0, description="per area [nA/cm2]")
    dark_reference_c: float = Field(gt=ABSOLUTE_ZERO_C, description="temperature of the dark current [deg C]")
    dark_doubling_k: float = Field(gt=0, le=100, description="warming that doubles the dark current [K]")
    dsnu_e: float = Field(ge=0, description="dark signal non-uniformity [e-]")
    prnu_percent: float = Field(ge=0, le=100, description="photo response non-uniformity [%]")
    exposure_min_us: float = Field(gt=0, description="shortest exposure [us]")
    exposure_max_us: float = Field(gt=0, description="longest exposure [us]")
    exposure_step_us: float = Field(gt=0, description="exposure step [us]")
    readout_ms: float = Field(default=0.0, ge=0, description="time per frame in which no exposure can run [ms]")
    gains: tuple[Gain, ...] = Field(default=(Gain(gain_db=0.0),), min_length=1, description="gain settings")
    channels: tuple[Channel, ...] = Field(min_length=1, description="one 'mono' or several colours")
    response_factor: float = Field(
        default=1.0, gt=0, le=10, description="quantum efficiency of this piece relative to its stated curves"
    )

    @model_validator(mode="after")
    def _check(self) -> Self:
        stated = [name for name in ("dark_current_e_per_s", "dark_current_na_per_cm2") if self._has(name)]
        if len(stated) != 1:
            raise ValueError(
                f"{len(stated)} dark currents are stated, must be one: dark_current_e_per_s or dark_current_na_per_cm2"
            )
        if self.exposure_max_us < self.exposure_min_us:
            raise ValueError(
                f"exposure_max_us is {self.exposure_max_us:g}, must be >= exposure_min_us {self.exposure_min_us:g}"
            )
        for values, key in (
            ([channel.name for channel in self.channels], "channels name"),
            ([gain.gain_db for gain in self.gains], "gains gain_db"),
        ):
            repeated = [value for value in values if values.count(value) > 1]
            if repeated:
                raise ValueError(f"{key} {repeated[0]!r} is given twice; remove one")
        self._check_levels()
        return self

    def _has(self, name: str) -> bool:
        return getattr(self, name) is not None

    def _check_levels(self) -> None:
        """Catch values that contradict each other whatever the camera."""
        if self.read_noise_e >= self.full_well_e:
            raise ValueError(f"read_noise_e is {self.read_noise_e:g}, must be below full_well_e {self.full_well_e:g}")
        top = 2**self.bits - 1
        if self.black_level_dn >= top:
            raise ValueError(f"black_level_dn is {self.black_level_dn:g}, must be below the top grey value {top}")
        well_dn = self.full_well_e * self.conversion_gain_dn_per_e
        if not 0.02 < well_dn / top < 50:
            raise ValueError(
                f"conversion_gain_dn_per_e is {self.conversion_gain_dn_per_e:g}: a full well would "
                f"be {well_dn:.3g} DN of {top}; must be DN per electron, take the inverse of e-/DN"
            )

    def curve_files(self) -> dict[str, str]:
        """Return channel → curve file."""
        return {f"channel {c.name!r}: curve": c.curve for c in self.channels if c.curve}

    @property
    def channel_names(self) -> tuple[str, ...]:
        """Names of the channels in file order."""
        return tuple(channel.name for channel in self.channels)

    @property
    def pixel_area(self) -> float:
        """Pixel area. [m2]"""
        return (self.pixel_pitch_um * 1e-6) ** 2

    def channel(self, name: str) -> Channel:
        """Return a channel by name."""
        for channel in self.channels:
            if channel.name == name:
                return channel
        raise self.error(f"no channel {name!r}, {nearest(name, self.channel_names)}")

    def quantum_efficiency(self, channel: str, grid_nm: ArrayLike) -> FloatArray:
        """Return electrons per photon that falls on the whole pixel.

        Parameters
        ----------
        channel : str
            Name of the channel.
        grid_nm : (n,) array
            [nm]

        Returns
        -------
        (n,) array
            0 to 1. [1]

        Raises
        ------
        CoverageError
            When the curve does not cover the grid and does not state ``outside = "zero"``.
        """
        return self.response_factor * self._stated_efficiency(channel, np.asarray(grid_nm, dtype=np.float64))

    def _stated_efficiency(self, channel: str, grid: FloatArray) -> FloatArray:
        chosen = self.channel(channel)
        if chosen.silicon is not None:
            return silicon_quantum_efficiency(grid, **chosen.silicon.model_dump())
        table = self._checked_table(chosen)
        values = table.column(table.names[0]).resample(grid, outside=chosen.outside)
        if chosen.quantity == "quantum_efficiency":
            return values * percent_factor(chosen.unit or "fraction")
        return quantum_efficiency_from_responsivity(values, grid)

    def _checked_table(self, channel: Channel) -> Table:
        table = self.read_single_curve(channel.curve or "", channel.column)
        if channel.quantity == "quantum_efficiency":
            check_share(table, channel.unit or "fraction")
            return table
        values = table.spectrum.values
        table.require(values >= 0, "must be >= 0; subtract the dark reading or clip noise")
        efficiency = quantum_efficiency_from_responsivity(values, table.spectrum.wavelength_nm)
        table.require(
            efficiency <= 1, "A/W would be more than one electron per photon; is it mA/W or a relative curve?"
        )
        return table

    def response_range(self, channel: str) -> tuple[float, float] | None:
        """Return the wavelengths a curve covers, or None where the answer is known everywhere. [nm]"""
        chosen = self.channel(channel)
        if chosen.silicon is not None or chosen.outside == "zero":
            return None
        spectrum: Spectrum = self._checked_table(chosen).spectrum
        return spectrum.range

    def dark_current(self, temperature_c: float) -> float:
        """Return the dark current of one pixel. [e-/s]"""
        reference = self.dark_current_e_per_s
        if reference is None:
            reference = dark_current_from_density(self.dark_current_na_per_cm2, self.pixel_area)
        return float(dark_current_at(reference, temperature_c, self.dark_reference_c, self.dark_doubling_k))

    def gain_settings(self) -> tuple[GainSetting, ...]:
        """Return all gains with their values; the conversion gain grows as 10^(dB/20) where not stated."""
        return tuple(self._resolved(gain) for gain in self.gains)

    def _resolved(self, gain: Gain) -> GainSetting:
        scaled = self.conversion_gain_dn_per_e * 10 ** (gain.gain_db / 20)
        return GainSetting(
            gain_db=gain.gain_db,
            conversion_gain_dn_per_e=scaled if gain.conversion_gain_dn_per_e is None else gain.conversion_gain_dn_per_e,
            read_noise_e=self.read_noise_e if gain.read_noise_e is None else gain.read_noise_e,
            full_well_e=self.full_well_e if gain.full_well_e is None else gain.full_well_e,
        )

    def check(self) -> None:
        """Read all curves now."""
        for channel in self.channels:
            if channel.curve:
                self._checked_table(channel)

    def selectable(self) -> dict[str, Any]:
        """Fields, with the channel names and whether the camera sees colour."""
        fields = super().selectable()
        del fields["gains"], fields["channels"]
        return {**fields, "channels": self.channel_names, "colour": len(self.channels) > 1}
