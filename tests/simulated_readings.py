"""A camera simulated pixel by pixel: readings of a rig whose deliveries, black level and gain are known to the test."""

from dataclasses import replace

import numpy as np
from numpy.random import Generator

from codesign import Design, evaluate
from codesign.design import setting_of
from codesign.problem import Problem
from codesign.problem.nudge import nudged
from codesign.radiometry import reflectances
from codesign.study.observations import observe
from codesign.study.readings import Reading

PIXELS = 400


def simulated(
    problem: Problem,
    designs: list[Design],
    rng: Generator,
    *,
    factors: dict[str, float] | None = None,
    swapped: tuple[str, str] | None = None,
    offset_dn: float = 0.0,
    gain: float = 1.0,
    stray_e_per_s: float = 0.0,
    pieces: bool = True,
    stated_errors: bool = False,
    noise: bool = False,
) -> tuple[Reading, ...]:
    """Measure every surface of a problem with every design.

    ``pieces`` draws what is measured from the spread of each surface, else its mean piece is measured. ``noise`` also
    reports the deviation of a pixel.
    """
    real = problem
    for led, factor in (factors or {}).items():
        real = nudged(real, "delivery", factor - 1, led)
    luck = rng.standard_normal(len(reflectances(problem).clutter)) * pieces
    return tuple(
        _measured(real, d, rng, swapped, luck, (offset_dn, gain, stray_e_per_s), stated_errors, noise) for d in designs
    )


def _measured(real, design, rng, swapped, luck, troubles, stated_errors, noise) -> Reading:
    offset, gain, stray = troubles
    wired = design
    if swapped:
        other = {swapped[0]: swapped[1], swapped[1]: swapped[0]}
        wired = replace(design, drive_ma={other.get(led, led): ma for led, ma in design.drive_ma.items()})
    performance, setting = evaluate(real, wired), setting_of(real, design)
    probe = Reading(design=wired, grey_dn={surface.id: 0.0 for surface in real.surfaces})
    amplitude = observe(real, (probe,)).spread.sum(axis=1)
    grey, error, deviation = {}, {}, {}
    for surface, own in zip(performance.surfaces, amplitude, strict=True):
        photo = surface.led_e + surface.ambient_e + float(own @ luck)
        dark = surface.dark_e + stray * design.exposure_us * 1e-6 / design.f_number**2
        camera = setting.camera
        light = photo * (1 + camera.prnu_percent / 100 * rng.standard_normal(PIXELS))
        electrons = rng.poisson(np.maximum(light + dark, 0)) + camera.dsnu_e * rng.standard_normal(PIXELS)
        electrons = electrons + setting.gain.read_noise_e * rng.standard_normal(PIXELS)
        values = np.round(camera.black_level_dn + offset + gain * setting.gain.conversion_gain_dn_per_e * electrons)
        values = np.minimum(values, 2**camera.bits - 1)
        grey[surface.id] = float(values.mean())
        error[surface.id] = float(values.std(ddof=1) / np.sqrt(PIXELS))
        # Two pictures of the same pixels, subtracted: fixed pattern drops out.
        temporal = setting.gain.read_noise_e * rng.standard_normal(PIXELS) + rng.poisson(max(photo + dark, 0.0), PIXELS)
        deviation[surface.id] = float((gain * setting.gain.conversion_gain_dn_per_e * temporal).std(ddof=1))
    return Reading(
        design=design,
        grey_dn=grey,
        error_dn=error if stated_errors else {},
        noise_dn=deviation if noise else {},
        pixels=PIXELS,
    )
