"""The section ``[tolerance]`` of a problem file: how far real parts and surroundings stray from what is stated."""

from __future__ import annotations

from typing import Self

from pydantic import Field, model_validator

from codesign.catalog.common import ABSOLUTE_ZERO_C, Record

Range = tuple[float, float]


def _percent(what: str) -> float | None:
    return Field(default=None, ge=0, le=100, description=f"{what}, standard deviation [%]")


def _share(what: str, usual: float) -> float:
    return Field(default=usual, ge=0, le=1, description=f"correlation of {what}; the rest is each one's own")


class Tolerance(Record):
    """Spreads of data-sheet quantities; one left out has the usual spread of `codesign.problem.nudge`, 0 is none.

    Numbers are standard deviations of normal spreads; for the keys listed in ``uniform`` they are half widths.
    """

    led_flux_percent: float | None = _percent("flux of an LED channel against its data sheet")
    led_flux_shared: float = _share("the flux of LED channels of one delivery", 0.5)
    led_ageing_percent: Range = Field(
        default=(0.0, 0.0), description="loss of light over life, uniform between the two, same for all LEDs [%]"
    )
    led_peak_nm: float | None = Field(default=None, ge=0, le=50, description="LED peak, standard deviation [nm]")
    led_peak_shared: float = _share("the peaks of LED channels of one delivery", 0.5)
    delivery_percent: float | None = _percent("light that reaches the object per watt")
    delivery_shared: float = _share("the delivery of LED channels, e.g. by one distance", 1.0)
    thermal_resistance_percent: float | None = _percent("junction to solder point")
    thermal_resistance_shared: float = _share("the thermal resistances of LED channels", 0.5)
    board_resistance_percent: float | None = _percent("solder point to air")
    forward_voltage_percent: float | None = _percent("forward voltage of an LED channel")
    forward_voltage_shared: float = _share("the forward voltages of LED channels", 0.5)
    filter_centre_nm: float | None = Field(
        default=None, ge=0, le=50, description="shift of a filter, standard deviation [nm]"
    )
    filter_tilt_deg: float | None = Field(
        default=None, ge=0, le=20, description="tilt added to the field angle, standard deviation [deg]"
    )
    lens_percent: float | None = _percent("lens transmittance")
    quantum_efficiency_percent: float | None = _percent("quantum efficiency")
    read_noise_percent: float | None = _percent("read noise")
    dark_current_percent: float | None = _percent("dark current")
    prnu_percent: float | None = _percent("the PRNU figure itself")
    dsnu_percent: float | None = _percent("the DSNU figure itself")
    full_well_percent: float | None = _percent("full well")
    conversion_gain_percent: float | None = _percent("conversion gain")
    reflectance_percent: float | None = _percent("reflectance scale of a surface, beside the clutter of its samples")
    reflectance_shared: float = _share("the reflectance scales of all surfaces, e.g. by one white standard", 1.0)
    ambient_percent: float | None = _percent("ambient light")
    ambient_off_probability: float = Field(default=0.0, ge=0, le=1, description="share of time ambient light is off")
    air_k: float | None = Field(default=None, ge=0, le=100, description="air temperature, standard deviation [K]")
    air_c_range: Range | None = Field(default=None, description="air temperature uniform between the two [deg C]")
    sensor_k: float | None = Field(default=None, ge=0, le=100, description="sensor temperature, standard deviation [K]")
    sensor_c_range: Range | None = Field(default=None, description="sensor temperature uniform between the two [deg C]")
    uniform: tuple[str, ...] = Field(default=(), description="keys whose spread is uniform, their number a half width")

    @model_validator(mode="after")
    def _check(self) -> Self:
        for key in ("led_ageing_percent", "air_c_range", "sensor_c_range"):
            pair = getattr(self, key)
            least, most = (0.0, 99.0) if key == "led_ageing_percent" else (ABSOLUTE_ZERO_C, 150.0)
            if pair is not None and not least <= pair[0] <= pair[1] <= most:
                raise ValueError(f"{key} is {list(pair)}, must be [least, most] within {least:g} to {most:g}")
        for key, other in (("air_k", "air_c_range"), ("sensor_k", "sensor_c_range")):
            if getattr(self, key) is not None and getattr(self, other) is not None:
                raise ValueError(f"{key} and {other} are both given, must be only one of the two")
        bad = [key for key in self.uniform if key not in SPREADS]
        if bad:
            raise ValueError(f"uniform names {bad[0]!r}, must be among {', '.join(SPREADS)}")
        return self


#: Keys that hold one spread each, and which quantity of `codesign.problem.nudge` it is of.
SPREADS = {
    "led_flux_percent": "LED flux",
    "led_peak_nm": "LED peak",
    "delivery_percent": "delivery",
    "thermal_resistance_percent": "thermal resistance",
    "board_resistance_percent": "board thermal resistance",
    "forward_voltage_percent": "forward voltage",
    "filter_centre_nm": "filter centre",
    "filter_tilt_deg": "filter tilt",
    "lens_percent": "lens transmittance",
    "quantum_efficiency_percent": "quantum efficiency",
    "read_noise_percent": "read noise",
    "dark_current_percent": "dark current",
    "prnu_percent": "PRNU",
    "dsnu_percent": "dark fixed pattern",
    "full_well_percent": "full well",
    "conversion_gain_percent": "conversion gain",
    "reflectance_percent": "reflectance",
    "ambient_percent": "ambient light",
    "air_k": "air temperature",
    "sensor_k": "sensor temperature",
}
