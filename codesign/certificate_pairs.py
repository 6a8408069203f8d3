"""Rigorous upper bound on the worst of several CNRs of one configuration: the proof and its checker.

Pairs k share the recipe ``y`` and its limits; each has its own signal ``d_k·y`` and noise ``σ_k(y)``, whose square is
``c_k + s_k·y + |R_k y|²``.
A *cell* is the part of all recipes with ``low_k ≤ s_k·y ≤ high_k``. There the square root lies above its chord
``e_k(y) = a_k + b_k s_k·y`` (without an upper end: above ``√(c_k + low_k)``), so that for every ``α_k² + |g_k|² ≤ 1``

    σ_k ≥ ‖(e_k, R_k y)‖ ≥ α_k e_k + g_k·R_k y.

If all CNRs exceeded Γ, then for any weights ``μ ≥ 0`` the sum ``Σ μ_k (d_k·y − Γ (α_k e_k + g_k·R_k y))`` would be
positive; prices λ, ω of the limits and ν of the cell's two sides show that it is not:

    min over the boxes of [Σ μ_k (Γ (α_k b_k s_k + R_kᵀg_k) − d_k) + Aᵀλ + ω heat + Σ (ν_k⁺ − ν_k⁻) s_k]·y
        + Γ Σ μ_k α_k a_k − λ·b − ω·heat_cap − Σ (ν_k⁺ high_k − ν_k⁻ low_k)  >  0.

Cells come from a tree that splits ``s_k·y`` of one pair at a time, so they cover everything by construction. No solver
is imported here; wrong multipliers are refused or prove less, never too much.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from codesign.certificate import FEASIBILITY_TOLERANCE, box_minimum
from codesign.errors import CertificateError
from codesign.program import Array, Program, contrast_to_noise, row_scale, violation

#: Share of the sum of all terms that a margin must exceed, to keep round-off out.
ROUND_OFF = 1e-13


@dataclass(frozen=True, slots=True, kw_only=True)
class Leaf:
    """Multipliers that no recipe of a cell has all K CNRs above ``level``.

    ``weight`` μ, ``share`` α, ``below`` ν⁻ and ``above`` ν⁺ are (K,), ``noise`` holds g_k (r_k,), ``limit`` λ (m,),
    ``heat`` ω (L,).
    """

    level: float
    weight: Array
    share: Array
    noise: tuple[Array, ...]
    limit: Array
    heat: Array
    below: Array
    above: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class Split:
    """A cell cut in two at ``s_pair·y = at``. [e⁻²]"""

    pair: int
    at: float
    below: Leaf | Split
    above: Leaf | Split


@dataclass(frozen=True, slots=True, kw_only=True)
class PairProof:
    """Tree of cells over all recipes of one configuration."""

    tree: Leaf | Split


def worst_contrast(programs: Sequence[Program], y: Array) -> float:
    """Least CNR of all pairs at one point ``y`` (n+1,)."""
    return float(pair_contrasts(programs, y).min())


def pair_contrasts(programs: Sequence[Program], y: Array) -> Array:
    """CNR of each pair at one point ``y`` (n+1,), negative against the common sign. (K,)"""
    return np.array([float(contrast_to_noise(program, y[None])[0]) for program in programs])


def chord(floor: float, low: float, high: float) -> tuple[float, float]:
    """``a, b`` with ``√(floor + h) ≥ a + b h`` for ``low ≤ h ≤ high``; flat where ``high`` is infinite."""
    start = np.sqrt(floor + low)
    if not np.isfinite(high):
        return float(start), 0.0
    slope = 1.0 / (start + np.sqrt(floor + high))
    return float(start - slope * low), float(slope)


@dataclass(frozen=True, slots=True)
class Margin:
    """The proof's inequality at level Γ: least over the boxes of ``(base + Γ gain)·y``, plus ``constant + Γ lift``."""

    program: Program
    base: Array
    gain: Array
    constant: float
    lift: float
    size: float

    def at(self, level: float) -> float:
        """Margin at a level, less what round-off could feign; positive proves the level."""
        cost = self.base + level * self.gain
        top = np.append(self.program.width, 1.0) * self.program.time_high[0]
        terms = float(np.abs(cost) @ top) + self.size + level * abs(self.lift)
        least = float(box_minimum(self.program, cost[None])[0])
        return least + self.constant + level * self.lift - ROUND_OFF * terms


