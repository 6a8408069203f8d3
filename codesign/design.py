"""The forward model: what any recipe does, without an optimiser. Every result must pass through `evaluate`.

It integrates the light of the recipe directly, LED by LED, and so stands beside the optimiser's arrays as a second
way to the same numbers.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Camera, GainSetting
from codesign.errors import ProblemError, nearest
from codesign.limits import (
    PulseLevel,
    Setting,
    dark_rate,
    depth_shortfall,
    junction_limit,
    pulse_levels,
    saturation_electrons,
    sum_limits,
    thermal_resistance,
    time_limits,
    well_bound,
)
from codesign.noise import NOISE_TERMS, Sensor
from codesign.physics.detection import error_rate
from codesign.physics.light import flux_at_temperature
from codesign.problem import LedChannel, Problem
from codesign.radiometry import (
    channel_irradiance,
    electrons_per_irradiance,
    filter_transmittance,
    reflectances,
)

Array = NDArray[np.float64]

#: A limit counts as met up to this share over its bound: well below any setting step, above round-off.
TOLERANCE = 1e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class Design:
    """What a user sets: parts, lens, exposure and the current of each LED channel (absent = off)."""

    camera: str
    channel: str
    gain_db: float
    filter: str
    f_number: float
    exposure_us: float
    drive_ma: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class SurfaceReading:
    """What the camera reads on one surface: mean electrons by origin and mean grey value."""

    id: str
    role: str
    led_e: float
    ambient_e: float
    dark_e: float
    grey_dn: float
    saturation_share: float

    @property
    def total_e(self) -> float:
        """All electrons. [e⁻]"""
        return self.led_e + self.ambient_e + self.dark_e


@dataclass(frozen=True, slots=True, kw_only=True)
class LimitUse:
    """How much of a limit is used. ``share`` is 1 at the limit; a ``floor`` is met from above."""

    name: str
    unit: str
    value: float
    bound: float
    share: float
    floor: bool = False

    @property
    def met(self) -> bool:
        """Whether the limit holds (to `TOLERANCE`)."""
        return self.share <= 1 + TOLERANCE

    def shortfall(self) -> str:
        """Say by how much the limit is missed."""
        word = "below" if self.floor else "above"
        return f"{self.name} {self.value:.5g} {self.unit} is {abs(self.value - self.bound):.3g} {self.unit} {word} the limit {self.bound:.5g} {self.unit}"


@dataclass(frozen=True, slots=True, kw_only=True)
class LedState:
    """One lit LED channel: current, electrical and optical power per emitter while on, junction."""

    id: str
    drive_ma: float
    electrical_w: float
    optical_w: float
    junction_c: float
    emitters: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Performance:
    """What a recipe achieves. ``noise`` maps each term to its variance at (target, background). [e⁻²]"""

    design: Design
    signal_e: float
    cnr: float
    sign: str
    error_rate: float
    surfaces: tuple[SurfaceReading, ...]
    noise: Mapping[str, tuple[float, float]]
    limits: tuple[LimitUse, ...]
    leds: tuple[LedState, ...]
    duty: float

    @property
    def feasible(self) -> bool:
        """Whether all limits hold."""
        return all(limit.met for limit in self.limits)

    @property
    def violated(self) -> tuple[LimitUse, ...]:
        """Limits that do not hold."""
        return tuple(limit for limit in self.limits if not limit.met)


def setting_of(problem: Problem, design: Design) -> Setting:
    """Look up the parts of a design. Raises ProblemError naming what is unknown."""
    camera = problem.camera(design.camera)
    if design.channel not in camera.channel_names:
        raise ProblemError(f"recipe: channel is {design.channel!r}; {nearest(design.channel, camera.channel_names)}")
    exposure = design.exposure_us * 1e-6
    return Setting(
        camera=camera,
        channel=design.channel,
        gain=_gain(camera, design.gain_db),
        f_number=design.f_number,
        level=level_at(problem, exposure),
    )


def _gain(camera: Camera, gain_db: float) -> GainSetting:
    for gain in camera.gain_settings():
        if abs(gain.gain_db - gain_db) < 1e-9:
            return gain
    offered = ", ".join(f"{gain.gain_db:g}" for gain in camera.gain_settings())
    raise ProblemError(f"recipe: gain_db is {gain_db:g}, must be one of {offered} that camera {camera.id!r} offers")


def level_at(problem: Problem, exposure_s: float) -> PulseLevel:
    """Return the pulse rating that holds at an exposure."""
    levels = pulse_levels(problem)
    return next((level for level in levels if exposure_s <= level.longest_s * (1 + 1e-9)), levels[-1])


def led_state(problem: Problem, channel: LedChannel, drive_ma: float, duty: float) -> LedState:
    """Power and junction temperature of one emitter: the temperature at which heat and flux agree, in closed form."""
    led = channel.led
    current, flux, power = led.operating_points()
    amps = drive_ma * 1e-3
    electrical = float(np.interp(amps, current, power))
    reference = led.flux_w() * float(np.interp(amps, current, flux))
    resistance = thermal_resistance(problem, channel) * duty
    coefficient, air = led.flux_temperature_coefficient_per_k, problem.spec.temperature.air_c
    # T = air + R (P - F (1 + c (T - T_ref))) solved for T; flux never below 0.
    junction = (air + resistance * (electrical - reference * (1 - coefficient * led.reference_junction_c))) / (
        1 + resistance * reference * coefficient
    )
    factor = float(flux_at_temperature(junction, coefficient, led.reference_junction_c))
    if factor <= 0:
        junction, factor = air + resistance * electrical, 0.0
    return LedState(
        id=led.id,
        drive_ma=drive_ma,
        electrical_w=electrical,
        optical_w=reference * factor,
        junction_c=float(junction),
        emitters=channel.emitters,
    )


def evaluate(problem: Problem, design: Design, *, junction_c: Mapping[str, float] | None = None) -> Performance:
    """Predict what a recipe does: electrons, grey values, noise, CNR and the use of every limit.

    Parameters
    ----------
    problem : Problem
    design : Design
        Any recipe, feasible or not.
    junction_c : mapping, optional
        Junction temperatures by LED id to assume instead of those the recipe leads to. [deg C]

    Returns
    -------
    Performance

    Raises
    ------
    ProblemError
        When the design names parts or LEDs that are not candidates, or values that cannot be set.

    Notes
    -----
    CNR = |mean target − mean background| / sqrt((variance target + variance background) / 2).
    """
    _check_values(problem, design)
    setting = setting_of(problem, design)
    t = design.exposure_us * 1e-6
    duty = problem.duty(t)
    states = tuple(led_state(problem, problem.channel(led), ma, duty) for led, ma in design.drive_ma.items() if ma > 0)
    if junction_c is not None:
        states = tuple(replace(state, junction_c=junction_c[state.id]) for state in states)
    light = _electrons(problem, setting, design, states, t)
    sensor, averaging = Sensor.of(setting.camera, setting.gain), problem.spec.averaging
    noise = {
        term.name: tuple(term.variance(sensor, light.electrons[i], light.clutter[i], averaging) for i in (0, 1))
        for term in NOISE_TERMS
    }
    difference = float(light.electrons[0].sum() - light.electrons[1].sum())
    variance = sum(pair[0] + pair[1] for pair in noise.values()) / 2
    cnr = abs(difference) / np.sqrt(variance) if variance > 0 else 0.0
    readings = tuple(_reading(problem, setting, i, light.electrons[i]) for i in range(len(problem.surfaces)))
    return Performance(
        design=design,
        signal_e=difference,
        cnr=float(cnr),
        sign="brighter" if difference > 0 else "darker",
        error_rate=float(error_rate(cnr)),
        surfaces=readings,
        noise=noise,
        limits=tuple(_limit_uses(problem, setting, design, states, readings)),
        leds=states,
        duty=duty,
    )


def _check_values(problem: Problem, design: Design) -> None:
    if not design.exposure_us > 0 or not np.isfinite(design.exposure_us):
        raise ProblemError(f"recipe: exposure_us is {design.exposure_us:g}, must be > 0")
    if not design.f_number > 0 or not np.isfinite(design.f_number):
        raise ProblemError(f"recipe: f_number is {design.f_number:g}, must be > 0")
    for led, drive in design.drive_ma.items():
        top = problem.channel(led).led.largest_current_ma
        if not 0 <= drive <= top * (1 + 1e-9):
            raise ProblemError(f"recipe: drive_ma.{led} is {drive:g}, must be 0 to {top:g} mA, its largest rating")


@dataclass(frozen=True, slots=True)
class _Light:
    """Electrons (S, 3) by origin, and clutter amplitudes of target and background."""

    electrons: Array
    clutter: tuple[Array, Array]


@lru_cache(maxsize=64)
def _sensitivity(problem: Problem, camera: str, channel: str, filter_id: str, f_number: float) -> Array:
    """Electron rate per unit of light leaving the object, filter included; the same for all drives of a recipe."""
    weight = electrons_per_irradiance(problem, problem.camera(camera), channel, f_number)
    return weight * filter_transmittance(problem, problem.filter(filter_id), f_number)


def _electrons(problem: Problem, setting: Setting, design: Design, states: tuple[LedState, ...], t: float) -> _Light:
    """Integrate the light of the recipe over wavelength for each surface."""
    scene = reflectances(problem)
    weight = _sensitivity(problem, design.camera, design.channel, design.filter, design.f_number)
    diffuse, gloss = np.zeros(problem.grid.size), np.zeros(problem.grid.size)
    for state in states:
        channel = problem.channel(state.id)
        current, flux, _ = channel.led.operating_points()
        share = float(np.interp(state.drive_ma * 1e-3, current, flux))
        light = channel_irradiance(problem, channel, state.junction_c) * share
        diffuse += light
        gloss += light * channel.specular_weight
    led = (scene.mean @ (weight * diffuse) + scene.specular * float(weight @ gloss)) * t
    ambient = scene.mean @ (weight * problem.ambient) * t
    dark = np.full(len(led), dark_rate(problem, setting) * t)
    clutter = scene.clutter @ (weight * (diffuse + problem.ambient)) * t
    rows = scene.target_rows
    return _Light(np.stack([led, ambient, dark], axis=1), (clutter[:rows], clutter[rows:]))


def _reading(problem: Problem, setting: Setting, index: int, electrons: Array) -> SurfaceReading:
    surface = problem.surfaces[index]
    total = float(electrons.sum())
    level = setting.camera.black_level_dn + setting.gain.conversion_gain_dn_per_e * total
    return SurfaceReading(
        id=surface.id,
        role=("target", "background")[index] if index < 2 else "guard",
        led_e=float(electrons[0]),
        ambient_e=float(electrons[1]),
        dark_e=float(electrons[2]),
        grey_dn=min(level, 2**setting.camera.bits - 1.0),
        saturation_share=total / saturation_electrons(setting.camera, setting.gain),
    )


def _use(name: str, unit: str, value: float, bound: float) -> LimitUse:
    share = value / bound if bound > 0 else (0.0 if value <= 0 else np.inf)
    return LimitUse(name=name, unit=unit, value=float(value), bound=float(bound), share=float(share))


def _limit_uses(problem, setting: Setting, design: Design, states, readings) -> list[LimitUse]:
    """Use of every limit, in the order of the signal chain."""
    t = design.exposure_us * 1e-6
    found = [_use(f"well, {r.id}", "e-", r.total_e, well_bound(problem, setting)) for r in readings]
    for limit in time_limits(problem, setting):
        value = limit.value(t)
        share = limit.bound / value if limit.floor else value / limit.bound
        found.append(
            LimitUse(
                name=limit.name,
                unit=limit.unit,
                value=value,
                bound=limit.bound,
                share=share,
                floor=limit.floor,
            )
        )
    found += _power_uses(problem, states, t)
    for state in states:
        channel = problem.channel(state.id)
        top_ma = setting.level.current_ma[problem.channel_index[state.id]]
        found.append(_use(f"current, {state.id}", "mA", state.drive_ma, top_ma))
        air, top = problem.spec.temperature.air_c, junction_limit(problem, channel)
        share = (state.junction_c - air) / (top - air) if top > air else np.inf
        found.append(
            LimitUse(name=f"junction, {state.id}", unit="deg C", value=state.junction_c, bound=top, share=share)
        )
    short = depth_shortfall(problem, setting.camera, design.f_number)
    if problem.spec.optics.required_depth_mm is not None:
        found.append(_depth_use(problem, setting, design, short))
    return found


def _depth_use(problem: Problem, setting: Setting, design: Design, short: float | None) -> LimitUse:
    from codesign.physics.optics import depth_of_field

    wanted = problem.spec.optics.required_depth_mm
    depth = (
        depth_of_field(design.f_number, setting.camera.pixel_pitch_um * 1e-6, problem.spec.optics.magnification) * 1e3
    )
    return LimitUse(
        name="depth of field",
        unit="mm",
        value=float(depth),
        bound=wanted,
        share=float(wanted / depth),
        floor=True,
    )


def _power_uses(problem: Problem, states: tuple[LedState, ...], t: float) -> list[LimitUse]:
    heat = sum(s.emitters * (s.electrical_w - s.optical_w) for s in states)
    power = sum(s.emitters * s.electrical_w for s in states)
    duty = problem.duty(t)
    return [
        _use(
            limit.name,
            limit.unit,
            (heat if limit.quantity == "heat" else power) * (duty if limit.mean else 1.0),
            limit.bound,
        )
        for limit in sum_limits(problem)
    ]
