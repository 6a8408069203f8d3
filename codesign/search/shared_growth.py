"""From a few LEDs that are not enough to as many as possible that still are not: array work, no solves.

Any multipliers bound a program with any of its LEDs, so those found with a few LEDs are put to use with more. Two
multipliers are set anew for each set, in closed form: the price of an LED's heat, and that of the number of LED
channels, which at its best is the worth of the first LED that has to stay out.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np

from codesign.certificate import Line, Proof, bound
from codesign.certificate_pairs import Leaf, PairProof, Split, everything, margin
from codesign.certificate_shared import Mask, Piece, piece_bound
from codesign.errors import CertificateError
from codesign.program import Array, Program
from codesign.search.bounds import both_bounds, cut_prices

#: Name of the row that limits the number of LEDs in use.
CHANNELS = "LED channels"
#: Rounds of adding one LED after the other once no more can be added in order.
LAST_ADDITIONS = 3


def zeroed(program: Program, masks: Mask) -> Program:
    """Every program with each of the sets of LEDs ``masks`` (M, L): the columns of other LEDs are blank.

    Program ``e`` with set ``m`` stands at ``e·M + m``.
    """
    count = len(masks)
    keep = np.ones((count, program.segments + 1))
    keep[:, :-1] = masks[:, program.led]

    def blank(values: Array) -> Array:
        inner = values.ndim - 2
        found = values[:, None] * keep.reshape((1, count, *(1,) * inner, -1))
        return found.reshape((-1, *values.shape[1:]))

    repeated = {name: np.repeat(getattr(program, name), count, axis=0) for name in ("floor", "bounds")}
    return replace(
        program,
        **{name: blank(getattr(program, name)) for name in ("signal", "shot", "noise_rows", "rows")},
        **repeated,
        time_low=np.repeat(program.time_low, count),
        time_high=np.repeat(program.time_high, count),
    )


def closed_bounds(program: Program, masks: Mask) -> Array:
    """Closed-form bounds of every program with each set of LEDs. (E, M)"""
    return both_bounds(zeroed(program, masks))[:, 0].reshape(program.size, len(masks))


class Stretch:
    """Multipliers of one program found with a few LEDs, fitted to any set of LEDs.

    Parameters
    ----------
    program : Program
        One program (P = 1) with the columns of all LEDs.
    proof : Proof
        As found with some of them.
    inside : (L,) bool array
        Those it was found with, which keep their prices of heat.
    coarse, pair
        As of `Piece`.
    """

    def __init__(self, program: Program, proof: Proof, inside: Mask, *, coarse: bool, pair: int = 0) -> None:
        self.program, self.inside, self.coarse, self.pair = program, inside, coarse, pair
        self.row = program.row_names.index(CHANNELS) if CHANNELS in program.row_names else None
        self.fitted = [self._fitted(proof.ceiling, ceiling=True)]
        self.fitted += [self._fitted(line, ceiling=False) for line in proof.lines]

    def _fitted(self, line: Line, *, ceiling: bool) -> tuple[Line, Array]:
        """Line without a price of channels and with prices of heat for all LEDs; and what each LED then gains. (L,)"""
        program = self.program
        limit = line.limit.copy()
        if self.row is not None:
            limit[:, self.row] = 0.0
        cost = -program.signal if ceiling else program.shot - line.theta[:, None] * program.signal
        if not ceiling:
            cost = cost + 2 * np.einsum("pr,prn->pn", line.noise, program.noise_rows)
        cost = (cost + np.einsum("pm,pmn->pn", limit, program.rows))[:, :-1]
        heat = np.where(self.inside, line.heat, cut_prices(program, cost, program.time_high))
        left = np.maximum(-(cost + heat[:, program.led] * program.heat), 0.0)[0] * program.width
        gain = np.bincount(program.led, left, minlength=program.heat_cap.size)
        return replace(line, limit=limit, heat=heat), gain

    def proof(self, masks: Mask) -> Proof:
        """Multipliers for each of the sets ``masks`` (M, L)."""
        ceiling, *lines = (self._line(line, gain, masks) for line, gain in self.fitted)
        return Proof(ceiling=ceiling, lines=tuple(lines))

    def piece(self, index: int, inside: Mask) -> Piece:
        """Proof of configuration ``index`` with the LEDs ``inside``."""
        return Piece(index, self.proof(inside[None]), self.coarse, self.pair)

    def _line(self, line: Line, gain: Array, masks: Mask) -> Line:
        count = len(masks)
        limit = np.repeat(line.limit, count, axis=0)
        if self.row is not None:
            limit[:, self.row] = price_of_channels(self.program, self.row, gain, masks)
        return Line(
            theta=np.repeat(line.theta, count),
            limit=limit,
            heat=np.repeat(line.heat, count, axis=0) * masks,
            noise=np.repeat(line.noise, count, axis=0),
            anchor=np.repeat(line.anchor, count),
        )

    def bounds(self, masks: Mask) -> Array:
        """What the multipliers show of each set. (M,)"""
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            found = bound(zeroed(self.program, masks), self.proof(masks))
        return np.where(np.isnan(found), np.inf, found)


def price_of_channels(program: Program, row: int, gain: Array, masks: Mask) -> Array:
    """Gain of the best LED that finds no room any more. (M,)"""
    entries = program.rows[0, row]
    counted = np.bincount(program.led, entries[:-1], minlength=gain.size) > 0
    room = int(-entries[-1] * (1 + 1e-9))
    dearest = -np.sort(-np.where(masks & counted, gain, 0.0), axis=1)
    return dearest[:, room] if room < gain.size else np.zeros(len(masks))


class PairStretch:
    """Multipliers of all pairs together, found with a few LEDs, tried with any set of LEDs at one level.

    Parameters
    ----------
    programs : sequence of Program
        Those of the pairs (P = 1), with the columns of all LEDs.
    proof : PairProof
    level : float
        What they have to prove.
    coarse
        As of `Piece`.
    """

    def __init__(self, programs: Sequence[Program], proof: PairProof, level: float, *, coarse: bool) -> None:
        self.programs, self.tree, self.level, self.coarse = programs, proof.tree, level, coarse
        self.row = programs[0].row_names.index(CHANNELS) if CHANNELS in programs[0].row_names else None

    def _fitted(self, node: Leaf | Split, low: Array, high: Array, inside: Mask) -> Leaf | Split:
        """The tree with the level asked for in its leaves, and a price of channels that fits the set."""
        if isinstance(node, Split):
            cut = np.arange(low.size) == node.pair
            below = self._fitted(node.below, low, np.where(cut, node.at, high), inside)
            return replace(node, below=below, above=self._fitted(node.above, np.where(cut, node.at, low), high, inside))
        leaf = replace(node, level=self.level, heat=node.heat * inside)
        if self.row is None:
            return leaf
        free = replace(leaf, limit=np.where(np.arange(leaf.limit.size) == self.row, 0.0, leaf.limit))
        left = margin(self.programs, free, low, high)
        program = self.programs[0]
        worth = np.maximum(-(left.base + self.level * left.gain), 0.0)[:-1] * program.width
        gain = np.bincount(program.led, worth, minlength=program.heat_cap.size)
        free.limit[self.row] = price_of_channels(program, self.row, gain, inside[None])[0]
        return free

    def piece(self, index: int, inside: Mask) -> Piece:
        """Proof of configuration ``index`` with the LEDs ``inside``."""
        return Piece(index, PairProof(tree=self._fitted(self.tree, *everything(self.programs), inside)), self.coarse)

    def bounds(self, masks: Mask) -> Array:
        """The level for the sets for which the multipliers prove it, infinite for others. (M,)"""
        return np.array([self.level if self._holds(inside) else np.inf for inside in masks])

    def _holds(self, inside: Mask) -> bool:
        try:
            piece_bound(self.programs, self.piece(0, inside), inside)
        except CertificateError:
            return False
        return True


def grown(evaluate: Callable[[Mask], Array], inside: Mask, level: float) -> Mask:
    """Add LEDs to a set as long as its bound stays below ``level``; those that raise it least come first.

    Parameters
    ----------
    evaluate : callable
        Bounds (M,) of some sets (M, L).
    inside : (L,) bool array
        A set whose bound is below the level.
    level : float
    """
    single = np.eye(inside.size, dtype=bool)
    others = np.flatnonzero(~inside)
    for attempt in range(1 + LAST_ADDITIONS):
        if not others.size:
            break
        worth = evaluate(inside | single[others])
        order = others[np.argsort(worth, kind="stable")][: int((worth < level).sum())]
        if not order.size:
            break
        if attempt:
            inside, others = inside | single[order[0]], order[1:]
            continue
        steps = inside | np.cumsum(single[order], axis=0, dtype=int).astype(bool)
        good = evaluate(steps) < level
        count = int(good.argmin()) if not good.all() else order.size
        if count:
            inside = steps[count - 1]
        others = order[count + 1 :]
    return inside
