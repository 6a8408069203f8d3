"""Several readings of one decision combined by linear weights: weighted programs, and a bound over all weights.

Readings m (channels of one exposure, or shots in turn) have signals ``d_m·y``, independent variances
``V_m(y) = c_m + s_m·y + |P_m y|²`` and noise in common of amplitudes ``C_m y`` and ``o_m ≥ 0``: the same samples of the
surface, and between shots the same pixels with their fixed pattern (PRNU as rows of C, DSNU as o). With weights w

    CNR_w = Σ w_m d_m·y / σ_w,   σ_w² = Σ w_m² V_m + |Σ w_m C_m y|² + (Σ w_m o_m)²,

which for fixed w is an ordinary program. The best weights at a fixed recipe are Hotelling's.

Bound over all weights. σ is a norm in w. A box of weights is the hull of its corners w^i, so ``w = Σ θ_i w^i`` (each
component drawn on its own from its two ends), and if no recipe exceeds Γ at any corner,
``Σ w_m d_m·y ≤ Γ Σ θ_i σ(w^i) ≤ Γ √(Σ θ_i σ(w^i)²)``. The last sum exceeds ``σ_w²`` by the spread of the corners,
``Σ_m var_m (V_m + |C_m y|² + o_m²) ≤ Σ_m var_m (1+Λ_m) V_m`` with Λ_m a bound on the variance in common over that of
its own, for reading m alone: components are drawn on their own, so products of two have no spread. For an interval
``[a, b]`` of one sign ``var_m ≤ w_m² (b−a)²/(4ab)``; else ``var_m V_m ≤ ρ_m V_face (b−a)²/4`` with ρ_m a bound on
``V_m/V_face``, where the face's own weight is 1. So no weights of the box reach more than κ Γ with

    κ² = 1 + max over the one-sign intervals of (1+Λ_m) (b−a)²/(4ab) + Σ over the others of (1+Λ_m) ρ_m (b−a)²/4.

Shots have columns of their own, which gives a bound without κ. In a box of one sign ``y'_m = |w_m|/high_m · y_m`` only
takes light away, so it is feasible; signal and all rows of P and C at ``(w, y)`` are those at ``(high, y')``, for
``w_m y_m = high_m y'_m`` with its sign. Shot noise is at least ``low_m high_m s_m·y'_m``, the floor at least
``low_m² c_m`` (sizes) and the least square of ``Σ w_m o_m`` over the box. One such program bounds the whole box.

No solver is imported here.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from codesign.certificate import Proof, bound
from codesign.errors import CertificateError
from codesign.program import Array, Program


@dataclass(frozen=True, slots=True, kw_only=True)
class Readings:
    """M readings under common limits: ``limits`` lends columns, rows and exposure; its signal and noise are not used.

    ``signal``, ``shot`` (M, n+1), ``floor`` (M,) and ``pattern`` (M, p, n+1), rows of noise of each reading's own (PRNU
    where pixels differ); ``common`` (M, r, n+1), rows that all readings share, and ``offset`` (M,), what they share
    without light, as standard deviation. [e⁻], variances [e⁻²]
    """

    limits: Program
    signal: Array
    shot: Array
    pattern: Array
    common: Array
    floor: Array
    offset: Array

    @property
    def count(self) -> int:
        """Number of readings M."""
        return self.floor.size

    def weighted(self, weights: Array) -> Program:
        """The program of fixed weights (M,)."""
        w = np.asarray(weights, dtype=float)
        rows = (w[:, None, None] * self.pattern).reshape(-1, self.signal.shape[1])
        common = np.einsum("m,mrn->rn", w, self.common)
        return replace(
            self.limits,
            signal=(w @ self.signal)[None],
            shot=(w**2 @ self.shot)[None],
            noise_rows=np.concatenate([rows, common])[None],
            floor=np.array([w**2 @ self.floor + (w @ self.offset) ** 2]),
        )

    def separate(self) -> bool:
        """Whether each column serves one reading only, none the common time, and less light breaks no limit."""
        parts = [self.signal[:, None], self.shot[:, None], self.pattern, self.common]
        used = np.any([np.any(part != 0, axis=1) for part in parts], axis=0)
        fixed = self.limits.time_low[0] == self.limits.time_high[0]
        alone = (used.sum(axis=0) <= 1).all() and not used[:, -1].any()
        return bool(alone and fixed and (self.limits.rows[:, :, :-1] >= 0).all())

    def boxed(self, low: Array, high: Array) -> Program:
        """The program that bounds all weights between ``low`` and ``high`` (M,) of one sign, for separate readings."""
        far = np.where(np.abs(high) >= np.abs(low), high, low)
        near = np.minimum(np.abs(low), np.abs(high))
        program = self.weighted(far)
        shot = (near * np.abs(far)) @ self.shot
        # Σ w o lies between low·o and high·o; where both have one sign, the smaller size is its least.
        common = max(low @ self.offset, -(high @ self.offset), 0.0)
        return replace(program, shot=shot[None], floor=np.array([near**2 @ self.floor + common**2]))

    def moments(self, y: Array) -> tuple[Array, Array]:
        """Difference of means (M,) and mean covariance (M, M) at a recipe ``y`` (n+1,). [e⁻], [e⁻²]"""
        pattern, common = self.pattern @ y, np.column_stack([self.common @ y, self.offset])
        own = self.floor + self.shot @ y + np.einsum("mp,mp->m", pattern, pattern)
        return self.signal @ y, np.diag(own) + common @ common.T


def shot_tops(readings: Readings) -> Array:
    """Most shot noise of each reading, from one limit at a time. (M,) [e⁻²]"""
    first = readings.limits
    full = np.append(first.width, 1.0) * first.time_high[0]
    tops = readings.shot @ full
    for row, limit in zip(first.rows[0], first.bounds[0], strict=True):
        if (row >= 0).all():
            for m, shot in enumerate(readings.shot):
                with np.errstate(divide="ignore", invalid="ignore"):
                    price = float(np.max(np.where(shot > 0, shot / row, 0.0)))
                if np.isfinite(price):
                    tops[m] = min(tops[m], price * limit * (1 + 1e-6))
    return tops


@dataclass(frozen=True, slots=True)
class Spread:
    """What bounds the spread of noise over a box of weights: Λ (M,), and ρ (face, reading)."""

    common: Array
    ratio: Array


def _steepest(values: Array, base: Array) -> float:
    """Largest ``values/base`` of any column with a value, infinite over a zero base."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return float(np.max(np.where(values > 0, values / base, 0.0), initial=0.0))


