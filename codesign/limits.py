"""Every limit once, each with a name and a unit.

Three kinds, by what they bound: the exposure alone (`time_limits`: ``rate·t ≤ bound``), sums over the LEDs
(`sum_limits`: ``Σ coefficient·charge ≤ bound`` or ``≤ bound·t``, and the wells), and single LEDs (current, junction).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Camera, GainSetting
from codesign.limits_eye import WEIGHTS, eye_weight
from codesign.physics.optics import depth_of_field, motion_blur_pixels
from codesign.problem import LedChannel, Problem

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class PulseLevel:
    """One step of the pulse ratings: exposures up to ``longest_s`` and the current each LED may then carry.

    ``cause`` names the limit that ends the step; ``current_ma`` is (L,).
    """

    name: str
    longest_s: float
    cause: str
    current_ma: tuple[float, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """One discrete choice except the filter."""

    camera: Camera
    channel: str
    gain: GainSetting
    f_number: float
    level: PulseLevel


@dataclass(frozen=True, slots=True, kw_only=True)
class TimeLimit:
    """``rate·t + offset ≤ bound`` (or ``≥`` when ``floor``), value and bound in ``unit``."""

    name: str
    unit: str
    rate: float
    bound: float
    offset: float = 0.0
    floor: bool = False

    @property
    def time(self) -> float:
        """Exposure at which the limit is reached. [s]"""
        if self.rate <= 0:
            return 0.0 if self.floor else np.inf
        return max((self.bound - self.offset) / self.rate, 0.0)

    def value(self, t: float) -> float:
        """What is used of the bound at exposure ``t`` [s]."""
        return self.rate * t + self.offset


def saturation_electrons(camera: Camera, gain: GainSetting) -> float:
    """Electrons at which a pixel clips: the well, or the top grey value. [e⁻]"""
    top = (2**camera.bits - 1 - camera.black_level_dn) / gain.conversion_gain_dn_per_e
    return min(gain.full_well_e, top)


def well_bound(problem: Problem, setting: Setting) -> float:
    """Electrons each guarded surface may reach. [e⁻]"""
    return problem.spec.limits.well_headroom * saturation_electrons(setting.camera, setting.gain)


def dark_rate(problem: Problem, setting: Setting) -> float:
    """Dark current at the sensor's temperature. [e⁻/s]"""
    return setting.camera.dark_current(problem.spec.temperature.sensor_c)


# --- limits on the exposure alone ------------------------------------------------------------------------------


def _camera_range(problem: Problem, setting: Setting) -> list[TimeLimit]:
    camera = setting.camera
    return [
        TimeLimit(name="camera longest exposure", unit="us", rate=1e6, bound=camera.exposure_max_us),
        TimeLimit(name="camera shortest exposure", unit="us", rate=1e6, bound=camera.exposure_min_us, floor=True),
    ]


def _wanted_range(problem: Problem, setting: Setting) -> list[TimeLimit]:
    timing, found = problem.spec.timing, []
    if timing.exposure_max_us is not None:
        found.append(TimeLimit(name="wanted longest exposure", unit="us", rate=1e6, bound=timing.exposure_max_us))
    if timing.exposure_min_us is not None:
        found.append(
            TimeLimit(name="wanted shortest exposure", unit="us", rate=1e6, bound=timing.exposure_min_us, floor=True)
        )
    return found


def _motion_blur(problem: Problem, setting: Setting) -> list[TimeLimit]:
    motion = problem.spec.motion
    if motion is None:
        return []
    speed, pitch = motion.speed_mm_per_s * 1e-3, setting.camera.pixel_pitch_um * 1e-6
    per_second = float(motion_blur_pixels(speed, 1.0, problem.spec.optics.magnification, pitch))
    return [TimeLimit(name="motion blur", unit="pixel", rate=per_second, bound=motion.max_blur_px)]


def _frame_period(problem: Problem, setting: Setting) -> list[TimeLimit]:
    rate = problem.spec.timing.frame_rate_hz
    if rate is None:
        return []
    return [TimeLimit(name="frame period", unit="ms", rate=1e3, bound=1e3 / rate, offset=setting.camera.readout_ms)]


def _pulse(problem: Problem, setting: Setting) -> list[TimeLimit]:
    level = setting.level
    return (
        []
        if np.isinf(level.longest_s)
        else [TimeLimit(name=level.cause, unit="us", rate=1e6, bound=level.longest_s * 1e6)]
    )


def _dark_signal(problem: Problem, setting: Setting) -> list[TimeLimit]:
    limits, dark = problem.spec.limits, dark_rate(problem, setting)
    found = []
    if limits.dark_well_share is not None:
        bound = limits.dark_well_share * saturation_electrons(setting.camera, setting.gain)
        found.append(TimeLimit(name="dark signal in the well", unit="e-", rate=dark, bound=bound))
    if limits.dark_noise_share is not None:
        bound = limits.dark_noise_share * setting.gain.read_noise_e**2
        found.append(TimeLimit(name="dark shot noise", unit="e-^2", rate=dark, bound=bound))
    return found


TIME_LIMITS: tuple[Callable[[Problem, Setting], list[TimeLimit]], ...] = (
    _camera_range,
    _wanted_range,
    _motion_blur,
    _frame_period,
    _pulse,
    _dark_signal,
)


