"""What one walk has proved, taken to another of the same problem at other junction temperatures.

Any multipliers give a valid bound for any program, so they are only worked out anew; where they prove too little, the
tightening goes on from them instead of from nothing.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

import numpy as np

from codesign.certificate import Proof
from codesign.search.lend import joined
from codesign.search.walk import LARGEST_CHUNK, Evidence, Walk

#: Lines taken over, the last ones: these brought the bound down.
LINES = 3


def carry(walk: Walk, before: Walk, target: float) -> None:
    """Bound the configurations that could still beat a CNR by what is known of them from ``before``."""
    kinds = sorted({(item.coarse, item.pair) for item in before.evidence}, key=lambda kind: (not kind[0], kind[1]))
    for index, hint in before.hints.items():
        walk.hints.setdefault(int(_renumbered(before, walk, np.array([index]))[0]), hint)
    for coarse, pair in kinds:
        items = [
            item
            for item in before.evidence
            if (item.coarse, item.pair) == (coarse, pair) and isinstance(item.proof, Proof) and item.proof.lines
        ]
        items = [replace(item, proof=replace(item.proof, lines=item.proof.lines[-LINES:])) for item in items]
        for part, proof in _pieces(walk, before, items, target):
            walk.resume(part, pair, target, proof, coarse=coarse)


def _pieces(walk: Walk, before: Walk, items: Sequence[Evidence], target: float) -> Iterator[tuple[np.ndarray, Proof]]:
    """Open configurations of the walk with their latest proofs, as many at a time as make a block."""
    own = np.full(before.upper.size, -1)
    place = np.zeros(before.upper.size, dtype=np.intp)
    for k, item in enumerate(items):
        own[item.index], place[item.index] = k, np.arange(item.index.size)
    known = np.flatnonzero(own >= 0)
    number = _renumbered(before, walk, known)
    open_ = walk.upper[number] > target * (1 + walk.gap)
    own, place = own[known[open_]], place[known[open_]]
    of_number = {int(n): k for k, n in enumerate(number[open_])}
    for same in walk.same_columns(number[open_]):
        for start in range(0, same.size, LARGEST_CHUNK):
            part = same[start : start + LARGEST_CHUNK]
            which = np.array([of_number[int(n)] for n in part], dtype=np.intp)
            proof = joined([item.proof for item in items], own[which], place[which])
            if proof is not None:
                yield part, proof


def _renumbered(before: Walk, walk: Walk, index: np.ndarray) -> np.ndarray:
    """Numbers of configurations in a walk that has further filters after those of ``before``."""
    place, sign = np.divmod(index, 2)
    setting, part = np.divmod(place, before.filters)
    return (setting * walk.filters + part) * 2 + sign