def margin(programs: Sequence[Program], leaf: Leaf, low: Array, high: Array) -> Margin:
    """Work out the inequality of a leaf for the cell ``low ≤ s_k·y ≤ high`` (K,)."""
    _require_valid(programs, leaf, high)
    first = programs[0]
    base = leaf.limit @ first.rows[0]
    base[:-1] += leaf.heat[first.led] * first.heat
    gain = np.zeros_like(base)
    caps = np.where(np.isfinite(first.heat_cap), first.heat_cap, 0.0)
    bounds = first.bounds[0] + FEASIBILITY_TOLERANCE * row_scale(first)[0]
    price = float(leaf.limit @ bounds + leaf.heat @ caps * (1 + FEASIBILITY_TOLERANCE))
    sides = lift = 0.0
    for k, program in enumerate(programs):
        base = base + (leaf.above[k] - leaf.below[k]) * program.shot[0] - leaf.weight[k] * program.signal[0]
        sides += leaf.above[k] * high[k] if leaf.above[k] > 0 else 0.0
        sides -= leaf.below[k] * low[k]
        offset, slope = chord(float(program.floor[0]), low[k], high[k])
        length = max(float(np.hypot(leaf.share[k], np.linalg.norm(leaf.noise[k]))), 1.0)
        gain = gain + leaf.weight[k] / length * (
            leaf.share[k] * slope * program.shot[0] + leaf.noise[k] @ program.noise_rows[0]
        )
        lift += leaf.weight[k] / length * leaf.share[k] * offset
    return Margin(first, base, gain, -price - sides, lift, price + abs(sides))


def _require_valid(programs: Sequence[Program], leaf: Leaf, high: Array) -> None:
    """Multipliers must be finite, nonnegative where they must be, and price only what exists."""
    prices = (leaf.weight, leaf.limit, leaf.heat, leaf.below, leaf.above)
    if not all(np.isfinite(part).all() for part in (*prices, leaf.share, *leaf.noise)) or not 0 <= leaf.level < np.inf:
        raise CertificateError("certificate: a multiplier of several pairs is not finite; the bound is rejected")
    if any((part < 0).any() for part in prices):
        raise CertificateError("certificate: a negative multiplier proves nothing; the bound is rejected")
    if (leaf.heat[~np.isfinite(programs[0].heat_cap)] > 0).any() or (leaf.above[~np.isfinite(high)] > 0).any():
        raise CertificateError("certificate: a multiplier prices a limit that does not exist")


def leaves(tree: Leaf | Split, low: Array, high: Array) -> Iterator[tuple[Leaf, Array, Array]]:
    """All leaves below a node with the cells they stand for."""
    open_ = [(tree, low, high)]
    while open_:
        node, low, high = open_.pop()
        if isinstance(node, Leaf):
            yield node, low, high
            continue
        if not low[node.pair] <= node.at <= high[node.pair]:
            raise CertificateError("certificate: a cell is cut outside itself; the bound is rejected")
        cut = np.arange(low.size) == node.pair
        open_.append((node.below, low, np.where(cut, node.at, high)))
        open_.append((node.above, np.where(cut, node.at, low), high))


def everything(programs: Sequence[Program]) -> tuple[Array, Array]:
    """The cell that holds all recipes: shot noise is never negative. (K,), (K,)"""
    return np.zeros(len(programs)), np.full(len(programs), np.inf)


def pair_bound(programs: Sequence[Program], proof: PairProof) -> float:
    """Bound on the worst CNR that a proof shows: the largest level of any leaf, each leaf checked.

    Raises CertificateError when a leaf does not prove its level.
    """
    _require_shared_limits(programs)
    worst = 0.0
    for leaf, low, high in leaves(proof.tree, *everything(programs)):
        if not margin(programs, leaf, low, high).at(leaf.level) > 0:
            raise CertificateError(f"certificate: the multipliers of a cell do not prove its bound {leaf.level:.12g}")
        worst = max(worst, leaf.level)
    return worst


def _require_shared_limits(programs: Sequence[Program]) -> None:
    first = programs[0]
    names = ("rows", "bounds", "width", "led", "heat", "heat_cap", "time_low", "time_high")
    if any(not np.array_equal(getattr(p, name), getattr(first, name)) for p in programs for name in names):
        raise CertificateError("certificate: the pairs do not share their limits; the bound is rejected")
    if any((p.shot < 0).any() or not (p.floor > 0).all() for p in programs):
        raise CertificateError("certificate: a pair has negative shot noise or no noise floor; the bound is rejected")


def check_pair_point(programs: Sequence[Program], y: Array, claimed: float) -> float:
    """Confirm that one point is feasible and that its worst CNR is the one claimed; return it.

    Raises CertificateError naming what is off.
    """
    excess = float(violation(programs[0], y[None])[0])
    if not excess <= FEASIBILITY_TOLERANCE:
        raise CertificateError(f"certificate: the recipe exceeds a limit by {excess:.2e} of it")
    actual = worst_contrast(programs, y)
    if not abs(actual - claimed) <= 1e-9 * max(abs(actual), 1e-12):
        raise CertificateError(f"certificate: the recipe's worst CNR is {actual:.12g}, not the claimed {claimed:.12g}")
    return actual