def time_limits(problem: Problem, setting: Setting) -> list[TimeLimit]:
    """All limits on the exposure alone."""
    return [limit for source in TIME_LIMITS for limit in source(problem, setting)]


# --- limits on sums over the LEDs ------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class SumLimit:
    """A bound on a power, or on weighted irradiance at the eye, summed over all LEDs.

    ``quantity`` picks what is summed ("heat", "power" or one of `codesign.limits_eye.WEIGHTS`); ``mean`` whether it is
    averaged over the frame.
    """

    name: str
    unit: str
    quantity: str
    mean: bool
    bound: float


def sum_limits(problem: Problem) -> list[SumLimit]:
    """Limits on heat, supply and light at the eye that the problem states."""
    limits = problem.spec.limits
    stated = (
        ("rig heat", "W", "heat", True, limits.rig_heat_w),
        ("supply power", "W", "power", True, limits.supply_w),
        ("supply peak power", "W", "power", False, limits.supply_peak_w),
        ("actinic ultraviolet at 200 mm", "W/m2", "actinic", True, limits.actinic_w_per_m2),
        ("ultraviolet A at 200 mm", "W/m2", "ultraviolet_a", True, limits.ultraviolet_a_w_per_m2),
        ("blue light at 200 mm", "W/m2", "blue_light", True, limits.blue_light_w_per_m2),
        ("infrared at 200 mm", "W/m2", "infrared", True, limits.infrared_w_per_m2),
    )
    return [
        SumLimit(name=name, unit=unit, quantity=quantity, mean=mean, bound=bound)
        for name, unit, quantity, mean, bound in stated
        if bound is not None
    ]


def eye_limits(problem: Problem) -> list[SumLimit]:
    """Those of `sum_limits` on light at the eye."""
    return [limit for limit in sum_limits(problem) if limit.quantity in WEIGHTS]


@lru_cache(maxsize=64)
def sum_weights(problem: Problem, quantity: str) -> tuple[float, Array]:
    """What a watt of electrical power, and a watt of light of each LED, add to the `SumLimit` of a quantity.

    Per emitter: ``electrical · P_el + light · P_opt``. Returns a number and (L,), [1] or [1/m²] for light at the eye.
    """
    count = len(problem.channels)
    if quantity in WEIGHTS:
        return 0.0, np.array([eye_weight(channel.led, quantity) for channel in problem.channels])
    return 1.0, np.full(count, -1.0 if quantity == "heat" else 0.0)


# --- limits on single LEDs -------------------------------------------------------------------------------------


def junction_limit(problem: Problem, channel: LedChannel) -> float:
    """Highest junction temperature allowed. [deg C]"""
    cap = problem.spec.limits.junction_max_c
    return channel.led.max_junction_c if cap is None else min(cap, channel.led.max_junction_c)


def thermal_resistance(problem: Problem, channel: LedChannel) -> float:
    """Junction to air, per emitter. [K/W]"""
    return channel.led.thermal_resistance_k_per_w + problem.spec.lighting.board_k_per_w


def _step(problem: Problem, channel: LedChannel, width_us: float, duty: float) -> tuple[float, str]:
    """Longest exposure a pulse bracket allows, and whether its width or its duty says so. [s]"""
    by_duty = duty / problem.spec.timing.frame_rate_hz
    return (width_us * 1e-6, "pulse width") if width_us * 1e-6 <= by_duty else (by_duty, "pulse duty")


@lru_cache(maxsize=16)
def pulse_levels(problem: Problem) -> tuple[PulseLevel, ...]:
    """Steps of the exposure at which some LED's current rating changes, shortest first."""
    steady = [min(c.led.continuous_current_ma, c.driver_max_ma) for c in problem.channels]
    last = PulseLevel(name="continuous rating", longest_s=np.inf, cause="", current_ma=tuple(steady))
    if not problem.strobe:
        return (last,)
    options = [
        [(*_step(problem, c, b.max_width_us, b.max_duty), min(b.max_current_ma, c.driver_max_ma)) for b in c.led.pulse]
        for c in problem.channels
    ]
    ends = sorted({(end, cause) for led in options for end, cause, _ in led})
    levels = []
    for end, cause in ends:
        current = tuple(
            max([s, *(ma for last_s, _, ma in led if last_s >= end * (1 - 1e-12))])
            for s, led in zip(steady, options, strict=True)
        )
        levels.append(PulseLevel(name=f"pulses to {end * 1e6:.6g} us", longest_s=end, cause=cause, current_ma=current))
    levels.append(last)
    pairs = zip(levels, [*levels[1:], None], strict=True)
    return tuple(a for a, b in pairs if b is None or a.current_ma != b.current_ma)


def depth_shortfall(problem: Problem, camera: Camera, f_number: float) -> float | None:
    """Depth of field where it falls short of what is required, else None. [mm]"""
    optics = problem.spec.optics
    if optics.required_depth_mm is None:
        return None
    depth = float(depth_of_field(f_number, camera.pixel_pitch_um * 1e-6, optics.magnification)) * 1e3
    return depth if depth < optics.required_depth_mm else None
