"""Closed-form bounds over all recipes and weights of many configurations whose readings are combined.

Readings m have signals ``d_m·y_m``, variances of their own ``V_m(y_m)`` and rows of noise in common ``C_m y_m``. For
any multipliers g, with ``e_m = d_m − C_mᵀ g``,

    Σ w_m d_m·y_m = g·(Σ w_m C_m y_m) + Σ w_m e_m·y_m,

and by the inequality of Cauchy and Schwarz, the parts of the noise being ``|Σ w_m C_m y_m|²`` and ``w_m² V_m``,

    CNR² ≤ |g|² + Σ_m max over y (e_m·y)²/V_m(y).

Each maximum is a plain program whose signal is what is left of the contrast, bounded by `codesign.search.bounds`. With
g = 0 readings count as if they shared nothing; a good g says that contrast which looks like the spread of a surface or
like the fixed pattern cannot be had by more light or other weights. Any g is valid; a poor one only costs tightness.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from codesign.program import Array, Program
from codesign.search.bounds import both_bounds


def first_bounds(programs: Sequence[Program], own: int, repeats: int = 1) -> Array:
    """Bounds on the CNR of blocks of configurations, whatever the weights. (P,)

    Parameters
    ----------
    programs : sequence of Program
        One block for each reading: its limits, its signal, and as ``shot`` and ``floor`` what noise is its own.
    own : int
        Leading noise rows that are each reading's own; the others are common to all.
    repeats : int
        Readings that each block stands for: shots that may all take the same recipes.
    """
    nothing = np.zeros((programs[0].size, programs[0].noise_rows.shape[1] - own))
    found = [_bound(programs, own, repeats, g) for g in (nothing, _multipliers(programs, own, repeats))]
    return np.fmin(*found) if nothing.shape[1] else found[0]


def _bound(programs: Sequence[Program], own: int, repeats: int, g: Array) -> Array:
    """What multipliers g (P, r) prove. (P,)"""
    total = np.einsum("pr,pr->p", g, g)
    for program in programs:
        common = program.noise_rows[:, own:]
        left = replace(
            program,
            signal=program.signal - np.einsum("pr,prn->pn", g, common),
            noise_rows=program.noise_rows[:, :own],
        )
        total = total + repeats * both_bounds(left).max(axis=1) ** 2
    return np.sqrt(total)


def _multipliers(programs: Sequence[Program], own: int, repeats: int) -> Array:
    """Good multipliers g: the least of the bound where each column counts on its own, as a sum of squares. (P, r)"""
    size, rows = programs[0].size, programs[0].noise_rows.shape[1] - own
    matrix, right = np.tile(np.eye(rows), (size, 1, 1)), np.zeros((size, rows))
    for program in programs:
        common, most = program.noise_rows[:, own:], _most(program)
        weighted = common * (repeats * most**2 / (program.floor[:, None] + program.shot * most))[:, None]
        matrix += weighted @ common.transpose(0, 2, 1)
        right += np.einsum("prn,pn->pr", weighted, program.signal)
    return np.linalg.solve(matrix, right[..., None])[..., 0]


def _most(program: Program) -> Array:
    """Most of each column by one limit at a time: current, longest exposure, each row. (P, n+1)"""
    found = np.append(program.width, 1.0) * program.time_high[:, None]
    for row, limit in zip(program.rows.transpose(1, 0, 2), program.bounds.T, strict=True):
        with np.errstate(divide="ignore"):
            found = np.fmin(found, np.where(row > 0, limit[:, None] / row, np.inf))
    return found
