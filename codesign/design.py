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
from codesign.catalog.camera import JOINT
from codesign.design_checks import candidate, check_values
from codesign.display import Displayed
from codesign.errors import ProblemError, nearest
from codesign.limit_use import LedState, LimitUse, build_uses, limit_uses
from codesign.limits import PulseLevel, Setting, dark_rate, pulse_levels, saturation_electrons, thermal_resistance
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


@dataclass(frozen=True, slots=True, kw_only=True)
class Shot:
    """One of several exposures of a frame: its length, and the current of each LED (absent = off)."""

    exposure_us: float
    drive_ma: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Design:
    """What a user sets: parts, lens, exposure and the current of each LED channel (absent = off).

    ``emitters`` holds how many emitters each LED channel has where the problem leaves that free (absent = all the
    channel can have). ``where`` names the file it comes from in messages.

    Several channels read together are joined by ``+``; several ``shots`` have their own exposures and currents, and
    ``exposure_us`` is then their sum. ``weights`` combine the readings (channels by name, shots as "shot 1" ..);
    absent = the best ones.
    """

    camera: str
    channel: str
    gain_db: float
    filter: str
    f_number: float
    exposure_us: float
    drive_ma: Mapping[str, float] = field(default_factory=dict)
    emitters: Mapping[str, int] = field(default_factory=dict)
    shots: tuple[Shot, ...] = ()
    weights: Mapping[str, float] = field(default_factory=dict)
    where: str = field(default="recipe", repr=False, compare=False)


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
class PairContrast:
    """One target against one background: difference of mean electrons, and CNR (without sign)."""

    target: str
    background: str
    signal_e: float
    cnr: float


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Performance(Displayed):
    """What a recipe achieves.

    ``pairs`` lists every target and background; ``cnr``, ``signal_e`` and ``noise`` are those of the worst pair, the
    noise as variance at (target, background) by term. [e⁻²] ``sign`` is the one all pairs must share: a pair that
    shows the opposite sign cannot be told by the same threshold, and the CNR is then 0.

    Where several readings are combined, ``weights`` (length 1) say how; signal and noise are those of the weighted sum.
    """

    design: Design
    signal_e: float
    cnr: float
    sign: str
    error_rate: float
    surfaces: tuple[SurfaceReading, ...]
    noise: Mapping[str, tuple[float, float]]
    pairs: tuple[PairContrast, ...]
    limits: tuple[LimitUse, ...]
    leds: tuple[LedState, ...]
    duty: float
    weights: Mapping[str, float] = field(default_factory=dict)

    @property
    def feasible(self) -> bool:
        """Whether all limits hold."""
        return all(limit.met for limit in self.limits)

    def junctions(self, problem: Problem, assumed: Array) -> Array:
        """Junction temperatures by channel, (L,): those reached where lit, those assumed where off. [deg C]"""
        reached = {state.id: state.junction_c for state in self.leds}
        return np.array([reached.get(c.id, t) for c, t in zip(problem.channels, assumed, strict=True)])

    @property
    def violated(self) -> tuple[LimitUse, ...]:
        """Limits that do not hold."""
        return tuple(limit for limit in self.limits if not limit.met)


def junctions_at(problem: Problem, design: Design, assumed: Array) -> Array:
    """Junction temperatures a recipe leads to by channel, (L,): those reached where lit, else those assumed. [deg C]"""
    found, duty = np.array(assumed, dtype=float), problem.duty(design.exposure_us * 1e-6)
    for led, drive_ma in design.drive_ma.items():
        if drive_ma > 0:
            found[problem.channel_index[led]] = _state_of(problem, led, drive_ma, duty).junction_c
    return found


def setting_of(problem: Problem, design: Design) -> Setting:
    """Look up the parts of a design. Raises ProblemError naming what is unknown."""
    camera = candidate(problem, design, "camera")
    for channel in design.channel.split(JOINT):
        if channel not in camera.channel_names:
            raise ProblemError(
                f"{design.where}: channel is {channel!r}, camera {camera.id!r} has none of that name; "
                f"{nearest(channel, camera.channel_names)}"
            )
    exposure = design.exposure_us * 1e-6
    return Setting(
        camera=camera,
        channel=design.channel,
        gain=_gain(camera, design),
        f_number=design.f_number,
        level=level_at(problem, exposure),
    )


