"""What may be changed to gain CNR: each lever as a function from a problem and a factor to a new problem.

Factors are 1 or more; 1 changes nothing, more is always the direction that should help, whatever the quantity: an
exposure limit is multiplied, a noise divided. So levers can be compared: their *relative change* is the factor. A
temperature has no natural factor; for the sensor it is that of its dark current, for the air that of the room left up
to the junction limit.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from codesign.catalog import Camera
from codesign.limits import junction_limit
from codesign.problem import LedChannel, Problem
from codesign.problem.nudge import nudged
from codesign.radiometry import reflectances

#: Lenses faster or slower than these are not made for cameras.
FASTEST_F_NUMBER, SLOWEST_F_NUMBER = 0.7, 64.0
#: Coldest sensor and air considered. [deg C]
COLDEST_SENSOR_C, COLDEST_AIR_C = -40.0, -20.0
#: Largest factor for limits and efforts, and for what can be removed (1000 times less is nothing).
MOST, NOTHING_LEFT = 100.0, 1000.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Lever:
    """One thing to change.

    Attributes
    ----------
    name : str
    change : callable
        New problem from (problem, factor).
    values : callable
        What is then set or bought, by name with unit, from (problem, camera id).
    reason : callable
        Why a problem has no such lever; None where it has.
    most : callable
        Largest factor considered.
    monotone : bool
        Whether a larger factor provably never lowers the optimum: it only widens limits or lowers noise.
    whole : callable or None
        Current whole number that the factor multiplies; None for what varies freely.
    """

    name: str
    change: Callable[[Problem, float], Problem]
    values: Callable[[Problem, str], Mapping[str, float]]
    reason: Callable[[Problem], str | None] = lambda problem: None
    most: Callable[[Problem], float] = lambda problem: MOST
    monotone: bool = True
    whole: Callable[[Problem], int] | None = None


def applicable(problem: Problem) -> tuple[tuple[Lever, ...], dict[str, str]]:
    """Levers a problem has, and why it lacks the others."""
    reasons = {lever.name: lever.reason(problem) for lever in LEVERS}
    return (
        tuple(lever for lever in LEVERS if reasons[lever.name] is None),
        {name: reason for name, reason in reasons.items() if reason is not None},
    )


def pulled(problem: Problem, levers: tuple[Lever, ...], factor: float) -> Problem:
    """Change several levers by one factor, each at most as far as it goes."""
    for lever in levers:
        problem = lever.change(problem, min(factor, lever.most(problem)))
    return problem


# --- parts of the problem file ---------------------------------------------------------------------------------


def _with(problem: Problem, section: str, **changes: Any) -> Problem:
    """Values of one section of the problem file changed; they only move away from their checked bounds."""
    record = getattr(problem.spec, section)
    if record is None:
        return problem
    changes = {key: value for key, value in changes.items() if getattr(record, key) is not None}
    spec = problem.spec.model_copy(update={section: record.model_copy(update=changes)})
    return replace(problem, spec=spec)


def _stated(problem: Problem, *keys: str) -> dict[str, float]:
    """Values that a problem file states, by dotted key."""
    found = {}
    for key in keys:
        section, name = key.split(".")
        value = getattr(getattr(problem.spec, section), name, None)
        if value is not None:
            found[key] = value
    return found


def _times(value: float | None, factor: float) -> float | None:
    return None if value is None else value * factor


def _scaled(*keys: str, divide: bool = False) -> Callable[[Problem, float], Problem]:
    """Multiply or divide values of the problem file."""

    def change(problem: Problem, factor: float) -> Problem:
        for key, value in _stated(problem, *keys).items():
            section, name = key.split(".")
            problem = _with(problem, section, **{name: value / factor if divide else value * factor})
        return problem

    return change


def _file_lever(name: str, *keys: str, divide: bool = False) -> Lever:
    """A lever that scales values of the problem file, where they are stated."""
    missing = f"{' and '.join(keys)} not stated"
    return Lever(
        name=name,
        change=_scaled(*keys, divide=divide),
        values=lambda problem, camera: _stated(problem, *keys),
        reason=lambda problem: None if _stated(problem, *keys) else missing,
    )


def _counted(name: str) -> Lever:
    """A lever that averages more of something."""

    def change(problem: Problem, factor: float) -> Problem:
        return _with(problem, "averaging", **{name: int(getattr(problem.spec.averaging, name) * factor + 1e-9)})

    return Lever(
        name=f"{name} averaged",
        change=change,
        values=lambda problem, camera: {f"averaging.{name}": getattr(problem.spec.averaging, name)},
        most=lambda problem: NOTHING_LEFT,
        whole=lambda problem: getattr(problem.spec.averaging, name),
    )


# --- lens, drivers, emitters -----------------------------------------------------------------------------------


def _f_numbers(problem: Problem, factor: float) -> Problem:
    """One faster and one slower stop besides those there are; none for a factor of 1."""
    stated = problem.spec.optics.f_numbers
    new = max(min(stated) / factor, FASTEST_F_NUMBER), min(max(stated) * factor, SLOWEST_F_NUMBER)
    extra = tuple(n for n in new if not min(stated) <= n <= max(stated))
    return _with(problem, "optics", f_numbers=(*stated, *extra))


def _channels(problem: Problem, change: Callable[[LedChannel], LedChannel]) -> Problem:
    return replace(problem, channels=tuple(change(channel) for channel in problem.channels))


def _rating(problem: Problem, channel: LedChannel) -> float:
    return channel.led.largest_current_ma if problem.strobe else channel.led.continuous_current_ma


def _driver_room(problem: Problem) -> float:
    """Largest share by which a driver holds an LED below its own rating, at least 1."""
    return max([1.0, *(_rating(problem, channel) / channel.driver_max_ma for channel in problem.channels)])


def _more_emitters(channel: LedChannel, factor: float) -> LedChannel:
    count = int(channel.emitters * factor + 1e-9)
    return replace(channel, emitters=count, delivery=channel.delivery * count / channel.emitters)


def _emitters(problem: Problem, camera: str) -> dict[str, float]:
    counts = [channel.emitters for channel in problem.channels]
    return {"emitters per channel, fewest": min(counts), "emitters per channel, most": max(counts)}


def _light_path(problem: Problem, camera: str) -> dict[str, float]:
    """Delivery of the strongest channel; the distance follows from its square."""
    return {"largest delivery [1/m2]": max(channel.delivery for channel in problem.channels)}


# --- camera and surfaces ---------------------------------------------------------------------------------------


def _nudge(name: str) -> Callable[[Problem, float], Problem]:
    return lambda problem, factor: nudged(problem, name, 1 / factor - 1)


def _read_noise(problem: Problem, factor: float) -> Problem:
    """Less read noise; a limit on dark shot noise stated as a multiple of it keeps its electrons."""
    share = problem.spec.limits.dark_noise_share
    return _with(nudged(problem, "read noise", 1 / factor - 1), "limits", dark_noise_share=_times(share, factor**2))


def _full_well(problem: Problem, factor: float) -> Problem:
    """A deeper well behind the same converter: fewer grey values per electron, at every gain."""
    share = {"full_well_e": factor, "conversion_gain_dn_per_e": 1 / factor}

    def deeper(camera: Camera) -> Camera:
        gains = [gain.model_dump(exclude_none=True) for gain in camera.gains]
        return camera.replaced(
            **{name: getattr(camera, name) * own for name, own in share.items()},
            gains=[{name: value * share.get(name, 1.0) for name, value in gain.items()} for gain in gains],
        )

    return replace(problem, cameras=tuple(deeper(camera) for camera in problem.cameras))


def _calmer(problem: Problem, factor: float) -> Problem:
    def change(surfaces):
        return tuple(s.replaced(spread_factor=s.spread_factor / factor) for s in surfaces)

    return replace(problem, targets=change(problem.targets), backgrounds=change(problem.backgrounds))


def _camera_value(unit: str, value: Callable[[Any], float]) -> Callable[[Problem, str], dict[str, float]]:
    return lambda problem, camera: {f"{camera} {unit}": value(problem.camera(camera))}


# --- temperatures ----------------------------------------------------------------------------------------------


def _doubling_k(problem: Problem) -> float:
    """Warming that doubles the dark current, of the candidate that needs least. [K]"""
    return min(camera.dark_doubling_k for camera in problem.cameras)


def _cooler_sensor(problem: Problem, factor: float) -> Problem:
    return nudged(problem, "sensor temperature", -_doubling_k(problem) * np.log2(factor))


def _most_sensor(problem: Problem) -> float:
    return float(2 ** ((problem.spec.temperature.sensor_c - COLDEST_SENSOR_C) / _doubling_k(problem)))


def _room_k(problem: Problem) -> float:
    """From the air to the lowest junction limit. [K]"""
    air = problem.spec.temperature.air_c
    return max(min(junction_limit(problem, channel) for channel in problem.channels) - air, 1.0)


def _cooler_air(problem: Problem, factor: float) -> Problem:
    return nudged(problem, "air temperature", -_room_k(problem) * (factor - 1))


def _most_air(problem: Problem) -> float:
    return 1 + (problem.spec.temperature.air_c - COLDEST_AIR_C) / _room_k(problem)


def _when(holds: Callable[[Problem], bool], reason: str) -> Callable[[Problem], str | None]:
    return lambda problem: None if holds(problem) else reason


#: All levers, in the order of the signal chain.
LEVERS = (
    _file_lever("exposure", "motion.max_blur_px", "timing.exposure_max_us"),
    _file_lever("frame rate", "timing.frame_rate_hz", divide=True),
    _file_lever("rig heat", "limits.rig_heat_w"),
    _file_lever("supply", "limits.supply_w", "limits.supply_peak_w"),
    Lever(
        name="driver current",
        change=lambda problem, f: _channels(problem, lambda c: replace(c, driver_max_ma=c.driver_max_ma * f)),
        values=lambda problem, camera: {"largest driver limit [mA]": max(c.driver_max_ma for c in problem.channels)},
        reason=_when(lambda problem: _driver_room(problem) > 1, "no driver holds an LED below its own rating"),
        most=_driver_room,
    ),
    Lever(
        name="delivery",
        change=lambda problem, f: nudged(problem, "delivery", f - 1),
        values=_light_path,
        monotone=False,
    ),
    Lever(
        name="emitters",
        change=lambda problem, f: _channels(problem, lambda c: _more_emitters(c, f)),
        values=_emitters,
        monotone=False,
    ),
    Lever(
        name="air temperature",
        change=_cooler_air,
        values=lambda problem, camera: _stated(problem, "temperature.air_c"),
        reason=_when(lambda problem: _most_air(problem) > 1, f"air is at {COLDEST_AIR_C:g} deg C or below"),
        most=_most_air,
        monotone=False,
    ),
    Lever(
        name="stray light",
        change=_nudge("ambient light"),
        values=lambda problem, camera: {
            "ambient irradiance [W/m2]": float(np.trapezoid(problem.ambient, problem.grid))
        },
        reason=_when(lambda problem: bool(np.any(problem.ambient)), "no ambient light is stated"),
        most=lambda problem: NOTHING_LEFT,
        monotone=False,
    ),
    Lever(
        name="surface clutter",
        change=_calmer,
        values=lambda problem, camera: {f"{s.id} spread_factor": s.spread_factor for s in problem.surfaces},
        reason=_when(lambda problem: len(reflectances(problem).clutter) > 0, "each surface has one sample only"),
        most=lambda problem: NOTHING_LEFT,
    ),
    Lever(
        name="f-number",
        change=_f_numbers,
        values=lambda problem, camera: {
            "fastest f-number": min(problem.spec.optics.f_numbers),
            "slowest f-number": max(problem.spec.optics.f_numbers),
        },
        most=lambda problem: max(
            min(problem.spec.optics.f_numbers) / FASTEST_F_NUMBER, SLOWEST_F_NUMBER / max(problem.spec.optics.f_numbers)
        ),
        monotone=False,
    ),
    Lever(
        name="full well",
        change=_full_well,
        values=_camera_value("full_well_e", lambda camera: camera.full_well_e),
        monotone=False,
    ),
    Lever(
        name="read noise",
        change=_read_noise,
        values=_camera_value("read_noise_e", lambda camera: camera.read_noise_e),
        reason=_when(lambda problem: any(c.read_noise_e > 0 for c in problem.cameras), "no camera has any"),
        most=lambda problem: NOTHING_LEFT,
    ),
    Lever(
        name="PRNU",
        change=_nudge("PRNU"),
        values=_camera_value("prnu_percent", lambda camera: camera.prnu_percent),
        reason=_when(lambda problem: any(c.prnu_percent > 0 for c in problem.cameras), "no camera has any"),
        most=lambda problem: NOTHING_LEFT,
    ),
    Lever(
        name="sensor temperature",
        change=_cooler_sensor,
        values=lambda problem, camera: _stated(problem, "temperature.sensor_c"),
        reason=_when(lambda problem: _most_sensor(problem) > 1, f"sensor is at {COLDEST_SENSOR_C:g} deg C or below"),
        most=_most_sensor,
    ),
    _counted("frames"),
    _counted("pixels"),
)
