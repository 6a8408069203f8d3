"""Best-first walk over every configuration of a problem, on a ladder of ever dearer and tighter bounds.

Rung 0, all configurations at once: the closed form of `codesign.search.bounds` on the optimistic one-column-per-LED
programs. Rung 1, some hundred at a time: the batched interior point on the same programs. Rung 2, one at a time:
the certified frontier of the full program. Whatever the bound of a configuration, it is looked at again only while
it could still beat the best found.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from codesign.assemble import Assembly
from codesign.build import Units, affordable, choosing
from codesign.certificate import Proof
from codesign.certificate_build import BuildSpace, build_space
from codesign.certificate_ceiling import shot_noise_ceilings
from codesign.certificate_pairs import pair_contrasts
from codesign.limits import Setting
from codesign.program import Array, Program, stack
from codesign.search import never
from codesign.search.build import Built, certify_build, polish_build
from codesign.search.closed_form import closed_form, limiting_pairs
from codesign.search.frontier import Certified, Hint, certify
from codesign.search.lend import Lenders, borrow
from codesign.search.pairs import CertifiedPairs, certify_pairs, polish_pairs
from codesign.search.records import SIGNS, Configuration, Evidence, Tally
from codesign.search.tighten import Tightening

#: Configurations refined together on rung 1, coarsely and fully: first few, to get a good target and lenders early,
#: then many.
FIRST_CHUNKS, LARGEST_CHUNK = (48, 24), 384
#: Configurations that borrow multipliers together.
MOST_LENT = 1024
#: How far rung 1 has looked at a configuration: at its coarse program, at its full one.
COARSELY, FULLY = 1, 2
#: Fewer open configurations than these go to rung 2 one at a time without a look at their full programs together.
MANY = 16
#: So few configurations are worked out sooner on rung 2 than tightened together once more.
FEW = 3
#: Rounds of tightening on rung 1.
ROUNDS = 6


def _largest(index: np.ndarray, value: Array, count: int) -> np.ndarray:
    """The ``count`` indices of largest value, in their order."""
    return index if index.size <= count else np.sort(index[np.argpartition(-value, count)[:count]])


@dataclass(slots=True)
class Walk:
    """State of the search: the best bound known for each configuration, and what proves it.

    Configurations are numbered ``(setting · F + filter) · 2 + sign index``.
    """

    assembly: Assembly
    gap: float = 1e-3
    progress: Callable[[float, float], None] | None = None
    stop: Callable[[], bool] = never
    #: CNR at which the search may end; configurations that stay below it are of no interest.
    enough: float | None = None
    upper: Array = field(init=False)
    refined: np.ndarray = field(init=False)
    found: dict[int, Certified | CertifiedPairs | Built] = field(init=False, default_factory=dict)
    evidence: list[Evidence] = field(init=False, default_factory=list)
    tally: Tally = field(init=False, default_factory=Tally)
    hints: dict[int, Hint] = field(init=False, default_factory=dict)
    #: Pairs on rung 0, and all pairs in the order in which they are likely to limit.
    quick_pairs: list[int] = field(init=False, default_factory=list)
    pair_order: list[int] = field(init=False)
    #: Least target against which a configuration was certified, ``inf`` where it never was.
    tried: Array = field(init=False)
    #: Proofs by stage of rung 1, name of the pulse level and pair, and how many stages a configuration has borrowed at.
    lenders: dict[tuple[int, str, int], Lenders] = field(init=False, default_factory=dict)
    lent: np.ndarray = field(init=False)
    #: Configurations whose recipe is settled at these temperatures and stays as it is.
    settled: set[int] = field(init=False, default_factory=set)

    #: Configurations whose closed form there was no time for.
    skipped: np.ndarray = field(init=False)

    closed_form: bool = True

    def __post_init__(self) -> None:
        count = 2 * self.filters * len(self.assembly.settings)
        self.upper = np.full(count, np.inf)
        self.skipped = np.zeros(count, dtype=bool)
        self.pair_order = list(range(self.pairs))
        if self.closed_form:
            self.quick_pairs = limiting_pairs(self.assembly)
            bounds, skipped = closed_form(self.assembly, self.quick_pairs, self.stop)
            if skipped.any():
                bounds = np.where(skipped[:, :, None], self.ceilings()[:, None, :], bounds)
                self.skipped = np.repeat(skipped.ravel(), 2)
            settings = zip(self.assembly.settings, bounds, strict=True)
            self.upper = np.stack([self.buildable(setting, own) for setting, own in settings]).ravel()
        self.refined = np.zeros(count, dtype=np.int8)
        self.tried = np.full(count, np.inf)
        self.lent = np.zeros(count, dtype=np.int8)
        self.tally.configurations = count

    @classmethod
    def blank(cls, assembly: Assembly) -> Walk:
        """A walk that knows no bound yet, for its numbering of configurations."""
        return cls(assembly, closed_form=False)

    def ceilings(self) -> Array:
        """Bounds of each setting and sign behind any filter, for configurations that there was no time for. (S, 2)"""
        return shot_noise_ceilings(self.assembly.problem, self.assembly.settings)

    @property
    def filters(self) -> int:
        """Number of filters F."""
        return len(self.assembly.problem.filters)

    @property
    def pairs(self) -> int:
        """Number of pairs of target and background."""
        return len(self.assembly.problem.pairs)

    def configuration(self, index: int) -> Configuration:
        """Decode a configuration's number."""
        pair, sign = divmod(int(index), 2)
        setting, filter_index = divmod(pair, self.filters)
        return Configuration(self.assembly.settings[setting], filter_index, SIGNS[sign])

    def programs(self, index: np.ndarray, *, coarse: bool, pair: int = 0) -> Program:
        """Build the programs of some configurations for one pair, in the order of ``index``."""
        index = np.asarray(index)
        setting = index // (2 * self.filters)
        order = np.argsort(setting, kind="stable")
        blocks = []
        for number in np.unique(setting):
            chosen = index[order][setting[order] == number]
            block = self.assembly.program(
                self.assembly.settings[number], (chosen // 2) % self.filters, coarse=coarse, pair=pair
            )
            turn = np.where(chosen % 2 == 1, -1.0, 1.0)
            blocks.append(replace(block, signal=block.signal * turn[:, None]))
        return stack(blocks).take(np.argsort(order, kind="stable"))

    def same_parts(self, index: int) -> np.ndarray:
        """Mark the configurations with the same camera and filter as ``index``. (N,) bool"""
        chosen = self.configuration(index)
        camera = np.array([setting.camera.id == chosen.setting.camera.id for setting in self.assembly.settings])
        filters = np.arange(self.filters) == chosen.filter
        return np.repeat((camera[:, None] & filters).ravel(), 2)

    def number(self, known: Configuration) -> int:
        """Number of a configuration."""
        setting = self.assembly.settings.index(known.setting)
        return (setting * self.filters + known.filter) * 2 + SIGNS.index(known.sign)

    def seed(self, known: Configuration, found: Certified | CertifiedPairs | Built) -> None:
        """Certify a configuration likely to be best first, so that others are dropped sooner."""
        self._certify(self.number(known), self._aim(0.0), getattr(found, "units", None))

    def _aim(self, value: float) -> float:
        """CNR that others must beat by more than the gap to be of interest."""
        return max(value, 0.0 if self.enough is None else self.enough / (1 + self.gap))

    def space(self, index: int) -> BuildSpace:
        """Whole choices of LEDs of one configuration."""
        chosen = self.configuration(index)
        return build_space(self.assembly.problem, chosen.setting.camera, chosen.filter)

    def every_pair(self, index: int) -> list[Program]:
        """Build the full program of one configuration for each pair."""
        return [self.programs(np.array([index]), coarse=False, pair=pair) for pair in range(self.pairs)]

    def polish(self, index: int, gap: float) -> Certified | CertifiedPairs | Built:
        """Work out a configuration already certified to a smaller gap, and return it.

        With several pairs or build limits the recipe is improved to its best and the bound stays.
        """
        if index in self.settled:
            return self.found[index]
        if isinstance(self.found[index], Built):
            self.found[index] = polish_build(self.every_pair(index), self.space(index), self.found[index], gap)
        elif self.pairs > 1:
            self.found[index] = polish_pairs(self.every_pair(index), self.found[index])
        elif self.found[index].gap > gap:
            program = self.programs(np.array([index]), coarse=False)
            result = certify(program, gap, 0.0, self.hints.get(int(index)))
            self.upper[index] = min(self.upper[index], result.bound)
            self.evidence.append(Evidence(np.array([index]), result.proof, coarse=False))
            best = max(self.found[index], result, key=lambda one: one.value)
            self.found[index] = replace(result, point=best.point, value=best.value)
        return self.found[index]

    def best(self, allowed: np.ndarray | None = None) -> int | None:
        """Return the certified best of the allowed configurations, or None where none has any contrast.

        On return no allowed configuration's bound exceeds the best value by more than the gap, but for those whose
        own search ended with a larger one. `stop` and `enough` end the search earlier.
        """
        allowed = np.ones(self.upper.size, dtype=bool) if allowed is None else allowed
        chunk = list(FIRST_CHUNKS)
        while True:
            leader, value = self._leader(allowed)
            aim = self._aim(value)
            looked_at = allowed.copy()
            looked_at[list(self.settled)] = False
            open_ = np.flatnonzero(looked_at & (self.upper > max(aim * (1 + self.gap), 0.0)) & (self.tried > aim))
            if self.progress is not None:
                self.progress(value, float(self.upper[open_].max(initial=value)))
            if open_.size == 0 or self._done(leader, value):
                return leader
            if leader is None and self.stop() and not self.skipped[open_].all():
                open_ = open_[~self.skipped[open_]]
            top = open_[np.argmax(self.upper[open_])]
            alike = open_[self.refined[open_] == self.refined[top]]
            stage = self.refined[top]
            fresh = alike[self.lent[alike] <= stage]
            if stage == FULLY or (stage == COARSELY and (alike.size < MANY or leader is None)):
                self._certify(top, aim)
            elif fresh.size and leader is not None and any(key[0] == stage for key in self.lenders):
                some = _largest(fresh, self.upper[fresh], MOST_LENT)
                self.lent[some] = stage + 1
                borrow(self, some, aim)
            else:
                self._refine(_largest(alike, self.upper[alike], chunk[stage]), aim)
                chunk[stage] = min(2 * chunk[stage], LARGEST_CHUNK)

    def _done(self, leader: int | None, value: float) -> bool:
        return leader is not None and (self.stop() or (self.enough is not None and value >= self.enough))

    @property
    def aim(self) -> float:
        """CNR that others must beat by more than the gap to be of interest."""
        leader = self.leader
        return self._aim(0.0 if leader is None else self.found[leader].value)

    @property
    def leader(self) -> int | None:
        """The best configuration certified so far."""
        return self._leader(np.ones(self.upper.size, dtype=bool))[0]

    def _leader(self, allowed: np.ndarray) -> tuple[int | None, float]:
        inside = [i for i in self.found if allowed[i] and self.found[i].value > 0]
        if not inside:
            return None, 0.0
        leader = max(inside, key=lambda i: self.found[i].value)
        return leader, self.found[leader].value

    def buildable(self, setting: Setting, bounds: Array) -> Array:
        """Bounds (F, 2) of a setting, 0 where camera and filter leave too little of the budget."""
        if choosing(self.assembly.problem):
            bounds[~affordable(self.assembly.problem, setting.camera)] = 0.0
        return bounds

    def _refine(self, index: np.ndarray, target: float) -> None:
        """Rung 1: tighten until a configuration is out of the race or a few rounds are over.

        Coarse programs the first time, full ones the second.
        """
        coarse = self.refined[index[0]] == 0
        self.refined[index] = COARSELY if coarse else FULLY
        self.tally.refined += index.size if coarse else 0
        for part in self.same_columns(index):
            for pair in list(self.pair_order):
                part = part[self.upper[part] > target * (1 + self.gap)]
                if part.size:
                    target = self._tighten(part, pair, target, coarse)

    def _tighten(self, part: np.ndarray, pair: int, target: float, coarse: bool) -> float:
        """Tighten the bounds of one pair until below the target or a few rounds are over; return the target."""
        state = Tightening.start(self.programs(part, coarse=coarse, pair=pair), target)
        best = int(np.argmax(state.own))
        whole = not coarse and self.pairs == 1 and not choosing(self.assembly.problem)
        if not self.found or (whole and state.own[best] > target):  # a recipe that others have to beat
            self._suggest(part, state)
            self._certify(int(part[best]), target)
            target = max(target, self._leader(np.ones(self.upper.size, dtype=bool))[1])
        self._narrow(part, pair, target, state, coarse=coarse)
        return target

    def resume(self, part: np.ndarray, pair: int, target: float, proof: Proof, *, coarse: bool) -> None:
        """Bound some configurations by multipliers known from elsewhere; coarse ones are tightened on from there."""
        state = Tightening.resume(self.programs(part, coarse=coarse, pair=pair), proof, target)
        self.tally.refined += int(np.sum(self.refined[part] == 0))
        self.refined[part] = np.maximum(self.refined[part], COARSELY)
        if coarse:
            self._narrow(part, pair, target, state, coarse=True)
        else:
            self._record(part, pair, coarse, state)

    def _narrow(self, part: np.ndarray, pair: int, target: float, state: Tightening, *, coarse: bool) -> None:
        """Add lines until the bounds are below the target or a few rounds are over."""
        for _ in range(ROUNDS):
            open_ = (state.bound > target * (1 + self.gap)) & ~state.settled(target)
            self._record(part[~open_], pair, coarse, state.take(np.flatnonzero(~open_)))
            part, state = part[open_], state.take(np.flatnonzero(open_))
            if part.size <= FEW:
                break
            state.round(target)
        self._record(part, pair, coarse, state)

    def _record(self, part: np.ndarray, pair: int, coarse: bool, state: Tightening) -> None:
        """Keep the bounds of some configurations by one pair and what proves them."""
        if part.size:
            key = (0 if coarse else COARSELY, self.level(part[0]), pair)
            self.lenders.setdefault(key, Lenders()).add(state.program, state.proof())
            self.evidence.append(Evidence(part, state.proof(), coarse=coarse, pair=pair))
            self.upper[part] = np.fmin(self.upper[part], state.bound)  # a bound that is no number proves nothing
            self._suggest(part, state)

    def drop(self, part: np.ndarray, pair: int, proof: Proof, found: Array, target: float, *, coarse: bool) -> None:
        """Keep those bounds of some configurations that put them out of the race, and what proves them."""
        done = np.flatnonzero(found <= target * (1 + self.gap))
        if done.size:
            self.upper[part[done]] = np.fmin(self.upper[part[done]], found[done])
            self.evidence.append(Evidence(part[done], proof.take(done), coarse=coarse, pair=pair))
            self.tally.refined += int(np.sum(self.refined[part[done]] == 0))

    def _suggest(self, part: np.ndarray, state: Tightening) -> None:
        """Leave hints for the last rung."""
        for k, i in enumerate(part):
            if state.lit[k].any():
                self.hints[int(i)] = Hint(state.ceiling.take(k), np.flatnonzero(state.lit[k]), float(state.own[k]))

    def level(self, index: int) -> str:
        """Name of a configuration's pulse level."""
        return self.assembly.settings[index // (2 * self.filters)].level.name

    def same_columns(self, index: np.ndarray) -> list[np.ndarray]:
        """Split by pulse level: programs in one block share their columns."""
        levels = np.array([self.level(i) for i in index])
        return [index[levels == name] for name in dict.fromkeys(levels)]

    def _certify(self, index: int, target: float, units: Units | None = None) -> None:
        """Rung 2."""
        self.tally.certified += 1
        pair = 0
        if choosing(self.assembly.problem):
            result = certify_build(
                self.every_pair(index), self.space(index), self.gap, target, self.hints.get(int(index)),
                stop=self.stop, known=units,
            )  # fmt: skip
        elif self.pairs == 1:
            program = self.programs(np.array([index]), coarse=False)
            result = certify(program, self.gap, target, self.hints.get(int(index)))
        else:
            programs = self.every_pair(index)
            result = certify_pairs(programs, self.gap, target, first=self.pair_order[0])
            self.pair_order = [int(k) for k in np.argsort(pair_contrasts(programs, result.point))]
            pair = result.pair
        # Evidence first: an interrupt must not leave a bound that nothing proves.
        self.evidence.append(Evidence(np.array([index]), result.proof, coarse=False, pair=pair))
        self.found[int(index)] = result
        self.tried[index] = min(self.tried[index], target)
        self.upper[index] = min(self.upper[index], result.bound)
