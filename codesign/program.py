"""The optimisation as plain arrays: many small programs of the same shape side by side.

One *program* is one discrete configuration (camera, channel, gain, filter, f-number, pulse bracket)
and one contrast sign. Its unknowns are ``q`` (charge sent through each drive segment of each LED
during one exposure, in A s) and ``t`` (exposure in s):

    maximise  d·y / sqrt(c + s·y + |R y|²)      with y = (q_1 .. q_n, t)
    subject to  A y ≤ b,   0 ≤ q_j ≤ width_j·t,   Σ_j∈LED heat_j q_j ≤ heat_cap_LED,   t_low ≤ t ≤ t_high.

Solvers and the proof checker see nothing else, so each can be tested without a catalogue.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

from codesign.errors import SolveError

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Program:
    """A block of ``P`` programs sharing their columns (n segments, then time) and their row names.

    Attributes
    ----------
    signal : (P, n+1) array
        ``d``: difference of mean photo-electrons, target minus background, times the contrast sign.
        [e⁻ per A s; last column e⁻ per s]
    shot : (P, n+1) array
        ``s`` ≥ 0: mean shot-noise variance per unit of ``y``, already divided by the averaging. [e⁻²]
    noise_rows : (P, r, n+1) array
        ``R``: noise that grows with the signal itself (PRNU, surface clutter). [e⁻]
    floor : (P,) array
        ``c`` > 0: variance without light. [e⁻²]
    rows, bounds : (P, m, n+1), (P, m) arrays
        ``A`` and ``b ≥ 0``: limits that couple the LEDs (well, rig heat, supply). Charge entries are ≥ 0; the time
        entry of a bound on power while on is negative.
    row_names : tuple of str
        m names.
    width : (n,) array
        Current range of each segment. [A]
    led : (n,) int array
        LED of each segment; the segments of an LED are in ascending current.
    heat : (n,) array
        Heat per charge of each segment. [W/A]
    heat_cap : (n_leds,) array
        Largest heat per exposure of each LED, ``inf`` where none. [J]
    time_low, time_high : (P,) arrays
        Exposure range. [s]
    """

    signal: Array
    shot: Array
    noise_rows: Array
    floor: Array
    rows: Array
    bounds: Array
    row_names: tuple[str, ...]
    width: Array
    led: NDArray[np.intp]
    heat: Array
    heat_cap: Array
    time_low: Array
    time_high: Array

    @property
    def size(self) -> int:
        """Number of programs in the block."""
        return self.signal.shape[0]

    @property
    def segments(self) -> int:
        """Number of drive segments n."""
        return self.width.size

    def take(self, index) -> Program:
        """Return the programs at ``index`` (an int keeps the leading axis)."""
        index = np.atleast_1d(index)
        per_program = ("signal", "shot", "noise_rows", "floor", "rows", "bounds", "time_low", "time_high")
        return replace(self, **{name: getattr(self, name)[index] for name in per_program})


def stack(blocks: list[Program]) -> Program:
    """Join blocks that share columns and row names.

    Raises SolveError for others: they would be judged by the current and heat limits of the first.
    """
    shared = ("row_names", "width", "led", "heat", "heat_cap")
    for name in shared:
        first = getattr(blocks[0], name)
        if not all(np.array_equal(first, getattr(block, name)) for block in blocks[1:]):
            raise SolveError(f"programs with other columns cannot be stacked: their {name} differ")
    merged = {
        f.name: np.concatenate([getattr(b, f.name) for b in blocks]) for f in fields(Program) if f.name not in shared
    }
    return replace(blocks[0], **merged)


def variance(program: Program, y: Array) -> Array:
    """Mean noise variance ``c + s·y + |R y|²`` of each program. ``y``: (P, n+1). [e⁻²]"""
    quadratic = np.einsum("prn,pn->pr", program.noise_rows, y)
    return program.floor + np.einsum("pn,pn->p", program.shot, y) + np.einsum("pr,pr->p", quadratic, quadratic)


def contrast_to_noise(program: Program, y: Array) -> Array:
    """CNR ``d·y / sqrt(variance)`` of each program, negative against its sign. ``y``: (P, n+1)."""
    return np.einsum("pn,pn->p", program.signal, y) / np.sqrt(variance(program, y))


def violation(program: Program, y: Array) -> Array:
    """Largest relative violation of any constraint, one value per program (≤ 0 is feasible).

    ``y`` has shape (P, n+1). Each constraint is divided by its own bound, so that 1e-9 means one part in 10⁹.
    """
    q, t = y[:, :-1], y[:, -1:]
    scale = row_scale(program)
    worst = [
        np.max((np.einsum("pmn,pn->pm", program.rows, y) - program.bounds) / scale, axis=1, initial=-np.inf),
        np.max(
            q / (program.width * program.time_high[:, None]) - t / program.time_high[:, None],
            axis=1,
            initial=-np.inf,
        ),
        np.max(-q / (program.width * program.time_high[:, None]), axis=1, initial=-np.inf),
        (t[:, 0] - program.time_high) / program.time_high,
        (program.time_low - t[:, 0]) / program.time_high,
    ]
    finite = np.isfinite(program.heat_cap)
    if finite.any():
        cap = program.heat_cap[finite]
        worst.append(np.max((led_heat(program, q)[:, finite] - cap) / np.maximum(cap, 1e-300), axis=1))
    return np.max(worst, axis=0)


def row_scale(program: Program) -> Array:
    """Size of each coupling row's right-hand side, (P, m): its bound, or what a bound per second comes to."""
    per_second = np.maximum(-program.rows[:, :, -1], 0.0)
    return np.maximum(program.bounds + per_second * program.time_high[:, None], 1e-300)


def led_heat(program: Program, q: Array) -> Array:
    """Heat per exposure of each LED, (P, n_leds). [J]"""
    out = np.zeros((q.shape[0], program.heat_cap.size))
    np.add.at(out, (slice(None), program.led), q * program.heat)
    return out


def segment_room(program: Program, t: Array) -> tuple[Array, Array]:
    """Room of each segment at exposure ``t`` when an LED fills its segments in order, and its slope in ``t``.

    The room is ``width·t`` until the LED's heat cap is used up; the partly filled segment then shrinks as
    the ones before it grow. ``t``: (P,). Returns two (P, n) arrays, [A s] and [A].
    """
    full = program.width * t[:, None]
    capped = np.isfinite(program.heat_cap[program.led])
    if not capped.any():
        return full, np.broadcast_to(program.width, full.shape)
    load = program.heat * program.width
    running = np.cumsum(load)
    before = running - load
    first = np.searchsorted(program.led, program.led, side="left")
    load_before = before - before[first]
    heat = np.maximum(program.heat, 1e-300)
    left = (program.heat_cap[program.led] - load_before * t[:, None]) / heat
    room = np.clip(left, 0.0, full)
    slope = np.where(left >= full, program.width, np.where(left > 0, -load_before / heat, 0.0))
    return room, slope
