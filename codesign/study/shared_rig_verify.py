"""Check the proof of a rig in common again, from the problems up, without any solver.

What is re-derived: the arrays of every variant at the junction temperatures stated; the bound of every rig, by the
closed form or by its cuts, each from its multipliers; that no set of LEDs that may be built meets these cuts, by trying
them all; and what every variant gets from the rig found, by the forward model.
"""

from __future__ import annotations

from contextlib import AbstractContextManager
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from codesign.assemble import flipped
from codesign.certificate import bound
from codesign.certificate_shared import Cut, bits, masked, piece_bound
from codesign.certificate_shared_sets import EQUAL, cheapest_set, most_served
from codesign.design import evaluate
from codesign.errors import CertificateError
from codesign.program import Array, Program
from codesign.search.bounds import simple_proof
from codesign.search.shared import REACHED
from codesign.search.shared_space import Rig, RigSpace
from codesign.search.shared_variant import Variant
from codesign.study.shared_rig_result import SharedProof, SharedRig, VariantOutcome
from codesign.verify import FORWARD_TOLERANCE, ROUND_OFF

#: Share of a limit by which an optimum may exceed it at the junction temperatures stated, which differ from its own by
#: the residual.
WARMING_TOLERANCE = 1e-4

if TYPE_CHECKING:
    from codesign.study.rig_sets import SetProof


@dataclass(frozen=True, slots=True, kw_only=True)
class SharedVerdict:
    """What was checked: rigs, how many of them by cuts, cuts re-derived, and the value of the rig found."""

    rigs: int
    by_cuts: int
    cuts: int
    value: float


class Checked(Variant):
    """A variant whose closed-form bounds are worked out from their multipliers."""

    def _closed_of_setting(self, number: int, filters: np.ndarray) -> Array:
        setting = self.walk.assembly.settings[number]
        programs = (self.walk.assembly.program(setting, filters, coarse=True, pair=pair) for pair in self.quick_pairs)
        found = np.full((self.walk.filters, 2), np.inf)
        found[filters] = np.min([np.stack([_closed(p), _closed(flipped(p))], axis=1) for p in programs], axis=0)
        return self.walk.buildable(setting, found)[filters]

    def level_of(self, rig: int, cut: Cut) -> float:
        """Least level that a cut proves: configuration by configuration with all LEDs, by its pieces or closed form."""
        own, _ = self.configurations(rig, 0.0)
        bounds = {int(index): float(self.walk.upper[index]) for index in own}
        for piece in cut.pieces:
            if bounds.get(piece.index, 0.0) > cut.level:
                programs = self.programs(rig, piece.index, coarse=piece.coarse)
                bounds[piece.index] = min(bounds[piece.index], piece_bound(programs, piece, cut.inside))
        left = np.array([index for index, found in bounds.items() if found > cut.level], dtype=np.intp)
        for index, programs in self._blocks(rig, left) if left.size else ():
            found = np.min([_closed(masked(program, cut.inside)) for program in programs], axis=0)
            bounds |= {int(i): min(bounds[int(i)], float(f)) for i, f in zip(index, found, strict=True)}
        return max(bounds.values(), default=0.0)


def _closed(program: Program) -> Array:
    """Bounds of the closed form, from its multipliers. (P,)"""
    return bound(program, simple_proof(program)[0])


def single_threaded() -> AbstractContextManager:
    """Keep the matrix library to one thread: for small arrays more would only wait for each other."""
    from threadpoolctl import threadpool_limits

    return threadpool_limits(limits=1, user_api="blas")


class Rebuilt:
    """The arrays of all variants of a proof, built anew, and cuts derived from them."""

    def __init__(self, proof: SharedProof | SetProof) -> None:
        self.proof = proof
        self.names = list(proof.problems)
        self.space = RigSpace(next(iter(proof.problems.values())))
        self.variants = [
            Checked(name, problem, proof.junction_c[name], self.space) for name, problem in proof.problems.items()
        ]
        self.cuts = 0

    def order(self) -> list[int]:
        """Variants in the order stated, and any it leaves out."""
        stated = [v for v in dict.fromkeys(self.proof.order) if 0 <= v < len(self.variants)]
        return stated + [v for v in range(len(self.variants)) if v not in stated]

    def needs(self, rig: int, levels: Array) -> list[list[int]]:
        """Of each variant the LEDs of which it needs one at least to exceed its level, from cuts derived anew."""
        any_led = (1 << len(self.space.problem.channels)) - 1
        found = [[any_led] for _ in self.variants]
        for place, variant in enumerate(self.variants):
            variant.look(np.arange(len(self.space)) == rig)
            if variant.upper[rig] <= levels[place]:
                found[place].append(0)
        for place, cut in self.proof.cuts.get(rig, ()):
            self.cuts += 1
            if self.variants[place].level_of(rig, cut) <= levels[place]:
                found[place].append(cut.outside)
        return found

    def require_leds(self, rig: int, leds: tuple[str, ...]) -> np.ndarray:
        """Confirm that these LEDs may be built into a rig; return them as a mask. (L,)"""
        mask = np.array([channel.id in leds for channel in self.space.problem.channels])
        if int(mask.sum()) != len(leds) or not leds or not self.space.room(rig).allows(bits(mask)):
            raise CertificateError("certificate: the LED channels of a rig are unknown or more than may be built")
        return mask


