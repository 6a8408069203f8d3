"""What the live page needs of a problem and its solution, as plain values for JSON.

Only what the controls cannot change is worked out here: curves on the problem's grid, data-sheet values, limits. Arrays
are base64 of little-endian numbers, ``{"f8": text}``, or ``{"f4": text}`` for filters, quantum efficiencies and clutter
where the catalogue is large: all surfaces share these curves, so that rounding hardly touches a difference of surfaces.
"""

from __future__ import annotations

import base64
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from codesign.build import free, part_price
from codesign.catalog import Camera, Filter
from codesign.design import Design, Performance
from codesign.limits import eye_limits, junction_limit, pulse_levels, thermal_resistance
from codesign.limits_eye import eye_weight
from codesign.physics.light import OHNO_FWHM_FACTOR, photons_per_joule
from codesign.problem import LedChannel, Problem
from codesign.problem.choices import FilterChoices
from codesign.radiometry import filter_transmittance, reflectances
from codesign.report.page.live_parts import Kept
from codesign.spectra import trapezoid_weights

if TYPE_CHECKING:
    from codesign.solve import Solution

Array = NDArray[np.float64]

#: Names the layout of the data; the scripts of the page ask for it.
SCHEMA = "codesign.live/1"


def live_data(solution: Solution, kept: Kept) -> dict[str, Any]:
    """Return what the scripts of the live page read.

    Parameters
    ----------
    solution : Solution
    kept : Kept
        The parts that the page takes.

    Returns
    -------
    dict
        Plain values without infinities: None stands for "no limit".
    """
    problem, seen = solution.problem, kept.span
    spec, grid = problem.spec, problem.grid
    chain = problem.lens * photons_per_joule(grid) * trapezoid_weights(grid)
    return {
        "schema": SCHEMA,
        "title": spec.title,
        "file": problem.where,
        "required_cnr": spec.required_cnr,
        "grid_nm": packed(grid[seen]),
        "chain": packed(chain[seen]),
        "ambient": packed(problem.ambient[seen]) if problem.ambient.any() else None,
        "surfaces": _surfaces(problem, kept),
        "leds": [_led(problem, channel) for channel in kept.leds],
        "cameras": [_camera(problem, camera, kept) for camera in kept.cameras],
        "filters": [_filter(problem, part, kept) for part in kept.filters],
        "filter_choices": _filter_choices(problem, kept.filters),
        "pulse_levels": _pulse_levels(problem, kept),
        "strobe": problem.strobe,
        "drive_step_ma": spec.lighting.drive_step_ma,
        "optics": spec.optics.model_dump(include={"f_numbers", "magnification", "required_depth_mm"}, mode="json"),
        "motion": spec.motion.model_dump() if spec.motion else None,
        "timing": spec.timing.model_dump(),
        "temperature": spec.temperature.model_dump(),
        "limits": spec.limits.model_dump(),
        "eye_limits": [{"name": x.name, "unit": x.unit, "bound": x.bound} for x in eye_limits(problem)],
        "averaging": spec.averaging.model_dump(),
        "build": _build(problem),
        "recipe": _result(solution.recipe),
        "optimum": _result(solution.optimum),
        "alternatives": [{**settings(a.design), "cnr": a.cnr} for a in solution.alternatives],
        "bound": {"cnr": _finite(solution.certificate.bound), "proven": solution.status == "proven"},
        "joined_channels": spec.detection.combine_channels,
        "left_out": kept.note,
    }


def packed(values: Array, kind: str = "f8") -> dict[str, str]:
    """Return an array, last axis fastest, as base64 of ``f8`` or ``f4`` numbers."""
    return {kind: base64.b64encode(np.ascontiguousarray(values, dtype=f"<{kind}").tobytes()).decode("ascii")}


def settings(design: Design) -> dict[str, Any]:
    """Return what a design sets, as the scripts name it."""
    names = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us")
    return {
        **{name: getattr(design, name) for name in names},
        "drive_ma": dict(design.drive_ma),
        "emitters": dict(design.emitters),
        "shots": [{"exposure_us": shot.exposure_us, "drive_ma": dict(shot.drive_ma)} for shot in design.shots],
    }


def _result(performance: Performance) -> dict[str, Any]:
    """Settings and the program's own CNR, which the page compares with its own."""
    return {**settings(performance.design), "cnr": float(performance.cnr)}


