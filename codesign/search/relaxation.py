"""One convex program at full accuracy, handed straight to a well-kept interior-point library.

``min (s − θ d)·y + |R y|²`` over the limits of one program. Only the linear cost changes with θ, so the matrices
are assembled once per program. The multipliers come back in SI units for `codesign.certificate`.
"""

from __future__ import annotations

from functools import cached_property

import clarabel
import numpy as np
from scipy.sparse import csc_matrix

from codesign.certificate import Line
from codesign.program import Array, Program, segment_room


def _settings() -> clarabel.DefaultSettings:
    settings = clarabel.DefaultSettings()
    settings.verbose = False
    settings.tol_gap_abs = settings.tol_gap_rel = 1e-10
    settings.tol_feas = 1e-10
    settings.max_iter = 60
    settings.presolve_enable = False
    return settings


class ConvexSlice:
    """The convex programs of one configuration, one for each slope θ of the noise frontier."""

    def __init__(self, program: Program) -> None:
        if program.size != 1:
            raise ValueError("ConvexSlice takes exactly one program")
        self.program = program
        self.column = np.append(program.width, 1.0) * program.time_high[0]
        self.bounds = np.where(program.bounds[0] > 0, program.bounds[0], 1.0)
        self.heat_leds = np.flatnonzero(np.isfinite(program.heat_cap))

    @cached_property
    def _keep(self) -> np.ndarray:
        """Columns that can help: without clutter of mixed sign an LED that lowers the signal never does."""
        program = self.program
        useful = program.signal[0, :-1] > 0
        mixed = (program.noise_rows[0] < 0).any()
        return np.append(np.ones_like(useful) if mixed else useful, True)

    @cached_property
    def _matrices(self) -> tuple[csc_matrix, csc_matrix, Array]:
        """Quadratic cost, constraint matrix and right-hand side over (kept y, g = R y) in unit scale."""
        program, keep = self.program, self._keep
        column = self.column[keep]
        noise = program.noise_rows[0][:, keep] * column
        rank, n = noise.shape
        n -= 1
        unit = np.sqrt(self._noise_unit)
        led, heat = program.led[keep[:-1]], program.heat[keep[:-1]]
        parts = [
            np.hstack([noise / unit, -np.eye(rank)]),
            np.hstack([program.rows[0][:, keep] * column / self.bounds[:, None], np.zeros((len(self.bounds), rank))]),
            np.hstack([np.eye(n), -np.ones((n, 1)), np.zeros((n, rank))]),
            np.hstack([-np.eye(n), np.zeros((n, 1 + rank))]),
        ]
        right = [np.zeros(rank), program.bounds[0] / self.bounds, np.zeros(2 * n)]
        if self.heat_leds.size:
            share = np.where(led == self.heat_leds[:, None], heat * column[:-1], 0.0)
            share /= program.heat_cap[self.heat_leds][:, None]
            parts.append(np.hstack([share, np.zeros((share.shape[0], 1 + rank))]))
            right.append(np.ones(share.shape[0]))
        ends = np.zeros((2, n + 1 + rank))
        ends[:, n] = 1.0, -1.0
        parts.append(ends)
        right.append(np.array([1.0, -program.time_low[0] / program.time_high[0]]))
        quadratic = csc_matrix(np.diag(np.append(np.zeros(n + 1), np.full(rank, 2.0))))
        return quadratic, csc_matrix(np.vstack(parts)), np.concatenate(right)

    @cached_property
    def _noise_unit(self) -> float:
        """Variance scale that makes g of order one. [e⁻²]"""
        noise = np.abs(self.program.noise_rows[0] * self.column).sum(axis=1)
        return float(max(np.max(noise, initial=0.0) ** 2, 1e-300))

    def solve(self, theta: float | None) -> tuple[Line, Array]:
        """Return the multipliers of the line of slope ``theta`` (None: of the signal ceiling) and the best point.

        The point is (n+1,), feasible to round-off. Accuracy is not trusted: the caller re-derives the bound.
        """
        program, keep = self.program, self._keep
        cost = -program.signal[0] if theta is None else program.shot[0] - theta * program.signal[0]
        cost = (cost * self.column)[keep]
        quadratic, matrix, right = self._matrices
        rank = program.noise_rows.shape[1]
        unit = max(float(np.max(np.abs(cost))), 1e-300)
        weight = 0.0 if theta is None else self._noise_unit / unit
        n_inequalities = right.size - rank
        cones = [clarabel.ZeroConeT(rank), clarabel.NonnegativeConeT(n_inequalities)]
        linear = np.append(cost / unit, np.zeros(rank))
        solution = clarabel.DefaultSolver(quadratic * weight, linear, matrix, right, cones, _settings()).solve()
        return self._line(theta, np.asarray(solution.z), unit), self._point(np.asarray(solution.x))

    def _line(self, theta: float | None, duals: Array, unit: float) -> Line:
        program = self.program
        rank, m, n = program.noise_rows.shape[1], len(self.bounds), int(self._keep.sum()) - 1
        duals = np.maximum(np.nan_to_num(duals), 0.0) if rank == 0 else np.nan_to_num(duals)
        limit = np.maximum(duals[rank : rank + m], 0.0) * unit / self.bounds
        heat = np.zeros(program.heat_cap.size)
        at = rank + m + 2 * n
        heat[self.heat_leds] = (
            np.maximum(duals[at : at + self.heat_leds.size], 0.0) * unit / program.heat_cap[self.heat_leds]
        )
        # The multiplier of g = R y is 2 g itself.
        noise = np.zeros(rank) if theta is None else duals[:rank] * unit / (2 * np.sqrt(self._noise_unit))
        return Line(
            theta=np.array([0.0 if theta is None else theta]), limit=limit[None], heat=heat[None], noise=noise[None]
        )

    def _point(self, scaled: Array) -> Array:
        y = np.zeros(self.column.size)
        y[self._keep] = np.nan_to_num(scaled[: int(self._keep.sum())])
        y *= self.column
        return feasible(self.program, y[None])[0]


def feasible(program: Program, y: Array) -> Array:
    """Pull nearly feasible points inside: clip to the boxes and shrink the light until every row holds. (P, n+1)"""
    t = np.clip(y[:, -1], program.time_low, program.time_high)
    q = np.clip(y[:, :-1], 0.0, program.width * t[:, None])
    capped = np.isfinite(program.heat_cap)
    if capped.any():
        load = np.zeros((program.size, program.heat_cap.size))
        np.add.at(load, (slice(None), program.led), q * program.heat)
        shrink = np.where(capped, np.minimum(1.0, program.heat_cap / np.maximum(load, 1e-300)), 1.0)
        q = q * shrink[:, program.led]
    used = np.einsum("pmn,pn->pm", program.rows[:, :, :-1], q)
    room = program.bounds - program.rows[:, :, -1] * t[:, None]
    shrink = np.min(np.where(used > 0, room / np.maximum(used, 1e-300), 1.0), axis=1, initial=1.0)
    q = q * np.clip(shrink, 0.0, 1.0)[:, None]
    return np.hstack([q, t[:, None]])


def exact_room(program: Program, t: float) -> Array:
    """Room of each segment of a single program at exposure ``t``. (n,) [A s]"""
    return segment_room(program, np.array([t]))[0][0]
