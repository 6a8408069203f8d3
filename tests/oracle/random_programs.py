"""Seeded random programs in every shape the search has to handle, without a catalogue."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.random import Generator
from numpy.typing import NDArray

from codesign.program import Program

Array = NDArray[np.float64]


def random_program(
    rng: Generator,
    *,
    programs: int = 1,
    leds: int = 3,
    segments: int = 2,
    contrast: float = 0.1,
    ambient: bool = True,
    prnu: float = 0.008,
    clutter: int = 0,
    heat_cap: bool = True,
    power_while_on: bool = False,
    fixed_time: bool = False,
) -> Program:
    """Random programs with the physics of the real ones: wells, rig heat, droop and junction limits.

    Parameters
    ----------
    segments : int
        Most drive segments of an LED; each LED has 1 to that many, with falling flux and rising heat per charge.
    contrast : float
        Standard deviation of the logarithm of target over background. [1]
    clutter : int
        Rows of noise of mixed sign on top of the two PRNU rows (``prnu`` = 0 and ``clutter`` = 0: no rows at all).
    power_while_on : bool
        Add a row whose time entry is negative and whose bound is zero.
    fixed_time : bool
        Leave one single exposure.
    """
    led = np.repeat(np.arange(leds), rng.integers(1, segments + 1, leds))
    first = np.searchsorted(led, led)
    rank = np.arange(led.size) - first
    flux = 1.0 - rng.uniform(0.05, 0.3, leds)[led] * rank
    target = rng.lognormal(0.0, 1.2, (programs, leds)) * 2e6
    background = target * np.exp(rng.normal(0.0, contrast, (programs, leds)))
    stray = rng.uniform(0.0, 3e4, (programs, 1)) * ambient
    target = np.hstack([target[:, led] * flux, stray])
    background = np.hstack([background[:, led] * flux, stray * np.exp(rng.normal(0.0, contrast, (programs, 1)))])
    dark = np.zeros_like(target)
    dark[:, -1:] = rng.uniform(5.0, 500.0, (programs, 1))

    power = rng.uniform(0.3, 3.0, leds)[led] * (1.0 + 0.1 * rank)
    heat = power - 0.3 * power[first] * flux
    width = rng.uniform(0.1, 0.5, leds)[led] * rng.uniform(0.5, 1.0, led.size)
    high = rng.uniform(1e-4, 5e-3, programs)
    rows = [target + dark, background + dark, np.broadcast_to(np.append(heat, 0.0), target.shape)]
    load = float(heat @ width)
    well = rng.uniform(5e3, 3e4, programs)
    bounds = [well, well, rng.uniform(0.05, 1.5, programs) * load * high]
    if power_while_on:
        watts = float(rng.uniform(0.1, 1.2) * (power @ width))
        rows.append(np.broadcast_to(np.append(power, -watts), target.shape))
        bounds.append(np.zeros(programs))
    # As in real programs, ambient light and dark current alone never fill a well.
    high = np.minimum(high, well / np.max([row[:, -1] for row in rows[:2]], axis=0))
    low = high if fixed_time else high * 10.0 ** rng.uniform(-2.5, -0.05, programs)

    noise = [np.stack([target, background], axis=1) * (prnu / np.sqrt(2.0))] if prnu else []
    if clutter:
        noise.append(rng.normal(0.0, 0.02, (programs, clutter, target.shape[1])) * target[:, None, :])
    cap = np.full(leds, np.inf)
    if heat_cap:
        some = rng.uniform(size=leds) < 0.7
        full = np.bincount(led, heat * width, minlength=leds) * float(np.median(high))
        cap = np.where(some, rng.uniform(0.05, 1.5, leds) * full, np.inf)
    return Program(
        signal=target - background,
        shot=(target + background) / 2 + dark,
        noise_rows=np.concatenate(noise, axis=1) if noise else np.zeros((programs, 0, target.shape[1])),
        floor=rng.uniform(4.0, 300.0, programs),
        rows=np.stack(rows, axis=1),
        bounds=np.stack(bounds, axis=1),
        row_names=("well, target", "well, background", "rig heat", "supply")[: len(rows)],
        width=width,
        led=led,
        heat=heat,
        heat_cap=cap,
        time_low=low,
        time_high=high,
    )


def any_program(rng: Generator, *, programs: int = 1, leds: int | None = None, quiet: bool = False) -> Program:
    """Random program of a random kind; ``quiet`` leaves out all noise rows (R = 0)."""
    leds = int(rng.integers(1, 5)) if leds is None else leds
    program = random_program(
        rng,
        programs=programs,
        leds=leds,
        segments=int(rng.integers(1, 4)),
        contrast=float(10.0 ** rng.uniform(-2.0, 0.0)),
        ambient=bool(rng.integers(2)),
        prnu=0.0 if quiet else float(rng.choice([0.0, 0.004, 0.03])),
        clutter=0 if quiet else int(rng.choice([0, 1, 4])),
        heat_cap=bool(rng.integers(2)),
        power_while_on=bool(rng.integers(2)),
        fixed_time=bool(rng.uniform() < 0.15),
    )
    twist = rng.uniform()
    if twist < 0.15:
        program = without_contrast(program, int(rng.integers(program.segments)))
    elif twist < 0.3:
        program = rescaled(program, *10.0 ** rng.uniform(-4.0, 4.0, 3))
    return program


def without_contrast(program: Program, column: int) -> Program:
    """Let one segment light both surfaces alike."""
    signal = program.signal.copy()
    signal[:, column] = 0.0
    return replace(program, signal=signal)


def rescaled(program: Program, electrons: float, amperes: float, seconds: float) -> Program:
    """The same programs in other units of electrons, current and time: every CNR stays as it is."""
    per_charge = np.append(np.full(program.segments, 1.0 / (amperes * seconds)), 1.0 / seconds)
    return replace(
        program,
        signal=program.signal * per_charge * electrons,
        shot=program.shot * per_charge * electrons**2,
        noise_rows=program.noise_rows * per_charge * electrons,
        floor=program.floor * electrons**2,
        rows=program.rows * per_charge,
        width=program.width * amperes,
        heat=program.heat / (amperes * seconds),
        time_low=program.time_low * seconds,
        time_high=program.time_high * seconds,
    )


def random_points(rng: Generator, program: Program, count: int) -> Array:
    """Feasible points of one program, (count, n+1): inside, on limits and at corners."""
    n = program.segments
    low, high = program.time_low[0], program.time_high[0]
    t = low + (high - low) * rng.choice([0.0, 1.0, rng.uniform()], count)
    share = rng.uniform(size=(count, n)) ** rng.choice([0.2, 1.0, 4.0], (count, 1))
    share = np.where(rng.uniform(size=(count, n)) < rng.choice([0.0, 0.5, 0.9], (count, 1)), 0.0, share)
    share = np.where(rng.uniform(size=(count, n)) < 0.3, np.round(share), share)
    return shrunk(program, np.hstack([share * program.width * t[:, None], t[:, None]]))


def shrunk(program: Program, y: Array) -> Array:
    """Scale the light of each point of one program down until every limit holds; feasible points stay."""
    q, t = y[:, :-1].copy(), y[:, -1]
    for led in np.flatnonzero(np.isfinite(program.heat_cap)):
        own = program.led == led
        load = q[:, own] @ program.heat[own]
        q[:, own] *= np.minimum(1.0, program.heat_cap[led] / np.maximum(load, 1e-300))[:, None]
    used = q @ program.rows[0][:, :-1].T
    room = np.maximum(program.bounds[0] - t[:, None] * program.rows[0][:, -1], 0.0)
    factor = np.divide(room, used, out=np.ones_like(used), where=used > room).min(axis=1)
    return np.hstack([q * factor[:, None], t[:, None]])


def repeated(program: Program, count: int) -> Program:
    """Stack one program ``count`` times."""
    return program.take(np.zeros(count, dtype=int))
