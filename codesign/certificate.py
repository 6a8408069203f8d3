"""Rigorous upper bounds on the CNR, from arrays and multipliers alone: the proof and its checker.

For one program let ``H(v)`` be the least signal-dependent variance ``s·y + |R y|²`` of any feasible ``y``
with signal ``d·y = v``. ``H`` is convex, and the best CNR² is the maximum of ``v²/(c + H(v))``. Any
multipliers (θ, λ ≥ 0, ω ≥ 0, g) give, by weak duality and ``|x|² ≥ 2 g·x − |g|²``, a straight line below ``H``:

    H(v) ≥ θ v + α,   α = −|g|² − λ·b − ω·heat_cap + min over the remaining boxes of (s + 2Rᵀg − θ d + Aᵀλ + ω heat)·y

and any (λ, ω) a ceiling ``v ≤ U``. Between two crossings of the lines ``v²/(c + line)`` is convex, so the
bound is the largest value at the crossings and at ``U``. No solver is imported here; a wrong or sloppy
multiplier can only make the bound worse, never wrong.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from codesign.errors import CertificateError
from codesign.program import Array, Program, contrast_to_noise, violation

#: A feasible recipe may exceed a limit by this share of it: round-off of sums of some hundred terms.
FEASIBILITY_TOLERANCE = 1e-9


@dataclass(frozen=True, slots=True, kw_only=True)
class Line:
    """Multipliers of one line below ``H`` for each of P programs: θ (P,), λ (P, m), ω (P, n_leds), g (P, r)."""

    theta: Array
    limit: Array
    heat: Array
    noise: Array

    def take(self, index) -> Line:
        """Return the multipliers of the programs at ``index``."""
        index = np.atleast_1d(index)
        return Line(theta=self.theta[index], limit=self.limit[index], heat=self.heat[index], noise=self.noise[index])


@dataclass(frozen=True, slots=True, kw_only=True)
class Proof:
    """Everything needed to re-derive the bound of each program of a block: one ceiling, some lines."""

    ceiling: Line
    lines: tuple[Line, ...]

    def take(self, index) -> Proof:
        """Return the proofs of the programs at ``index``."""
        return Proof(ceiling=self.ceiling.take(index), lines=tuple(line.take(index) for line in self.lines))


def box_minimum(program: Program, cost: Array) -> Array:
    """Least ``cost·y`` over ``0 ≤ q ≤ width·t``, ``t_low ≤ t ≤ t_high``: linear in t once q is out. (P,)"""
    per_second = cost[:, -1] + np.minimum(cost[:, :-1], 0.0) @ program.width
    return np.where(per_second >= 0, program.time_low, program.time_high) * per_second


def _charge_cost(program: Program, line: Line, cost: Array) -> Array:
    """Add the prices of the limits and of LED heat to a cost vector."""
    total = cost + np.einsum("pm,pmn->pn", line.limit, program.rows)
    total[:, :-1] += line.heat[:, program.led] * program.heat
    return total


def _price(program: Program, line: Line) -> Array:
    """``λ·b + ω·heat_cap``, with 0·inf = 0."""
    caps = np.where(np.isfinite(program.heat_cap), program.heat_cap, 0.0)
    return np.einsum("pm,pm->p", line.limit, program.bounds) + line.heat @ caps


def _require_valid(program: Program, line: Line) -> None:
    """Multipliers must be nonnegative and must not price a limit that does not exist."""
    if (line.limit < 0).any() or (line.heat < 0).any():
        raise CertificateError("certificate: a negative multiplier proves nothing; the bound is rejected")
    if (line.heat[:, ~np.isfinite(program.heat_cap)] > 0).any():
        raise CertificateError("certificate: a multiplier prices a heat limit that does not exist")
    if not all(np.isfinite(part).all() for part in (line.theta, line.limit, line.heat, line.noise)):
        raise CertificateError("certificate: a multiplier is not finite; the bound is rejected")


def intercept(program: Program, line: Line) -> Array:
    """α of each line, so that ``H(v) ≥ θ v + α``. (P,) [e⁻²]"""
    _require_valid(program, line)
    cost = program.shot - line.theta[:, None] * program.signal
    cost = cost + 2 * np.einsum("pr,prn->pn", line.noise, program.noise_rows)
    free = box_minimum(program, _charge_cost(program, line, cost))
    return free - _price(program, line) - np.einsum("pr,pr->p", line.noise, line.noise)


def signal_ceiling(program: Program, line: Line) -> Array:
    """U of each program, so that ``d·y ≤ U`` (θ and g are not used). (P,) [e⁻]"""
    _require_valid(program, line)
    return _price(program, line) - box_minimum(program, _charge_cost(program, line, -program.signal))


def envelope(floor: Array, ceiling: Array, theta: Array, alpha: Array) -> tuple[Array, Array]:
    """Largest ``v²/(c + max_k(α_k + θ_k v))`` over 0 ≤ v ≤ U, and where.

    ``floor`` and ``ceiling`` are (P,), ``theta`` and ``alpha`` (P, K). The line 0 (variance is never negative)
    is always among them. Returns the bound on CNR (not squared) and its ``v``, both (P,).
    """
    zero = np.zeros((floor.size, 1))
    theta, alpha = np.hstack([zero, theta]), np.hstack([zero, alpha])
    first, second = np.triu_indices(theta.shape[1], 1)
    slope = theta[:, second] - theta[:, first]
    cross = np.divide(
        alpha[:, first] - alpha[:, second], slope, out=np.zeros_like(slope), where=np.abs(slope) > 0
    )
    top = np.maximum(ceiling, 0.0)[:, None]
    points = np.hstack([top, np.clip(cross, 0.0, top)])
    lines = np.max(alpha[:, None, :] + theta[:, None, :] * points[:, :, None], axis=2)
    value = points**2 / (floor[:, None] + lines)
    best = np.argmax(value, axis=1)
    pick = np.arange(floor.size)
    return np.sqrt(value[pick, best]), points[pick, best]


def bound(program: Program, proof: Proof) -> Array:
    """Upper bound on the CNR of each program that follows from its proof. (P,)"""
    theta = np.stack([line.theta for line in proof.lines], axis=1)
    alpha = np.stack([intercept(program, line) for line in proof.lines], axis=1)
    return envelope(program.floor, signal_ceiling(program, proof.ceiling), theta, alpha)[0]


def check_point(program: Program, y: Array, claimed: float) -> float:
    """Confirm that one point is feasible and has the CNR claimed for it; return that CNR.

    ``program`` holds one program, ``y`` is (n+1,). Raises CertificateError naming what is off.
    """
    excess = float(violation(program, y[None])[0])
    if not excess <= FEASIBILITY_TOLERANCE:
        raise CertificateError(f"certificate: the recipe exceeds a limit by {excess:.2e} of it")
    actual = float(contrast_to_noise(program, y[None])[0])
    if not abs(actual - claimed) <= 1e-9 * max(abs(actual), 1e-12):
        raise CertificateError(f"certificate: the recipe's CNR is {actual:.12g}, not the claimed {claimed:.12g}")
    return actual


def check_bound(program: Program, proof: Proof, claimed: float) -> Array:
    """Confirm that each program's proof gives no more than ``claimed``; return the bounds. (P,)"""
    proven = bound(program, proof)
    worst = float(np.max(proven, initial=-np.inf))
    if not worst <= claimed * (1 + 1e-12):
        raise CertificateError(f"certificate: the proof reaches only {worst:.12g}, not the claimed bound {claimed:.12g}")
    return proven
