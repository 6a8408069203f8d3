"""Each limit moved by a little, in its own unit: the problem whose bound is that much higher.

What hangs on the quantity goes with it: a longer frame period also lowers the duty of a strobe, a higher well
headroom acts on all surfaces. Wells of single surfaces have no quantity of their own; their prices come from the
multipliers directly. Limits in whole numbers (LED channels, board slots, price, depth of field over a list of
f-numbers) have no price at all.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from codesign.limits import Setting, junction_limit, saturation_electrons
from codesign.problem import LedChannel, Problem

#: Limits that only move in whole steps.
WHOLE = ("LED channels", "board slots", "price", "depth of field")
WELL_HEADROOM = "well headroom"

Move = Callable[[Problem, Setting, float], Problem]


def moved(problem: Problem, setting: Setting, name: str, amount: float) -> Problem | None:
    """The problem with the bound of a limit moved by ``amount`` of its unit; None where the limit cannot move so.

    Raises CatalogError or ProblemError when a data sheet could not state the new value.
    """
    kind, _, led = name.partition(", ")
    if led and kind in ("current", "junction"):
        change = _current if kind == "current" else _junction
        return change(problem, setting, led, amount)
    move = MOVES.get(name)
    return None if move is None else move(problem, setting, amount)


def _spec(section: str, key: str, per: Callable[[Problem, Setting], float] = lambda problem, setting: 1.0) -> Move:
    """Move a value of the problem file; ``per`` units of the limit make one of it."""

    def move(problem: Problem, setting: Setting, amount: float) -> Problem:
        record = getattr(problem.spec, section)
        value = getattr(record, key) + amount / per(problem, setting)
        record = record.model_copy(update={key: value})
        return replace(problem, spec=problem.spec.model_copy(update={section: record}))

    return move


def _camera(key: str) -> Move:
    def move(problem: Problem, setting: Setting, amount: float) -> Problem:
        cameras = tuple(
            c.replaced(**{key: getattr(c, key) + amount}) if c.id == setting.camera.id else c for c in problem.cameras
        )
        return replace(problem, cameras=cameras)

    return move


def _frame_period(problem: Problem, setting: Setting, amount: float) -> Problem:
    timing = problem.spec.timing
    rate = 1e3 / (1e3 / timing.frame_rate_hz + amount)
    timing = timing.model_copy(update={"frame_rate_hz": rate})
    return replace(problem, spec=problem.spec.model_copy(update={"timing": timing}))


def _pulse(key: str, per_us: Callable[[Problem], float]) -> Move:
    """Move the end of the pulse level, for all LEDs whose rating ends there."""

    def move(problem: Problem, setting: Setting, amount: float) -> Problem:
        end = setting.level.longest_s * 1e6 * per_us(problem)

        def changed(channel: LedChannel) -> LedChannel:
            hit = [abs(getattr(bracket, key) - end) <= 1e-9 * end for bracket in channel.led.pulse]
            if not any(hit):
                return channel
            rows = [bracket.model_dump() for bracket in channel.led.pulse]
            for row, is_hit in zip(rows, hit, strict=True):
                row[key] += amount * per_us(problem) if is_hit else 0.0
            return replace(channel, led=channel.led.replaced(pulse=rows))

        return replace(problem, channels=tuple(changed(channel) for channel in problem.channels))

    return move


def _current(problem: Problem, setting: Setting, led: str, amount: float) -> Problem:
    """Move the rating of one LED that holds at the pulse level: driver, pulse bracket or continuous."""
    index = problem.channel_index[led]
    channel, top = problem.channels[index], setting.level.current_ma[index]
    part = channel.led
    hit = [bracket.max_current_ma == top for bracket in part.pulse]
    if channel.driver_max_ma <= top:
        channel = replace(channel, driver_max_ma=channel.driver_max_ma + amount)
    elif any(hit) and top > part.continuous_current_ma:
        rows = [bracket.model_dump() for bracket in part.pulse]
        for row, is_hit in zip(rows, hit, strict=True):
            row["max_current_ma"] += amount if is_hit else 0.0
        channel = replace(channel, led=part.replaced(pulse=rows))
    else:
        channel = replace(channel, led=part.replaced(max_current_ma=part.continuous_current_ma + amount))
    return _with_channel(problem, index, channel)


def _junction(problem: Problem, setting: Setting, led: str, amount: float) -> Problem:
    """Move the junction limit of one LED, be it its own or the cap on all."""
    limits = problem.spec.limits.model_copy(update={"junction_max_c": None})
    tops = [junction_limit(problem, channel) + (amount if channel.id == led else 0.0) for channel in problem.channels]
    channels = tuple(
        channel if top == channel.led.max_junction_c else replace(channel, led=channel.led.replaced(max_junction_c=top))
        for channel, top in zip(problem.channels, tops, strict=True)
    )
    return replace(problem, channels=channels, spec=problem.spec.model_copy(update={"limits": limits}))


def _with_channel(problem: Problem, index: int, channel: LedChannel) -> Problem:
    channels = (*problem.channels[:index], channel, *problem.channels[index + 1 :])
    return replace(problem, channels=channels)


def _saturation(problem: Problem, setting: Setting) -> float:
    return saturation_electrons(setting.camera, setting.gain)


MOVES: dict[str, Move] = {
    WELL_HEADROOM: _spec("limits", "well_headroom", lambda problem, setting: 100.0),
    "camera longest exposure": _camera("exposure_max_us"),
    "camera shortest exposure": _camera("exposure_min_us"),
    "wanted longest exposure": _spec("timing", "exposure_max_us"),
    "wanted shortest exposure": _spec("timing", "exposure_min_us"),
    "motion blur": _spec("motion", "max_blur_px"),
    "frame period": _frame_period,
    "pulse width": _pulse("max_width_us", lambda problem: 1.0),
    "pulse duty": _pulse("max_duty", lambda problem: 1e-6 * problem.spec.timing.frame_rate_hz),
    "dark signal in the well": _spec("limits", "dark_well_share", _saturation),
    "dark shot noise": _spec("limits", "dark_noise_share", lambda problem, setting: setting.gain.read_noise_e**2),
    "rig heat": _spec("limits", "rig_heat_w"),
    "supply power": _spec("limits", "supply_w"),
    "supply peak power": _spec("limits", "supply_peak_w"),
    "actinic ultraviolet at 200 mm": _spec("limits", "actinic_w_per_m2"),
    "ultraviolet A at 200 mm": _spec("limits", "ultraviolet_a_w_per_m2"),
    "blue light at 200 mm": _spec("limits", "blue_light_w_per_m2"),
    "infrared at 200 mm": _spec("limits", "infrared_w_per_m2"),
}
