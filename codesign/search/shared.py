"""Whether a variant of a family reaches a level on a rig with some of the LEDs, and what it lacks if not.

This is decided in three steps: the closed form on the optimistic programs, their certified frontier, that of the full
programs. Where the level is not reached, a `Cut` says with which further LEDs it is not reached either: all those, if
possible, that do not reach it alone.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from codesign.certificate import Proof
from codesign.certificate_shared import Cut, Mask, masked
from codesign.program import Array, Program
from codesign.search.frontier import Certified, certify
from codesign.search.pairs import CertifiedPairs, certify_pairs
from codesign.search.shared_growth import PairStretch, Stretch, grown
from codesign.search.shared_variant import Variant

#: A CNR this share below a level counts as reaching it. [1]
REACHED = 1e-6
#: Gaps of decisions, from rough to fine, and of what a rig found is worth.
ROUGH_GAP, QUICK_GAP, FINE_GAP, VALUE_GAP = 0.03, 1e-3, 2e-7, 1e-4
#: A level this factor below the closed form is likely to be reached.
LIKELY = 1.02

#: Multipliers of configurations by number.
Shown = dict[int, Stretch | PairStretch]


@dataclass(frozen=True, slots=True)
class Reached:
    """A recipe found: configuration number, point over the columns of the LEDs allowed, its CNR."""

    configuration: int
    point: Array
    value: float


class Judge(Variant):
    """A variant that can say what it reaches."""

    def cut(self, rig: int, inside: Mask, level: float) -> Reached | Cut:
        """Find a recipe with the LEDs ``inside`` that reaches a level, or a cut that shows there is none.

        The cut covers as many further LEDs as can be shown not to help. Its level is above the one asked for where the
        proof does not reach so far.
        """
        index, closed, _ = self.closed(rig, inside[None], level)
        shown: Shown = {}
        for place in np.argsort(-closed[:, 0]):
            if closed[place, 0] < level:
                break
            found = self._decided(rig, int(index[place]), inside, level, float(closed[place, 0]))
            if isinstance(found, Reached):
                return found
            shown[int(index[place])] = found
        if self._bounds(rig, inside[None], level, shown)[0] < level:
            inside, shown = self._widened(rig, inside, level, shown)
        reached = float(self._bounds(rig, inside[None], level, shown)[0])
        return Cut(inside, reached, tuple(found.piece(i, inside) for i, found in shown.items()))

    def tried(self, rig: int, inside: Mask, level: float) -> Cut | None:
        """Cut by a set of LEDs that may not reach a level; None where that is not shown at once."""
        shown = self._refuted(rig, inside, level, set())
        if shown is None:
            return None
        reached = float(self._bounds(rig, inside[None], level, shown)[0])
        return Cut(inside, reached, tuple(found.piece(i, inside) for i, found in shown.items()))

    def _bounds(self, rig: int, masks: Mask, level: float, shown: Shown) -> Array:
        """What closed form and multipliers show of a rig with each set of LEDs. (M,)"""
        index, found, below = self.closed(rig, masks, level)
        for place, number in enumerate(index):
            if int(number) in shown:
                found[place] = np.minimum(found[place], shown[int(number)].bounds(masks))
        return np.maximum(found.max(axis=0, initial=0.0), below)

    def _widened(self, rig: int, inside: Mask, level: float, shown: Shown) -> tuple[Mask, Shown]:
        """Add LEDs while it can be shown that they do not help; those that do least alone come first."""
        single = np.eye(inside.size, dtype=bool)
        alone = self.closed_of_rig(rig, single, level)
        others = np.flatnonzero(~inside & (alone < level))
        others = others[np.argsort(alone[others], kind="stable")]
        low, high, fine = 0, others.size, {i for i, found in shown.items() if not found.coarse}
        # All others at once mostly will do; else as many as halving finds.
        count = high
        while low < high:
            wider = inside | single[others[:count]].any(axis=0)
            found = self._refuted(rig, wider, level, fine)
            if found is None:
                high = count - 1
            else:
                low, shown = count, found
            count = (low + high + 1) // 2
        wider = inside | single[others[:low]].any(axis=0)
        return grown(lambda masks: self._bounds(rig, masks, level, shown), wider, level), shown

    def _refuted(self, rig: int, inside: Mask, level: float, fine: set[int]) -> Shown | None:
        """Multipliers that show that no configuration of a rig reaches a level; None where there are none."""
        index, closed, _ = self.closed(rig, inside[None], level)
        shown: Shown = {}
        for place in np.argsort(-closed[:, 0]):
            if closed[place, 0] < level:
                break
            number, target = int(index[place]), level / (1 + QUICK_GAP) * (1 - 1e-12)
            coarse = number not in fine
            found = self._solved(rig, number, inside, QUICK_GAP, target, coarse=coarse)
            if found.bound >= level:
                return None
            shown[number] = stretch(self.programs(rig, number, coarse=coarse), found, inside, level, coarse=coarse)
        return shown

    def best(self, rig: int, inside: Mask, least: float = 0.0) -> Reached:
        """Best recipe of a rig with the LEDs ``inside``, to `VALUE_GAP`; ``least`` is a level known to be reached."""
        index, closed, _ = self.closed(rig, inside[None], least * (1 - 2 * REACHED))
        best = Reached(-1, np.zeros(0), 0.0)
        for place in np.argsort(-closed[:, 0]):
            if closed[place, 0] <= best.value * (1 + VALUE_GAP):
                break
            found = self._solved(rig, int(index[place]), inside, VALUE_GAP, best.value, coarse=False)
            if found.value > best.value:
                best = Reached(int(index[place]), found.point, found.value)
        return best

    def _solved(
        self, rig: int, index: int, inside: Mask, gap: float, target: float, *, coarse: bool
    ) -> Certified | CertifiedPairs:
        programs = [masked(program, inside) for program in self.programs(rig, index, coarse=coarse)]
        if len(programs) == 1:
            return certify(programs[0], gap, target)
        return certify_pairs(programs, gap, target, first=self.quick_pairs[0])

    def _decided(
        self, rig: int, index: int, inside: Mask, level: float, closed: float
    ) -> Reached | Stretch | PairStretch:
        """Whether one configuration reaches a level; if not, the multipliers that show it."""
        easy = closed > level * LIKELY
        for coarse, gap in ((False, ROUGH_GAP),) * easy + ((True, QUICK_GAP), (False, QUICK_GAP), (False, FINE_GAP)):
            found = self._solved(rig, index, inside, gap, level / (1 + gap) * (1 - 1e-12), coarse=coarse)
            if not coarse and found.value >= level * (1 - REACHED):
                return Reached(index, found.point, found.value)
            if found.bound < level and (coarse or gap != ROUGH_GAP):
                break
        return stretch(self.programs(rig, index, coarse=coarse), found, inside, level, coarse=coarse)


def stretch(
    programs: Sequence[Program], found: Certified | CertifiedPairs, inside: Mask, level: float, *, coarse: bool
) -> Stretch | PairStretch:
    """What was proven with the LEDs ``inside``, ready to be tried with others."""
    if isinstance(found.proof, Proof):
        pair = getattr(found, "pair", None) or 0
        return Stretch(programs[pair], found.proof, inside, coarse=coarse, pair=pair)
    aimed = level * (1 - 1e-9) if found.bound < level else found.bound * (1 + 1e-9)
    return PairStretch(programs, found.proof, aimed, coarse=coarse)
