"""The certified optimum of one configuration over several pairs: the largest worst CNR, by branch and bound on cells.

The most limiting pair alone often settles it; its frontier is tried first. Otherwise cells of the recipes are split,
best-first, at the shot-noise variance of the pair that falls short by most (`codesign.certificate_pairs`), until no
cell could hold anything better. Recipes come from the relaxations, improved by convex-concave steps: the concave part
of each noise is replaced by its tangent, which restricts the problem and never makes a recipe worse.
"""

from __future__ import annotations

import heapq
import itertools
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from codesign.certificate import Proof
from codesign.certificate_pairs import (
    Leaf,
    Margin,
    PairProof,
    Split,
    chord,
    everything,
    margin,
    pair_contrasts,
    worst_contrast,
)
from codesign.program import Array, Program, variance
from codesign.search.bounds import simple_ceiling
from codesign.search.cone import ConeProgram, Step
from codesign.search.frontier import certify

#: Pairs certified alone before all are taken together.
ALONE = 2
#: Cells after which an honest gap is reported instead.
LARGEST_NUMBER_OF_CELLS = 200
#: Convex-concave steps from one start, and the relative gain below which they end.
LARGEST_NUMBER_OF_STEPS, LEAST_GAIN = 12, 1e-5
#: The same for the last polish.
POLISHING_STEPS, POLISHING_GAIN = 60, 1e-10
#: Share of an LED's reach below which it counts as off where a search starts. [1]
DUST = 1e-3
#: Pairs this close to the worst one enter the cone programs at once. [1]
CLOSE = 0.03
#: A positive level for pairs that no recipe seen so far shows with the wanted sign, relative to what is asked.
NO_LEVEL = 1e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class CertifiedPairs:
    """Best recipe of one configuration over several pairs, its worst CNR, the proven bound and its proof.

    ``proof`` is a tree of cells, or lines of the pair ``pair`` alone where these suffice.
    """

    point: Array
    value: float
    bound: float
    proof: PairProof | Proof
    pair: int | None
    cells: int = 0

    @property
    def gap(self) -> float:
        """Relative distance of the bound above the value."""
        return self.bound / self.value - 1.0 if self.value > 0 else (0.0 if self.bound <= 0 else np.inf)


@dataclass(slots=True)
class _Node:
    """A cell with what bounds it, and its two parts once it is split."""

    low: Array
    high: Array
    step: Step
    leaf: Leaf
    pair: int = -1
    at: float = 0.0
    parts: tuple[_Node, _Node] | None = None


