"""Which drive segments are likely to carry the light of a program: batches leave the others out, then price them."""

from __future__ import annotations

import numpy as np

from codesign.program import Array, Program, segment_room

#: Columns with less signal than this share of the most are not worth having.
_FAINT = 1e-6


def promising(program: Program, theta: Array | None, count: int) -> np.ndarray:
    """Return the most promising columns of each program, in ascending order. (P, count)

    A column is as promising as the best of its scores, each relative to the best column of the program: signal within
    its own limits, signal per use of each limit and, where noise counts (``theta`` given), signal per noise.
    """
    signal = np.maximum(program.signal[:, :-1], 0.0)
    reach = signal * segment_room(program, program.time_high)[0]
    score = _relative(reach)
    signal = np.where(score > _FAINT, signal, 0.0)
    prices = [program.rows[:, k, :-1] for k in range(program.rows.shape[1])]
    if theta is not None:
        square = np.einsum("prn,prn->pn", program.noise_rows[:, :, :-1], program.noise_rows[:, :, :-1])
        prices += [program.shot[:, :-1], np.divide(square, signal, out=np.zeros_like(square), where=signal > 0)]
    for price in prices:
        worth = np.divide(signal, price, out=np.zeros_like(signal), where=price > 0)
        np.maximum(score, _relative(worth), out=score)
    return np.sort(np.argpartition(-score, count - 1, axis=1)[:, :count], axis=1)


def _relative(score: Array) -> Array:
    return score / np.maximum(score.max(axis=1, keepdims=True), 1e-300)
