"""Measured grey values beside what the chain predicts for each LED alone: the arrays a calibration is fitted to.

A mean grey value is linear in the deliveries: ``grey = black + K (Σ_j f_j e_j + ambient + dark)`` with the electrons
``e_j`` that LED ``j`` would bring at the delivery stated. Each LED warms by its own current only, so they add up. The
piece measured is one of those the samples of its surface stand for: its departure from their mean is the same in every
reading, and enters as a covariance between them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from codesign.design import led_state, setting_of
from codesign.limits import dark_rate, saturation_electrons
from codesign.noise import Sensor, noise_model
from codesign.problem import Problem
from codesign.problem.schema import Averaging
from codesign.program import Array
from codesign.radiometry import channel_irradiance, electrons_per_irradiance, filter_transmittance, reflectances
from codesign.study.readings import Reading

#: Grey values this close to the top are taken as clipped. [1]
CLIPPED = 0.995


@dataclass(frozen=True, slots=True, kw_only=True)
class Observations:
    """M grey values and the model of them, for L lit LEDs.

    Attributes
    ----------
    where, surface, camera : tuple of str
        File and line, surface, and camera with gain of each value.
    grey, known_error : (M,) arrays
        Measured mean and its standard error (NaN: from the noise model). [DN]
    noise : (M,) array
        Measured standard deviation of a pixel over time, NaN where none. [DN]
    black, gain : (M,) arrays
        Stated black level [DN] and conversion gain [DN/e⁻].
    pixels, exposure_s, speed : (M,) arrays
        Samples averaged, exposure [s], 1/f-number².
    leds : tuple of str
        The L LEDs lit in any reading.
    electrons : (M, L) array
        Of each LED at its stated delivery. [e⁻]
    ambient, dark : (M,) arrays
        [e⁻]
    spread : (M, L + 1, r) array
        Clutter amplitudes of each LED, then of ambient light, by the directions of all surfaces. [e⁻]
    sensors : tuple of Sensor
    dropped : tuple of str
        Values that were clipped.
    """

    where: tuple[str, ...]
    surface: tuple[str, ...]
    camera: tuple[str, ...]
    grey: Array
    known_error: Array
    noise: Array
    black: Array
    gain: Array
    pixels: Array
    exposure_s: Array
    speed: Array
    leds: tuple[str, ...]
    electrons: Array
    ambient: Array
    dark: Array
    spread: Array
    sensors: tuple[Sensor, ...]
    dropped: tuple[str, ...]

    def variance(self, led_e: Array, gain: Array) -> Array:
        """Variance of each mean grey value about that of its piece: known, or by the noise model. (M,) [DN²]"""
        photo = np.maximum(led_e + self.ambient, 0.0)
        terms = np.array([_noise(*pair) for pair in zip(self.sensors, self.pixels, strict=True)])
        constant, shot, dark, relative = terms.T
        found = constant + shot * photo + dark * self.dark + (relative * photo) ** 2
        return np.where(np.isnan(self.known_error), gain**2 * found, self.known_error**2)


@lru_cache(maxsize=256)
def _noise(sensor: Sensor, pixels: float) -> tuple[float, float, float, float]:
    """Variance without light [e⁻²], per electron of light and of dark current, and relative deviation."""
    model = noise_model(sensor, Averaging(pixels=int(pixels)))
    return model.constant, model.linear[0], model.linear[2], model.relative


def observe(problem: Problem, readings: tuple[Reading, ...], wiring: Mapping[str, str] | None = None) -> Observations:
    """Predict every reading LED by LED.

    Parameters
    ----------
    problem : Problem
        With all measured surfaces, see `codesign.study.readings.with_surfaces`.
    readings : tuple of Reading
    wiring : mapping, optional
        Which LED really sits in the channel of another, by id; each in its own by default.
    """
    leds = tuple(c.id for c in problem.channels if any(c.id in r.design.drive_ma for r in readings))
    index = {surface.id: i for i, surface in enumerate(problem.surfaces)}
    rows, dropped = [], []
    for reading in readings:
        setting = setting_of(problem, reading.design)
        top = 2**setting.camera.bits - 1
        limit = min(top, setting.camera.black_level_dn + _well_dn(setting)) * CLIPPED
        light = [_led_light(problem, reading, led, (wiring or {}).get(led, led)) for led in leds]
        around = _ambient_light(problem, reading)
        for name, grey in reading.grey_dn.items():
            if grey >= limit:
                dropped.append(f"{reading.design.where}: {name} at {grey:g} DN is clipped or nearly so")
                continue
            rows.append(_row(problem, reading, setting, name, index[name], light, around))
    columns = {name: [row[name] for row in rows] for name in (rows[0] if rows else {})}
    words = ("where", "surface", "camera", "sensors")
    arrays = {name: tuple(v) if name in words else np.array(v) for name, v in columns.items()}
    return Observations(leds=leds, dropped=tuple(dropped), **arrays) if rows else _nothing(leds, dropped)


def _nothing(leds: tuple[str, ...], dropped: list[str]) -> Observations:
    flat, words = np.zeros(0), ("where", "surface", "camera", "sensors")
    names = set(Observations.__slots__) - {"leds", "dropped", "electrons", "spread"}
    empty = {name: () if name in words else flat for name in names}
    shapes = {"electrons": np.zeros((0, len(leds))), "spread": np.zeros((0, len(leds) + 1, 0))}
    return Observations(leds=leds, dropped=tuple(dropped), **empty, **shapes)


def _well_dn(setting) -> float:
    return saturation_electrons(setting.camera, setting.gain) * setting.gain.conversion_gain_dn_per_e


def _row(problem: Problem, reading: Reading, setting, name: str, surface: int, light: list, around) -> dict:
    """One value measured, and its prediction."""
    t, rows = reading.design.exposure_us * 1e-6, reflectances(problem).rows_of[surface]
    spread = np.zeros((len(light) + 1, len(reflectances(problem).clutter)))
    for j, (_, clutter) in enumerate([*light, around]):
        spread[j, rows] = clutter[rows] * t
    return {
        "where": reading.design.where,
        "surface": name,
        "camera": f"{setting.camera.id} at {setting.gain.gain_db:g} dB",
        "grey": reading.grey_dn[name],
        "known_error": reading.error_dn.get(name, np.nan),
        "noise": reading.noise_dn.get(name, np.nan),
        "black": setting.camera.black_level_dn,
        "gain": setting.gain.conversion_gain_dn_per_e,
        "pixels": float(reading.pixels),
        "exposure_s": t,
        "speed": reading.design.f_number**-2,
        "electrons": np.array([mean[surface] * t for mean, _ in light]),
        "ambient": around[0][surface] * t,
        "dark": dark_rate(problem, setting) * t,
        "spread": spread,
        "sensors": Sensor.of(setting.camera, setting.gain),
    }


def _led_light(problem: Problem, reading: Reading, led: str, real: str) -> tuple[Array, Array]:
    """Electron rates of all surfaces and clutter rows under one LED's channel, whichever LED sits in it. [e⁻/s]"""
    design, scene = reading.design, reflectances(problem)
    drive = design.drive_ma.get(led, 0.0)
    if not drive:
        return np.zeros(len(scene.mean)), np.zeros(len(scene.clutter))
    place = (design.camera, design.channel, design.filter, design.f_number)
    mean, clutter = _rates(problem, real, drive, problem.duty(design.exposure_us * 1e-6), *place)
    emitters = design.emitters.get(led, problem.channel(led).emitters) / problem.channel(real).emitters
    return mean * emitters, clutter * emitters


