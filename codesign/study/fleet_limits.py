"""The limits of `codesign.limits` on many rigs at once, and the exposure each rig would be set to."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from codesign.limit_use import TOLERANCE
from codesign.limits import TimeLimit, junction_limit, pulse_levels, sum_limits, sum_weights, time_limits
from codesign.study.fleet import Block, Light
from codesign.study.rigs import duty, lit_channels

Array = NDArray[np.float64]

#: How the names of limits on light at the eye end.
AT_THE_EYE = " at 200 mm"
#: Rounds towards the longest exposure of a strobed rig, whose LEDs warm with it.
LARGEST_NUMBER_OF_ROUNDS = 8


def limit_shares(block: Block, light: Light) -> Mapping[str, Array]:
    """How much of each limit each rig uses, 1 at the limit; names and order as `codesign.evaluate` has them. (B,)

    Limits that no draw touches (depth of field, what may be built) are those of the nominal rig.
    """
    shares = {limit.name: np.full(block.rigs.size, limit.share) for limit in block.fleet.nominal.limits}
    wells = block.electrons(light) / _well_bound(block)[:, None]
    shares |= {f"well, {s.id}": wells[:, i] for i, s in enumerate(block.problem.surfaces)}
    for limit, rate, bound in _times(block):
        value = rate * light.exposure_s + limit.offset
        shares[limit.name] = bound / value if limit.floor else value / bound
    shares |= _powers(block, light)
    shares |= _leds(block, light)
    return shares


def broken(shares: Mapping[str, Array]) -> Mapping[str, NDArray[np.bool_]]:
    """Which rigs miss which limit, as `LimitUse.met` has it."""
    return {name: ~(share <= 1 + TOLERANCE) for name, share in shares.items()}


def _well_bound(block: Block) -> Array:
    return block.problem.spec.limits.well_headroom * block.rigs.saturation_e


def _times(block: Block) -> list[tuple[TimeLimit, Array | float, Array | float]]:
    """Limits on the exposure alone, with rate and bound of each rig; pulse ratings follow the exposure instead."""
    found, limits, rigs = [], block.problem.spec.limits, block.rigs
    pulse = {level.cause for level in pulse_levels(block.problem)}
    for limit in time_limits(block.problem, block.fleet.setting):
        rate, bound = limit.rate, limit.bound
        if limit.name == "dark signal in the well":
            rate, bound = rigs.dark_rate, limits.dark_well_share * rigs.saturation_e
        elif limit.name == "dark shot noise":
            rate, bound = rigs.dark_rate, limits.dark_noise_share * rigs.read_noise_e**2
        if limit.name not in pulse:
            found.append((limit, rate, bound))
    return found


def _power_of(block: Block, quantity: str, optical_w: Array) -> Array:
    """Heat, electrical power or weighted irradiance at the eye of all LEDs while on. (B,) [W] or [W/m²]"""
    lit = [channel for channel, _ in lit_channels(block.problem, block.fleet.design)]
    emitters = np.array([_emitters(block, channel) for channel in lit], dtype=float)
    electrical, light = sum_weights(block.problem, quantity)
    light = light[[block.problem.channel_index[channel.id] for channel in lit]]
    return electrical * block.rigs.electrical_w @ emitters + optical_w @ (light * emitters)


def _emitters(block: Block, channel) -> int:
    return block.fleet.design.emitters.get(channel.id, channel.emitters)


def _powers(block: Block, light: Light) -> dict[str, Array]:
    share = duty(block.problem, light.exposure_s)
    return {
        limit.name: _power_of(block, limit.quantity, light.optical_w) * (share if limit.mean else 1.0) / limit.bound
        for limit in sum_limits(block.problem)
    }


def _leds(block: Block, light: Light) -> dict[str, Array]:
    """Current and junction of each lit LED."""
    found, air = {}, block.rigs.air_c
    levels = pulse_levels(block.problem)
    ends = np.array([level.longest_s for level in levels]) * (1 + 1e-9)
    level = np.minimum(np.searchsorted(ends, light.exposure_s), len(levels) - 1)
    for k, (channel, drive_ma) in enumerate(lit_channels(block.problem, block.fleet.design)):
        allowed = np.array([each.current_ma[block.problem.channel_index[channel.id]] for each in levels])
        found[f"current, {channel.id}"] = drive_ma / allowed[level]
        room = junction_limit(block.problem, channel) - air
        rise = light.junction_c[:, k] - air
        found[f"junction, {channel.id}"] = np.where(room > 0, rise / np.where(room > 0, room, 1.0), np.inf)
    return found


def longest_exposure(block: Block) -> Light:
    """The light of each rig at the longest exposure, in whole steps, inside all its limits.

    With the drive held the CNR grows with the exposure: signal grows with it, the noise more slowly. A rig for which no
    exposure is allowed stays at the shortest one, and its limits say so.
    """
    step = block.fleet.setting.camera.exposure_step_us * 1e-6
    exposure = np.full(block.rigs.size, block.fleet.design.exposure_us * 1e-6)
    shortest = _shortest(block, step)
    if not block.problem.strobe:  # steady light does not depend on the exposure
        light = block.light(exposure)
        return replace(light, exposure_s=np.maximum(np.floor(_top(block, light) / step + 1e-6) * step, shortest))
    for _ in range(LARGEST_NUMBER_OF_ROUNDS):
        light = block.light(exposure)
        best = np.maximum(np.floor(_top(block, light) / step + 1e-6) * step, shortest)
        done = np.max(np.abs(best - exposure)) < 0.5 * step
        exposure = best
        if done:
            return light
    light = block.light(exposure)
    used = np.max([share for name, share in limit_shares(block, light).items() if _yields(name)], axis=0)
    shorter = np.where(used > 1 + TOLERANCE, np.maximum(exposure - step, shortest), exposure)
    return block.light(shorter) if np.any(shorter < exposure) else light


def _yields(name: str) -> bool:
    """Whether a shorter exposure helps."""
    return name.startswith(("well", "junction", "rig heat", "supply power")) or name.endswith(AT_THE_EYE)


def _shortest(block: Block, step: float) -> Array:
    floors = [bound / rate for limit, rate, bound in _times(block) if limit.floor]
    return np.ceil(np.max(floors, axis=0) / step - 1e-6) * step + np.zeros(block.rigs.size)


def _top(block: Block, light: Light) -> Array:
    """Longest exposure inside all limits, junctions taken as in ``light`` but for their own limits. (B,) [s]"""
    rate = block.electrons(light) / light.exposure_s[:, None]
    tops = [_well_bound(block) / np.max(rate, axis=1)]
    tops += [
        np.where(np.asarray(rate) > 0, (bound - limit.offset) / np.where(np.asarray(rate) > 0, rate, 1.0), np.inf)
        for limit, rate, bound in _times(block)
        if not limit.floor
    ]
    tops.append(_pulse_top(block))
    if block.problem.strobe:
        frames = block.problem.spec.timing.frame_rate_hz
        for limit in sum_limits(block.problem):
            power = _power_of(block, limit.quantity, light.optical_w)
            tops += [limit.bound / np.maximum(power * frames, 1e-300)] if limit.mean else []
        tops.append(_junction_top(block))
    return np.min(np.broadcast_arrays(*tops), axis=0)


def _pulse_top(block: Block) -> float:
    """Longest exposure at which the pulse ratings allow all currents. [s]"""
    index, lit = block.problem.channel_index, lit_channels(block.problem, block.fleet.design)
    ends = [
        level.longest_s
        for level in pulse_levels(block.problem)
        if all(ma <= level.current_ma[index[channel.id]] * (1 + TOLERANCE) for channel, ma in lit)
    ]
    return max(ends, default=np.inf)


def _junction_top(block: Block) -> Array:
    """Longest strobed exposure at which all junctions stay below their limits. (B,) [s]

    At the limit the balance says ``top = air + R D (P − F factor(top))``, which gives the duty D.
    """
    problem, rigs, frames = block.problem, block.rigs, block.problem.spec.timing.frame_rate_hz
    least = np.full(rigs.size, np.inf)
    for k, (channel, _) in enumerate(lit_channels(problem, block.fleet.design)):
        led, top = channel.led, junction_limit(problem, channel)
        coefficient, reference = led.flux_temperature_coefficient_per_k, rigs.reference_w[:, k]
        at_top = np.maximum(0.0, 1 + coefficient * (top - led.reference_junction_c))
        heat = rigs.resistance[:, k] * (rigs.electrical_w[:, k] - reference * at_top)
        longest = np.maximum(top - rigs.air_c, 0.0) / np.maximum(heat * frames, 1e-300)
        least = np.minimum(least, longest)
    return least
