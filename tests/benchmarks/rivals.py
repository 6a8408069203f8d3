"""What a user would do otherwise, on the same arrays: each returns the best CNR it found for one or all configurations.

All rivals get feasible points counted only: light is shrunk until every limit holds.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.optimize import differential_evolution, minimize

from codesign.assemble import Assembly
from codesign.program import Array, Program, contrast_to_noise, row_scale
from codesign.search.relaxation import feasible


@dataclass(frozen=True)
class Unit:
    """One program in unit scale: u = (x, τ), each 0 to 1."""

    program: Program
    column: Array
    rows: Array
    right: Array

    @classmethod
    def of(cls, program: Program) -> Unit:
        """Scale one program (P = 1); steady light only, where LED heat is part of the columns."""
        column = np.append(program.width, 1.0) * program.time_high[0]
        size = row_scale(program)[0]
        return cls(program, column, program.rows[0] * column / size[:, None], program.bounds[0] / size)

    @property
    def low(self) -> float:
        """Shortest exposure."""
        return float(self.program.time_low[0] / self.program.time_high[0])

    def reached(self, u: Array) -> float:
        """CNR of the point pulled inside the limits."""
        return float(contrast_to_noise(self.program, feasible(self.program, (np.asarray(u) * self.column)[None]))[0])


def local_ascent(program: Program, starts: int, rng: np.random.Generator) -> float:
    """Best CNR of SLSQP (Kraft 1988) from several starts, with exact gradients."""
    unit, n = Unit.of(program), program.segments
    signal, shot = program.signal[0] * unit.column, program.shot[0] * unit.column
    noise, floor = program.noise_rows[0] * unit.column, program.floor[0]

    def loss(u: Array) -> tuple[float, Array]:
        v, g = signal @ u, noise @ u
        spread = max(floor + shot @ u + g @ g, 1e-12)
        root = np.sqrt(spread)
        return -v / root, -signal / root + v * (shot + 2 * noise.T @ g) / (2 * spread * root)

    share = np.hstack([-np.eye(n), np.ones((n, 1))])  # x ≤ τ
    matrix, right = np.vstack([-unit.rows, share]), np.append(unit.right, np.zeros(n))
    limits = {"type": "ineq", "fun": lambda u: matrix @ u + right, "jac": lambda u: matrix}
    best = 0.0
    for _ in range(starts):
        tau = rng.uniform(max(unit.low, 0.05), 1)
        start = np.append(rng.uniform(0, tau, n) * rng.uniform(0, 0.2), tau)
        bounds = [(0, 1)] * n + [(unit.low, 1)]
        found = minimize(
            loss, start, jac=True, bounds=bounds, constraints=limits, method="SLSQP", options={"maxiter": 200}
        )
        if np.isfinite(found.x).all():
            best = max(best, unit.reached(found.x))
    return best


def evolution(assembly: Assembly, generations: int, population: int, seed: int) -> float:
    """Best CNR of differential evolution (Storn and Price 1997) over camera, filter, drives and exposure.

    Discrete choices are integer genes, the contrast sign is left free, light is shrunk until all limits hold.
    """
    settings, filters = assembly.settings, len(assembly.problem.filters)
    blocks: dict[int, Program] = {}
    segments = assembly.segments(settings[0]).width.size

    def loss(genes: Array) -> float:
        setting = int(genes[0])
        if setting not in blocks:
            blocks[setting] = assembly.program(settings[setting])
        program = blocks[setting].take(int(genes[1]))
        tau = 10 ** genes[2]
        y = np.append(genes[3:] * tau * program.width, tau) * program.time_high[0]
        return -abs(float(contrast_to_noise(program, feasible(program, y[None]))[0]))

    bounds = [(0, len(settings) - 1), (0, filters - 1), (-2.0, 0.0), *[(0.0, 1.0)] * segments]
    found = differential_evolution(
        loss,
        bounds,
        integrality=[True, True] + [False] * (segments + 1),
        maxiter=generations,
        popsize=population,
        seed=seed,
        polish=False,
        init="random",
    )
    return -float(found.fun)


def global_solver(gap: float, limit_s: float) -> Callable[[Program], tuple[float, bool]]:
    """The SCIP solver on one program: its best CNR and whether it proved the gap in time."""
    import pyscipopt

    def solve(program: Program) -> tuple[float, bool]:
        unit, n = Unit.of(program), program.segments
        signal, shot = program.signal[0] * unit.column, program.shot[0] * unit.column
        noise, floor = program.noise_rows[0] * unit.column, float(program.floor[0])
        scale = max(float(np.maximum(signal, 0).sum()), 1e-9)  # signals in units of the largest possible
        model = pyscipopt.Model()
        model.hideOutput()
        u = [model.addVar(lb=0, ub=1) for _ in range(n)] + [model.addVar(lb=unit.low, ub=1)]
        for row, right in zip(unit.rows, unit.right, strict=True):
            model.addCons(pyscipopt.quicksum(float(a) * x for a, x in zip(row, u, strict=True)) <= float(right))
        for x in u[:-1]:
            model.addCons(x <= u[-1])
        v = model.addVar(lb=0, ub=1)
        spread = model.addVar(lb=floor / scale, ub=None)
        square = model.addVar(lb=0, ub=None)  # CNR²
        total = lambda row, by: pyscipopt.quicksum(float(a / by) * x for a, x in zip(row, u, strict=True))  # noqa: E731
        model.addCons(v == total(signal, scale))
        parts = []
        for row in noise:
            g = model.addVar(lb=None, ub=None)
            model.addCons(g == total(row, np.sqrt(scale)))
            parts.append(g * g)
        model.addCons(spread >= floor / scale + total(shot, scale) + pyscipopt.quicksum(parts))
        model.addCons(square * spread <= scale * v * v)
        model.setObjective(square, "maximize")
        model.setParam("limits/gap", 2 * gap)  # of CNR², so half of it in CNR
        model.setParam("limits/time", limit_s)
        model.optimize()
        if not model.getNSols():
            return 0.0, model.getStatus() in ("optimal", "gaplimit", "infeasible")
        best = model.getBestSol()
        point = np.clip([best[x] for x in u], 0, 1)
        return unit.reached(point), model.getStatus() in ("optimal", "gaplimit")

    return solve
