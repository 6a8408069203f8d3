"""A closed-form upper bound for thousands of programs at once.

`simple_proof` gives it as multipliers the proof checker accepts, `both_bounds` the same value for both contrast signs
in a tenth of the time: what one sign needs serves the other, and no multipliers are written out.

Ceiling on the signal: the best of one price per limit (``λ_k = max_j d_j/A_kj``, the others 0) and of no price at
all (every LED full on). Lines: no LED has less shot noise per signal than the best ratio ``min_j s_j/d_j``, and with
signal-proportional noise the same once more, tangent at the ceiling.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from codesign.certificate import FEASIBILITY_TOLERANCE, LEAST_ANCHOR, Line, Proof, bound, signal_ceiling
from codesign.program import Array, Program, row_scale, segment_room

#: Round-off of a sum of some hundred terms, as a share of the sum of their sizes; added to what `both_bounds` claims.
ROUND_OFF = 1e-13


def junction_prices(program: Program, line: Line, t: Array) -> Array:
    """Best heat multipliers ω of each LED once the other multipliers and an exposure guess are given. (P, n_leds)

    At exposure ``t`` an LED fills its segments in order until its heat cap; the segment that is cut short sets
    the price of heat, ``−cost/heat`` of that segment.
    """
    out = np.zeros((program.size, program.heat_cap.size))
    capped = np.isfinite(program.heat_cap)
    if not capped.any():
        return out
    cost = program.shot - line.theta[:, None] * program.signal
    cost = cost + 2 * np.einsum("pr,prn->pn", line.noise, program.noise_rows)
    cost = (cost + np.einsum("pm,pmn->pn", line.limit, program.rows))[:, :-1]
    return cut_prices(program, cost, t)


def cut_prices(program: Program, cost: Array, t: Array) -> Array:
    """ω from the reduced cost of the segment at which each LED's heat runs out."""
    out = np.zeros((cost.shape[0], program.heat_cap.size))
    room, _ = segment_room(program, t)
    cut = (room < program.width * t[:, None] * (1 - 1e-12)) & np.isfinite(program.heat_cap[program.led])
    price = np.where(cut, np.maximum(-cost, 0.0) / np.maximum(program.heat, 1e-300), 0.0)
    for led in np.flatnonzero(np.isfinite(program.heat_cap)):
        out[:, led] = price[:, program.led == led].max(axis=1, initial=0.0)
    return out


def no_prices(program: Program) -> Line:
    """All multipliers zero."""
    size = program.size
    return Line(
        theta=np.zeros(size),
        limit=np.zeros((size, program.rows.shape[1])),
        heat=np.zeros((size, program.heat_cap.size)),
        noise=np.zeros((size, program.noise_rows.shape[1])),
        anchor=np.ones(size),
    )


def simple_ceiling(program: Program) -> tuple[Line, Array]:
    """Best single-price ceiling of each program: its multipliers and its value. (P,) [e⁻]"""
    best = _full_drive(program)
    value = signal_ceiling(program, best)
    limit, heat = best.limit.copy(), best.heat.copy()
    signal = np.maximum(program.signal, 0.0)
    for k in range(program.rows.shape[1]):
        row = program.rows[:, k, :]
        with np.errstate(divide="ignore", invalid="ignore"):
            price = np.max(np.where(signal > 0, signal / row, 0.0), axis=1)
        usable = np.isfinite(price) & (row[:, :-1] >= 0).all(axis=1) & (price >= 0)
        trial = no_prices(program)
        trial.limit[:, k] = np.where(usable, price, 0.0)
        reached = signal_ceiling(program, trial)
        better = usable & (reached < value)
        value = np.where(better, reached, value)
        limit[better], heat[better] = trial.limit[better], 0.0
    return replace(best, limit=limit, heat=heat), value


def _full_drive(program: Program) -> Line:
    """Every LED as far as its own limits go at the longest exposure."""
    line = no_prices(program)
    heat = cut_prices(program, -program.signal[:, :-1], program.time_high)
    return replace(line, heat=heat)


