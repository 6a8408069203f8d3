"""Walk over all configurations whose readings are combined by weights: channels read together, or several shots.

A first bound of every configuration comes in closed form (`codesign.search.combined_first`). The most promising ones
are certified over all recipes and weights, best first, until the bound is within the gap or a number of them is done;
the gap is then what it is.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from codesign.assemble import Assembly
from codesign.certificate_combined import CombinedProof, Readings
from codesign.design import JOINT
from codesign.limits import Setting
from codesign.program import Array
from codesign.search import never
from codesign.search.combined import Combined, alternate, best_alternation, certify_combined
from codesign.search.combined_first import first_bounds
from codesign.search.readings import (
    PATTERN_ROWS,
    channel_readings,
    frame_time,
    noise_of_shots,
    shot_readings,
    single,
)

#: Configurations looked at to find the temperatures, and certified before an honest gap is reported.
SCOUTED, MOST_CERTIFIED = 4, 20
#: Filters bounded together.
FILTERS_TOGETHER = 4096
#: Factors on the exposure of one shot that are tried, and gain of the last polish.
EXPOSURE_STEPS, POLISH_GAP = (0.5, 2.0), 1e-5


@dataclass(frozen=True, slots=True)
class CombinedEvidence:
    """Proofs, one for each contrast sign, that bound one configuration."""

    index: int
    proof: tuple[CombinedProof, ...]


@dataclass(frozen=True, slots=True)
class Recipe:
    """Recipe and weights found for a configuration; exposures [s] where there are shots."""

    point: Array
    weights: Array
    value: float
    exposures: Array | None


@dataclass(slots=True)
class CombinedWalk:
    """Bounds of all configurations, numbered ``setting · F + filter``, and what was found."""

    assembly: Assembly
    gap: float
    stop: Callable[[], bool] = never
    #: Recipes of a walk at other temperatures, to start from.
    start: Mapping[int, Recipe] = field(default_factory=dict)
    upper: Array = field(init=False)
    found: dict[int, Recipe] = field(init=False, default_factory=dict)
    evidence: list[CombinedEvidence] = field(init=False, default_factory=list)

    closed_form: bool = True

    def __post_init__(self) -> None:
        self.upper = np.full(self.filters * len(self.assembly.settings), np.inf)
        if self.closed_form:
            self.upper = np.concatenate([self.first_bounds(setting) for setting in self.assembly.settings])

    @classmethod
    def blank(cls, assembly: Assembly, gap: float) -> CombinedWalk:
        """A walk that knows no bound yet, for its numbering of configurations."""
        return cls(assembly, gap, closed_form=False)

    @property
    def filters(self) -> int:
        """Number of filters F."""
        return len(self.assembly.problem.filters)

    @property
    def shots(self) -> int:
        """Shots in a frame."""
        return self.assembly.problem.spec.detection.shots

    def configuration(self, index: int) -> tuple[Setting, int]:
        """Setting and filter of a number."""
        setting, filter_index = divmod(int(index), self.filters)
        return self.assembly.settings[setting], filter_index

    def first_bounds(self, setting: Setting) -> Array:
        """Closed-form bounds of all filters of a setting, over all weights. (F,)"""
        if self.shots > 1 and not frame_time(self.assembly, setting, self.shots) > 0:
            return np.zeros(self.filters)
        names, found = setting.channel.split(JOINT), np.zeros(self.filters)
        for start in range(0, self.filters, FILTERS_TOGETHER):
            part = slice(start, min(start + FILTERS_TOGETHER, self.filters))
            programs = [self.assembly.program(replace(setting, channel=name), part, coarse=True) for name in names]
            if self.shots > 1:
                new, _ = noise_of_shots(self.assembly, setting)
                programs = [replace(p, floor=np.full(p.size, new.constant)) for p in programs]
            own = 0 if self.shots > 1 else PATTERN_ROWS
            found[part] = first_bounds(programs, own, self.shots)
        return found

    def readings(self, index: int, exposures: Array | None = None) -> Readings:
        """Readings of a configuration; for shots at fixed exposures [s] or, without, as a relaxation over all."""
        setting, filter_index = self.configuration(index)
        if self.shots == 1:
            return channel_readings(self.assembly, setting, filter_index)
        return shot_readings(self.assembly, setting, filter_index, self.shots, exposures)

    def recipe(self, index: int, gap: float) -> Recipe:
        """Best recipe that alternation finds; shots also try other exposures."""
        if index in self.start and self.start[index].value > 0:
            return self._from(index, self.start[index].weights, self.start[index].exposures, gap)
        if self.shots == 1:
            return Recipe(*best_alternation(self.readings(index), gap), None)
        setting, filter_index = self.configuration(index)
        one = single(self.assembly, setting, filter_index)
        low, high = float(one.time_low[0]), float(one.time_high[0])
        total = frame_time(self.assembly, setting, self.shots)
        exposures = np.full(self.shots, min(high, total / self.shots))
        if exposures[0] < low:
            return Recipe(np.zeros(0), np.zeros(self.shots), 0.0, exposures)
        best = Recipe(*best_alternation(self.readings(index, exposures), gap), exposures)
        for shot in range(self.shots):
            for factor in EXPOSURE_STEPS:
                trial = best.exposures.copy()
                trial[shot] = np.clip(trial[shot] * factor, low, min(high, total - trial.sum() + trial[shot]))
                if abs(trial[shot] / best.exposures[shot] - 1) > 1e-6:
                    best = max(best, self._from(index, best.weights, trial, gap), key=lambda r: r.value)
        return best

    def _from(self, index: int, weights: Array, exposures: Array | None, gap: float) -> Recipe:
        """Alternation from known weights at fixed exposures."""
        return Recipe(*alternate(self.readings(index, exposures), weights, gap), exposures)

    def polish(self, index: int, known: Recipe) -> Recipe:
        """Improve a recipe at its exposures from its own weights."""
        better = self._from(index, known.weights, known.exposures, POLISH_GAP)
        return better if better.value >= known.value else known

    def scout(self) -> int | None:
        """Best of the configurations that look best, without proof; None where none has any contrast."""
        for index in np.argsort(-self.upper)[:SCOUTED]:
            if self.upper[index] > 0:
                self.found[int(index)] = self.recipe(int(index), self.gap)
        return self.leader

    @property
    def leader(self) -> int | None:
        """Best configuration found."""
        seen = {i: r.value for i, r in self.found.items() if r.value > 0}
        return max(seen, key=seen.get) if seen else None

    def best(self) -> int | None:
        """Certify, best bound first, until no configuration can beat the best found by more than the gap."""
        done: set[int] = set()
        while len(done) < MOST_CERTIFIED and not self.stop():
            value = 0.0 if self.leader is None else self.found[self.leader].value
            open_ = [i for i in np.flatnonzero(self.upper > value * (1 + self.gap)) if i not in done]
            if not open_:
                break
            index = int(max(open_, key=lambda i: self.upper[i]))
            done.add(index)
            self._certify(index, value)
        return self.leader

    def _certify(self, index: int, target: float) -> None:
        known = self.found.get(index) or self.recipe(index, self.gap)
        self.found[index] = known
        result: Combined = certify_combined(
            self.readings(index),
            self.gap,
            target,
            known=(known.point, known.weights, known.value),
            exchangeable=self.shots > 1,
            stop=self.stop,
        )
        self.evidence.append(CombinedEvidence(index, result.proof))
        self.upper[index] = min(self.upper[index], result.bound)
