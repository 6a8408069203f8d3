"""Multipliers of configurations already worked out, lent to others much like them.

Any multipliers give a valid bound for any program. Behind another filter or camera an optimum is held by much the same
limits, so that those of the most alike configuration mostly prove enough at the cost of one evaluation.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from codesign.certificate import Line, Proof, bound
from codesign.program import Array, Program

if TYPE_CHECKING:
    from codesign.search.walk import Walk

#: Lenders kept; more look much like these.
MOST_LENDERS = 256
#: Unlikeness of a signal e times as large, as part of that of signals with nothing in common.
LEVEL = 0.05


def borrow(walk: Walk, index: np.ndarray, target: float) -> None:
    """Bound configurations of a walk by the multipliers of those most like them, all at the same stage of rung 1.

    Only what drops a configuration is kept; the others are worked out on their own.
    """
    stage = walk.refined[index[0]]
    for part in walk.same_columns(index):
        for pair in walk.pair_order:
            part = part[walk.upper[part] > target * (1 + walk.gap)]
            lenders = walk.lenders.get((int(stage), walk.level(part[0]), pair)) if part.size else None
            if lenders is None:
                continue
            program = walk.programs(part, coarse=stage == 0, pair=pair)
            proof = lenders.lend(program)
            if proof is not None:
                walk.drop(part, pair, proof, bound(program, proof), target, coarse=stage == 0)


class Lenders:
    """Proofs of some programs and what tells which of them is most like another."""

    def __init__(self) -> None:
        self.proofs: list[Proof] = []
        self.direction = np.zeros((0, 0))
        self.level = np.zeros(0)

    def add(self, program: Program, proof: Proof) -> None:
        """Keep the proof of each program of a block."""
        direction, level = _look(program)
        if not self.proofs:
            self.direction = np.zeros((0, direction.shape[1]))
        if self.level.size >= MOST_LENDERS or not proof.lines:
            return
        self.proofs.append(proof)
        self.direction = np.concatenate([self.direction, direction])
        self.level = np.concatenate([self.level, level])

    def lend(self, program: Program) -> Proof | None:
        """Return the proof of the lender most like each program of a block; None where none fits its shape."""
        if not self.proofs or self.direction.shape[1] != program.signal.shape[1]:
            return None
        direction, level = _look(program)
        alike = direction @ self.direction.T - LEVEL * np.abs(level[:, None] - self.level)
        best = np.argmax(alike, axis=1)
        ends = np.cumsum([proof.ceiling.theta.size for proof in self.proofs])
        own = np.searchsorted(ends, best, side="right")
        place = best - np.concatenate([[0], ends])[own]
        found = joined(self.proofs, own, place)
        return found if found is not None and _fits(found, program) else None


def _look(program: Program) -> tuple[Array, Array]:
    """Direction of the signal over the columns, and the logarithm of its size. (P, n+1), (P,)"""
    size = np.maximum(np.linalg.norm(program.signal, axis=1), 1e-300)
    return program.signal / size[:, None], np.log(size)


def _fits(proof: Proof, program: Program) -> bool:
    limits, leds, noise = program.rows.shape[1], program.heat_cap.size, program.noise_rows.shape[1]
    shapes = (line.limit.shape[1] == limits and line.heat.shape[1] == leds for line in (proof.ceiling, *proof.lines))
    return all(shapes) and proof.lines[0].noise.shape[1] == noise


def joined(proofs: Sequence[Proof], own: np.ndarray, place: np.ndarray) -> Proof | None:
    """Return one proof of many programs from the places ``place`` in the proofs ``own``, both (P,).

    A program with fewer lines repeats its last, which proves as much. None where limits or noise differ in number.
    """
    used = [(k, proofs[k], own == k) for k in np.unique(own)]
    if len({(proof.ceiling.limit.shape[1], proof.lines[0].noise.shape[1]) for _, proof, _ in used}) != 1:
        return None
    most = max(len(proof.lines) for _, proof, _ in used)

    def line(number: int | None) -> Line:
        pieces = [
            (proof.ceiling if number is None else proof.lines[min(number, len(proof.lines) - 1)], rows)
            for _, proof, rows in used
        ]
        return Line(**{name: _gathered([(getattr(x, name), rows) for x, rows in pieces], place) for name in _NAMES})

    return Proof(ceiling=line(None), lines=tuple(line(number) for number in range(most)))


_NAMES = Line.__slots__


def _gathered(pieces: Sequence[tuple[Array, np.ndarray]], place: np.ndarray) -> Array:
    """Values at the places of each piece. A ceiling may come without noise, which plays no part in it."""
    width = max((values.shape[1:] for values, _ in pieces), key=lambda shape: shape[-1:] or (0,))
    found = np.zeros((place.size, *width))
    for values, rows in pieces:
        if values.shape[1:] == width:
            found[rows] = values[place[rows]]
    return found