def ratio_line(program: Program, noise: Array, top: Array) -> Line:
    """Line from the best noise-to-signal ratio of any column, with the noise tangent at ``noise``.

    ``noise``: (P, r), the assumed ``g = R y`` at signal ``top`` (P,), which anchors the parabola. [e⁻]
    """
    cost = program.shot + 2 * np.einsum("pr,prn->pn", noise, program.noise_rows)
    positive = program.signal > 0
    theta = np.min(np.divide(cost, program.signal, out=np.full_like(cost, np.inf), where=positive), axis=1)
    theta = np.where(np.isfinite(theta), theta, 0.0)
    return replace(no_prices(program), theta=theta, noise=noise, anchor=np.maximum(top, 1e-300))


def lone_led_noise(program: Program, top: Array) -> Array:
    """``g = R y`` of the single column that would be best at the ceiling: a guess where to be tangent. (P, r)"""
    size = np.maximum(top, 1e-300)[:, None]
    # Columns with next to no signal would overflow and are never best.
    usable = program.signal > 1e-12 * np.max(program.signal, axis=1, keepdims=True, initial=1e-300)
    per_signal = np.divide(1.0, program.signal, out=np.zeros_like(program.signal), where=usable)
    square = np.einsum("prn,prn->pn", program.noise_rows, program.noise_rows)
    price = np.where(usable, program.shot * per_signal / size + square * per_signal**2, np.inf)
    best = np.argmin(price, axis=1)
    pick = np.arange(program.size)
    return program.noise_rows[pick, :, best] * (per_signal[pick, best] * np.maximum(top, 0.0))[:, None]


def simple_proof(program: Program) -> tuple[Proof, Array]:
    """Closed-form proof of each program and the bound it gives on the CNR. (P,)"""
    ceiling, top = simple_ceiling(program)
    shot_only = ratio_line(program, np.zeros((program.size, program.noise_rows.shape[1])), top)
    proof = Proof(ceiling=ceiling, lines=(shot_only, ratio_line(program, lone_led_noise(program, top), top)))
    return proof, bound(program, proof)


def both_bounds(program: Program) -> Array:
    """Bounds of `simple_proof` for the program and for its other contrast sign, never below it. (P, 2)

    Rows and shot noise must be nonnegative in the charges, as `Program` says.
    """
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        tops, scale = _both_ceilings(program), _Scale.of(program)
        sides = zip((1.0, -1.0), tops, scale.cleanest, strict=True)
        found = [_lines_bound(program, sign, top, clean, scale) for sign, top, clean in sides]
    return np.stack(found, axis=1)


@dataclass(frozen=True, slots=True)
class _Scale:
    """What both signs share: shot noise and squared proportional noise per signal (P, n+1), round-off of the shot.

    ``cleanest`` holds the least shot noise per signal of either sign, 0 where there is no such signal. (P,) each
    """

    shot: Array
    square: Array
    cleanest: tuple[Array, Array]
    round_off: Array

    @classmethod
    def of(cls, program: Program) -> _Scale:
        ratio = program.signal / np.maximum(program.shot, 1e-300)
        square = np.einsum("prn,prn->pn", program.noise_rows, program.noise_rows)
        return cls(
            shot=1.0 / ratio,
            square=square / program.signal**2,
            cleanest=(_inverse(ratio.max(axis=1)), _inverse(-ratio.min(axis=1))),
            round_off=ROUND_OFF * (program.shot @ np.append(program.width, 1.0)) * program.time_high,
        )


def _inverse(value: Array) -> Array:
    return np.divide(1.0, value, out=np.zeros_like(value), where=value > 0)


def _at_window(program: Program, per_second: Array) -> Array:
    """Least ``per_second·t`` over the exposures allowed. (P,)"""
    return np.where(per_second >= 0, program.time_low, program.time_high) * per_second


def _both_ceilings(program: Program) -> list[Array]:
    """`simple_ceiling` for either sign. [e⁻]"""
    signal, time = program.signal[:, :-1], program.signal[:, -1]
    if np.isfinite(program.heat_cap).any():
        tops = [_full_light(program, sign * signal, sign * time) for sign in (1.0, -1.0)]
        size = np.abs(signal) @ program.width
    else:
        bright, net = np.maximum(signal, 0.0) @ program.width, signal @ program.width
        tops = [-_at_window(program, -(bright + time)), -_at_window(program, -(bright - net - time))]
        size = 2 * bright - net
    bounds = program.bounds + FEASIBILITY_TOLERANCE * row_scale(program)
    for k in range(program.rows.shape[1]):
        row, late = program.rows[:, k, :-1], program.rows[:, k, -1]
        ratio = signal / (row + 1e-300)
        for side, (sign, dearest) in enumerate(((1.0, ratio.max(axis=1)), (-1.0, -ratio.min(axis=1)))):
            own = sign * time
            price = np.maximum(dearest, np.where((own > 0) & (late >= 0), own / (late + 1e-300), 0.0))
            value = price * bounds[:, k] - _at_window(program, price * late - own)
            tops[side] = np.fmin(tops[side], np.where(np.isnan(value), np.inf, value))
    slack = ROUND_OFF * (size + np.abs(time)) * program.time_high
    return [np.maximum(top + slack, 0.0) for top in tops]