def _finite(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _surfaces(problem: Problem, kept: Kept) -> list[dict[str, Any]]:
    scene = reflectances(problem)
    return [
        {
            "id": surface.id,
            "role": problem.role(index),
            "specular": float(scene.specular[index]),
            "mean": packed(scene.mean[index, kept.span]),
            "clutter": packed(scene.clutter[rows, kept.span], kept.kind) if rows.stop > rows.start else None,
        }
        for index, (surface, rows) in enumerate(zip(problem.surfaces, scene.rows_of, strict=True))
    ]


def _led(problem: Problem, channel: LedChannel) -> dict[str, Any]:
    led = channel.led
    current, flux, power = led.operating_points()
    return {
        "id": led.id,
        "peak_nm": float(led.peak()),
        "emitters": channel.emitters,
        "delivery_per_m2": float(channel.delivery),
        "specular_weight": channel.specular_weight,
        "peak_shift_nm": channel.peak_shift_nm,
        "shift_nm_per_k": led.peak_shift_nm_per_k,
        "flux_w": led.flux_w(),
        "flux_coefficient_per_k": led.flux_temperature_coefficient_per_k,
        "reference_c": led.reference_junction_c,
        "resistance_k_per_w": thermal_resistance(problem, channel),
        "junction_limit_c": junction_limit(problem, channel),
        "largest_ma": led.largest_current_ma,
        "current_a": current.tolist(),
        "relative_flux": flux.tolist(),
        "power_w": power.tolist(),
        "price": _finite(part_price(problem, led)),
        "must_have": led.id in problem.spec.build.must_have,
        "at_the_eye": {limit.name: eye_weight(led, limit.quantity) for limit in eye_limits(problem)},
        **_spectrum(channel),
    }


def _spectrum(channel: LedChannel) -> dict[str, Any]:
    """The curve of unit area: parameters of the model, or the points measured."""
    led = channel.led
    if led.curve:
        return {"curve": {"nm": packed(led.shape.wavelength_nm), "values": packed(led.shape.values)}}
    density = float(led.shape.values.max())
    return {"model": {"peak_nm": led.peak_nm, "width_nm": led.fwhm_nm / OHNO_FWHM_FACTOR, "density": density}}


def _camera(problem: Problem, camera: Camera, kept: Kept) -> dict[str, Any]:
    names = (
        "id", "pixel_pitch_um", "bits", "black_level_dn", "dark_reference_c", "dark_doubling_k", "dsnu_e",
        "exposure_min_us", "exposure_max_us", "exposure_step_us", "readout_ms",
    )  # fmt: skip
    gains, wanted = camera.gain_settings(), problem.spec.candidates
    offered = [g for g in gains if wanted.gains_db is None or any(abs(g.gain_db - w) <= 1e-9 for w in wanted.gains_db)]
    fields = ("gain_db", "conversion_gain_dn_per_e", "read_noise_e", "full_well_e")
    return {
        **{name: getattr(camera, name) for name in names},
        "pixel_area_m2": camera.pixel_area,
        "prnu": camera.prnu_percent / 100,
        "dark_e_per_s": camera.dark_current(camera.dark_reference_c),
        "price": _finite(part_price(problem, camera)),
        "gains": [{name: getattr(gain, name) for name in fields} for gain in offered],
        "channels": [
            {"name": name, "qe": packed(camera.quantum_efficiency(name, problem.grid)[kept.span], kept.kind)}
            for name in camera.channel_names
            if wanted.channels == "all" or name in _listed(wanted.channels)
        ],
    }


def _listed(choice: str | tuple[str, ...]) -> tuple[str, ...]:
    return (choice,) if isinstance(choice, str) else choice


def _filter(problem: Problem, part: Filter, kept: Kept) -> dict[str, Any]:
    """One curve for all f-numbers in front of the lens, one for each at the sensor."""
    optics = problem.spec.optics
    stops = optics.f_numbers[:1] if optics.filter_position == "front" else optics.f_numbers
    return {
        "id": part.id,
        "price": _finite(part_price(problem, part)),
        "curves": [packed(filter_transmittance(problem, part, stop)[kept.span], kept.kind) for stop in stops],
    }


def _filter_choices(problem: Problem, base: tuple[Filter, ...]) -> dict[str, Any]:
    """Which filters may be used alone, and which two stacked: a bit for each two, row by row."""
    choices = FilterChoices.of(problem.filters)
    place = {part.id: k for k, part in enumerate(base)}
    own = np.array([place.get(part.id, -1) for part in choices.base], dtype=np.intp)
    first, second = choices.members.T
    single = second < 0
    pairs = np.zeros((len(base), len(base)), dtype=bool)
    stacked = ~single & (own[first] >= 0) & (own[second] >= 0)
    a, b = own[first[stacked]], own[second[stacked]]
    pairs[a, b] = pairs[b, a] = True
    found = {"single": sorted(int(k) for k in own[first[single]] if k >= 0)}
    if pairs.any():
        found["pairs"] = base64.b64encode(np.packbits(pairs).tobytes()).decode("ascii")
    return found


def _pulse_levels(problem: Problem, kept: Kept) -> list[dict[str, Any]]:
    index = [problem.channel_index[channel.id] for channel in kept.leds]
    return [
        {
            "longest_s": _finite(level.longest_s),
            "cause": level.cause,
            "current_ma": [_finite(level.current_ma[i]) for i in index],
        }
        for level in pulse_levels(problem)
    ]


def _build(problem: Problem) -> Mapping[str, Any]:
    build = problem.spec.build
    names = ("max_led_channels", "board_slots", "price_budget")
    return {"limited": build.limited, "free": free(problem), **{name: getattr(build, name) for name in names}}
