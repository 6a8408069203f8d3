"""One variant of a family as the search for a rig in common sees it: programs and closed-form bounds, rig by rig."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from codesign.assemble import Assembly, flipped
from codesign.certificate_shared import Mask, masked
from codesign.limits import Setting
from codesign.problem import Problem
from codesign.program import Array, Program, stack
from codesign.radiometry import Rates
from codesign.search.bounds import both_bounds
from codesign.search.closed_form import blocks, limiting_pairs
from codesign.search.shared_growth import closed_bounds
from codesign.search.shared_space import RigSpace
from codesign.search.walk import Walk

#: Rates of all filters that a variant keeps, unless those of one camera channel are more. [bytes]
MOST_KEPT = 8e6


class KeptAssembly(Assembly):
    """An assembly that keeps the rates of all filters: its programs are asked for again and again, rig by rig."""

    def __init__(self, problem: Problem, junction_c: Array) -> None:
        super().__init__(problem, junction_c)
        self._all: dict[tuple, Rates] = {}
        self._rows: dict[tuple[int, bool], slice] = {}

    def rates(self, setting: Setting, filters: slice | np.ndarray = slice(None), *, coarse: bool = False) -> Rates:
        """As `Assembly.rates`."""
        optics = self.problem.spec.optics
        base = optics.f_numbers[0] if optics.filter_position == "front" else setting.f_number
        key = (setting.camera.id, setting.channel, base, coarse)
        found = self._all.pop(key, None)
        if found is None:
            found = self._table.rates(setting.camera, setting.channel, base, slice(None), coarse)
            while self._all and (len(self._all) + 1) * found.led.nbytes > MOST_KEPT:
                self._all.pop(next(iter(self._all)))
        self._all[key] = found
        return Rates(led=found.led[filters], ambient=found.ambient[filters]).scaled((base / setting.f_number) ** 2)

    def _clutter_rows(self, surface: int, coarse: bool) -> slice:
        key = surface, coarse
        if key not in self._rows:
            self._rows[key] = super()._clutter_rows(surface, coarse)
        return self._rows[key]


class Variant:
    """Programs and closed-form bounds of one variant at stated junction temperatures.

    Parameters
    ----------
    name : str
    problem : Problem
        With the parts and the build limits of the family.
    junction_c : (L,) array
        [deg C]
    space : RigSpace
    """

    def __init__(self, name: str, problem: Problem, junction_c: Array, space: RigSpace) -> None:
        self.name, self.problem = name, problem
        self.walk = Walk.blank(KeptAssembly(problem, np.asarray(junction_c, dtype=float)))
        self.quick_pairs = limiting_pairs(self.walk.assembly) if self.walk.pairs > 1 else [0]
        rigs = space.of_configurations(self.walk.assembly)
        self._order = np.argsort(rigs, kind="stable")
        self._ends = np.searchsorted(rigs[self._order], np.arange(len(space) + 1))
        self._settings = rigs.reshape(len(self.walk.assembly.settings), -1)[:, ::2]
        #: Bound of every rig with all LEDs there are, infinite where it was not worked out yet. (C,)
        self.upper = np.where(np.diff(self._ends) > 0, np.inf, 0.0)
        self._kept: tuple[int, dict] = (-1, {})

    @property
    def junction_c(self) -> Array:
        """Junction temperatures assumed. (L,) [deg C]"""
        return self.walk.assembly.junction_c

    @property
    def leds(self) -> int:
        """Number of LEDs there are."""
        return len(self.problem.channels)

    def look(self, rigs: Mask) -> None:
        """Work out the closed-form bounds of some rigs (C,) not looked at before."""
        rigs = rigs & np.isinf(self.upper)
        if not rigs.any():
            return
        upper = self.walk.upper.reshape(len(self._settings), -1, 2)
        for number, own in enumerate(self._settings):
            wanted = np.flatnonzero(rigs[own])
            for part in blocks(wanted.size):
                upper[number, wanted[part]] = self._closed_of_setting(number, wanted[part])
        for rig in np.flatnonzero(rigs):
            self.upper[rig] = self.walk.upper[self._own(rig)].max(initial=0.0)

    def _closed_of_setting(self, number: int, filters: np.ndarray) -> Array:
        """Bounds of some filters and both signs in one setting. (F, 2)"""
        setting = self.walk.assembly.settings[number]
        programs = (self.walk.assembly.program(setting, filters, coarse=True, pair=pair) for pair in self.quick_pairs)
        found = np.full((self.walk.filters, 2), np.inf)
        found[filters] = np.min([both_bounds(program) for program in programs], axis=0)
        return self.walk.buildable(setting, found)[filters]

    def _own(self, rig: int) -> np.ndarray:
        return self._order[self._ends[rig] : self._ends[rig + 1]]

    def configurations(self, rig: int, level: float) -> tuple[np.ndarray, float]:
        """Configurations of a rig whose bound with all LEDs is a level or more, and the largest bound of the others."""
        own = self._own(rig)
        upper = self.walk.upper[own]
        return own[upper >= level], float(upper[upper < level].max(initial=0.0))

    def programs(self, rig: int, index: int, *, coarse: bool) -> list[Program]:
        """Programs of one configuration for all pairs; those of the rig looked at last are kept."""
        kept, key = self._of_rig(rig), (int(index), coarse)
        if key not in kept:
            chosen = self.walk.configuration(index)
            part, pairs = np.array([chosen.filter]), range(self.walk.pairs)
            found = [self.walk.assembly.program(chosen.setting, part, coarse=coarse, pair=pair) for pair in pairs]
            kept[key] = found if chosen.sign > 0 else [flipped(program) for program in found]
        return kept[key]

    def _of_rig(self, rig: int) -> dict:
        if rig != self._kept[0]:
            self._kept = rig, {}
        return self._kept[1]

    def _blocks(self, rig: int, open_: np.ndarray) -> list[tuple[np.ndarray, list[Program]]]:
        """Optimistic programs of some configurations, those that share their columns together."""
        kept, key = self._of_rig(rig), open_.tobytes()
        if key not in kept:
            groups: dict[str, list[int]] = {}
            for index in map(int, open_):
                groups.setdefault(self.walk.configuration(index).setting.level.name, []).append(index)
            kept[key] = [(np.array(own), self._stacked(rig, own)) for own in groups.values()]
        return kept[key]

    def _stacked(self, rig: int, own: Iterable[int]) -> list[Program]:
        programs = [self.programs(rig, index, coarse=True) for index in own]
        return [stack([each[pair] for each in programs]) for pair in self.quick_pairs]

    def closed(self, rig: int, masks: Mask, level: float) -> tuple[np.ndarray, Array, float]:
        """Closed-form bounds of the configurations of a rig that reach a level with all LEDs, with each set of LEDs.

        Returns their numbers (E,), the bounds (E, M), and the largest bound of the other configurations.
        """
        open_, below = self.configurations(rig, level)
        parts = self._blocks(rig, open_) if open_.size else []
        if not parts:
            return open_, np.zeros((0, len(masks))), below
        found = [np.min([closed_bounds(program, masks) for program in programs], axis=0) for _, programs in parts]
        return np.concatenate([own for own, _ in parts]), np.concatenate(found), below

    def closed_of_filters(self, rig: int, inside: Mask) -> Array:
        """Closed-form bounds of the rigs that differ from one in the filter only, with the LEDs ``inside``. (F,)"""
        found, first = np.zeros(self.walk.filters), rig - rig % self.walk.filters
        for number in np.flatnonzero(self._settings[:, 0] == first):
            setting = self.walk.assembly.settings[number]
            both = [
                both_bounds(masked(self.walk.assembly.program(setting, coarse=True, pair=pair), inside))
                for pair in self.quick_pairs
            ]
            found = np.maximum(found, np.min(both, axis=0).max(axis=1))
        return found

    def closed_of_rig(self, rig: int, masks: Mask, level: float) -> Array:
        """Closed-form bounds of a rig with each set of LEDs; others count as below the level. (M,)"""
        _, found, below = self.closed(rig, masks, level)
        return np.maximum(found.max(axis=0, initial=0.0), below)
