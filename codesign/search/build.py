"""The certified optimum of one configuration under build limits: branch and bound on how many units each LED has.

Boxes of choices are explored best bound first. The relaxed optimum of a box says which LEDs are worth having; the
best of them in whole numbers give a recipe, the box is split at the LED that matters most. Optima light few LEDs, so
trees stay small.
"""

from __future__ import annotations

import heapq
import itertools
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from codesign.build import Box, Units, tightened
from codesign.certificate import Line, Proof
from codesign.certificate_build import BuildLeaf, BuildSpace, BuildSplit, restricted
from codesign.certificate_pairs import PairProof
from codesign.program import Array, Program, contrast_to_noise
from codesign.search import never
from codesign.search.frontier import Certified, Hint, certify
from codesign.search.pairs import CertifiedPairs, certify_pairs

#: Share of the gap left to each box's own proof.
OWN_SHARE = 0.25
#: Uses below this share of a unit are dust of the interior point.
DUST = 1e-6
#: Boxes explored at most; the honest gap is reported then.
LARGEST_NUMBER_OF_BOXES = 20000

Solve = Callable[[Sequence[Program], float, float, Hint | None], Certified | CertifiedPairs]


@dataclass(frozen=True, slots=True, kw_only=True)
class Built:
    """Best recipe under build limits: point over all columns, units of each LED, its CNR, bound and proof."""

    point: Array
    units: Units
    value: float
    bound: float
    proof: BuildLeaf | BuildSplit
    boxes: int

    @property
    def gap(self) -> float:
        """Relative distance of the bound above the value."""
        return self.bound / self.value - 1.0 if self.value > 0 else (0.0 if self.bound <= 0 else np.inf)


@dataclass(slots=True, eq=False)
class _Node:
    """One box; ``use`` and ``worth`` are each LED's units and signal in the relaxed optimum."""

    box: Box | None
    bound: float = 0.0
    proof: Proof | PairProof | None = None
    pair: int | None = 0
    use: Array | None = None
    worth: Array | None = None
    hint: Hint | None = None
    names: tuple[str, ...] = ()
    split: tuple[int, int] | None = None
    below: _Node | None = None
    above: _Node | None = None


def one_pair(programs: Sequence[Program], gap: float, target: float, hint: Hint | None) -> Certified:
    """One pair: the frontier."""
    return certify(programs[0], gap, target, hint)


def all_pairs(programs: Sequence[Program], gap: float, target: float, hint: Hint | None) -> CertifiedPairs:
    """Several pairs: the worst of them."""
    return certify_pairs(programs, gap, target)


@dataclass(slots=True)
class _Search:
    """Incumbent and boxes of one configuration."""

    programs: Sequence[Program]
    space: BuildSpace
    gap: float
    target: float
    solve: Solve
    value: float = 0.0
    point: Array | None = None
    units: Units | None = None
    boxes: int = 0
    tried: set[bytes] = field(default_factory=set)

    @property
    def cutoff(self) -> float:
        """Bounds below this need no further look."""
        return max(self.value, self.target) * (1 + self.gap)

    def node(self, box: Box, parent: _Node | None, hint: Hint | None) -> _Node:
        """Bound a box by its relaxation, and try the best whole choice near it."""
        box = tightened(self.space.limits, box)
        if box is None:
            return _Node(None)
        self.boxes += 1
        small, keep = zip(*(restricted(program, self.space, box) for program in self.programs), strict=True)
        keep = keep[0]
        if parent is not None and parent.hint is not None:
            hint, names = parent.hint, parent.names
        else:
            names = self.programs[0].row_names
        own = self.gap * OWN_SHARE
        found = self.solve(small, own, self.cutoff / (1 + own), _fitted(hint, names, small[0]))
        use, worth = self._use(small[0], found.point)
        lit = np.flatnonzero(use > DUST)
        node = _Node(box, found.bound, found.proof, use=use * box.high, worth=worth, names=small[0].row_names)
        node.pair = getattr(found, "pair", 0)
        ceiling = getattr(found.proof, "ceiling", None)
        if ceiling is not None:
            node.hint = Hint(ceiling, lit, max(found.value, 1e-12))
        if found.bound > self.cutoff:
            self._round(node)
        return node

    def _use(self, program: Program, point: Array) -> tuple[Array, Array]:
        """Share of its units and signal of each LED in a point. (L,), (L,)"""
        leds = self.space.units.size
        q, t = point[:-1], max(float(point[-1]), 1e-300)
        use = np.zeros(leds)
        np.maximum.at(use, program.led, q / (program.width * t))
        heat = np.bincount(program.led, q * program.heat, minlength=leds)
        use = np.maximum(use, np.where(np.isfinite(program.heat_cap), heat / np.maximum(program.heat_cap, 1e-300), 0))
        worth = np.bincount(program.led, np.abs(program.signal[0, :-1] * q), minlength=leds)
        return np.minimum(use, 1.0), worth

    def _round(self, node: _Node) -> None:
        """Take the LEDs of most signal in whole units while the limits allow, and certify that choice."""
        units = node.box.low.copy()
        order = [int(i) for i in np.argsort(-node.worth, kind="stable") if node.use[i] > DUST]
        for led in order:
            most = self._most(units, led)
            units[led] = max(units[led], min(int(np.ceil(node.use[led] - DUST)), most))
        for led in order:
            units[led] = max(units[led], self._most(units, led)) if units[led] else 0
        self.offer(units, node)

    def _most(self, units: Units, led: int) -> int:
        """Units of an LED that the limits allow beside those of the others."""
        high = units.copy()
        high[led] = self.space.root.high[led]
        box = tightened(self.space.limits, Box(units, high))
        return int(box.high[led]) if box is not None else int(units[led])

    def offer(self, units: Units, node: _Node | None = None) -> None:
        """Certify a whole choice and keep it if it is the best."""
        key = units.tobytes()
        if key in self.tried or not self.space.allows(units):
            return
        self.tried.add(key)
        small, keep = zip(
            *(restricted(program, self.space, Box(units, units)) for program in self.programs), strict=True
        )
        hint = None if node is None else _fitted(node.hint, node.names, small[0])
        own = self.gap * OWN_SHARE
        found = self.solve(small, own, max(self.value, self.target), hint)
        point, value = np.zeros(self.programs[0].segments + 1), found.value
        point[-1] = found.point[-1]
        if units.any():
            point[keep[0]] = found.point[:-1]
        else:  # one column was kept for want of any; the dust of light in it is not there
            value = min(float(contrast_to_noise(program, point[None])[0]) for program in self.programs)
        if value > self.value:
            self.value, self.units, self.point = value, units, point

    def branch(self, node: _Node) -> None:
        """Split a box at the LED that matters most."""
        led, at = self._where(node)
        node.split = (led, at)
        node.below, node.above = (self.node(box, node, None) for box in node.box.split(led, at))

    def _where(self, node: _Node) -> tuple[int, int]:
        box = node.box
        open_ = box.low < box.high
        in_use = (node.use > DUST) | (box.low > 0)
        crowded = any(limit.first @ in_use > limit.bound for limit in self.space.limits)
        whole = np.floor(node.use + DUST)
        part = np.clip(node.use - whole, 0.0, 1.0)
        if crowded:
            score = np.where(open_ & (box.low == 0), node.worth, -1.0)
            at = np.zeros_like(box.low)
        else:
            score = np.where(open_, node.worth * np.where(self.space.units == 1, 1.0, 1e-3 + part * (1 - part)), -1.0)
            at = whole.astype(np.int64)
        if score.max() < 0:
            score = open_.astype(float)
        led = int(np.argmax(score))
        return led, int(np.clip(at[led], box.low[led], box.high[led] - 1))