@lru_cache(maxsize=4096)
def _rates(
    problem: Problem, led: str, drive_ma: float, duty: float, camera: str, channel: str, filter_id: str, f_number: float
) -> tuple[Array, Array]:
    """Electron rates under one LED at a current, at most its largest. [e⁻/s]"""
    lamp, scene = problem.channel(led), reflectances(problem)
    state = led_state(problem, lamp, min(drive_ma, lamp.led.largest_current_ma), duty)
    current, flux, _ = lamp.led.operating_points()
    share = float(np.interp(state.drive_ma * 1e-3, current, flux))
    weight = _weight(problem, camera, channel, filter_id, f_number)
    light = channel_irradiance(problem, lamp, state.junction_c) * (share * weight)
    return scene.mean @ light + scene.specular * (lamp.specular_weight * light.sum()), scene.clutter @ light


def _ambient_light(problem: Problem, reading: Reading) -> tuple[Array, Array]:
    design, scene = reading.design, reflectances(problem)
    light = _weight(problem, design.camera, design.channel, design.filter, design.f_number) * problem.ambient
    return scene.mean @ light, scene.clutter @ light


@lru_cache(maxsize=64)
def _weight(problem: Problem, camera: str, channel: str, filter_id: str, f_number: float) -> Array:
    """Electron rate per unit of light leaving the object. (n,)"""
    weight = electrons_per_irradiance(problem, problem.camera(camera), channel, f_number)
    return weight * filter_transmittance(problem, problem.filter(filter_id), f_number)
