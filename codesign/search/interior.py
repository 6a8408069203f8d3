"""A primal-dual interior point over many small programs at once, for good multipliers rather than last digits.

Solves, for each program of a block,  min (s − θ d)·y + |R y|²  (or  min −d·y)  over its limits. LED heat caps
enter as the boxes they leave at the longest exposure; the exact multipliers for them are put back in closed form
afterwards (`junction_prices`). Whatever comes out is judged by
`codesign.certificate`, so this file needs no trust.

Method: Mehrotra's predictor-corrector (SIAM J. Optim. 2, 575, 1992). The LED boxes make the normal matrix an
arrow plus a few rows, so one step costs O(n·(m+r)) per program and is all array operations.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from codesign.certificate import Line
from codesign.program import Array, Program, row_scale, segment_room, variance
from codesign.search.bounds import cut_prices, junction_prices
from codesign.search.columns import promising

#: Fewer columns than these more than wanted are not worth leaving out.
SPARE_COLUMNS = 8
#: What columns left out may add to the signal or take off the noise, as a share, before they are brought in.
LOOSE_COLUMNS = 1e-3


@dataclass(slots=True)
class _Scaled:
    """One block in unit scale: x = q/(width·t_high), τ = t/t_high, rows divided by their bounds."""

    cost: Array
    rows: Array
    right: Array
    noise_rows: Array
    low: Array
    box: Array | None
    unit: Array

    @property
    def size(self) -> int:
        return self.cost.shape[0]

    def only(self, columns: np.ndarray) -> _Scaled:
        """The block with some columns of each program, (P, k), and the exposure."""
        last = np.full((self.size, 1), self.cost.shape[1] - 1)
        kept = np.hstack([columns, last])
        return replace(
            self,
            cost=np.take_along_axis(self.cost, kept, axis=1),
            rows=np.take_along_axis(self.rows, kept[:, None, :], axis=2),
            noise_rows=np.take_along_axis(self.noise_rows, kept[:, None, :], axis=2),
            box=None if self.box is None else np.take_along_axis(self.box, columns, axis=1),
        )


def _scale(program: Program, cost: Array, noise_rows: Array) -> tuple[_Scaled, Array]:
    """Return the scaled block and the factor each program's objective was divided by."""
    column = np.hstack([program.width * program.time_high[:, None], program.time_high[:, None]])
    scaled_cost = cost * column
    unit = np.maximum(np.max(np.abs(scaled_cost), axis=1), 1e-300)
    size = row_scale(program)
    box = None
    if np.isfinite(program.heat_cap).any():
        box = np.maximum(segment_room(program, program.time_high)[0] / column[:, :-1], 1e-4)
    return _Scaled(
        cost=scaled_cost / unit[:, None],
        rows=program.rows * column[:, None, :] / size[:, :, None],
        right=program.bounds / size,
        noise_rows=noise_rows * column[:, None, :] / np.sqrt(unit)[:, None, None],
        low=np.minimum(program.time_low / program.time_high, 1 - 1e-6),
        box=box,
        unit=unit,
    ), column


