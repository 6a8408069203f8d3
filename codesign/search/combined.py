"""Best weights and recipe of one configuration together: alternation for a good one, boxes of weights for the bound."""

from __future__ import annotations

import heapq
import itertools
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from codesign.certificate import Proof
from codesign.certificate_combined import (
    Box,
    CombinedProof,
    Readings,
    Spread,
    combined_bound,
    faces,
    intervals,
    spread,
    widening,
)
from codesign.errors import CertificateError
from codesign.physics.detection import hotelling
from codesign.program import Array
from codesign.search import never
from codesign.search.frontier import certify

#: Contrast signs, in the order of the proofs.
SIGNS = (1.0, -1.0)
#: Alternations from one start, and the relative gain below which they end.
LARGEST_NUMBER_OF_ROUNDS, LEAST_GAIN = 30, 1e-5
#: Rounds from every start, and how many of the results are worked out.
SHORT_ROUNDS, LEADERS = 3, 2
#: Corners certified for each contrast sign before an honest gap is reported.
LARGEST_NUMBER_OF_CORNERS = 150
#: The same for whole boxes of separate readings.
LARGEST_NUMBER_OF_BOXES = 300
#: Gap of the programs at fixed weights, as a share of the gap asked for.
CORNER_SHARE = 0.2


@dataclass(frozen=True, slots=True, kw_only=True)
class Combined:
    """Best recipe and weights of some readings, their CNR, the proven bound over all weights and its proof."""

    point: Array
    weights: Array
    value: float
    bound: float
    proof: tuple[CombinedProof, ...]

    @property
    def gap(self) -> float:
        """Relative distance of the bound above the value."""
        return self.bound / self.value - 1.0 if self.value > 0 else np.inf


def turned(readings: Readings, sign: float) -> Readings:
    """The same readings with the contrast sign turned."""
    return replace(readings, signal=readings.signal * sign)


def alternate(
    readings: Readings, weights: Array, gap: float, rounds: int = LARGEST_NUMBER_OF_ROUNDS
) -> tuple[Array, Array, float]:
    """Best recipe at the weights, best weights at the recipe, and so on; never falls. Returns recipe, weights, CNR."""
    point, value = None, 0.0
    for _ in range(rounds):
        trial = certify(readings.weighted(weights), gap).point
        cnr, better = hotelling(*readings.moments(trial))
        if point is not None and not cnr > value * (1 + LEAST_GAIN):
            break
        point, value, weights = trial, cnr, better
        if not value > 0:
            break
    return point, weights, value


def starts(count: int) -> list[Array]:
    """Weights to start from: each reading alone, and all sums and differences with equal weights."""
    alone = list(np.eye(count))
    return alone + [np.array([1.0, *signs]) for signs in itertools.product((1.0, -1.0), repeat=count - 1)]


def best_alternation(readings: Readings, gap: float) -> tuple[Array, Array, float]:
    """The best of the alternations from all starts with either contrast sign.

    A few rounds from each start, the leaders to the end. The weights returned make the weighted target brighter.
    """
    first = [alternate(readings, sign * w, gap, SHORT_ROUNDS) for w in starts(readings.count) for sign in SIGNS]
    leaders = sorted(first, key=lambda item: -item[2])[:LEADERS]
    return max((better(readings, known, gap) for known in leaders), key=lambda item: item[2])


def better(readings: Readings, known: tuple[Array, Array, float], gap: float) -> tuple[Array, Array, float]:
    """Alternation from a recipe and weights already found; never worse."""
    return max(known, alternate(readings, known[1], gap), key=lambda item: item[2]) if known[2] > 0 else known


class _Corners:
    """Certified bounds at the corners of the boxes, with both contrast signs, each worked out once."""

    def __init__(self, readings: Readings, gap: float) -> None:
        self.readings, self.gap = readings, gap
        self.proofs: dict[tuple[float, ...], Proof] = {}
        self.bounds: dict[tuple[float, ...], float] = {}

    def bound(self, box: Box, aim: float) -> float:
        """Largest bound of any corner; corners that stay below ``aim`` are not worked out further."""
        return max(self._at(corner, aim) for corner in box.corners())

    def _at(self, corner: tuple[float, ...], aim: float) -> float:
        if corner not in self.bounds:
            result = certify(self.readings.weighted(np.array(corner)), self.gap, aim / (1 + self.gap))
            self.bounds[corner], self.proofs[corner] = result.bound, result.proof
        return self.bounds[corner]