class _Check(Rebuilt):
    """One result and the arrays of its variants."""

    def __init__(self, result: SharedRig) -> None:
        super().__init__(result.evidence)
        self.result = result
        self.levels = self.proof.levels * (1 + ROUND_OFF)
        if result.goal == "worst":
            self.levels = np.full(len(self.variants), result.bound * (1 + ROUND_OFF))

    def left_open(self) -> np.ndarray:
        """Rigs that the closed form of the variants does not close."""
        goal = self.result.goal
        failing = np.zeros(len(self.space))
        beside = np.zeros(len(self.space), dtype=bool)
        if goal == "cost":
            beside = self._prices() >= self.result.bound * (1 - ROUND_OFF)
        allowed = len(self.variants) - self.result.bound - EQUAL if goal == "count" else 1.0
        open_ = ~beside & (failing < allowed)
        for place in self.order():
            variant = self.variants[place]
            variant.look(open_)
            failing += open_ & (variant.upper <= self.levels[place])
            open_ = ~beside & (failing < allowed)
        return np.flatnonzero(open_)

    def _prices(self) -> Array:
        found = np.array([self.space.price(rig) for rig in range(len(self.space))])
        return np.where(np.isnan(found), np.inf, found)

    def rigs(self) -> int:
        """Check every rig left open; return how many there were."""
        open_ = self.left_open()
        for rig in map(int, open_):
            needs, room = self.needs(rig, self.levels), self.space.room(rig)
            if self.result.goal == "count":
                more = most_served(needs, np.ones(len(needs)), room, self.result.bound)
            elif self.result.goal == "worst":
                more = cheapest_set([cut for own in needs for cut in own], room)
            else:
                led = np.where(np.isnan(self.space.led_prices()), np.inf, self.space.led_prices())
                below = self.result.bound * (1 - ROUND_OFF) - self._prices()[rig]
                more = cheapest_set([cut for own in needs for cut in own], room, led, below)
            if more is not None:
                raise CertificateError(
                    f"certificate: the cuts of rig {self.space.rig(rig)} leave sets of LEDs that may be better than "
                    f"the claimed {self.result.bound:.10g}"
                )
        return int(open_.size)

    def found(self) -> float:
        """Check the rig found and what every variant gets from it; return the value of the goal."""
        result = self.result
        rig = Rig(result.camera, result.filter, result.f_number)
        mask = self.require_leds(self.space.number(rig), result.leds)
        if list(result.outcomes) != self.names:
            raise CertificateError("certificate: the variants of the result are not those of its proof")
        reached = np.array(
            [require_recipe(self.proof, result.outcomes[name], name, rig, result.leds, 0.0) for name in self.names]
        )
        if result.goal == "worst":
            return float(reached.min())
        met = reached >= self.proof.levels * (1 - 2 * REACHED)
        if result.goal == "count":
            return float(met.sum())
        if not met.all():
            raise CertificateError("certificate: the rig found does not serve all variants")
        return float(self.space.price(self.space.number(rig)) + self.space.led_prices()[mask].sum())


def require_recipe(
    proof: SharedProof | SetProof, outcome: VariantOutcome, name: str, rig: Rig, leds: tuple[str, ...], level: float
) -> float:
    """Check the recipes of one variant; return its CNR at the junction temperatures of the proof.

    Raises CertificateError where they use other parts, exceed a limit, or do not have the CNR claimed or required.
    """
    problem = proof.problems[name]
    if outcome.optimum is None:
        if level > 0:
            raise CertificateError(f"certificate: variant {name!r} has no recipe")
        return 0.0
    for performance in (outcome.optimum, outcome.recipe):
        design = None if performance is None else performance.design
        if design is not None and (
            Rig(design.camera, design.filter, design.f_number) != rig or not set(design.drive_ma) <= set(leds)
        ):
            raise CertificateError(f"certificate: the recipe of variant {name!r} uses parts that its rig does not have")
    stated = {c.id: float(t) for c, t in zip(problem.channels, proof.junction_c[name], strict=True)}
    same = evaluate(problem, outcome.optimum.design, junction_c=stated)
    if any(limit.share > 1 + WARMING_TOLERANCE for limit in same.limits):
        raise CertificateError(f"certificate: variant {name!r}: the optimum exceeds a limit")
    if not same.cnr >= level * (1 - 2 * REACHED):
        raise CertificateError(
            f"certificate: variant {name!r} has a CNR of {same.cnr:.6g} only, {level:.6g} is required"
        )
    if outcome.recipe is not None:
        again = evaluate(problem, outcome.recipe.design)
        if not again.feasible or abs(again.cnr - outcome.recipe.cnr) > FORWARD_TOLERANCE * again.cnr:
            raise CertificateError(
                f"certificate: variant {name!r}: the settable recipe is not feasible, or its CNR is not what is claimed"
            )
    return same.cnr


def verify_shared(result: SharedRig) -> SharedVerdict:
    """Re-derive the proof of a rig in common.

    Raises
    ------
    CertificateError
        Naming the first thing that does not hold.
    """
    with single_threaded():
        return _verdict(result)


def _verdict(result: SharedRig) -> SharedVerdict:
    check = _Check(result)
    value = check.found()
    if not abs(value - result.value) <= FORWARD_TOLERANCE * max(abs(value), 1e-12):
        raise CertificateError(f"certificate: the rig found has {value:.12g}, not the claimed {result.value:.12g}")
    better = -1.0 if result.goal == "cost" else 1.0
    if not better * (result.bound - value) >= -ROUND_OFF * abs(value):
        raise CertificateError(f"certificate: the bound {result.bound:.12g} is on the wrong side of {value:.12g}")
    by_cuts = check.rigs()
    return SharedVerdict(rigs=len(check.space), by_cuts=by_cuts, cuts=check.cuts, value=value)