class _State:
    """Slacks and duals of every program of a scaled block; slack lists are kept, not recomputed, to save digits.

    Order of both lists: x ≥ 0, τ − x ≥ 0, b − A y ≥ 0, τ − low ≥ 0, 1 − τ ≥ 0, and box − x ≥ 0 where there are boxes.
    ``exact`` asks for a step of refinement in each solution, which rough multipliers do without.
    """

    def __init__(self, block: _Scaled, *, exact: bool) -> None:
        tau = 0.5 * (1 + block.low)
        load = block.rows[:, :, :-1].sum(axis=2)
        room = block.right - block.rows[:, :, -1] * tau[:, None]
        share = np.min(np.where(load > 0, room / np.maximum(load, 1e-300), np.inf), axis=1, initial=np.inf)
        level = 0.5 * np.minimum(tau, share)
        if block.box is not None:
            level = np.minimum(level, 0.5 * block.box.min(axis=1))
        level = np.maximum(level, 1e-9)
        x = np.repeat(level[:, None], block.cost.shape[1] - 1, axis=1)
        self.block = block
        self.exact = exact
        self.slack = [
            x,
            tau[:, None] - x,
            room - load * level[:, None],
            (tau - block.low)[:, None],
            (1.0 - tau)[:, None],
        ]
        if block.box is not None:
            self.slack.append(block.box - x)
        self.dual = self._feasible_duals()

    def _feasible_duals(self) -> list[Array]:
        """Duals that already satisfy stationarity: each box pair absorbs whatever the gradient leaves over."""
        block = self.block
        limit = np.full(self.slack[2].shape, 0.1)
        gradient = self.gradient() + np.einsum("pm,pmn->pn", limit, block.rows)
        inner, spare = gradient[:, :-1], 0.02
        at_zero, at_cap = np.maximum(inner, 0.0) + spare, np.maximum(-inner, 0.0) + spare
        at_box = []
        if block.box is not None:
            at_box, at_cap = [0.5 * at_cap], 0.5 * at_cap
        left = gradient[:, -1:] - at_cap.sum(axis=1, keepdims=True)
        return [at_zero, at_cap, limit, np.maximum(left, 0.0) + 0.1, np.maximum(-left, 0.0) + 0.1, *at_box]

    def gradient(self) -> Array:
        """Gradient of the objective at the present point, (P, n+1)."""
        rows = self.block.noise_rows
        noise = np.einsum("prn,pn->pr", rows[:, :, :-1], self.x) + rows[:, :, -1] * self.tau[:, None]
        return self.block.cost + 2 * np.einsum("pr,prn->pn", noise, rows)

    @property
    def x(self) -> Array:
        return self.slack[0]

    @property
    def tau(self) -> Array:
        return self.block.low + self.slack[3][:, 0]


def _step_length(values: list[Array], steps: list[Array]) -> Array:
    """Longest step (≤ 1) that keeps all values positive, per program."""
    worst = np.zeros(values[0].shape[0])
    for value, step in zip(values, steps, strict=True):
        worst = np.maximum(worst, np.max(-step / value, axis=1, initial=0.0))
    return 1.0 / np.maximum(worst, 1.0)