def bound_over_weights(
    readings: Readings,
    gap: float,
    value: float,
    exchangeable: bool,
    most: int = LARGEST_NUMBER_OF_CORNERS,
    stop: Callable[[], bool] = never,
) -> tuple[float, CombinedProof]:
    """Bound on the CNR over all recipes and weights of one sign, to the gap above ``value`` where that works.

    The boxes kept cover all weights at any time, so a bound stopped early is loose, never wrong.
    """
    if readings.separate():
        return _bound_by_boxes(readings, gap, value, exchangeable, stop=stop)
    spread_, corners = spread(readings), _Corners(readings, CORNER_SHARE * gap)
    aim, ticket = value * (1 + gap), itertools.count()

    def entry(box: Box):
        wide = widening(box, spread_)
        return (-wide * corners.bound(box, aim / wide), next(ticket), box)

    open_ = [entry(box) for box in faces(readings.count, exchangeable)]
    heapq.heapify(open_)
    while -open_[0][0] > aim and len(corners.bounds) < most and not stop():
        _, _, box = heapq.heappop(open_)
        for part in _halves(box, spread_):
            heapq.heappush(open_, entry(part))
    used = tuple(box for _, _, box in open_)
    kept = {corner: corners.proofs[corner] for box in used for corner in box.corners()}
    return -open_[0][0], CombinedProof(boxes=used, corners=kept)


def _bound_by_boxes(
    readings: Readings,
    gap: float,
    value: float,
    exchangeable: bool,
    most: int = LARGEST_NUMBER_OF_BOXES,
    stop: Callable[[], bool] = never,
) -> tuple[float, CombinedProof]:
    """As `bound_over_weights` for readings with columns of their own: one program for each box of one sign."""
    aim, ticket, whole = value * (1 + gap), itertools.count(), {}

    def entry(box: Box):
        if not box.one_sign():
            return (-np.inf, next(ticket), box)
        program = readings.boxed(np.array(box.low), np.array(box.high))
        result = certify(program, CORNER_SHARE * gap, aim / (1 + CORNER_SHARE * gap))
        whole[box] = result.proof
        return (-result.bound, next(ticket), box)

    open_ = [entry(box) for box in faces(readings.count, exchangeable)]
    heapq.heapify(open_)
    while -open_[0][0] > aim and ((len(whole) < most and not stop()) or not np.isfinite(open_[0][0])):
        _, _, box = heapq.heappop(open_)
        whole.pop(box, None)
        low, high = np.array(box.low), np.array(box.high)
        for part in _cut(box, int(np.argmax(high - low))):
            heapq.heappush(open_, entry(part))
    used = tuple(box for _, _, box in open_)
    return -open_[0][0], CombinedProof(boxes=used, corners={}, whole=whole)


def _halves(box: Box, spread_: Spread) -> tuple[Box, Box]:
    """Cut a box where its interval widens the bound most."""
    found, _ = intervals(box, spread_)
    return _cut(box, int(np.argmax(found)))


def _cut(box: Box, m: int) -> tuple[Box, Box]:
    """Cut an interval of a box: at zero, else in the middle, by ratio away from zero."""
    low, high = box.low[m], box.high[m]
    if low < 0 < high:
        at = 0.0
    elif low == 0 or high == 0:
        at = 0.25 * (low + high)
    else:
        at = float(np.sign(low) * np.sqrt(low * high))
    lows, highs = list(box.low), list(box.high)
    lows[m] = highs[m] = at
    return replace(box, high=tuple(highs)), replace(box, low=tuple(lows))


def certify_combined(
    readings: Readings,
    gap: float = 1e-2,
    target: float = 0.0,
    *,
    known: tuple[Array, Array, float] | None = None,
    exchangeable: bool = False,
    stop: Callable[[], bool] = never,
) -> Combined:
    """Best recipe and weights of one configuration, with a bound over all of them for both contrast signs.

    ``known`` is a recipe, its weights and CNR; by default alternation finds one. ``exchangeable`` readings (shots) may
    change places. A gap that does not close is reported as it is.
    """
    point, weights, value = best_alternation(readings, gap) if known is None else known
    found = [
        bound_over_weights(turned(readings, sign), gap, max(value, target), exchangeable, stop=stop) for sign in SIGNS
    ]
    most = max(limit for limit, _ in found)
    return Combined(
        point=point, weights=weights, value=value, bound=max(most, value), proof=tuple(proof for _, proof in found)
    )


def combined_bounds(readings: Readings, proof: tuple[CombinedProof, ...], exchangeable: bool = False) -> float:
    """Bound that the proofs of both contrast signs show. Raises CertificateError when they do not."""
    if len(proof) != len(SIGNS):
        raise CertificateError("certificate: combined readings need a proof for either contrast sign")
    pairs = zip(SIGNS, proof, strict=True)
    return max(combined_bound(turned(readings, sign), part, exchangeable) for sign, part in pairs)