def spread(readings: Readings) -> Spread:
    """Work out Λ and ρ of some readings, from ``|C_m y| ≤ steepness·s_m·y`` and ``s_m·y ≤`` its top.

    ``(steepness² x² + o²)/(c + x)`` is convex in the shot noise x, so it is largest at one end: none, or the top.
    """
    tops, floor, count = shot_tops(readings), readings.floor, readings.count
    common, pattern = (np.sqrt(np.einsum("mrn,mrn->mn", x, x)) for x in (readings.common, readings.pattern))
    steep, dark = np.array([_steepest(common[m], readings.shot[m]) for m in range(count)]), readings.offset**2
    with np.errstate(invalid="ignore"):
        at_top = (np.where(steep > 0, steep**2 * tops**2, 0.0) + dark) / (floor + tops)
    share = np.maximum(dark / floor, at_top)
    # PRNU adds at most this factor to shot noise: |P y|² ≤ steepness²·top·(s·y).
    factor = np.array([1 + _steepest(pattern[m], readings.shot[m]) ** 2 * tops[m] for m in range(count)])
    most = (floor + factor * tops)[None, :] / floor[:, None]
    by_column = [[_steepest(readings.shot[m], readings.shot[face]) for m in range(count)] for face in range(count)]
    by_column = np.maximum(np.array(by_column) * factor, floor[None, :] / floor[:, None])
    return Spread(share, np.minimum(most, by_column))