class _Search:
    """Best recipe so far and the cone programs of all pairs, over a growing set of pairs that matter."""

    def __init__(self, programs: Sequence[Program], start: Array, tolerance: float) -> None:
        self.programs = programs
        bright = start[:-1] > DUST * programs[0].width * start[-1]
        lit = np.isin(programs[0].led, programs[0].led[bright])
        self.cone = ConeProgram(programs, np.flatnonzero(lit), tolerance)
        self.floor = np.array([p.floor[0] for p in programs])
        self.shot = np.stack([p.shot[0] for p in programs])
        self.point, self.value = start, worst_contrast(programs, start)
        self.pairs: list[int] = []

    def offer(self, y: Array) -> bool:
        """Keep a feasible point if it is the best."""
        value = worst_contrast(self.programs, y)
        if value > self.value:
            self.point, self.value = y, value
            return True
        return False

    def units(self, y: Array) -> Array:
        """Noise of each pair at a point. (K,) [e⁻]"""
        return np.sqrt([float(variance(p, y[None])[0]) for p in self.programs])

    def solve(self, level: float, lines: Array, y: Array, low: Array, high: Array) -> Step:
        """Solve a cone program, bringing in pairs until those left out hold too."""
        units = self.units(y)
        while True:
            step = self.cone.solve(level, lines, units, self.pairs, low, high)
            reached = pair_contrasts(self.programs, step.point)
            wanted = min(level, float(reached[self.pairs].min()))
            missing = [k for k in np.argsort(reached) if k not in self.pairs and reached[k] < wanted * (1 - 1e-9)]
            if not missing:
                return step
            self.pairs += [int(k) for k in missing[:2]]

    def improve(self, y: Array, least: float, steps: int = LARGEST_NUMBER_OF_STEPS, gain: float = LEAST_GAIN) -> None:
        """Convex-concave steps from a point while they gain."""
        low, high = everything(self.programs)
        value = worst_contrast(self.programs, y)
        for _ in range(steps):
            root = np.sqrt(self.floor + self.shot @ y)
            lines = np.stack([root - (self.shot @ y) / (2 * root), 1 / (2 * root)], axis=1)
            step = self.solve(max(value, least), lines, y, low, high)
            reached = worst_contrast(self.programs, step.point)
            self.offer(step.point)
            if not reached > max(value, 0.0) * (1 + gain):
                return
            y, value = step.point, reached

    def tops(self) -> list[tuple[float, Leaf]]:
        """For each pair the most shot noise any recipe has, in closed form, and multipliers that no recipe has more."""
        found = []
        for k, program in enumerate(self.programs):
            line, top = simple_ceiling(replace(program, signal=program.shot))
            nothing, blank = np.zeros_like(self.floor), tuple(np.zeros(len(p.noise_rows[0])) for p in self.programs)
            leaf = Leaf(
                level=0.0, weight=nothing, share=nothing, noise=blank,
                limit=line.limit[0], heat=line.heat[0], below=np.eye(len(self.programs))[k], above=nothing,
            )  # fmt: skip
            found.append((float(top[0]) * (1 + 1e-6), leaf))
        return found

    def cell(self, low: Array, high: Array, level: float) -> _Node:
        """Bound one cell."""
        lines = np.array([chord(*args) for args in zip(self.floor, low, high, strict=True)])
        step = self.solve(level, lines, self.point, low, high)
        leaf = replace(step.leaf, level=_least_level(margin(self.programs, step.leaf, low, high), level))
        return _Node(low, high, step, leaf)

    def split(self, node: _Node, level: float) -> None:
        """Cut a cell where its relaxed recipe is, for the pair that falls short of the level by most."""
        y = node.step.point
        h = self.shot @ y
        lines = np.array([chord(*args) for args in zip(self.floor, node.low, node.high, strict=True)])
        root = np.sqrt(self.floor + h)
        error = 1.0 - (lines[:, 0] + lines[:, 1] * h) / root
        missing = 1.0 - pair_contrasts(self.programs, y) / level
        pair = int(np.argmax(np.minimum(error, missing)))
        room = 0.1 * (node.high[pair] - node.low[pair])
        at = float(np.clip(h[pair], node.low[pair] + room, node.high[pair] - room))
        cut = np.arange(len(self.programs)) == pair
        node.pair, node.at = pair, at
        node.parts = (
            self.cell(node.low, np.where(cut, at, node.high), level),
            self.cell(np.where(cut, at, node.low), node.high, level),
        )


def _least_level(left: Margin, start: float) -> float:
    """Least level these multipliers prove, ``inf`` where they prove none: the margin is concave in the level."""
    high = start
    for _ in range(60):
        if left.at(high) > 0:
            break
        high *= 1.0 + 1e-9 if high == start else 1.5
    else:
        return np.inf
    low, below = 0.0, left.at(0.0)
    if below > 0:
        return 0.0
    for _ in range(50):
        above = left.at(high)
        # The chord from a level not proven to one proven crosses zero where the margin is already positive.
        trial = low + (high - low) * (-below / (above - below)) * (1 + 1e-12)
        middle = left.at(trial)
        if not low < trial < high * (1 - 1e-10) or not middle > 0:
            break
        high = trial
        probe = low + 0.9 * (high - low)
        value = left.at(probe)
        if value > 0:
            high = probe
        else:
            low, below = probe, value
    return high