def _full_light(program: Program, signal: Array, time: Array) -> Array:
    """Most signal with every LED as far as its own limits go, its heat cap among them. (P,) [e⁻]"""
    heat = cut_prices(program, -signal, program.time_high)
    caps = np.where(np.isfinite(program.heat_cap), program.heat_cap, 0.0)
    bright = np.maximum(signal - heat[:, program.led] * program.heat, 0.0)
    return heat @ caps * (1 + FEASIBILITY_TOLERANCE) - _at_window(program, -(bright @ program.width + time))


def _lines_bound(program: Program, sign: float, top: Array, clean: Array, scale: _Scale) -> Array:
    """Least of what the two lines of `simple_proof` allow, each alone; ``clean`` is the slope of the first. (P,)"""
    signal, pick = program.signal if sign > 0 else -program.signal, np.arange(program.size)
    first = _at_window(program, program.shot[:, -1] - clean * signal[:, -1]) - scale.round_off
    usable = signal > 1e-12 * np.max(signal, axis=1, keepdims=True)
    price = (sign / np.maximum(top, 1e-300))[:, None] * scale.shot + scale.square
    np.putmask(price, ~usable, np.inf)
    best = np.argmin(price, axis=1)
    share = np.where(usable[pick, best], top / signal[pick, best], 0.0)
    noise = program.noise_rows[pick, :, best] * share[:, None]
    cost = program.shot + np.matmul(2 * noise[:, None, :], program.noise_rows)[:, 0]
    theta, free = _second_line(program, signal, cost)
    return _best_single_curve(program.floor, top, (clean, first), (theta, free, np.einsum("pr,pr->p", noise, noise)))


def _second_line(program: Program, signal: Array, cost: Array) -> tuple[Array, Array]:
    """Steepest slope that leaves no column a gain, and what the exposure alone costs then. (P,), (P,)"""
    width = np.append(program.width, 1.0)
    if cost.min(initial=1.0) > 0:  # then no charge pays, of either sign of signal
        theta = _inverse(np.max(signal / cost, axis=1))
        free = _at_window(program, cost[:, -1] - theta * signal[:, -1])
        return theta, free - ROUND_OFF * (cost @ width) * program.time_high
    theta = np.min(np.where(signal > 0, cost / signal, np.inf), axis=1)
    theta = np.where(np.isfinite(theta), theta, 0.0)
    left = cost - theta[:, None] * signal
    free = _at_window(program, left[:, -1] + np.minimum(left[:, :-1], 0.0) @ program.width)
    return theta, free - ROUND_OFF * (np.abs(cost) @ width) * program.time_high


def _best_single_curve(floor: Array, top: Array, line: tuple, second: tuple) -> Array:
    """Largest CNR below the ceiling under the better of: no noise, first line, second line, second parabola. (P,)

    As `codesign.certificate.envelope`, with one curve for the whole stretch and the parabola anchored at the ceiling.
    """
    clean, first = line
    theta, free, square = second
    anchor = np.maximum(top, LEAST_ANCHOR)
    least = anchor**2 / floor
    for slope, offset in ((clean, first), (theta, free - square)):
        height = floor + offset + slope * anchor
        least = np.where((floor + offset > 0) & (height > 0), np.fmin(least, anchor**2 / height), least)
    bend = (theta - clean - square / anchor) / anchor
    rise = clean + free / anchor
    z = np.maximum(1.0 / anchor, -rise / (2 * floor))
    quadratic = floor * z**2 + rise * z + bend
    least = np.where(quadratic > 0, np.fmin(least, 1.0 / quadratic), least)
    return np.where(top > 0, np.sqrt(least), 0.0)