def _iterate(state: _State, tolerance: float) -> Array:
    """One predictor-corrector step of every program; returns the mean complementarity."""
    block = state.block
    n = state.x.shape[1]
    slack, dual = state.slack, state.dual
    count = sum(s.shape[1] for s in slack)
    mu = sum(np.einsum("pk,pk->p", s, z) for s, z in zip(slack, dual, strict=True)) / count
    weight = [z / s for s, z in zip(slack, dual, strict=True)]
    gradient = state.gradient()

    # Normal matrix = arrow (boxes, exposure) + coupling rows and noise rows, inverted by the Woodbury identity.
    cap = weight[1]
    rest = weight[0] + weight[5] if block.box is not None else weight[0]
    inverse = 1.0 / (rest + cap)
    pull = cap * inverse
    ends = weight[3][:, 0] + weight[4][:, 0]
    corner = ends + np.sum(pull * rest, axis=1)

    def solve_arrow(rx: Array, rt: Array) -> tuple[Array, Array]:
        """Rows on axis 1: (P, k, n), (P, k)."""
        t = (rt + np.einsum("pn,pkn->pk", pull, rx)) / corner[:, None]
        return rx * inverse[:, None, :] + pull[:, None, :] * t[:, :, None], t

    rows = np.concatenate([block.rows, block.noise_rows * np.sqrt(2.0)], axis=1)
    zx, zt = solve_arrow(rows[:, :, :-1], rows[:, :, -1])
    small = rows[:, :, :-1] @ zx.transpose(0, 2, 1) + rows[:, :, -1][:, :, None] * zt[:, None, :]
    m, k = block.rows.shape[1], rows.shape[1]
    index = np.arange(k)
    small[:, index[:m], index[:m]] += slack[2] / dual[2]
    small[:, index[m:], index[m:]] += 1.0
    strength = np.concatenate([dual[2] / slack[2], np.ones((block.size, k - m))], axis=1)

    def solve(rx: Array, rt: Array) -> tuple[Array, Array]:
        yx, yt = solve_arrow(rx[:, None, :], rt[:, None])
        yx, yt = yx[:, 0], yt[:, 0]
        inner = np.einsum("pkn,pn->pk", rows[:, :, :-1], yx) + rows[:, :, -1] * yt[:, None]
        inner = np.linalg.solve(small, inner[:, :, None])[:, :, 0]
        return yx - np.einsum("pk,pkn->pn", inner, zx), yt - np.einsum("pk,pk->p", inner, zt)

    def refine(yx: Array, yt: Array, rx: Array, rt: Array) -> tuple[Array, Array]:
        """One step of iterative refinement: the Woodbury identity loses digits as boxes open up."""
        inner = strength * (np.einsum("pkn,pn->pk", rows[:, :, :-1], yx) + rows[:, :, -1] * yt[:, None])
        left = rx - (rest + cap) * yx + cap * yt[:, None] - np.einsum("pk,pkn->pn", inner, rows[:, :, :-1])
        late = (
            rt - (ends + cap.sum(axis=1)) * yt + np.sum(cap * yx, axis=1) - np.einsum("pk,pk->p", inner, rows[:, :, -1])
        )
        ex, et = solve(left, late)
        return yx + ex, yt + et

    def direction(push: list[Array]) -> tuple[Array, Array]:
        """Newton step for complementarity targets ``push`` (s·z → push)."""
        pull_back = [p / s for p, s in zip(push, slack, strict=True)]
        rx = -gradient[:, :n] + pull_back[0] - pull_back[1]
        rx = rx - np.einsum("pm,pmn->pn", pull_back[2], block.rows[:, :, :-1])
        rt = -gradient[:, n] + pull_back[1].sum(axis=1) + pull_back[3][:, 0] - pull_back[4][:, 0]
        rt = rt - np.einsum("pm,pm->p", pull_back[2], block.rows[:, :, -1])
        if block.box is not None:
            rx = rx - pull_back[5]
        return refine(*solve(rx, rt), rx, rt) if state.exact else solve(rx, rt)

    def changes(dx: Array, dt: Array, push: list[Array]) -> tuple[list[Array], list[Array]]:
        used = np.einsum("pmn,pn->pm", block.rows[:, :, :-1], dx) + block.rows[:, :, -1] * dt[:, None]
        ds = [dx, dt[:, None] - dx, -used, dt[:, None], -dt[:, None]]
        if block.box is not None:
            ds.append(-dx)
        dz = [(p - s * z - z * d) / s for p, s, z, d in zip(push, slack, dual, ds, strict=True)]
        return ds, dz

    zero = [np.zeros_like(s) for s in slack]
    ds, dz = changes(*direction(zero), zero)
    ahead_s, ahead_z = _step_length(slack, ds), _step_length(dual, dz)
    mu_ahead = (
        sum(
            np.einsum("pk,pk->p", s + ahead_s[:, None] * a, z + ahead_z[:, None] * b)
            for s, z, a, b in zip(slack, dual, ds, dz, strict=True)
        )
        / count
    )
    centre = (np.clip(mu_ahead / mu, 0.0, 1.0) ** 3 * mu)[:, None]
    push = [centre - a * b for a, b in zip(ds, dz, strict=True)]
    ds, dz = changes(*direction(push), push)
    going = mu > tolerance
    primal, back = _step_length(slack, ds), _step_length(dual, dz)
    if block.noise_rows.shape[1]:  # the Hessian ties both steps together
        primal = back = np.minimum(primal, back)
    primal = np.where(going, 0.99 * primal, 0.0)[:, None]
    back = np.where(going, 0.99 * back, 0.0)[:, None]
    state.slack = [s + primal * a for s, a in zip(slack, ds, strict=True)]
    state.dual = [z + back * b for z, b in zip(dual, dz, strict=True)]
    return mu


@dataclass(frozen=True, slots=True)
class Relaxed:
    """Multipliers of a line (or ceiling) for each program and a feasible point each, (P, n+1)."""

    line: Line
    point: Array

    def put(self, index: np.ndarray, other: Relaxed) -> None:
        """Take over the results of some programs."""
        self.point[index] = other.point
        for name in self.line.__slots__:
            getattr(self.line, name)[index] = getattr(other.line, name)


