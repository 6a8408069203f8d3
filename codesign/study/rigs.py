"""What each of many rigs with one recipe is like before any wavelength comes in: its camera, LEDs and surroundings."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Filter
from codesign.design import Design
from codesign.limits import Setting
from codesign.noise import Sensor
from codesign.physics.light import flux_at_temperature
from codesign.problem import LedChannel, Problem
from codesign.study.draws import SWITCH, Draws, filters_in

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Rigs:
    """B rigs with K lit LEDs, S surfaces and a filter of J plain pieces.

    Attributes
    ----------
    air_c : (B,) array
        [deg C]
    read_noise_e, conversion_gain_dn_per_e, dsnu_e, prnu : (B,) arrays
        Noise figures of the camera.
    saturation_e : (B,) array
        Electrons at which a pixel clips. [e⁻]
    dark_rate : (B,) array
        [e⁻/s]
    gain, ambient : (B,) arrays
        Factor on all light, by lens and quantum efficiency, and on ambient light. [1]
    reflectance : (B, S) array
        Factor on each surface. [1]
    field_deg : (B,) array
        Angle of the chief ray at the filter. [deg]
    filter_nm : (B, J) array
        Shift of each piece of the filter. [nm]
    electrical_w, reference_w : (B, K) arrays
        Power of one emitter, and its light at the reference junction temperature. [W]
    share, delivery : (B, K) arrays
        Flux against that of the data sheet at rated current, factor on the delivery. [1]
    resistance : (B, K) array
        Junction to air, per emitter. [K/W]
    peak_nm : (B, K) array
        Shift of the spectrum but for warming. [nm]
    """

    air_c: Array
    read_noise_e: Array
    conversion_gain_dn_per_e: Array
    dsnu_e: Array
    prnu: Array
    saturation_e: Array
    dark_rate: Array
    gain: Array
    ambient: Array
    reflectance: Array
    field_deg: Array
    filter_nm: Array
    electrical_w: Array
    reference_w: Array
    share: Array
    delivery: Array
    resistance: Array
    peak_nm: Array

    @property
    def size(self) -> int:
        """Number of rigs B."""
        return self.air_c.size

    def take(self, index: slice | NDArray[np.intp]) -> Rigs:
        """Some of the rigs."""
        return Rigs(**{f.name: getattr(self, f.name)[index] for f in fields(self)})

    @property
    def sensor(self) -> Sensor:
        """Noise figures of the cameras, each (B,)."""
        names = ("read_noise_e", "conversion_gain_dn_per_e", "dsnu_e", "prnu")
        return Sensor(**{name: getattr(self, name) for name in names})


def filter_pieces(problem: Problem, name: str) -> tuple[tuple[str, Filter], ...]:
    """The plain filters that a filter is made of, each after the id under which it may be off."""
    open_ = [(part, problem.filter(part)) for part in filters_in(problem, name)]
    found = []
    while open_:
        owner, piece = open_.pop()
        open_ += [(owner, problem.catalog.part("filter", part)) for part in piece.parts or ()]
        if piece.kind != "stack":
            found.append((owner, piece))
    return tuple(found)


def lit_channels(problem: Problem, design: Design) -> tuple[tuple[LedChannel, float], ...]:
    """Channels that carry a current, with it. [mA]"""
    return tuple((problem.channel(led), ma) for led, ma in design.drive_ma.items() if ma > 0)


def rigs_of(problem: Problem, design: Design, setting: Setting, draws: Draws) -> Rigs:
    """Work out all rigs of some draws."""
    temperature, optics = problem.spec.temperature, problem.spec.optics
    pieces = [draws.shift("filter centre", owner) for owner, _ in filter_pieces(problem, design.filter)]
    surfaces = [draws.factor("reflectance", surface.id) for surface in problem.surfaces]
    return Rigs(
        air_c=temperature.air_c + draws.shift("air temperature"),
        **_camera(problem, setting, draws),
        gain=draws.factor("lens transmittance") * draws.factor("quantum efficiency", setting.camera.id),
        ambient=draws.factor("ambient light") * draws.factor(SWITCH),
        reflectance=np.stack(surfaces, axis=1),
        field_deg=optics.field_angle_deg + draws.shift("filter tilt"),
        filter_nm=np.stack(pieces, axis=1) if pieces else np.zeros((draws.size, 0)),
        **_leds(problem, design, draws),
    )


def _camera(problem: Problem, setting: Setting, draws: Draws) -> dict[str, Array]:
    camera, gain, sensor_c = setting.camera, setting.gain, problem.spec.temperature.sensor_c

    def factor(quantity: str) -> Array:
        return draws.factor(quantity, camera.id)

    nominal, conversion = Sensor.of(camera, gain), factor("conversion gain")
    top = (2**camera.bits - 1 - camera.black_level_dn) / gain.conversion_gain_dn_per_e
    warmer = np.exp2(draws.shift("sensor temperature") / camera.dark_doubling_k)
    return {
        "read_noise_e": nominal.read_noise_e * factor("read noise"),
        "conversion_gain_dn_per_e": nominal.conversion_gain_dn_per_e * conversion,
        "dsnu_e": nominal.dsnu_e * factor("dark fixed pattern"),
        "prnu": nominal.prnu * factor("PRNU"),
        "saturation_e": np.minimum(gain.full_well_e * factor("full well"), top / conversion),
        "dark_rate": camera.dark_current(sensor_c) * warmer * factor("dark current"),
    }


def _leds(problem: Problem, design: Design, draws: Draws) -> dict[str, Array]:
    columns = {name: [] for name in ("electrical_w", "reference_w", "share", "delivery", "resistance", "peak_nm")}
    for channel, drive_ma in lit_channels(problem, design):
        led, amps = channel.led, drive_ma * 1e-3
        current, flux, power = led.operating_points()
        share = float(np.interp(amps, current, flux)) * draws.factor("LED flux", led.id)
        own = led.thermal_resistance_k_per_w * draws.factor("thermal resistance", led.id)
        board = problem.spec.lighting.board_k_per_w * draws.factor("board thermal resistance")
        columns["electrical_w"].append(float(np.interp(amps, current, power)) * draws.factor("forward voltage", led.id))
        columns["reference_w"].append(led.flux_w() * share)
        columns["share"].append(share)
        columns["delivery"].append(draws.factor("delivery", led.id))
        columns["resistance"].append(own + board)
        columns["peak_nm"].append(channel.peak_shift_nm + draws.shift("LED peak", led.id))
    return {name: np.stack(c, axis=1) if c else np.zeros((draws.size, 0)) for name, c in columns.items()}


def duty(problem: Problem, exposure_s: Array) -> Array:
    """Share of time the LEDs are on. (B,) [1]"""
    return exposure_s * problem.spec.timing.frame_rate_hz if problem.strobe else np.ones_like(exposure_s)


def balance(problem: Problem, design: Design, rigs: Rigs, exposure_s: Array) -> tuple[Array, Array]:
    """Junction temperature of each lit LED, and its flux against the reference, as `codesign.design` has it. (B, K)"""
    leds = [channel.led for channel, _ in lit_channels(problem, design)]
    coefficient = np.array([led.flux_temperature_coefficient_per_k for led in leds])
    reference_c = np.array([led.reference_junction_c for led in leds])
    heated, air = rigs.resistance * duty(problem, exposure_s)[:, None], rigs.air_c[:, None]
    stiffness = 1 + heated * rigs.reference_w * coefficient
    steady = stiffness > 0
    cold = air + heated * (rigs.electrical_w - rigs.reference_w * (1 - coefficient * reference_c))
    junction = cold / np.where(steady, stiffness, 1.0)
    factor = np.where(steady, flux_at_temperature(junction, coefficient, reference_c), 0.0)
    return np.where(factor > 0, junction, air + heated * rigs.electrical_w), factor
