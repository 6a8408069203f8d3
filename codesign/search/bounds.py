"""A closed-form upper bound for thousands of programs at once, as multipliers the proof checker accepts.

Ceiling on the signal: the best of one price per limit (``λ_k = max_j d_j/A_kj``, the others 0) and of no price at
all (every LED full on). Lines: no LED has less shot noise per signal than the best ratio ``min_j s_j/d_j``, and with
signal-proportional noise the same once more, tangent at the ceiling.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from codesign.certificate import Line, Proof, bound, signal_ceiling
from codesign.program import Array, Program, segment_room


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


def _zero_line(program: Program) -> Line:
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
        trial = _zero_line(program)
        trial.limit[:, k] = np.where(usable, price, 0.0)
        reached = signal_ceiling(program, trial)
        better = usable & (reached < value)
        value = np.where(better, reached, value)
        limit[better], heat[better] = trial.limit[better], 0.0
    return replace(best, limit=limit, heat=heat), value


def _full_drive(program: Program) -> Line:
    """Every LED as far as its own limits go at the longest exposure."""
    line = _zero_line(program)
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
    return replace(_zero_line(program), theta=theta, noise=noise, anchor=np.maximum(top, 1e-300))


def lone_led_noise(program: Program, top: Array) -> Array:
    """``g = R y`` of the single column that would be best at the signal ceiling, as a guess where to be tangent. (P, r)"""
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