def relax(
    program: Program,
    theta: Array | None,
    iterations: int = 25,
    tolerance: float = 1e-7,
    *,
    exact: bool = True,
    columns: int | None = None,
) -> Relaxed:
    """Solve ``min (s − θ d)·y + |R y|²`` for each program, or ``min −d·y`` when ``theta`` is None.

    ``theta``: (P,). Stops after ``iterations`` or when every program's mean complementarity, in unit scale, is below
    ``tolerance``. With ``columns`` only so many of the most promising columns of each program are looked at, and all of
    them where those left out turn out to matter.
    """
    cost, noise_rows = _objective(program, theta)
    block, column = _scale(program, cost, noise_rows)
    if columns is None or program.segments < columns + SPARE_COLUMNS:
        state = _solved(block, iterations, tolerance, exact=exact)
        return _unscale(program, state, theta, state.x * column[:, :-1])
    chosen = promising(program, theta, columns)
    state = _solved(block.only(chosen), iterations, tolerance, exact=exact)
    charge = np.zeros((program.size, program.segments))
    np.put_along_axis(charge, chosen, state.x * np.take_along_axis(column, chosen, axis=1), axis=1)
    found = _unscale(program, state, theta, charge)
    missed = np.flatnonzero(_gain_outside(program, theta, found, chosen) > LOOSE_COLUMNS)
    if missed.size:
        some = None if theta is None else theta[missed]
        found.put(missed, relax(program.take(missed), some, iterations, tolerance, exact=exact))
    return found


def _objective(program: Program, theta: Array | None) -> tuple[Array, Array]:
    if theta is None:
        return -program.signal, program.noise_rows[:, :0]
    return program.shot - theta[:, None] * program.signal, program.noise_rows


def _solved(block: _Scaled, iterations: int, tolerance: float, *, exact: bool) -> _State:
    state = _State(block, exact=exact)
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        for _ in range(iterations):
            if np.max(_iterate(state, tolerance)) <= tolerance:
                break
    return state


def _gain_outside(program: Program, theta: Array | None, found: Relaxed, inside: np.ndarray) -> Array:
    """What the columns left out could add to the signal, or take off the noise, at most: as a share of it. (P,)"""
    cost, noise_rows = _objective(program, theta)
    line = found.line
    if noise_rows.shape[1]:
        cost = cost + 2 * np.einsum("pr,prn->pn", line.noise, noise_rows)
    cost = (cost + np.einsum("pm,pmn->pn", line.limit, program.rows))[:, :-1]
    gain = np.maximum(-cost - line.heat[:, program.led] * program.heat, 0.0)
    np.put_along_axis(gain, inside, 0.0, axis=1)
    size = (
        np.abs(np.einsum("pn,pn->p", program.signal, found.point)) if theta is None else variance(program, found.point)
    )
    return gain @ program.width * program.time_high / np.maximum(size, 1e-300)


def _unscale(program: Program, state: _State, theta: Array | None, charge: Array) -> Relaxed:
    """Return to SI units; broken numbers become the harmless multiplier 0 and the dark point. ``charge`` (P, n)."""
    block = state.block
    limit = np.nan_to_num(state.dual[2] * block.unit[:, None] / row_scale(program), nan=0.0, posinf=0.0)
    t = np.nan_to_num(state.tau * program.time_high, nan=0.0)
    t = np.clip(t, program.time_low, program.time_high)
    q = np.nan_to_num(charge, nan=0.0)
    room, _ = segment_room(program, t)
    point = np.hstack([np.clip(q, 0.0, room), t[:, None]])
    rank = program.noise_rows.shape[1]
    noise = np.zeros((program.size, rank)) if theta is None else np.einsum("prn,pn->pr", program.noise_rows, point)
    blank = np.zeros((program.size, program.heat_cap.size))
    anchor = np.maximum(np.einsum("pn,pn->p", program.signal, point), 1e-300)
    line = Line(
        theta=np.zeros(program.size) if theta is None else theta,
        limit=np.maximum(limit, 0.0),
        heat=blank,
        noise=noise,
        anchor=anchor,
    )
    if theta is None:
        cost = (np.einsum("pm,pmn->pn", line.limit, program.rows) - program.signal)[:, :-1]
        heat = cut_prices(program, cost, t)
    else:
        heat = junction_prices(program, line, t)
    return Relaxed(line=replace(line, heat=heat), point=point)
