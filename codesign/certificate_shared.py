"""Proof that no rig in common does better: what each variant lacks without some LEDs, and exhaustive branching.

A *rig* is a camera, a filter and an f-number. A *cut* says of one variant on one rig that with the LEDs ``inside``
alone, or as many of them as may be built, its CNR stays at or below a level; the multipliers that show it hold for
every set of LEDs within. So every set that serves the variant above that level has an LED outside. When no set that may
be built has an LED outside each of a list of cuts, the rig cannot serve all variants: `certificate_shared_sets`
tries them all. No solver is imported.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from codesign.certificate import Proof, bound
from codesign.certificate_build import NEXT_TO_NOTHING
from codesign.certificate_pairs import PairProof, pair_bound
from codesign.program import Program

Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Piece:
    """Multipliers for one configuration, by its number in the walk of its variant.

    A `Proof` bounds it by the pair ``pair`` alone; ``coarse`` says whether on the optimistic program.
    """

    index: int
    proof: Proof | PairProof
    coarse: bool
    pair: int = 0


@dataclass(frozen=True, slots=True, eq=False)
class Cut:
    """A variant stays at or below ``level`` on a rig with the LEDs ``inside`` (L,) only.

    Configurations without a piece are bounded by the closed form.
    """

    inside: Mask
    level: float
    pieces: tuple[Piece, ...] = field(default=(), repr=False)

    @property
    def outside(self) -> int:
        """LEDs of which one at least is needed, as a bit mask."""
        return bits(~self.inside)


def bits(mask: Mask) -> int:
    """LEDs as the bits of a whole number."""
    return sum(1 << int(led) for led in np.flatnonzero(mask))


def members(mask: int) -> list[int]:
    """Positions of the bits set."""
    return [place for place in range(mask.bit_length()) if mask >> place & 1]


def mask_of(chosen: int, leds: int) -> Mask:
    """Bits as a mask. (L,)"""
    found = np.zeros(leds, dtype=bool)
    found[members(chosen)] = True
    return found


def masked(program: Program, inside: Mask) -> Program:
    """The programs with the LEDs ``inside`` (L,) alone; where none has a column, one with next to no light is kept."""
    keep, scale = np.flatnonzero(inside[program.led]), 1.0
    if not keep.size:
        keep, scale = np.array([0]), NEXT_TO_NOTHING
    columns = np.append(keep, program.segments)
    return replace(
        program,
        signal=program.signal[:, columns],
        shot=program.shot[:, columns],
        noise_rows=program.noise_rows[:, :, columns],
        rows=program.rows[:, :, columns],
        width=program.width[keep] * scale,
        led=program.led[keep],
        heat=program.heat[keep],
    )


def piece_bound(programs: Sequence[Program], piece: Piece, inside: Mask) -> float:
    """Bound that a piece shows for its configuration with the LEDs ``inside``.

    ``programs`` are those of all its pairs (P = 1 each), coarse or full as the piece says.
    """
    if isinstance(piece.proof, PairProof):
        return pair_bound([masked(program, inside) for program in programs], piece.proof)
    return float(bound(masked(programs[piece.pair], inside), piece.proof)[0])
