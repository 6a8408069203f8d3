"""Build limits as linear rows over charge and time: what whole units imply for the light.

A unit carries at most ``width·t`` in each drive segment, so an LED with ``n`` of ``N`` units in use has
``q_j ≤ width_j·t·n/N``, hence ``n/N ≥ Σ_j w_j q_j/(width_j t)`` for any weights ``w ≥ 0`` that sum to 1. Put into
``Σ cost ≤ bound`` this is a row with bound 0 and a negative time entry, like a limit on power while on.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from codesign.build import BuildLimit, Units, build_limits, other_prices, root_box
from codesign.limits import Setting
from codesign.problem import Problem
from codesign.program import Array

#: Room left for LEDs is raised to this share of the dearest LED: a row without any room has no scale.
LEAST_ROOM = 1e-6


def shares(led: np.ndarray, width: Array, value: Array) -> Array:
    """Entries ``w_j/width_j`` for weights proportional to ``value·width`` within each LED. (n,) [1/A]"""
    total = np.bincount(led, value * width)
    return value / np.maximum(total[led], 1e-300)


def first_shares(led: np.ndarray, width: Array) -> Array:
    """Entries ``w_j/width_j`` for all weight on each LED's first segment. (n,) [1/A]"""
    first = np.diff(led, prepend=-1) > 0
    return np.where(first, 1.0 / np.maximum(width, 1e-300), 0.0)


def root_slopes(limit: BuildLimit, low: Units, most: Units) -> Array:
    """Cost of each LED per share of its units, 0 for LEDs in use anyway, whose least cost is spent. (L,)"""
    return np.where(low > 0, 0.0, limit.first + limit.each * most)


def with_build_rows(
    problem: Problem, setting: Setting, segments: Any, filters: Any, coupled: tuple[Array, Array, tuple[str, ...]]
) -> tuple[Array, Array, tuple[str, ...]]:
    """Append the build limits to the coupling rows ``(P, m, n+1)``, ``(P, m)`` and their names."""
    limits = build_limits(problem)
    if not limits:
        return coupled
    rows, bounds, names = coupled
    box = root_box(problem)
    share = shares(segments.led, segments.width, segments.flux)
    further = []
    for limit in limits:
        slope = root_slopes(limit, box.low, box.high)
        room = np.full(len(rows), limit.bound - float(limit.cost(box.low).sum()))
        if limit.name == "price":
            room = room - other_prices(problem, setting.camera)[filters]
        room = np.maximum(room, LEAST_ROOM * max(float(slope.max(initial=0.0)), 1e-300))
        row = np.broadcast_to(slope[segments.led] * share, (len(rows), segments.width.size))
        further.append(np.concatenate([row, -room[:, None]], axis=1))
    added = np.stack(further, axis=1)
    nothing = np.zeros((len(rows), len(limits)))
    return (
        np.concatenate([rows, added], axis=1),
        np.concatenate([bounds, nothing], axis=1),
        (*names, *(limit.name for limit in limits)),
    )
