"""Rigorous upper bounds on the CNR, from arrays and multipliers alone: the proof and its checker.

For one program let ``H(v)`` be the least signal-dependent variance ``s·y + |R y|²`` of any feasible ``y``
with signal ``d·y = v``. The best CNR² is the maximum of ``v²/(c + H(v))``. By weak duality and
``|x|² ≥ 2 g·x − |g|²``, any multipliers (θ, λ ≥ 0, ω ≥ 0, g) give a straight line below the convex ``H``:

    H(v) ≥ θ v + α,   α = m − λ·b − ω·heat_cap − |g|²,   m = min over the boxes of (s + 2Rᵀg − θ d + Aᵀλ + ω heat)·y.

The same multipliers, scaled down together with the signal, give a parabola below ``H``. With ``σ₀ = min_j s_j/d_j``
(so that ``s − σ₀ d ≥ 0``) and any anchor ``v₀ > 0``, using ``σ·(θ, λ, ω, g)`` for ``σ = v/v₀`` and adding
``(1−σ)·σ₀`` to the slope:

    H(v) ≥ k v² + e v  for 0 ≤ v ≤ v₀,   k = (θ − σ₀ − |g|²/v₀)/v₀,   e = σ₀ + (α + |g|²)/v₀.

It touches the line at ``v₀`` and follows noise that grows with the signal (PRNU, clutter) where a line cannot.
Finally any (λ, ω) give a ceiling ``v ≤ U``. The bound on CNR is the largest ``v²/(c + best curve)`` up to ``U``.
No solver is imported here; a wrong or sloppy multiplier can only make the bound worse, never wrong.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from codesign.errors import CertificateError
from codesign.program import Array, Program, contrast_to_noise, row_scale, violation

#: A feasible recipe may exceed a limit by this share of it: round-off of sums of some hundred terms.
FEASIBILITY_TOLERANCE = 1e-9
#: Anchors below this are raised to it, which is as valid and keeps the arithmetic finite. [e⁻]
LEAST_ANCHOR = 1e-100


@dataclass(frozen=True, slots=True, kw_only=True)
class Line:
    """Multipliers of one line below ``H`` for each of P programs, and the anchor of its parabola.

    ``theta`` (P,), ``limit`` λ (P, m), ``heat`` ω (P, n_leds), ``noise`` g (P, r), ``anchor`` v₀ > 0 (P,).
    """

    theta: Array
    limit: Array
    heat: Array
    noise: Array
    anchor: Array

    def take(self, index) -> Line:
        """Return the multipliers of the programs at ``index``."""
        index = np.atleast_1d(index)
        return Line(**{name: getattr(self, name)[index] for name in self.__slots__})


@dataclass(frozen=True, slots=True, kw_only=True)
class Proof:
    """Everything needed to re-derive the bound of each program of a block: one ceiling, some lines."""

    ceiling: Line
    lines: tuple[Line, ...]

    def take(self, index) -> Proof:
        """Return the proofs of the programs at ``index``."""
        return Proof(ceiling=self.ceiling.take(index), lines=tuple(line.take(index) for line in self.lines))


def box_minimum(program: Program, cost: Array) -> Array:
    """Least ``cost·y`` over ``0 ≤ q ≤ width·t``, ``t_low ≤ t ≤ t_high``: linear in t once q is out. (P,)

    Infinite where no exposure is allowed at all: then every bound holds, also zero.
    """
    per_second = cost[:, -1] + np.minimum(cost[:, :-1], 0.0) @ program.width
    least = np.where(per_second >= 0, program.time_low, program.time_high) * per_second
    return np.where(no_exposure(program), np.inf, least)


def no_exposure(program: Program) -> NDArray[np.bool_]:
    """Whether the exposure range is empty: ambient light alone fills a well before the shortest exposure ends. (P,)"""
    return program.time_low > program.time_high * (1 + 2 * FEASIBILITY_TOLERANCE)


def _charge_cost(program: Program, line: Line, cost: Array) -> Array:
    """Add the prices of the limits and of LED heat to a cost vector."""
    total = cost + np.einsum("pm,pmn->pn", line.limit, program.rows)
    total[:, :-1] += line.heat[:, program.led] * program.heat
    return total


def _price(program: Program, line: Line) -> Array:
    """``λ·b + ω·heat_cap`` with every limit as far out as a recipe that passes for feasible may lie, and 0·inf = 0.

    This also keeps round-off out: the largest multipliers would turn it into a false proof.
    """
    caps = np.where(np.isfinite(program.heat_cap), program.heat_cap, 0.0)
    bounds = program.bounds + FEASIBILITY_TOLERANCE * row_scale(program)
    return np.einsum("pm,pm->p", line.limit, bounds) + line.heat @ (caps * (1 + FEASIBILITY_TOLERANCE))


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
    return _dual_value(program, line) - _square(line)


def _square(line: Line) -> Array:
    """``|g|²``. (P,)"""
    return np.einsum("pr,pr->p", line.noise, line.noise)


def _dual_value(program: Program, line: Line) -> Array:
    """``α + |g|²``, on its own because a huge ``|g|²`` taken off and put back would leave round-off only. (P,)"""
    _require_valid(program, line)
    with np.errstate(over="ignore", invalid="ignore"):  # what overflows proves nothing, see `envelope`
        cost = program.shot - line.theta[:, None] * program.signal
        cost = cost + 2 * np.einsum("pr,prn->pn", line.noise, program.noise_rows)
        free = box_minimum(program, _charge_cost(program, line, cost))
        return free - _price(program, line)


def signal_ceiling(program: Program, line: Line) -> Array:
    """U of each program, so that ``d·y ≤ U`` (θ and g are not used). (P,) [e⁻]"""
    _require_valid(program, line)
    with np.errstate(over="ignore", invalid="ignore"):
        top = _price(program, line) - box_minimum(program, _charge_cost(program, line, -program.signal))
    return np.where(np.isnan(top), np.inf, top)


def least_shot_ratio(program: Program) -> Array:
    """σ₀: least shot-noise variance per signal of any column, so that ``s − σ₀ d ≥ 0``. (P,)"""
    positive = program.signal > 0
    ratio = np.divide(program.shot, program.signal, out=np.full_like(program.shot, np.inf), where=positive)
    least = np.min(ratio, axis=1)
    return np.where(np.isfinite(least), least, 0.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Curves:
    """Lower curves of ``H``: lines ``θ v + α`` and parabolas ``k v² + e v`` up to their anchors, each (P, K)."""

    theta: Array
    alpha: Array
    k: Array
    e: Array
    anchor: Array

    def joined(self, other: Curves) -> Curves:
        """These curves and further ones of the same programs."""
        return Curves(**{n: np.hstack([getattr(self, n), getattr(other, n)]) for n in self.__slots__})


def curves(program: Program, lines: tuple[Line, ...]) -> Curves:
    """Work out lines and parabolas of a proof from its multipliers. [e⁻²]"""
    theta = np.stack([line.theta for line in lines], axis=1)
    value = np.stack([_dual_value(program, line) for line in lines], axis=1)
    anchor = np.stack([line.anchor for line in lines], axis=1)
    square = np.stack([_square(line) for line in lines], axis=1)
    if not (anchor > 0).all():
        raise CertificateError("certificate: an anchor is not positive; the bound is rejected")
    anchor = np.maximum(anchor, LEAST_ANCHOR)
    shot = least_shot_ratio(program)[:, None]
    return Curves(
        theta=theta,
        alpha=value - square,
        anchor=anchor,
        k=(theta - shot - square / anchor) / anchor,
        e=shot + value / anchor,
    )


def _break_points(found: Curves, top: Array) -> Array:
    """Ascending signals 0 .. U between which no two lines cross and no parabola ends. (P, M)"""
    theta = np.hstack([np.zeros_like(top), found.theta])
    alpha = np.hstack([np.zeros_like(top), found.alpha])
    first, second = np.triu_indices(theta.shape[1], 1)
    slope = theta[:, second] - theta[:, first]
    offset = alpha[:, first] - alpha[:, second]
    cross = np.divide(offset, slope, out=np.zeros_like(slope), where=np.abs(slope) > 0)
    inner = np.clip(np.hstack([cross, found.anchor]), 0.0, top)
    return np.sort(np.hstack([np.zeros_like(top), inner, top]), axis=1)


def envelope(floor: Array, ceiling: Array, found: Curves) -> tuple[Array, Array]:
    """Largest ``v²/(c + best curve)`` over 0 ≤ v ≤ U, and a signal near which it is reached.

    On each stretch between break points the best single curve counts: a line takes its largest ratio at an end
    (the ratio is convex), a parabola where ``c z² + e z + k`` with z = 1/v is least. ``H ≥ 0`` is always known.
    Returns the bound on CNR (not squared) and the signal, both (P,).
    """
    with np.errstate(over="ignore", invalid="ignore"):  # nearly parallel lines cross beyond all signals
        points = _break_points(found, np.maximum(ceiling, 0.0)[:, None])
    low, high = points[:, :-1, None], points[:, 1:, None]
    c = floor[:, None, None]
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        best, where = high**2 / c, high
        for end in (low, high):
            height = c + found.alpha[:, None, :] + found.theta[:, None, :] * end
            ratio = np.where(height > 0, end**2 / height, np.inf)
            if end is low:
                at_low = ratio
        lines = np.maximum(at_low, ratio)
        z_low, z_high = 1.0 / high, 1.0 / low
        z = np.clip(-found.e[:, None, :] / (2 * c), z_low, z_high)
        quadratic = c * z**2 + found.e[:, None, :] * z + found.k[:, None, :]
        usable = (high <= found.anchor[:, None, :] * (1 + 1e-12)) & (quadratic > 0)
        parabolas = np.where(usable, 1.0 / quadratic, np.inf)
    stretch = np.minimum(best[:, :, 0], np.minimum(lines.min(axis=2), np.nan_to_num(parabolas, nan=np.inf).min(axis=2)))
    stretch = np.where(points[:, 1:] > points[:, :-1], np.nan_to_num(stretch, nan=np.inf, posinf=np.inf), 0.0)
    pick, row = np.argmax(stretch, axis=1), np.arange(floor.size)
    left = (low[row, pick, 0] > 0) & (at_low.min(axis=2)[row, pick] > ratio.min(axis=2)[row, pick])
    signal = np.where(left, low[row, pick, 0], where[row, pick, 0])
    return np.sqrt(stretch[row, pick]), signal


def bound(program: Program, proof: Proof) -> Array:
    """Upper bound on the CNR of each program that follows from its proof. (P,)"""
    top = signal_ceiling(program, proof.ceiling)
    if not proof.lines:
        return np.where(top > 0, np.maximum(top, 0.0) / np.sqrt(program.floor), 0.0)
    return envelope(program.floor, top, curves(program, proof.lines))[0]


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
        raise CertificateError(
            f"certificate: the proof reaches only {worst:.12g}, not the claimed bound {claimed:.12g}"
        )
    return proven
