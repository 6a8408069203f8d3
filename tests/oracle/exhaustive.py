"""Best CNR of small programs by brute force: every vertex, or many local searches from everywhere."""

from __future__ import annotations

from itertools import combinations

import numpy as np
from random_programs import repeated, shrunk
from scipy.optimize import differential_evolution, minimize

from codesign.program import Array, Program, contrast_to_noise, violation

#: Subsets of constraints solved at a time.
_BATCH = 20_000


def half_spaces(program: Program) -> tuple[Array, Array]:
    """All limits of one program as ``G u ≤ h`` over ``u = (q/(width·t_high), t/t_high)``, rows of unit size."""
    n = program.segments
    column = np.append(program.width, 1.0) * program.time_high[0]
    ceiling = np.hstack([np.eye(n), -np.ones((n, 1))])
    rows = [program.rows[0] * column, ceiling, -np.eye(n + 1)[:n]]
    right = [program.bounds[0], np.zeros(n), np.zeros(n)]
    for led in np.flatnonzero(np.isfinite(program.heat_cap)):
        rows.append(np.append(np.where(program.led == led, program.heat, 0.0), 0.0)[None] * column)
        right.append(program.heat_cap[led : led + 1])
    rows.append(np.append(np.zeros(n), 1.0)[None] * [[1.0], [-1.0]])
    right.append(np.array([1.0, -program.time_low[0] / program.time_high[0]]))
    g, h = np.concatenate(rows), np.concatenate(right)
    size = np.abs(g).max(axis=1)
    return g / size[:, None], h / size


def vertices(program: Program) -> Array:
    """Every vertex of the feasible set of one program, (V, n+1), by trying all sets of n+1 limits."""
    g, h = half_spaces(program)
    size = g.shape[1]
    column = np.append(program.width, 1.0) * program.time_high[0]
    subsets = np.array(list(combinations(range(len(h)), size)))
    found = []
    for part in np.array_split(subsets, max(len(subsets) // _BATCH, 1)):
        square = g[part]
        regular = np.abs(np.linalg.det(square)) > 1e-13
        corner = np.linalg.solve(square[regular], h[part][regular][:, :, None])[:, :, 0]
        inside = (corner @ g.T <= h + 1e-9).all(axis=1)
        found.append(corner[inside] * column)
    return np.concatenate(found)


def best_vertex(program: Program) -> float:
    """Best CNR over all vertices; with R = 0 the squared CNR is convex, so this is the optimum."""
    corners = vertices(program)
    return float(contrast_to_noise(repeated(program, len(corners)), corners).max())


def best_by_search(program: Program, rng: np.random.Generator, starts: int = 12) -> float:
    """Best CNR by differential evolution and by ascents from its best and from random points."""
    n = program.segments
    low = program.time_low[0] / program.time_high[0]
    column = np.append(program.width, 1.0) * program.time_high[0]

    def points(share: Array) -> Array:
        """Shares (N, n+1) of each segment's range and of the exposure range, pulled inside all limits."""
        tau = low + (1 - low) * share[:, -1:]
        return shrunk(program, np.hstack([share[:, :-1] * tau, tau]) * column)

    def loss(share: Array) -> Array:
        y = points(np.atleast_2d(share.T))
        return -contrast_to_noise(repeated(program, len(y)), y)

    box = [(0.0, 1.0)] * (n + 1)
    evolved = differential_evolution(
        loss, box, rng=rng, vectorized=True, updating="deferred", maxiter=60, popsize=10, tol=1e-10, polish=False
    )
    first = points(np.vstack([evolved.x, rng.uniform(size=(starts, n + 1))]))
    return max(-float(evolved.fun), *(_ascend(program, y / column) for y in first))


def _ascend(program: Program, start: Array) -> float:
    """Local ascent of the CNR from ``start`` in unit scale; 0 when it ends outside the limits."""
    g, h = half_spaces(program)
    column = np.append(program.width, 1.0) * program.time_high[0]
    d, s, rows = program.signal[0] * column, program.shot[0] * column, program.noise_rows[0] * column

    def loss(u: Array) -> tuple[float, Array]:
        noise = rows @ u
        variance = max(program.floor[0] + s @ u + noise @ noise, 1e-2 * program.floor[0])  # also outside the limits
        signal = d @ u
        slope = (s + 2 * noise @ rows) / 2
        return -signal / np.sqrt(variance), -(d - signal / variance * slope) / np.sqrt(variance)

    inside = {"type": "ineq", "fun": lambda u: h - g @ u, "jac": lambda u: -g}
    found = minimize(
        loss, start, jac=True, constraints=[inside], method="SLSQP", options={"maxiter": 60, "ftol": 1e-12}
    )
    y = shrunk(program, np.clip(found.x, 0.0, 1.0)[None] * column)
    return float(contrast_to_noise(program, y)[0]) if violation(program, y)[0] <= 1e-9 else 0.0
