"""The optimum of one configuration to the last digits, with its multipliers, from a point close to it.

With φ = log CNR the optimum of pairs k under linear limits ``G u ≤ h`` is the stationary point of
``max τ, τ ≤ φ_k(u)``:

    Σ μ_k ∇φ_k = Gᵀλ,   Σ μ_k = 1,   φ_k = τ where μ_k > 0,   (G u)_i = h_i where λ_i > 0.

Unknowns are in unit scale: charge as share of what a segment could carry, rows as share of their bound. λ_i is then
the relative gain of CNR per relative loosening of limit i.

With `Warming` the junction temperatures T are unknowns too, each with the balance of its heat: arrays and recipe settle
together, also where an LED is lit just so far that its own warming takes away what more light would bring.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from codesign.errors import SolveError
from codesign.program import Array, Program, row_scale

#: Limits closer than this (share of their bound) may be among those that bind at the start.
NEAR = 1e-4
#: Segments this close to empty or full (share of their range) stay so unless a multiplier says otherwise.
AT_END = 1e-7
#: Pairs whose log CNR is this close to the worst one's likewise.
NEAR_PAIR = 1e-3
#: Stationary to this, temperatures included. [1], [K]
EXACT, EXACT_K = 1e-10, 1e-7
#: Step of junction temperature in differences. [K]
STEP_K = 0.05
LARGEST_NUMBER_OF_STEPS = 80


@dataclass(frozen=True, slots=True)
class Scale:
    """Units of the unknowns (n+1,) and of the limits, kept while the problem is nudged."""

    column: Array
    row: Array
    heat: Array

    @classmethod
    def of(cls, program: Program) -> Scale:
        """Take the scale from a program."""
        column = np.append(program.width, 1.0) * program.time_high[0]
        most = np.bincount(program.led, program.heat * column[:-1], minlength=program.heat_cap.size)
        cap = np.where(np.isfinite(program.heat_cap), program.heat_cap, 1.0)
        return cls(column, row_scale(program)[0], np.maximum(cap, 1e-6 * most))


def limits_of(program: Program, scale: Scale) -> tuple[Array, Array]:
    """All limits as ``G u ≤ h``: rows, heat caps, segments' upper and lower ends, longest and shortest exposure.

    Heat caps that do not exist are kept as rows that never bind, so that positions mean the same in any program.
    """
    n, leds = program.segments, program.heat_cap.size
    index = np.arange(n)
    own = np.zeros((leds, n + 1))
    own[program.led, index] = program.heat
    upper, lower = np.zeros((n, n + 1)), np.zeros((n, n + 1))
    upper[index, index], upper[:, -1], lower[index, index] = 1.0, -program.width, -1.0
    last = np.zeros((1, n + 1))
    last[0, -1] = 1.0
    finite = np.isfinite(program.heat_cap)
    matrix = np.concatenate([program.rows[0], own * finite[:, None], upper, lower, last, -last])
    right = np.concatenate(
        [
            program.bounds[0],
            np.where(finite, program.heat_cap, scale.heat),
            np.zeros(2 * n),
            program.time_high,
            -program.time_low,
        ]
    )
    unit = np.concatenate([scale.row, scale.heat, scale.column[:-1], scale.column[:-1], scale.column[[-1, -1]]])
    return matrix * scale.column / unit[:, None], right / unit


@dataclass(frozen=True, slots=True)
class Shape:
    """Values (K,), gradients (K, n+1) and, on demand, second derivatives of φ of some pairs at a point."""

    programs: Sequence[Program]
    scale: Scale
    value: Array
    gradient: Array
    _noise_slope: Array
    _signal: Array
    _variance: Array

    @classmethod
    def at(cls, programs: Sequence[Program], scale: Scale, u: Array) -> Shape:
        """Work out φ and its gradient at ``u``."""
        y = u * scale.column
        signal = np.array([p.signal[0] @ y for p in programs])
        noise = [p.noise_rows[0] @ y for p in programs]
        spread = np.array([p.floor[0] + p.shot[0] @ y + r @ r for p, r in zip(programs, noise, strict=True)])
        slope = np.stack(
            [(p.shot[0] + 2 * r @ p.noise_rows[0]) * scale.column for p, r in zip(programs, noise, strict=True)]
        )
        d = np.stack([p.signal[0] * scale.column for p in programs])
        with np.errstate(divide="ignore", invalid="ignore"):
            value = np.log(np.maximum(signal, 0.0)) - 0.5 * np.log(spread)
            gradient = d / signal[:, None] - slope / (2 * spread[:, None])
        return cls(programs, scale, value, gradient, slope, signal, spread)

    def curvature(self, weight: Array) -> Array:
        """``Σ μ_k ∇²φ_k``. (n+1, n+1)"""
        total = np.zeros((self.gradient.shape[1],) * 2)
        for k, program in enumerate(self.programs):
            if weight[k] == 0:
                continue
            d = program.signal[0] * self.scale.column / self._signal[k]
            rows = program.noise_rows[0] * self.scale.column
            slope = self._noise_slope[k] / self._variance[k]
            total += weight[k] * (np.outer(slope, slope) / 2 - np.outer(d, d) - rows.T @ rows / self._variance[k])
        return total


class Warming(Protocol):
    """How the arrays of one configuration hang on the junction temperatures, and these on the recipe."""

    def programs(self, junction_c: Array) -> list[Program]:
        """Arrays at junction temperatures (L,). [deg C]"""

    def balance(self, program: Program, y: Array, junction_c: Array) -> Array:
        """Temperature assumed minus that reached at a point (n+1,). (L,) [K]"""

    def balance_slope(self, program: Program, y: Array) -> Array:
        """Derivative of the balance along the point. (L, n+1)"""


@dataclass(frozen=True, slots=True)
class Stationary:
    """An optimum in unit scale.

    Point ``u`` (n+1,), log CNR ``value``, weights μ (K,), multipliers λ (m,), what binds (masks), junction
    temperatures (L,) [deg C] (none without warming), and the arrays all this belongs to.
    """

    programs: Sequence[Program]
    scale: Scale
    u: Array
    value: float
    weight: Array
    price: Array
    pairs: np.ndarray
    active: np.ndarray
    junction_c: Array

    @property
    def point(self) -> Array:
        """Charges and exposure (n+1,)."""
        return self.u * self.scale.column

    def residual(self, programs: Sequence[Program], junction_c: Array, warming: Warming | None) -> Array:
        """The conditions at the same unknowns but other arrays: stationarity, Σμ = 1, pairs, limits, balance."""
        shape = Shape.at(programs, self.scale, self.u)
        matrix, right = limits_of(programs[0], self.scale)
        value = float(shape.value[self.pairs] @ self.weight[self.pairs]) if programs is self.programs else self.value
        found = [
            self.weight @ shape.gradient - self.price @ matrix,
            [1.0 - self.weight.sum()],
            shape.value[self.pairs] - value,
            right[self.active] - matrix[self.active] @ self.u,
        ]
        if warming is not None:
            found.append(warming.balance(programs[0], self.point, junction_c))
        return np.concatenate(found)

    def system(self, warming: Warming | None, ends: Sequence) -> Array:
        """Derivative of the conditions along (u, τ, μ, λ, T); ``ends`` are arrays at T ± `STEP_K`, LED by LED."""
        shape = Shape.at(self.programs, self.scale, self.u)
        matrix, _ = limits_of(self.programs[0], self.scale)
        n, kept, bound = self.u.size, int(self.pairs.sum()), int(self.active.sum())
        inner = n + 1 + kept + bound
        found = np.zeros((inner + len(ends),) * 2)
        found[:n, :n] = shape.curvature(self.weight)
        found[:n, n + 1 : n + 1 + kept] = shape.gradient[self.pairs].T
        found[n + 1 : n + 1 + kept, :n] = shape.gradient[self.pairs]
        found[n, n + 1 : n + 1 + kept] = found[n + 1 : n + 1 + kept, n] = -1.0
        found[:n, n + 1 + kept : inner] = -matrix[self.active].T
        found[n + 1 + kept : inner, :n] = -matrix[self.active]
        for led, (low, high) in enumerate(ends):
            step = np.zeros(len(ends))
            step[led] = STEP_K
            change = self.residual(high, self.junction_c + step, warming)
            change = change - self.residual(low, self.junction_c - step, warming)
            found[:, inner + led] = change / (2 * STEP_K)
        if warming is not None:
            found[inner:, :n] = warming.balance_slope(self.programs[0], self.point) * self.scale.column
        return found


def warm_ends(warming: Warming | None, junction_c: Array) -> list[tuple[list[Program], list[Program]]]:
    """Arrays a little cooler and warmer, LED by LED."""
    steps = np.eye(junction_c.size) * STEP_K
    return [(warming.programs(junction_c - step), warming.programs(junction_c + step)) for step in steps]


def stationary(
    programs: Sequence[Program], point: Array, warming: Warming | None = None, junction_c: Array | None = None
) -> Stationary:
    """Optimum near ``point`` (n+1,), by Newton steps on what binds.

    ``programs`` are the arrays of each pair, at ``junction_c`` where ``warming`` is given. Raises SolveError when there
    is no optimum to be found from there.
    """
    junction_c = np.zeros(0) if warming is None else np.asarray(junction_c, dtype=float)
    now, released = _first_guess(programs, point, junction_c), None
    ends = warm_ends(warming, junction_c)
    for _ in range(LARGEST_NUMBER_OF_STEPS):
        _require_shape(now, [programs for pair in ends for programs in pair])
        residual = now.residual(now.programs, now.junction_c, warming)
        step = np.linalg.lstsq(now.system(warming, ends), -residual, rcond=1e-13)[0]
        if released is not None and _outward(now, step, released):
            now, released = _jumped(now, step, warming), None
            continue
        released = None
        now, blocked = _moved(now, step, warming)
        n = now.u.size
        if blocked or _add_violated(now):
            continue
        small = np.abs(step[:n]).max() < EXACT and np.abs(step[step.size - junction_c.size :]).max(initial=0) < EXACT_K
        if small:
            released, free = _release(now)
            if not free:
                return now
    raise SolveError("the multipliers of the optimum could not be worked out to the last digits")


def _require_shape(now: Stationary, others: Sequence[Sequence[Program]]) -> None:
    if any(other[0].segments + 1 != now.u.size for other in others):
        raise SolveError("the drive range of an LED ends right at its optimum: its sensitivities are one-sided")


def _first_guess(programs: Sequence[Program], point: Array, junction_c: Array) -> Stationary:
    """What binds and its multipliers, as the least squares solution of the conditions with positive multipliers."""
    from scipy.optimize import nnls

    scale = Scale.of(programs[0])
    u = point / scale.column
    shape = Shape.at(programs, scale, u)
    if not np.isfinite(shape.value).all():
        raise SolveError("no contrast of the wanted sign at the recipe: it has no sensitivities")
    matrix, right = limits_of(programs[0], scale)
    near = right - matrix @ u < NEAR
    close = shape.value - shape.value.min() < NEAR_PAIR
    size = max(float(np.abs(shape.gradient).max()), 1.0)
    system = np.block(
        [[shape.gradient[close].T, -matrix[near].T], [np.full((1, close.sum()), size), np.zeros((1, near.sum()))]]
    )
    found = nnls(system, np.append(np.zeros(u.size), size), maxiter=50 * system.shape[1])[0]
    weight, price = np.zeros(close.size), np.zeros(near.size)
    weight[close], price[near] = found[: close.sum()], found[close.sum() :]
    pairs, active = weight > 1e-6, price > 1e-9
    # The segments of an LED give the same light: only their order of filling tells them apart, where heat has no price.
    boxes = slice(near.size - 2 - 2 * programs[0].segments, near.size - 2)
    active[boxes] |= (right - matrix @ u)[boxes] < AT_END
    weight[~pairs] = price[~active] = 0.0
    value = float(shape.value.min())
    return Stationary(programs, scale, u, value, weight / weight.sum(), price, pairs, active, junction_c)


def _moved(now: Stationary, step: Array, warming: Warming | None) -> tuple[Stationary, bool]:
    """Take a step as far as the first limit that does not bind yet, which then does; whether there was one."""
    n, kept, bound = now.u.size, int(now.pairs.sum()), int(now.active.sum())
    length, blocking = _room(now, step[:n])
    u, weight, price = now.u + length * step[:n], now.weight.copy(), now.price.copy()
    weight[now.pairs] += length * step[n + 1 : n + 1 + kept]
    price[now.active] += length * step[n + 1 + kept : n + 1 + kept + bound]
    programs, junction_c = now.programs, now.junction_c
    if warming is not None:
        junction_c = junction_c + length * step[n + 1 + kept + bound :]
        programs = warming.programs(junction_c)
        _require_shape(now, [programs])
    active = now.active.copy()
    if blocking is not None:
        active[blocking] = True
    value = float(Shape.at(programs, now.scale, u).value[now.pairs].min())
    return Stationary(programs, now.scale, u, value, weight, price, now.pairs, active, junction_c), blocking is not None


def _room(now: Stationary, step: Array) -> tuple[float, int | None]:
    """How far a step may go before a limit that does not bind yet, and which one."""
    matrix, right = limits_of(now.programs[0], now.scale)
    rate, slack = matrix @ step, right - matrix @ now.u
    with np.errstate(divide="ignore", invalid="ignore"):
        length = np.where(~now.active & (rate > 1e-14), np.maximum(slack, 0.0) / rate, np.inf)
    first = int(np.argmin(length))
    return (float(length[first]), first) if length[first] < 1 else (1.0, None)


def _add_violated(now: Stationary) -> bool:
    """Let the pair furthest below the worst one count too; whether there was one."""
    value = Shape.at(now.programs, now.scale, now.u).value
    missing = np.where(now.pairs, np.inf, value)
    worst = int(np.argmin(missing))
    if not missing[worst] < value[now.pairs].min() - 1e-9:
        return False
    now.pairs[worst] = True
    return True


def _release(now: Stationary) -> tuple[int | None, bool]:
    """Let go of the limit or pair with the most negative multiplier; which limit, and whether there was any."""
    lowest, least = np.where(now.active, now.price, np.inf), np.where(now.pairs, now.weight, np.inf)
    i, k = int(np.argmin(lowest)), int(np.argmin(least))
    if min(lowest[i], least[k]) > -1e-9:
        return None, False
    if lowest[i] <= least[k]:
        now.active[i], now.price[i] = False, 0.0
        return i, True
    now.pairs[k], now.weight[k] = False, 0.0
    return None, True


def _outward(now: Stationary, step: Array, released: int) -> bool:
    """Whether a step leaves through the limit just let go: away from it CNR grows without a stationary point."""
    return float(limits_of(now.programs[0], now.scale)[0][released] @ step[: now.u.size]) > 0


def _jumped(now: Stationary, step: Array, warming: Warming | None) -> Stationary:
    """Go the other way as far as the limits allow, and begin anew there."""
    inward = -step[: now.u.size] * (1e6 / max(float(np.abs(step[: now.u.size]).max()), 1e-300))
    u = now.u + _room(now, inward)[0] * inward
    programs, junction_c = now.programs, now.junction_c
    if warming is not None:
        junction_c = junction_c - warming.balance(programs[0], u * now.scale.column, junction_c)
        programs = warming.programs(junction_c)
        _require_shape(now, [programs])
    return _first_guess(programs, u * now.scale.column, junction_c)
