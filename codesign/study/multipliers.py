"""Multipliers of one search as proofs for the next: any multipliers give a valid bound on any program.

A problem that differs little from one already solved has nearly the same multipliers. What they still prove is worked
out anew from its own arrays, so nothing has to be trusted; most configurations drop out at the cost of one evaluation.
"""

from __future__ import annotations

from collections.abc import Hashable, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from codesign.certificate import Line, Proof, bound
from codesign.program import Program
from codesign.search.walk import Evidence, Walk

#: Configurations that are bounded by carried multipliers at most; more are left to the walk.
MOST_CONFIGURATIONS = 2048

Name = tuple[Hashable, ...]


@dataclass(frozen=True, slots=True)
class _Piece:
    """The multipliers of one configuration: where they stand in a proof of many."""

    proof: Proof
    position: int

    def shape(self) -> tuple[int, int, int]:
        """Numbers of limits, LEDs and noise rows."""
        ceiling = self.proof.ceiling
        return ceiling.limit.shape[1], ceiling.heat.shape[1], ceiling.noise.shape[1]


@dataclass(frozen=True, slots=True)
class Multipliers:
    """The latest multipliers of each configuration by name, as searches of related problems left them.

    ``pieces`` are kept by (coarse, pair), since programs of different kinds differ in shape.
    """

    pieces: Mapping[tuple[bool, int], Mapping[Name, _Piece]] = field(default_factory=dict, repr=False)

    def learned(self, walk: Walk, evidence: Sequence[Evidence]) -> Multipliers:
        """Return these with the multipliers in the evidence of a walk in place of older ones."""
        names = Names(walk)
        pieces = {kind: dict(kept) for kind, kept in self.pieces.items()}
        for item in evidence:
            if isinstance(item.proof, Proof):
                kept = pieces.setdefault((item.coarse, item.pair), {})
                for position, index in enumerate(item.index):
                    kept[names.of(int(index))] = _Piece(item.proof, position)
        return Multipliers(pieces)

    def apply(self, walk: Walk, target: float) -> None:
        """Bound the configurations of a walk that could still beat ``target``."""
        names = Names(walk)
        for (coarse, pair), kept in sorted(self.pieces.items(), reverse=True, key=lambda item: item[0]):
            if pair >= walk.pairs:
                continue
            open_ = np.flatnonzero(walk.upper > target * (1 + walk.gap))
            if open_.size > MOST_CONFIGURATIONS:
                continue
            found = [(int(i), kept[name]) for i in open_ if (name := names.of(int(i))) in kept]
            for group in _alike(walk, found):
                _bound(walk, group, coarse, pair)


class Names:
    """Names of the configurations of a walk that mean the same in a related problem."""

    def __init__(self, walk: Walk) -> None:
        self.filters = walk.assembly.problem.filters
        self.count = walk.filters
        ranks: dict[Name, int] = {}
        self.settings: list[Name] = []
        for setting in walk.assembly.settings:
            parts = (setting.camera.id, setting.channel, setting.gain.gain_db, setting.f_number)
            ranks[parts] = ranks.get(parts, -1) + 1
            self.settings.append((*parts, ranks[parts]))

    def of(self, index: int) -> Name:
        """Camera, channel, gain, f-number, rank of the pulse level, filter, sign."""
        place, sign = divmod(index, 2)
        setting, part = divmod(place, self.count)
        return (*self.settings[setting], self.filters[part].id, sign)


def _alike(walk: Walk, found: list[tuple[int, _Piece]]) -> list[list[tuple[int, _Piece]]]:
    """Groups that share their columns and the shape of their multipliers."""
    groups: dict[Hashable, list[tuple[int, _Piece]]] = {}
    for index, piece in found:
        level = walk.configuration(index).setting.level.name
        groups.setdefault((level, piece.shape()), []).append((index, piece))
    return list(groups.values())


def _bound(walk: Walk, group: list[tuple[int, _Piece]], coarse: bool, pair: int) -> None:
    """Work out what a group of pieces proves, and keep it as evidence."""
    index = np.array([i for i, _ in group])
    program = walk.programs(index, coarse=coarse, pair=pair)
    shape = program.rows.shape[1], program.heat_cap.size, program.noise_rows.shape[1]
    if group[0][1].shape()[:2] != shape[:2]:
        return
    proof = _joined([piece for _, piece in group], program)
    if proof is None:
        return
    found = bound(program, proof)
    better = np.flatnonzero(found < walk.upper[index])
    if better.size:
        walk.upper[index[better]] = found[better]
        walk.evidence.append(Evidence(index[better], proof.take(better), coarse=coarse, pair=pair))


def _joined(pieces: list[_Piece], program: Program) -> Proof | None:
    """One proof for all pieces; those with fewer lines repeat their last, which proves as much."""
    most = max(len(piece.proof.lines) for piece in pieces)
    if min(len(piece.proof.lines) for piece in pieces) == 0:
        return None
    rank = program.noise_rows.shape[1]
    capped = np.isfinite(program.heat_cap)

    def line(number: int | None) -> Line | None:
        lines = [
            piece.proof.ceiling if number is None else piece.proof.lines[min(number, len(piece.proof.lines) - 1)]
            for piece in pieces
        ]
        where = [piece.position for piece in pieces]
        joined = Line(
            **{
                name: np.stack([getattr(each, name)[k] for each, k in zip(lines, where, strict=True)])
                for name in ("theta", "limit", "heat", "noise", "anchor")
            }
        )
        # A limit that is gone has no price.
        return replace(joined, heat=joined.heat * capped)

    ceiling, rest = line(None), [line(number) for number in range(most)]
    # A ceiling by closed form may come without noise multipliers; they play no part in it.
    ceiling = replace(ceiling, noise=np.zeros((len(pieces), rank)))
    if any(each.noise.shape[1] != rank for each in rest):
        return None
    return Proof(ceiling=ceiling, lines=tuple(rest))