def _gain(camera: Camera, design: Design) -> GainSetting:
    for gain in camera.gain_settings():
        if abs(gain.gain_db - design.gain_db) < 1e-9:
            return gain
    offered = ", ".join(f"{gain.gain_db:g}" for gain in camera.gain_settings())
    raise ProblemError(
        f"{design.where}: gain_db is {design.gain_db:g}, must be one of {offered} that camera {camera.id!r} offers"
    )


def level_at(problem: Problem, exposure_s: float) -> PulseLevel:
    """Return the pulse rating that holds at an exposure."""
    levels = pulse_levels(problem)
    return next((level for level in levels if exposure_s <= level.longest_s * (1 + 1e-9)), levels[-1])


@lru_cache(maxsize=1024)
def _state_of(problem: Problem, led: str, drive_ma: float, duty: float) -> LedState:
    """`led_state` by id, kept: recipes that are compared differ in one LED or two."""
    return led_state(problem, problem.channel(led), drive_ma, duty)


def led_state(problem: Problem, channel: LedChannel, drive_ma: float, duty: float) -> LedState:
    """Power and junction temperature of one emitter: the temperature at which heat and flux agree, in closed form."""
    led = channel.led
    current, flux, power = led.operating_points()
    amps = drive_ma * 1e-3
    electrical = float(np.interp(amps, current, power))
    reference = led.flux_w() * float(np.interp(amps, current, flux))
    junction, factor = balance(problem, channel, duty, electrical, reference)
    return LedState(
        id=led.id,
        drive_ma=drive_ma,
        electrical_w=electrical,
        optical_w=reference * factor,
        junction_c=junction,
        emitters=channel.emitters,
    )


def balance(
    problem: Problem, channel: LedChannel, duty: float, electrical_w: float, reference_w: float
) -> tuple[float, float]:
    """Temperature at which heat and flux agree, and the flux there relative to the reference. [deg C], [1]

    Where each kelvin takes more flux than heat leaves, there is no stable balance with light: all power is heat.
    """
    led, air = channel.led, problem.spec.temperature.air_c
    resistance = thermal_resistance(problem, channel) * duty
    coefficient, reference_c = led.flux_temperature_coefficient_per_k, led.reference_junction_c
    # T = air + R (P - F (1 + c (T - T_ref))) solved for T; flux never below 0.
    stiffness = 1 + resistance * reference_w * coefficient
    if stiffness > 0:
        junction = (air + resistance * (electrical_w - reference_w * (1 - coefficient * reference_c))) / stiffness
        factor = float(flux_at_temperature(junction, coefficient, reference_c))
        if factor > 0:
            return float(junction), factor
    return air + resistance * electrical_w, 0.0


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
    if design.shots or JOINT in design.channel:
        from codesign.design_combined import evaluate_combined

        return evaluate_combined(problem, design, junction_c=junction_c)
    check_values(problem, design)
    setting = setting_of(problem, design)
    t = design.exposure_us * 1e-6
    duty = problem.duty(t)
    states = tuple(_state_of(problem, led, ma, duty) for led, ma in design.drive_ma.items() if ma > 0)
    states = tuple(replace(state, emitters=design.emitters.get(state.id, state.emitters)) for state in states)
    if junction_c is not None:
        states = tuple(replace(state, junction_c=junction_c[state.id]) for state in states)
    light = electrons(problem, setting, design, states, t)
    noise = _noise_by_surface(problem, setting, light)
    pairs = tuple(_contrast(problem, light, noise, i, j) for i, j in problem.pairs)
    direction, worst, cnr = _worst(pairs)
    target, background = problem.pairs[worst]
    readings = tuple(reading(problem, setting, i, light.electrons[i]) for i in range(len(problem.surfaces)))
    return Performance(
        design=design,
        signal_e=pairs[worst].signal_e,
        cnr=cnr,
        sign="brighter" if direction > 0 else "darker",
        error_rate=float(error_rate(cnr)),
        surfaces=readings,
        noise={name: (values[target], values[background]) for name, values in noise.items()},
        pairs=pairs,
        limits=(
            *limit_uses(problem, setting, design.f_number, t, states, readings),
            *build_uses(problem, design),
        ),
        leds=states,
        duty=duty,
    )


