"""How the optimum of one configuration moves with anything in the problem, the LEDs' own warming included.

The conditions of the optimum and of its junction temperatures (`codesign.solve_joint`) are one system F(z; p) = 0 in
z = (u, τ, μ, λ, T). Its derivative along z is solved once with the row of τ = log CNR; the resulting weights w give the
derivative of log CNR along any quantity as ``−w·∂F/∂p``: the multipliers of the limits, with the feedback through the
temperatures in them. ∂F/∂p comes from the arrays of two nudged problems, at the same z. So a change that brings heat or
flux is met by temperatures that settle again, as in a problem solved anew.
"""

from __future__ import annotations

import numpy as np

from codesign.problem import Problem
from codesign.program import Array
from codesign.search.stationary import warm_ends
from codesign.solve_joint import Optimum


class Tangent:
    """Derivatives of log CNR at an optimum."""

    def __init__(self, optimum: Optimum) -> None:
        self.optimum = optimum
        state, rig = optimum.state, optimum.rig
        system = state.system(rig, warm_ends(rig, state.junction_c))
        wanted = np.zeros(len(system))
        wanted[state.u.size] = 1.0  # τ
        self._weights = np.linalg.lstsq(system.T, wanted, rcond=1e-13)[0]

    def slope(self, low: Problem, high: Problem, span: float) -> float:
        """Derivative of log CNR between two narrowed problems nudged by ``span`` in sum.

        NaN where they differ in shape.
        """
        ends = [self._residual(problem) for problem in (low, high)]
        if any(end.shape != self._weights.shape for end in ends):
            return float("nan")
        return float(-self._weights @ (ends[1] - ends[0]) / span)

    def row_price(self, name: str) -> float:
        """Derivative of log CNR per unit of the bound of one coupling row, e.g. of a well."""
        state = self.optimum.state
        row = state.programs[0].row_names.index(name)
        if not state.active[row]:
            return 0.0
        position = state.u.size + 1 + int(state.pairs.sum()) + int(state.active[:row].sum())
        return float(-self._weights[position] / state.scale.row[row])

    def _residual(self, problem: Problem) -> Array:
        state, rig = self.optimum.state, self.optimum.rig.at(problem)
        programs = rig.programs(state.junction_c)
        if programs[0].segments + 1 != state.u.size or programs[0].rows.shape[1] != state.scale.row.size:
            return np.zeros(0)
        return state.residual(programs, state.junction_c, rig)