def certify_build(
    programs: Sequence[Program],
    space: BuildSpace,
    gap: float = 1e-3,
    target: float = 0.0,
    hint: Hint | None = None,
    *,
    stop: Callable[[], bool] = never,
    known: Units | None = None,
) -> Built:
    """Best recipe of one configuration over all whole choices, with a proven bound.

    Parameters
    ----------
    programs : sequence of Program
        Those of the pairs of one configuration (P = 1 each), with the rows of `codesign.assemble`.
    space : BuildSpace
    gap : float
        Relative gap to prove. [1]
    target : float
        CNR reached elsewhere: boxes that cannot beat it by more than the gap are left.
    hint : Hint, optional
        From a cheaper bound of the same configuration.
    stop : function
        Asked between boxes; True ends the search with the gap reached.
    known : (L,) int array, optional
        A choice worth trying first.
    """
    search = _Search(programs, space, gap, target, one_pair if len(programs) == 1 else all_pairs)
    if known is not None:
        search.offer(np.asarray(known, dtype=np.int64))
    root = search.node(space.root, None, hint)
    count = itertools.count()
    waiting = [(-root.bound, next(count), root)] if root.box is not None else []
    while waiting and -waiting[0][0] > search.cutoff:
        if search.boxes >= LARGEST_NUMBER_OF_BOXES or stop():
            break
        node = heapq.heappop(waiting)[2]
        if not (node.box.low < node.box.high).any():
            continue  # one whole choice, proven as far as its own frontier goes
        search.branch(node)
        for child in (node.below, node.above):
            if child.box is not None:
                heapq.heappush(waiting, (-child.bound, next(count), child))
    tree, bound = _tree(root)
    if search.point is None:
        search.point = np.append(np.zeros(programs[0].segments), programs[0].time_low)
        search.units = space.root.low
    return Built(
        point=search.point, units=search.units, value=search.value, bound=bound, proof=tree, boxes=search.boxes
    )


def _tree(node: _Node) -> tuple[BuildLeaf | BuildSplit, float]:
    """The branching record, and the largest bound of its leaves."""
    if node.split is None:
        return BuildLeaf(node.proof, node.pair or 0), max(node.bound, 0.0)
    below, above = _tree(node.below), _tree(node.above)
    return BuildSplit(*node.split, below[0], above[0]), max(below[1], above[1])


def _fitted(hint: Hint | None, names: tuple[str, ...], program: Program) -> Hint | None:
    """A hint with its multipliers put to the rows of another program, None when it lights nothing there."""
    if hint is None:
        return None
    leds = np.intersect1d(hint.leds, program.led)
    if not leds.size:
        return None
    place = {name: k for k, name in enumerate(names)}
    limit = np.zeros((1, len(program.row_names)))
    for k, name in enumerate(program.row_names):
        if name in place and place[name] < hint.ceiling.limit.shape[1]:
            limit[0, k] = hint.ceiling.limit[0, place[name]]
    ceiling: Line = replace(hint.ceiling, limit=limit)
    return Hint(ceiling, leds, hint.promise)


def polish_build(programs: Sequence[Program], space: BuildSpace, found: Built, gap: float) -> Built:
    """Work out the best recipe for the units found to a smaller gap; the bound over all choices stays."""
    search = _Search(programs, space, gap, 0.0, one_pair if len(programs) == 1 else all_pairs)
    search.offer(found.units)
    if search.value <= found.value:
        return found
    return replace(found, point=search.point, value=search.value, bound=max(found.bound, search.value))
