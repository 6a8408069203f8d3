"""Drive segments: the droop curve of each LED in straight pieces, which are the columns of the programs."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from codesign.limits import Setting, junction_limit, thermal_resistance
from codesign.physics.light import flux_at_temperature
from codesign.problem import Problem
from codesign.program import Array


@dataclass(frozen=True, slots=True)
class Segments:
    """Drive segments of all LEDs at one pulse level (n = segments of all LEDs).

    ``width`` (n,) [A]; ``led`` (n,) index; ``flux`` (n,) flux per ampere relative to rated [1/A]; ``power`` and
    ``heat`` (n,) of one emitter [W/A]; ``heat_cap`` (L,) heat of one emitter per exposure [J].
    """

    width: Array
    led: np.ndarray
    flux: Array
    power: Array
    heat: Array
    heat_cap: Array


def light_segments(problem: Problem, setting: Setting, junction_c: Array) -> Segments:
    """Cut each LED's droop curve at the level's current and, under steady light, at its junction limit."""
    width, led, flux, power = _droop(problem, setting.level.current_ma)
    rated, coefficient, reference, cap = _lamps(problem)
    emitted = rated * flux_at_temperature(junction_c, coefficient, reference)
    heat = power - emitted[led] * flux
    if not problem.strobe:
        width, cap = _cut(width, led, heat, cap[led]), np.full(cap.size, np.inf)
    keep = width > 0
    return Segments(width[keep], led[keep], flux[keep], power[keep], heat[keep], cap)


@lru_cache(maxsize=32)
def _droop(problem: Problem, current_ma: tuple[float, ...]) -> tuple[Array, np.ndarray, Array, Array]:
    """Width, LED, flux and power per ampere of all segments up to a current each: the same at all temperatures."""
    parts = []
    for index, (channel, top) in enumerate(zip(problem.channels, current_ma, strict=True)):
        width, flux, power = channel.led.segments(top)
        parts.append((width, np.full(width.size, index), flux, power))
    return _kept(np.concatenate(column) for column in zip(*parts, strict=True))


@lru_cache(maxsize=32)
def _lamps(problem: Problem) -> tuple[Array, Array, Array, Array]:
    """Rated flux [W], its temperature coefficient [1/K] and reference [deg C], and heat cap of each LED. (L,) each"""
    leds = [channel.led for channel in problem.channels]
    return _kept(
        np.array(values, dtype=float)
        for values in (
            [led.flux_w() for led in leds],
            [led.flux_temperature_coefficient_per_k for led in leds],
            [led.reference_junction_c for led in leds],
            [_heat_cap(problem, channel) for channel in problem.channels],
        )
    )


def _kept(arrays: Iterable[np.ndarray]) -> tuple[np.ndarray, ...]:
    found = tuple(arrays)
    for each in found:
        each.setflags(write=False)
    return found


def optimistic(segments: Segments) -> Segments:
    """One segment per LED that is never worse: all light at the efficiency of the first segment.

    Flux per ampere falls and heat and power per flux rise along a droop curve, so this relaxes every limit: bounds
    proven with it hold for the LED itself, at a fraction of the columns.
    """
    first = np.flatnonzero(np.diff(segments.led, prepend=-1))
    flux = np.add.reduceat(segments.width * segments.flux, first)
    return Segments(
        flux / segments.flux[first],
        segments.led[first],
        segments.flux[first],
        segments.power[first],
        segments.heat[first],
        segments.heat_cap,
    )


def _heat_cap(problem: Problem, channel) -> float:
    """Mean heat at which the junction limit is reached, per exposure when strobed. [W] or [J]"""
    resistance = thermal_resistance(problem, channel)
    if resistance == 0:
        return np.inf
    watts = max(junction_limit(problem, channel) - problem.spec.temperature.air_c, 0.0) / resistance
    return watts / problem.spec.timing.frame_rate_hz if problem.strobe else watts


def _cut(width: Array, led: np.ndarray, heat: Array, cap: Array) -> Array:
    """Shorten the segments of each LED, last first, until their heat stays below its cap. (n,)"""
    load = width * heat
    before = np.cumsum(load) - load
    before = before - before[np.searchsorted(led, led, side="left")]
    return np.clip((cap - before) / heat, 0.0, width)
