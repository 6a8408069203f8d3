"""What a walk numbers, counts and keeps for the checker."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from codesign.certificate import Proof
from codesign.certificate_build import BuildLeaf, BuildSplit
from codesign.certificate_pairs import PairProof
from codesign.limits import Setting

SIGNS = (1, -1)


@dataclass(frozen=True, slots=True)
class Configuration:
    """One discrete choice: setting, filter index and contrast sign (+1: target brighter)."""

    setting: Setting
    filter: int
    sign: int


@dataclass(slots=True)
class Tally:
    """How many configurations each rung handled."""

    configurations: int = 0
    refined: int = 0
    certified: int = 0


@dataclass(slots=True)
class Evidence:
    """Multipliers that bound some configurations, kept for the checker: indices and their proof.

    A `Proof` bounds them by the pair ``pair`` alone, a `PairProof` one configuration by all pairs together,
    a `BuildLeaf` or `BuildSplit` one configuration over all whole choices of LEDs.
    """

    index: np.ndarray
    proof: Proof | PairProof | BuildLeaf | BuildSplit
    coarse: bool
    pair: int = 0
