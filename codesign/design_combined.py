"""The forward model of several readings combined by linear weights: channels of one exposure, or shots of one frame.

Readings have noise of their own, and noise in common, which adds up with the weights before it is squared: the sample
of the surface and, between shots, the fixed pattern. The spatial nonuniformity of EMVA Standard 1288 is what stays when
temporal noise is averaged out, so a pixel has the same response and dark offset in every shot; weights of opposite sign
take it out. Channels of a colour camera have pixels of their own. Two things are assumed: a spot falls on the same
pixels in all shots, and a pixel's response strays by the same share at all wavelengths.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from codesign.design import (
    JOINT,
    Array,
    Design,
    Light,
    PairContrast,
    Performance,
    Shot,
    SurfaceReading,
    balance,
    electrons,
    led_state,
    reading,
    setting_of,
)
from codesign.design_checks import check_values
from codesign.errors import ProblemError, nearest
from codesign.limit_use import LedState, LimitUse, build_uses, limit_uses
from codesign.limits import Setting, sum_limits, time_limits
from codesign.noise import NOISE_TERMS, NoiseTerm, Sensor
from codesign.physics.detection import error_rate, hotelling
from codesign.problem import LedChannel, Problem

#: Limits on exposures that hold for all shots of a frame together.
TOGETHER = ("frame period", "pulse width", "pulse duty")


@dataclass(frozen=True, slots=True)
class _Reading:
    """One reading: its name and the light it collects of every surface."""

    name: str
    light: Light


def evaluate_combined(
    problem: Problem, design: Design, *, junction_c: Mapping[str, float] | None = None
) -> Performance:
    """As `codesign.design.evaluate`, for designs whose channels or shots are combined.

    Every reading must stay within the wells; heat and mean power add over the shots of a frame. Each LED has one
    junction temperature, that of its mean heat.
    """
    if design.shots and JOINT in design.channel:
        raise ProblemError(f"{design.where}: channel {design.channel!r} and several shots do not go together")
    shots = design.shots or (Shot(exposure_us=design.exposure_us, drive_ma=design.drive_ma),)
    for shot in shots:
        check_values(problem, replace(design, exposure_us=shot.exposure_us, drive_ma=shot.drive_ma))
    total = replace(design, exposure_us=sum(shot.exposure_us for shot in shots))
    setting = setting_of(problem, total)
    junctions = _junctions(problem, design, shots) if junction_c is None else junction_c
    lit = [_states(problem, design, shot, junctions) for shot in shots]
    readings = _readings(problem, setting, design, shots, lit)
    weights = _weights(problem, setting, design, readings)
    surfaces = tuple(
        replace(found, id=f"{found.id}, {item.name}")
        for item in readings
        for found in (reading(problem, setting, i, item.light.electrons[i]) for i in range(len(problem.surfaces)))
    )
    w = np.array(list(weights.values()))
    noise = {
        term.name: _combined_noise(problem, setting, term, readings, w, bool(design.shots)) for term in NOISE_TERMS
    }
    difference = float(w @ _differences(readings))
    variance = sum(sum(values) for values in noise.values()) / 2
    cnr = abs(difference) / np.sqrt(variance) if variance > 0 else 0.0
    return Performance(
        design=design,
        signal_e=difference,
        cnr=float(cnr),
        sign="brighter" if difference > 0 else "darker",
        error_rate=float(error_rate(cnr)),
        surfaces=surfaces,
        noise=noise,
        pairs=(PairContrast(target=problem.target.id, background=problem.background.id, signal_e=difference, cnr=cnr),),
        limits=(*_limits(problem, setting, design, shots, lit, surfaces), *build_uses(problem, design)),
        leds=_mean_states(shots, lit),
        duty=problem.duty(total.exposure_us * 1e-6),
        weights=weights,
    )


def _junctions(problem: Problem, design: Design, shots: Sequence[Shot]) -> dict[str, float]:
    """Junction temperature of each LED lit in any shot, from its heat averaged over the shots. [deg C]"""
    found = {}
    for led in dict.fromkeys(led for shot in shots for led, ma in shot.drive_ma.items() if ma > 0):
        channel = problem.channel(led)
        power = flux = 0.0
        for shot in shots:
            amps, duty = shot.drive_ma.get(led, 0.0) * 1e-3, problem.duty(shot.exposure_us * 1e-6)
            current, relative, watts = channel.led.operating_points()
            power += duty * float(np.interp(amps, current, watts))
            flux += duty * channel.led.flux_w() * float(np.interp(amps, current, relative))
        found[led] = balance(problem, channel, 1.0, power, flux)[0]
    return found


def _states(problem: Problem, design: Design, shot: Shot, junctions: Mapping[str, float]) -> tuple[LedState, ...]:
    """LEDs lit in one shot, at the junction temperatures given."""
    states = []
    for led, ma in shot.drive_ma.items():
        if ma > 0:
            channel = problem.channel(led)
            state = led_state(problem, channel, ma, problem.duty(shot.exposure_us * 1e-6))
            flux = optical_power(channel, ma, junctions[led])
            emitters = design.emitters.get(led, state.emitters)
            states.append(replace(state, junction_c=junctions[led], optical_w=flux, emitters=emitters))
    return tuple(states)


def optical_power(channel: LedChannel, drive_ma: float, junction_c: float) -> float:
    """Light of one emitter at a current and junction temperature. [W]"""
    led = channel.led
    current, flux, _ = led.operating_points()
    factor = 1 + led.flux_temperature_coefficient_per_k * (junction_c - led.reference_junction_c)
    return led.flux_w() * float(np.interp(drive_ma * 1e-3, current, flux)) * max(factor, 0.0)


def _readings(
    problem: Problem, setting: Setting, design: Design, shots: Sequence[Shot], lit: list[tuple[LedState, ...]]
) -> list[_Reading]:
    found = []
    for number, (shot, states) in enumerate(zip(shots, lit, strict=True), start=1):
        for channel in design.channel.split(JOINT):
            one = replace(design, channel=channel)
            light = electrons(problem, replace(setting, channel=channel), one, states, shot.exposure_us * 1e-6)
            found.append(_Reading(f"shot {number}" if design.shots else channel, light))
    return found


def _differences(readings: Sequence[_Reading]) -> Array:
    """Mean electrons of the target minus those of the background, by reading. (M,) [e⁻]"""
    return np.array([item.light.electrons[0].sum() - item.light.electrons[1].sum() for item in readings])


def _weights(problem: Problem, setting: Setting, design: Design, readings: Sequence[_Reading]) -> dict[str, float]:
    """The weights the design states, else the best; length 1, the largest positive."""
    names = [item.name for item in readings]
    if design.weights:
        unknown = [name for name in design.weights if name not in names]
        if unknown:
            raise ProblemError(f"{design.where}: weights.{unknown[0]}: no such reading; {nearest(unknown[0], names)}")
        found = np.array([float(design.weights.get(name, 0.0)) for name in names])
        if not np.isfinite(found).all() or not found.any():
            raise ProblemError(f"{design.where}: weights must be finite numbers and not all zero")
        found = found / np.linalg.norm(found)
    else:
        found = hotelling(_differences(readings), _covariance(problem, setting, readings, bool(design.shots)))[1]
    largest = found[np.argmax(np.abs(found))] if found.any() else 1.0
    return dict(zip(names, (found * np.sign(largest)).tolist(), strict=True))


def _covariance(problem: Problem, setting: Setting, readings: Sequence[_Reading], same_pixels: bool) -> Array:
    """Mean of the covariances of target and background over the readings. (M, M) [e⁻²]"""
    total = np.zeros((len(readings), len(readings)))
    for term in NOISE_TERMS:
        for surface in (0, 1):
            root = _root(problem, setting, term, readings, surface, same_pixels)
            total += root @ root.T
    return total / 2


def _combined_noise(
    problem: Problem, setting: Setting, term: NoiseTerm, readings: Sequence[_Reading], w: Array, same_pixels: bool
) -> tuple[float, float]:
    """Variance of the weighted sum by one term, at target and background. [e⁻²]"""
    target, background = (w @ _root(problem, setting, term, readings, surface, same_pixels) for surface in (0, 1))
    return float(target @ target), float(background @ background)


def _root(
    problem: Problem,
    setting: Setting,
    term: NoiseTerm,
    readings: Sequence[_Reading],
    surface: int,
    same_pixels: bool,
) -> Array:
    """Readings by independent causes of one term, standard deviations: times its transpose it is the covariance. [e⁻]

    Shape (M, causes); each reading has a cause of its own where the term does not last.
    """
    sensor, averaging = Sensor.of(setting.camera, setting.gain), problem.spec.averaging
    seen = [(item.light.electrons[surface], item.light.clutter[surface]) for item in readings]
    if term.lasting(same_pixels):
        return np.stack([term.amplitudes(sensor, *light, averaging) for light in seen])
    return np.diag(np.sqrt([term.variance(sensor, *light, averaging) for light in seen]))


def _limits(
    problem: Problem,
    setting: Setting,
    design: Design,
    shots: Sequence[Shot],
    lit: list[tuple[LedState, ...]],
    surfaces: tuple[SurfaceReading, ...],
) -> list[LimitUse]:
    """Use of every limit; with shots those on single exposures by shot, sums over the frame once."""
    if not design.shots:
        t = design.exposure_us * 1e-6
        return limit_uses(problem, setting, design.f_number, t, lit[0], surfaces)
    mean = {limit.name: limit for limit in sum_limits(problem) if limit.mean}
    apart, sums = [], {}
    size = len(problem.surfaces)
    for number, (shot, states) in enumerate(zip(shots, lit, strict=True)):
        own = surfaces[number * size : (number + 1) * size]
        for use in limit_uses(problem, setting, design.f_number, shot.exposure_us * 1e-6, states, own):
            if use.name in mean:
                value = use.value + (sums[use.name].value if use.name in sums else 0.0)
                sums[use.name] = replace(use, value=value, share=value / use.bound)
            elif use.name.startswith("junction") or use.name == "depth of field":
                sums[use.name] = use
            elif use.name.startswith("well"):
                apart.append(use)
            elif use.name not in TOGETHER:
                apart.append(replace(use, name=f"{use.name}, shot {number + 1}"))
    return [*apart, *_together(problem, setting, shots), *sums.values()]


def _together(problem: Problem, setting: Setting, shots: Sequence[Shot]) -> list[LimitUse]:
    """Frame period (a readout after each shot) and pulse rating (all shots as one pulse, the cautious reading)."""
    found, seconds = [], sum(shot.exposure_us for shot in shots) * 1e-6
    for limit in time_limits(problem, setting):
        if limit.name in TOGETHER:
            value = limit.rate * seconds + limit.offset * len(shots)
            found.append(
                LimitUse(name=limit.name, unit=limit.unit, value=value, bound=limit.bound, share=value / limit.bound)
            )
    return found


def _mean_states(shots: Sequence[Shot], lit: list[tuple[LedState, ...]]) -> tuple[LedState, ...]:
    """Each LED once: its largest current, and power averaged over all exposures."""
    if len(lit) == 1:
        return lit[0]
    seconds = np.array([shot.exposure_us for shot in shots])
    by_led: dict[str, list[tuple[float, LedState]]] = {}
    for share, states in zip(seconds / seconds.sum(), lit, strict=True):
        for state in states:
            by_led.setdefault(state.id, []).append((float(share), state))
    return tuple(
        replace(
            max((state for _, state in parts), key=lambda state: state.drive_ma),
            electrical_w=sum(share * state.electrical_w for share, state in parts),
            optical_w=sum(share * state.optical_w for share, state in parts),
        )
        for parts in by_led.values()
    )
