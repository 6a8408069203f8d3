"""Programs of several readings combined by weights: the channels of one exposure, or shots one after another.

Channels of a colour camera have pixels of their own, whose fixed patterns are independent; shots are taken by the same
pixels, whose fixed pattern is one and the same (see `codesign.design_combined`).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from codesign.assemble import Assembly
from codesign.certificate_combined import Readings
from codesign.design import JOINT
from codesign.limits import Setting
from codesign.noise import NOISE_TERMS, NoiseModel, Sensor, noise_model
from codesign.program import Array, Program, stack

#: Leading noise rows of a program that hold the photo-response fixed pattern: target and background.
PATTERN_ROWS = 2


def channel_readings(assembly: Assembly, setting: Setting, filter_index: int) -> Readings:
    """Readings of all channels named in ``setting.channel`` at one exposure; every channel's wells are guarded."""
    names = setting.channel.split(JOINT)
    programs = [single(assembly, replace(setting, channel=name), filter_index) for name in names]
    wells = len(assembly.problem.surfaces)
    first = programs[0]
    rows = np.concatenate([*(p.rows[:, :wells] for p in programs), first.rows[:, wells:]], axis=1)
    bounds = np.concatenate([*(p.bounds[:, :wells] for p in programs), first.bounds[:, wells:]], axis=1)
    labels = [f"{row}, {name}" for name in names for row in first.row_names[:wells]]
    limits = replace(
        first,
        rows=rows,
        bounds=bounds,
        row_names=(*labels, *first.row_names[wells:]),
        time_high=np.min([p.time_high for p in programs], axis=0),
    )
    whole = stack([replace(p, rows=rows, bounds=bounds, row_names=limits.row_names) for p in programs])
    return Readings(
        limits=limits,
        signal=whole.signal,
        shot=whole.shot,
        pattern=whole.noise_rows[:, :PATTERN_ROWS],
        common=whole.noise_rows[:, PATTERN_ROWS:],
        floor=whole.floor,
        offset=np.zeros(len(names)),
    )


def single(assembly: Assembly, setting: Setting, filter_index: int) -> Program:
    return assembly.program(setting, np.array([filter_index]))


def shot_readings(
    assembly: Assembly, setting: Setting, filter_index: int, shots: int, exposures: Array | None = None
) -> Readings:
    """Readings of shots under one setting, each with its own currents and exposure, as columns of one program.

    Without ``exposures`` every shot may take as much light as at the longest exposure and as little stray light and
    dark current as at none: a relaxation that holds for all exposures. With ``exposures`` (shots,) [s] these are fixed.
    Columns: the segments of each LED, shot after shot, then (only when free) each shot's exposure as a share of the
    longest; last the common time, which is fixed.
    """
    one = single(assembly, setting, filter_index)
    longest, n = float(one.time_high[0]), one.segments
    order = np.argsort(np.tile(one.led, shots), kind="stable")
    span = np.full(shots, longest) if exposures is None else np.asarray(exposures, dtype=float)
    free = exposures is None
    extra = shots if free else 0
    total = shots * n + extra

    def spread_out(values: Array, shot: int) -> Array:
        """Place coefficients (…, n+1) of one shot into the joint columns."""
        out = np.zeros((*values.shape[:-1], total + 1))
        wide = np.zeros((*values.shape[:-1], shots * n))
        wide[..., shot * n : (shot + 1) * n] = values[..., :-1]
        out[..., : shots * n] = wide[..., order]
        if free:
            out[..., shots * n + shot] = values[..., -1]
        else:
            out[..., -1] = values[..., -1] * span[shot] / longest
        return out

    rows, bounds, names = _joint_rows(assembly, one, shots, spread_out, free)
    leds = one.heat_cap.size
    width = np.tile(one.width, shots) * np.repeat(span / longest, n)
    limits = replace(
        one,
        rows=rows[None],
        bounds=bounds[None],
        row_names=names,
        width=np.append(width[order], np.ones(extra)),
        led=np.append(np.tile(one.led, shots)[order], leds + np.arange(extra)),
        heat=np.append(np.tile(one.heat, shots)[order], np.zeros(extra)),
        heat_cap=np.append(one.heat_cap, np.full(extra, np.inf)),
        time_low=one.time_high,
        time_high=one.time_high,
    )

    temporal, fixed = noise_of_shots(assembly, setting)

    def each(values: Array) -> Array:
        return np.stack([spread_out(values, shot) for shot in range(shots)])

    return Readings(
        limits=limits,
        signal=each(one.signal[0]),
        shot=each(one.shot[0]),
        pattern=np.zeros((shots, 0, total + 1)),
        common=each(one.noise_rows[0]),
        floor=np.full(shots, temporal.constant),
        offset=np.full(shots, np.sqrt(fixed.constant)),
    )


def noise_of_shots(assembly: Assembly, setting: Setting) -> tuple[NoiseModel, NoiseModel]:
    """Noise that is new in every shot, and noise that all shots of the same pixels have in common."""
    sensor, averaging = Sensor.of(setting.camera, setting.gain), assembly.problem.spec.averaging
    terms = [tuple(term for term in NOISE_TERMS if term.lasting(True) == lasts) for lasts in (False, True)]
    new, lasting = (noise_model(sensor, averaging, own) for own in terms)
    return new, lasting


def shot_points(one: Program, exposures: Array, point: Array) -> list[Array]:
    """Recipe (n+1,) of each shot from a joint one at fixed exposures [s]; ``one`` is the program of a single shot."""
    shots, n = len(exposures), one.segments
    order = np.argsort(np.tile(one.led, shots), kind="stable")
    charge = np.empty(shots * n)
    charge[order] = point[: shots * n]
    return [np.append(q, t) for q, t in zip(charge.reshape(shots, n), exposures, strict=True)]


def frame_time(assembly: Assembly, setting: Setting, shots: int) -> float:
    """Longest sum of the exposures: frame period less a readout each, and the pulse rating. [s]"""
    period = 1.0 / assembly.problem.spec.timing.frame_rate_hz - shots * setting.camera.readout_ms * 1e-3
    return min(period, setting.level.longest_s)


def _joint_rows(
    assembly: Assembly, one: Program, shots: int, spread_out, free: bool
) -> tuple[Array, Array, tuple[str, ...]]:
    """Limits of all shots: wells and peak power in each shot, mean heat and power summed over them."""
    wells = len(assembly.problem.surfaces)
    rows, bounds, names = [], [], []
    for index, name in enumerate(one.row_names):
        row = one.rows[0, index].copy()
        while_on = min(row[-1], 0.0)  # a bound per second: taken at the longest exposure where that is free
        row[-1] -= while_on if free else 0.0
        parts = [spread_out(row, shot) for shot in range(shots)]
        for part in parts if free else []:
            part[-1] = while_on
        if index >= wells and row[-1] == 0 and not while_on:  # averaged over the frame: all shots together
            rows.append(sum(parts))
            bounds.append(one.bounds[0, index])
            names.append(name)
            continue
        rows += parts
        bounds += [one.bounds[0, index]] * shots
        names += [f"{name}, shot {shot + 1}" for shot in range(shots)]
    return np.stack(rows), np.array(bounds), tuple(names)
