"""The mathematics once more in a modelling language: slow, readable, and independent of the search.

Nothing in the product calls this file. Tests compare the search with it wherever the problem is convex, and a newcomer
can read here what the fast code computes. Each function takes one program (P = 1).
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass

import numpy as np

from codesign.errors import SolveError
from codesign.program import Array, Program, row_scale


@dataclass(frozen=True, slots=True)
class Slice:
    """Value of one convex program and a point ``y`` (n+1,) that reaches it."""

    value: float
    point: Array


class _Model:
    """The feasible set in unit scale: ``x_j = q_j/(width_j·t_high)``, ``τ = t/t_high``, ``y = column·(x, τ)``."""

    def __init__(self, program: Program) -> None:
        import cvxpy as cp

        if program.size != 1:
            raise ValueError("the reference takes exactly one program")
        self.column = np.append(program.width, 1.0) * program.time_high[0]
        self.u = cp.Variable(self.column.size)
        x, tau = self.u[:-1], self.u[-1]
        size = row_scale(program)[0]
        self.limits = [
            (program.rows[0] * self.column / size[:, None]) @ self.u <= program.bounds[0] / size,
            x >= 0,
            x <= tau,
            tau <= 1,
            tau >= program.time_low[0] / program.time_high[0],
        ]
        for led in np.flatnonzero(np.isfinite(program.heat_cap)):
            own = program.led == led
            heat = (program.heat * self.column[:-1])[own]
            if heat.size:
                self.limits.append(heat @ x[np.flatnonzero(own)] <= program.heat_cap[led])
        self.signal = program.signal[0] * self.column
        self.shot = program.shot[0] * self.column
        self.noise_rows = program.noise_rows[0] * self.column

    def noise(self, unit: float):
        """``(s·y + |R y|²)/unit`` as an expression."""
        import cvxpy as cp

        linear = (self.shot / unit) @ self.u
        if not self.noise_rows.size:
            return linear
        return linear + cp.sum_squares((self.noise_rows / np.sqrt(unit)) @ self.u)

    def least(self, objective, unit: float, *further) -> Slice:
        """Minimise ``objective``, an expression in units of ``unit``."""
        import cvxpy as cp

        problem = cp.Problem(cp.Minimize(objective), [*self.limits, *further])
        with warnings.catch_warnings():  # "inaccurate" here means fewer digits than the ten asked for
            warnings.filterwarnings("ignore", message="Solution may be inaccurate")
            problem.solve(solver=cp.CLARABEL, tol_gap_abs=1e-10, tol_gap_rel=1e-10, tol_feas=1e-10)
        if problem.status not in (cp.OPTIMAL, cp.OPTIMAL_INACCURATE):
            raise SolveError(f"reference: the convex program is {problem.status}; is the signal within reach?")
        return Slice(float(problem.value) * unit, self.u.value * self.column)


def line(program: Program, theta: float) -> Slice:
    """``min (s − θ d)·y + |R y|²`` over the limits: where a line of slope θ touches the noise frontier. [e⁻²]"""
    model = _Model(program)
    slope = theta * model.signal
    unit = max(float(np.max(np.abs(model.shot - slope))), 1e-300)
    return model.least(model.noise(unit) - (slope / unit) @ model.u, unit)


def largest_signal(program: Program) -> Slice:
    """``max d·y`` over the limits: where the noise frontier ends. [e⁻]"""
    model = _Model(program)
    unit = max(float(np.max(np.abs(model.signal))), 1e-300)
    found = model.least(-(model.signal / unit) @ model.u, unit)
    return Slice(-found.value, found.point)


def fixed_signal(program: Program, v: float) -> Slice:
    """``H(v) = min s·y + |R y|²`` over the limits and ``d·y = v``: the noise frontier at signal v. [e⁻²]"""
    model = _Model(program)
    electrons = max(float(np.max(np.abs(model.signal))), 1e-300)
    share = abs(v) / electrons
    growing = float(np.max(np.abs(model.noise_rows), initial=0.0)) * share
    unit = float(program.floor[0]) + float(np.max(model.shot)) * share + growing**2
    return model.least(model.noise(unit), unit, (model.signal / electrons) @ model.u == v / electrons)


def best_by_scan(program: Program, points: int = 200) -> Slice:
    """Largest ``v/√(c + H(v))`` over ``points`` signals v, evenly spaced up to the largest one: the best CNR.

    Zero, at no point in particular, when no signal is positive.
    """
    top = largest_signal(program)
    best = Slice(0.0, top.point)
    if top.value <= 0:
        return best
    for v in np.linspace(0.0, top.value * (1 - 1e-9), points + 1)[1:]:
        try:
            found = fixed_signal(program, float(v))
        except SolveError:  # signals below what ambient light alone gives at the shortest exposure
            continue
        cnr = float(v) / np.sqrt(program.floor[0] + max(found.value, 0.0))
        if cnr > best.value:
            best = Slice(cnr, found.point)
    return best
