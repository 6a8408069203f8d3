"""One convex program at full accuracy, handed straight to a well-kept interior-point library.

``min (s − θ d)·y + |R y|²`` over the limits of one program. Only the linear cost changes with θ, so the matrices
are assembled once per program. The multipliers come back in SI units for `codesign.certificate`.
"""

from __future__ import annotations

from copy import copy
from functools import cache, cached_property

import clarabel
import numpy as np

from codesign.certificate import Line
from codesign.program import Array, Program, row_scale


class Columns:
    """A matrix in compressed columns, as the library reads it.

    Says no more than the library asks of a sparse matrix; importing a whole sparse package for this would
    cost a third of the time a small problem takes.
    """

    has_canonical_format = True

    def __init__(self, dense: Array) -> None:
        column, row = np.nonzero(dense.T)
        self.shape = dense.shape
        self.indices = row.astype(np.int64)
        self.indptr = np.searchsorted(column, np.arange(dense.shape[1] + 1)).astype(np.int64)
        self.data = dense[row, column]

    def scaled(self, factor: float) -> Columns:
        """Return the matrix times a number."""
        twin = copy(self)
        twin.data = self.data * factor
        return twin


@cache
def solver_settings(accuracy: float) -> clarabel.DefaultSettings:
    """Settings of the interior-point library: quiet, no presolve, gaps and residuals to ``accuracy``."""
    settings = clarabel.DefaultSettings()
    settings.verbose = False
    settings.tol_gap_abs = settings.tol_gap_rel = settings.tol_feas = accuracy
    settings.max_iter = 60
    settings.presolve_enable = False
    return settings


class ConvexSlice:
    """The convex programs of one configuration over some of its columns, one for each slope θ of the noise frontier.

    Columns left out only make the answer less good, never the bound wrong: the caller prices them (`reduced_cost`)
    and brings in those that pay.
    """

    def __init__(self, program: Program, columns: np.ndarray) -> None:
        if program.size != 1:
            raise ValueError("ConvexSlice takes exactly one program")
        self.program = program
        self.columns = columns
        self.column = np.append(program.width, 1.0) * program.time_high[0]
        self.size = row_scale(program)[0]
        self.keep = np.append(columns, program.segments)
        noise = program.noise_rows[0][:, self.keep] * self.column[self.keep]
        self.noise_unit = float(max(np.max(np.abs(noise).sum(axis=1), initial=0.0) ** 2, 1e-300))
        self.led = program.led[columns]
        self.heat_leds = np.unique(self.led[np.isfinite(program.heat_cap[self.led])])
        # Size of each LED's heat row: its cap, or where there is none to speak of a part of what it could make.
        most = np.bincount(program.led, program.heat * self.column[:-1], minlength=program.heat_cap.size)
        self.heat_size = np.maximum(program.heat_cap, 1e-6 * most)[self.heat_leds]

    @cached_property
    def _matrices(self) -> tuple[Columns, Columns, Array]:
        """Quadratic cost, constraint matrix and right-hand side over (kept y, g = R y) in unit scale."""
        program, keep = self.program, self.keep
        column = self.column[keep]
        noise = program.noise_rows[0][:, keep] * column
        rank, n, m = noise.shape[0], self.columns.size, self.size.size
        heated = self.heat_leds.size
        matrix = np.zeros((rank + m + 2 * n + heated + 2, n + 1 + rank))
        right = np.zeros(matrix.shape[0])
        matrix[:rank, : n + 1] = noise / np.sqrt(self.noise_unit)
        matrix[np.arange(rank), n + 1 + np.arange(rank)] = -1.0
        matrix[rank : rank + m, : n + 1] = program.rows[0][:, keep] * column / self.size[:, None]
        right[rank : rank + m] = program.bounds[0] / self.size
        at, index = rank + m, np.arange(n)
        matrix[at + index, index], matrix[at : at + n, n] = 1.0, -1.0
        matrix[at + n + index, index] = -1.0
        at += 2 * n
        share = np.where(self.led == self.heat_leds[:, None], program.heat[self.columns] * column[:-1], 0.0)
        matrix[at : at + heated, :n] = share / self.heat_size[:, None]
        right[at : at + heated] = program.heat_cap[self.heat_leds] / self.heat_size
        matrix[at + heated :, n] = 1.0, -1.0
        right[at + heated :] = 1.0, -program.time_low[0] / program.time_high[0]
        quadratic = np.diag(np.append(np.zeros(n + 1), np.full(rank, 2.0)))
        return Columns(quadratic), Columns(matrix), right

    def solve(self, theta: float | None) -> tuple[Line, Array]:
        """Return the multipliers of the line of slope ``theta`` (None: of the signal ceiling) and the best point.

        The point is (n+1,) over all columns, feasible to round-off. Accuracy is not trusted: the caller re-derives
        the bound.
        """
        program = self.program
        cost = -program.signal[0] if theta is None else program.shot[0] - theta * program.signal[0]
        cost = (cost * self.column)[self.keep]
        quadratic, matrix, right = self._matrices
        rank = program.noise_rows.shape[1]
        unit = max(float(np.max(np.abs(cost))), 1e-300)
        weight = 0.0 if theta is None else self.noise_unit / unit
        cones = [clarabel.ZeroConeT(rank), clarabel.NonnegativeConeT(right.size - rank)]
        linear = np.append(cost / unit, np.zeros(rank))
        solution = clarabel.DefaultSolver(
            quadratic.scaled(weight), linear, matrix, right, cones, solver_settings(1e-10)
        ).solve()
        point = self._point(np.asarray(solution.x))
        return self._line(theta, _finite(np.asarray(solution.z)), unit, point), point

    def _line(self, theta: float | None, duals: Array, unit: float, point: Array) -> Line:
        program = self.program
        rank, m, n = program.noise_rows.shape[1], self.size.size, self.columns.size
        heat = np.zeros(program.heat_cap.size)
        at = rank + m + 2 * n
        prices = np.maximum(duals[at : at + self.heat_leds.size], 0.0)
        heat[self.heat_leds] = prices * unit / self.heat_size
        # The multiplier of g = R y is 2 g itself.
        noise = np.zeros(rank) if theta is None else duals[:rank] * unit / (2 * np.sqrt(self.noise_unit))
        return Line(
            theta=np.array([0.0 if theta is None else theta]),
            limit=(np.maximum(duals[rank : rank + m], 0.0) * unit / self.size)[None],
            heat=heat[None],
            noise=noise[None],
            anchor=np.array([max(float(program.signal[0] @ point), 1e-300)]),
        )

    def _point(self, scaled: Array) -> Array:
        y = np.zeros(self.column.size)
        y[self.keep] = _finite(scaled[: self.keep.size])
        return feasible(self.program, (y * self.column)[None])[0]


def _finite(values: Array) -> Array:
    return values if np.isfinite(values).all() else np.nan_to_num(values)


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