def _noise_by_surface(problem: Problem, setting: Setting, light: Light) -> dict[str, list[float]]:
    """Variance of each term at each target and background, in the order of the surfaces. [e⁻²]"""
    sensor, averaging = Sensor.of(setting.camera, setting.gain), problem.spec.averaging
    count = len(problem.targets) + len(problem.backgrounds)
    return {
        term.name: [float(term.variance(sensor, light.electrons[i], light.clutter[i], averaging)) for i in range(count)]
        for term in NOISE_TERMS
    }


def _contrast(problem: Problem, light: Light, noise: Mapping[str, list[float]], i: int, j: int) -> PairContrast:
    difference = float(light.electrons[i].sum() - light.electrons[j].sum())
    variance = sum(values[i] + values[j] for values in noise.values()) / 2
    return PairContrast(
        target=problem.surfaces[i].id,
        background=problem.surfaces[j].id,
        signal_e=difference,
        cnr=abs(difference) / np.sqrt(variance) if variance > 0 else 0.0,
    )


def _worst(pairs: tuple[PairContrast, ...]) -> tuple[int, int, float]:
    """Best common sign, the worst pair under it and its CNR (0 where that pair shows the other sign)."""
    signed = np.array([pair.cnr if pair.signal_e > 0 else -pair.cnr for pair in pairs])
    direction = 1 if signed.min() >= -signed.max() else -1
    worst = int(np.argmin(direction * signed))
    return direction, worst, max(float(direction * signed[worst]), 0.0) + 0.0  # no minus before a zero


@dataclass(frozen=True, slots=True)
class Light:
    """Electrons (S, 3) by origin, and clutter amplitudes of each surface. [e⁻]"""

    electrons: Array
    clutter: tuple[Array, ...]


def led_irradiance(problem: Problem, state: LedState) -> Array:
    """Spectral irradiance at the object by one lit LED channel, at its drive and junction. (n,) [W m⁻² nm⁻¹]"""
    return _irradiance_of(problem, state.id, state.drive_ma, state.emitters, state.junction_c)


@lru_cache(maxsize=256)
def _irradiance_of(problem: Problem, led: str, drive_ma: float, emitters: int, junction_c: float) -> Array:
    """The same by id, kept: recipes that are compared differ in one LED or two."""
    channel = problem.channel(led)
    current, flux, _ = channel.led.operating_points()
    share = float(np.interp(drive_ma * 1e-3, current, flux))
    found = channel_irradiance(problem, channel, junction_c) * (share * emitters / channel.emitters)
    found.setflags(write=False)
    return found


@lru_cache(maxsize=64)
def sensitivity(problem: Problem, camera: str, channel: str, filter_id: str, f_number: float) -> Array:
    """Electron rate per unit of light leaving the object, filter included; the same for all drives of a recipe."""
    weight = electrons_per_irradiance(problem, problem.camera(camera), channel, f_number)
    return weight * filter_transmittance(problem, problem.filter(filter_id), f_number)


def electrons(problem: Problem, setting: Setting, design: Design, states: tuple[LedState, ...], t: float) -> Light:
    """Integrate the light of the recipe over wavelength for each surface."""
    scene = reflectances(problem)
    weight = sensitivity(problem, design.camera, design.channel, design.filter, design.f_number)
    diffuse, gloss = np.zeros(problem.grid.size), np.zeros(problem.grid.size)
    for state in states:
        light = led_irradiance(problem, state)
        diffuse += light
        gloss += light * problem.channel(state.id).specular_weight
    led = (scene.mean @ (weight * diffuse) + scene.specular * float(weight @ gloss)) * t
    ambient = scene.mean @ (weight * problem.ambient) * t
    dark = np.full(len(led), dark_rate(problem, setting) * t)
    clutter = scene.clutter @ (weight * (diffuse + problem.ambient)) * t
    return Light(np.stack([led, ambient, dark], axis=1), tuple(clutter[rows] for rows in scene.rows_of))


def reading(problem: Problem, setting: Setting, index: int, electrons: Array) -> SurfaceReading:
    surface = problem.surfaces[index]
    total = float(electrons.sum())
    level = setting.camera.black_level_dn + setting.gain.conversion_gain_dn_per_e * total
    return SurfaceReading(
        id=surface.id,
        role=problem.role(index),
        led_e=float(electrons[0]),
        ambient_e=float(electrons[1]),
        dark_e=float(electrons[2]),
        grey_dn=min(level, 2**setting.camera.bits - 1.0),
        saturation_share=total / saturation_electrons(setting.camera, setting.gain),
    )
