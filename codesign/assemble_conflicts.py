"""Why nothing can be done: looks for the plain reason and names the limits in conflict."""

from __future__ import annotations

import numpy as np

from codesign.assemble import Assembly, exposure_window
from codesign.errors import InfeasibleError
from codesign.limits import dark_rate, junction_limit, well_bound
from codesign.problem import Problem


def require_usable_leds(problem: Problem) -> None:
    """Raise InfeasibleError when the air alone is hotter than every LED may get."""
    air = problem.spec.temperature.air_c
    tops = {channel.id: junction_limit(problem, channel) for channel in problem.channels}
    if all(top <= air for top in tops.values()):
        led = max(tops, key=lambda name: tops[name])
        raise InfeasibleError(
            f"{problem.where}: limits in conflict: temperature.air_c is {air:g}, the junction limit of every candidate "
            f"LED is at or below that ({led}: {tops[led]:g} deg C is the highest); cool the air or take other LEDs",
            ["junction", "air temperature"],
        )


def nothing_seen(assembly: Assembly) -> InfeasibleError:
    """Return the error for a problem in which no configuration shows any difference."""
    where = assembly.problem.where
    plain = _no_time_for_shots(assembly.problem) or _filled_by_ambient(assembly)
    if plain is not None:
        return plain
    return InfeasibleError(
        f"{where}: no configuration shows any difference between target and background within the limits; "
        "look at the candidates and at junction and current limits",
        ["candidates"],
    )


def _no_time_for_shots(problem: Problem) -> InfeasibleError | None:
    """Say so when the shots of a frame, each with its readout, take longer than the frame with every camera."""
    shots, rate = problem.spec.detection.shots, problem.spec.timing.frame_rate_hz
    if shots < 2 or rate is None:
        return None
    quickest = min(problem.cameras, key=lambda camera: camera.readout_ms + camera.exposure_min_us * 1e-3)
    needed = shots * (quickest.readout_ms + quickest.exposure_min_us * 1e-3)
    if needed <= 1e3 / rate:
        return None
    return InfeasibleError(
        f"{problem.where}: limits in conflict: {shots} shots in a frame take {needed:.4g} ms at least (camera "
        f"{quickest.id!r} reads out for {quickest.readout_ms:g} ms after each), timing.frame_rate_hz {rate:g} leaves "
        f"{1e3 / rate:.4g} ms; lower the frame rate, take fewer shots or a quicker camera",
        ["frame period"],
    )


def _filled_by_ambient(assembly: Assembly) -> InfeasibleError | None:
    """Say so when ambient light fills a well at the shortest exposure of every configuration."""
    problem, least = assembly.problem, None
    for setting in assembly.settings:
        low = exposure_window(problem, setting).low
        electrons = assembly.rates(setting).ambient[:, : len(problem.surfaces)] * low.time
        electrons = electrons + dark_rate(problem, setting) * low.time
        fill = electrons / well_bound(problem, setting)
        worst = fill.max(axis=1)
        if least is None or worst.min() < least[0]:
            surface = problem.surfaces[int(np.argmax(fill[int(np.argmin(worst))]))].id
            least = float(worst.min()), surface, setting, low
    if least is None or least[0] <= 1:
        return None
    fill, surface, setting, low = least
    return InfeasibleError(
        f"{problem.where}: limits in conflict: ambient light alone fills the well of {surface!r} {fill:.3g} times its "
        f"limit already at the shortest exposure, {low.time * 1e6:.4g} us (best of all: camera {setting.camera.id!r}, "
        f"f/{setting.f_number:g}); shade the scene, allow larger f-numbers or denser filters",
        [f"well, {surface}", low.name],
    )


def no_step_fits(problem: Problem) -> InfeasibleError:
    """Return the error for an optimum that no whole steps of the settings can come near."""
    step = problem.spec.lighting.drive_step_ma
    return InfeasibleError(
        f"{problem.where}: limits in conflict: no LED can be lit in whole steps of lighting.drive_step_ma {step:g} "
        "within all limits; make the step smaller or loosen the limits",
        ["setting steps"],
    )