@dataclass(frozen=True, slots=True)
class Box:
    """Weights with that of ``face`` equal to 1 and the others (by reading) between ``low`` and ``high`` (M,)."""

    face: int
    low: tuple[float, ...]
    high: tuple[float, ...]

    def one_sign(self) -> bool:
        """Whether no interval reaches across zero."""
        return all(low * high >= 0 for low, high in zip(self.low, self.high, strict=True))

    def corners(self) -> list[tuple[float, ...]]:
        """All corners, once each."""
        return list(dict.fromkeys(itertools.product(*zip(self.low, self.high, strict=True))))


def intervals(box: Box, spread_: Spread) -> tuple[Array, Array]:
    """What each reading's interval adds to ``κ² − 1``, and whether as a one-sign interval. (M,), (M,)"""
    low, high = np.array(box.low), np.array(box.high)
    with np.errstate(divide="ignore", invalid="ignore"):
        relative = np.where(low * high > 0, (high - low) ** 2 / (4 * low * high), np.inf)
    absolute = spread_.ratio[box.face] * (high - low) ** 2 / 4
    one_sign = relative <= absolute
    found = np.where(one_sign, relative, absolute) * (1 + spread_.common)
    found[high == low] = 0.0
    return found, one_sign


def widening(box: Box, spread_: Spread) -> float:
    """κ of a box."""
    found, one_sign = intervals(box, spread_)
    inside = np.max(found, where=one_sign, initial=0.0) + np.sum(found, where=~one_sign)
    return float(np.sqrt(1 + inside))


def faces(count: int, exchangeable: bool) -> list[Box]:
    """Boxes that hold all directions of weights up to their length and sign: one for each largest weight.

    Readings that can be exchanged need only one of them.
    """
    return [
        Box(
            face=face,
            low=tuple(1.0 if m == face else -1.0 for m in range(count)),
            high=tuple(1.0 for m in range(count)),
        )
        for face in range(1 if exchangeable else count)
    ]


@dataclass(frozen=True, slots=True, kw_only=True)
class CombinedProof:
    """Boxes that cover all weights, and proofs of the corners' bounds or, for separate readings, of whole boxes."""

    boxes: tuple[Box, ...]
    corners: Mapping[tuple[float, ...], Proof]
    whole: Mapping[Box, Proof] = field(default_factory=dict)


def combined_bound(readings: Readings, proof: CombinedProof, exchangeable: bool = False) -> float:
    """Bound over all weights and recipes that a proof shows.

    Raises CertificateError when its boxes leave weights out.
    """
    _require_cover(proof.boxes, faces(readings.count, exchangeable))
    reached = {w: float(bound(readings.weighted(np.array(w)), p)[0]) for w, p in proof.corners.items()}
    spread_ = spread(readings)
    if proof.whole and not readings.separate():
        raise CertificateError("certificate: readings that share columns cannot be bounded by whole boxes")

    def of_box(box: Box) -> float:
        if box in proof.whole and box.one_sign():
            program = readings.boxed(np.array(box.low), np.array(box.high))
            return float(bound(program, proof.whole[box])[0])
        return widening(box, spread_) * max(reached[w] for w in box.corners())

    try:
        return max(of_box(box) for box in proof.boxes)
    except KeyError:
        raise CertificateError("certificate: a corner of the weights has no proof; the bound is rejected") from None


def _require_cover(boxes: tuple[Box, ...], wanted: list[Box]) -> None:
    """The boxes of each face must fill it: split it along their own edges and look each piece up."""
    for face in wanted:
        own = [box for box in boxes if box.face == face.face]
        if not own or not _covered(own, np.array(face.low), np.array(face.high)):
            raise CertificateError("certificate: some weights are in no box; the bound is rejected")


def _covered(own: list[Box], low: Array, high: Array) -> bool:
    """Whether boxes cover a region: cut it at an edge inside it, until single boxes hold the pieces."""
    touching = [b for b in own if (np.array(b.low) <= high).all() and (np.array(b.high) >= low).all()]
    if any((np.array(b.low) <= low).all() and (np.array(b.high) >= high).all() for b in touching):
        return True
    for box in touching:
        for edges in (box.low, box.high):
            for m, edge in enumerate(edges):
                if low[m] < edge < high[m]:
                    cut = np.arange(low.size) == m
                    return _covered(touching, low, np.where(cut, edge, high)) and _covered(
                        touching, np.where(cut, edge, low), high
                    )
    return False