def certify_pairs(
    programs: Sequence[Program], gap: float = 1e-2, target: float = 0.0, first: int = 0
) -> CertifiedPairs:
    """Recipe of the largest worst CNR over several pairs, with a bound at most ``gap`` above it or above ``target``.

    Parameters
    ----------
    programs : sequence of Program
        One program (P = 1) for each pair, equal but for signal, shot noise, noise rows and floor.
    gap : float
        Relative gap to prove; a larger one is reported as it is. [1]
    target : float
        Worst CNR already reached elsewhere: the search stops early once this configuration cannot beat it.
    first : int
        Pair likely to limit most, tried alone first.
    """
    found = _by_one_pair(programs, gap, target, first)
    if len(programs) == 1 or found.bound <= max(found.value, target, 0.0) * (1 + gap):
        return found
    search = _start(programs, found, 0.02 * gap)
    if found.value >= target:  # else a relaxation may well show that improving is in vain
        search.improve(found.point, NO_LEVEL * found.bound)
    if found.bound <= max(search.value, target) * (1 + gap):
        return replace(found, point=search.point, value=search.value)
    tree, cells = _branch(search, gap, target, found.bound)
    bound = _worst_level(tree)
    if bound >= found.bound:
        return replace(found, point=search.point, value=search.value, cells=cells)
    return CertifiedPairs(
        point=search.point, value=search.value, bound=bound, proof=PairProof(tree=tree), pair=None, cells=cells
    )


def polish_pairs(programs: Sequence[Program], found: CertifiedPairs) -> CertifiedPairs:
    """Improve a recipe to its local best; its bound holds as before."""
    search = _start(programs, found, 1e-7)
    search.improve(found.point, NO_LEVEL * found.bound, POLISHING_STEPS, POLISHING_GAIN)
    return replace(found, point=search.point, value=search.value, bound=max(found.bound, search.value))


def _start(programs: Sequence[Program], found: CertifiedPairs, tolerance: float) -> _Search:
    search = _Search(programs, found.point, tolerance)
    reached = pair_contrasts(programs, found.point)
    close = int(np.sum(reached <= found.value + CLOSE * abs(found.value)))
    search.pairs = [int(k) for k in np.argsort(reached)[:close]]
    return search


def _by_one_pair(programs: Sequence[Program], gap: float, target: float, pair: int) -> CertifiedPairs:
    """Certify single pairs, next the one that limits the recipe found, while that lowers the bound."""
    best = None
    for _ in programs[:ALONE]:
        one = certify(programs[pair], gap, target)
        value = worst_contrast(programs, one.point)
        found = CertifiedPairs(point=one.point, value=value, bound=one.bound, proof=one.proof, pair=pair)
        if best is not None:
            lower, better = min(found, best, key=lambda x: x.bound), max(found, best, key=lambda x: x.value)
            found, stalled = replace(lower, point=better.point, value=better.value), lower is best
            if stalled:
                return found
        best = found
        worst = int(np.argmin(pair_contrasts(programs, one.point)))
        if worst == pair or best.bound <= max(best.value, target) * (1 + gap):
            break
        pair = worst
    return best


def _branch(search: _Search, gap: float, target: float, known: float) -> tuple[Leaf | Split, int]:
    """Split cells, the one with the highest bound first, until the bound is within the gap."""

    def aim() -> float:
        return max(search.value, target, NO_LEVEL * known) * (1 + gap)

    tops = search.tops()
    root = search.cell(np.zeros(len(tops)), np.array([top for top, _ in tops]), aim())
    count, ticket = 1, itertools.count()
    open_ = [(-root.leaf.level, next(ticket), root)]
    while open_ and -open_[0][0] > aim() and count < LARGEST_NUMBER_OF_CELLS:
        _, _, node = heapq.heappop(open_)
        if worst_contrast(search.programs, node.step.point) > search.value:
            search.improve(node.step.point, NO_LEVEL * known)
        if node.leaf.level <= aim():
            continue
        search.split(node, aim() * (1 - 0.1 * gap))
        count += 2
        for part in node.parts:
            heapq.heappush(open_, (-part.leaf.level, next(ticket), part))
    tree = _tree(root)
    for pair, (top, leaf) in enumerate(tops):
        tree = Split(pair=pair, at=top, below=tree, above=leaf)
    return tree, count


def _tree(node: _Node) -> Leaf | Split:
    if node.parts is None:
        return node.leaf
    below, above = (_tree(part) for part in node.parts)
    parted = Split(pair=node.pair, at=node.at, below=below, above=above)
    return parted if _worst_level(parted) < node.leaf.level else node.leaf


def _worst_level(tree: Leaf | Split) -> float:
    return tree.level if isinstance(tree, Leaf) else max(_worst_level(tree.below), _worst_level(tree.above))
