"""Programs of one recipe that must serve several scenarios: the worst scenario counts, all limits hold in each.

A scenario is a whole nudged problem. Its contrast takes the place of a pair of surfaces: the walk over configurations
and the certified search over several pairs (`codesign.search`) then give the recipe of the greatest worst CNR with a
proven bound. What scenarios share are the unknowns: charges and exposure. The limits of all scenarios hold together.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from functools import cached_property

import numpy as np

from codesign.assemble import Assembly, Segments, exposure_window, flipped
from codesign.errors import InfeasibleError
from codesign.limits import Setting, pulse_levels
from codesign.problem import Problem
from codesign.program import Array, Program
from codesign.search.walk import Walk


class ScenarioAssembly:
    """What the walk needs of an `Assembly`, over scenarios; "pair" ``k P + p`` is pair p in the k-th scenario chosen.

    Parameters
    ----------
    problem : Problem
        As stated; it numbers the configurations.
    scenarios : sequence of Problem
        The same problem nudged.
    junction_c : (K, L) array
        Junction temperatures assumed in each. [deg C]
    chosen : sequence of int
        Scenarios whose contrast counts; the limits of all hold.
    """

    def __init__(
        self, problem: Problem, scenarios: Sequence[Problem], junction_c: Array, chosen: Sequence[int]
    ) -> None:
        self.problem, self.junction_c = problem, junction_c.copy()
        # A contrast alone is counted twice: the walk's short cut for one pair would miss the other scenarios' limits.
        self.chosen = tuple(chosen) * (2 if len(chosen) * len(problem.pairs) == 1 else 1)
        self.parts = [Assembly(each, t) for each, t in zip(scenarios, junction_c, strict=True)]

    @cached_property
    def settings(self) -> tuple[Setting, ...]:
        """Settings that leave an exposure range in every scenario."""
        wanted = [{_key(setting) for setting in part.settings} for part in self.parts]
        nominal = Assembly(self.problem, self.junction_c[0]).settings
        found = tuple(s for s in nominal if all(_key(s) in keys for keys in wanted) and self._open(s))
        if not found:
            raise InfeasibleError(
                f"{self.problem.where}: no camera, gain and f-number leave exposure and current in every scenario; "
                "narrow [tolerance] or loosen the limits",
                ["tolerance"],
            )
        return found

    def _open(self, setting: Setting) -> bool:
        windows = [exposure_window(part.problem, self.own(k, setting)) for k, part in enumerate(self.parts)]
        exposed = max(w.low.time for w in windows) <= min(w.high.time for w in windows)
        return exposed and self.segments(setting).width.size > 0

    def own(self, k: int, setting: Setting) -> Setting:
        """The same choice with the camera of scenario k."""
        problem = self.parts[k].problem
        camera = problem.camera(setting.camera.id)
        gain = next(g for g in camera.gain_settings() if g.gain_db == setting.gain.gain_db)
        level = next(each for each in pulse_levels(problem) if each.name == setting.level.name)
        return replace(setting, camera=camera, gain=gain, level=level)

    def forget(self) -> None:
        """Give memory back."""
        for part in self.parts:
            part.forget()

    def program(self, setting: Setting, filters=slice(None), *, coarse: bool = False, pair: int = 0) -> Program:
        """Programs of one scenario and pair, with that scenario's limits alone: a relaxation, for bounds."""
        k, own = divmod(pair, len(self.problem.pairs))
        k = self.chosen[k]
        return self.parts[k].program(self.own(k, setting), filters, coarse=coarse, pair=own)

    def segments(self, setting: Setting, coarse: bool = False) -> Segments:
        """Drive segments that every scenario allows; coarse ones, worked out for all, are those of the first."""
        if coarse:
            every = [part.segments(self.own(k, setting), True) for k, part in enumerate(self.parts)]
            return every[0]
        own = [part.segments(self.own(k, setting)) for k, part in enumerate(self.parts)]
        columns = _shared_columns(own)
        first, kept = own[0], columns[0]
        width = np.min([s.width[c] for s, c in zip(own, columns, strict=True)], axis=0)
        lead = self._leading(own, columns)
        heat = np.array([own[k].heat[columns[k][j]] for j, k in enumerate(lead[first.led[kept]])])
        caps = np.array([own[k].heat_cap[led] for led, k in enumerate(lead)])
        return Segments(width, first.led[kept], first.flux[kept], first.power[kept], heat, caps)

    @staticmethod
    def _leading(own: list[Segments], columns: list[np.ndarray]) -> np.ndarray:
        """For each LED the scenario in which its junction limit is tightest. (L,)"""
        led = own[0].led[columns[0]]
        with np.errstate(divide="ignore"):
            load = np.array([s.heat[c] / s.heat_cap[s.led[c]] for s, c in zip(own, columns, strict=True)])
        lead = np.zeros(own[0].heat_cap.size, dtype=int)
        for each in np.unique(led):
            lead[each] = int(np.argmax(load[:, led == each].max(axis=1)))
        return lead

    def joint(self, setting: Setting, part: int, sign: int) -> list[Program]:
        """Full programs of one signed configuration for every scenario and pair, with the limits of all scenarios."""
        count, index = len(self.problem.pairs), np.array([part])
        own = [s.segments(self.own(k, setting)) for k, s in enumerate(self.parts)]
        columns = _shared_columns(own)
        limits = [_columns(each.program(self.own(k, setting), index), columns[k]) for k, each in enumerate(self.parts)]
        found = [
            limits[k] if p == 0 else _columns(self.parts[k].program(self.own(k, setting), index, pair=p), columns[k])
            for k in self.chosen
            for p in range(count)
        ]
        segments = self.segments(setting)
        rows, bounds, names = _joined_rows(limits, own, columns, segments)
        shared = {
            "rows": rows[None],
            "bounds": bounds[None],
            "row_names": names,
            "width": segments.width,
            "heat": segments.heat,
            "heat_cap": segments.heat_cap,
            "time_low": np.max([p.time_low for p in limits], axis=0),
            "time_high": np.min([p.time_high for p in limits], axis=0),
        }
        found = [replace(program, **shared) for program in found]
        return found if sign > 0 else [flipped(program) for program in found]


class ScenarioWalk(Walk):
    """The walk over configurations with scenarios in the place of pairs."""

    @property
    def pairs(self) -> int:
        """Number of contrasts: pairs of all scenarios."""
        return len(self.assembly.problem.pairs) * len(self.assembly.chosen)

    def every_pair(self, index: int) -> list[Program]:
        """Full programs of one configuration, limits of all scenarios together."""
        chosen = self.configuration(index)
        return self.assembly.joint(chosen.setting, chosen.filter, chosen.sign)


def _key(setting: Setting) -> tuple:
    return (setting.camera.id, setting.channel, setting.gain.gain_db, setting.f_number, setting.level.name)


def _shared_columns(own: list[Segments]) -> list[np.ndarray]:
    """Columns of each scenario's segments that all scenarios have: cut junctions may drop the last of an LED."""
    keys = []
    for segments in own:
        first = np.searchsorted(segments.led, segments.led, side="left")
        keys.append(list(zip(segments.led.tolist(), (np.arange(segments.led.size) - first).tolist(), strict=True)))
    common = set(keys[0]).intersection(*keys[1:])
    return [np.array([i for i, key in enumerate(each) if key in common], dtype=int) for each in keys]


def _columns(program: Program, kept: np.ndarray) -> Program:
    """A program over some of its segments, and time."""
    chosen = np.append(kept, program.segments)
    return replace(
        program,
        signal=program.signal[:, chosen],
        shot=program.shot[:, chosen],
        noise_rows=program.noise_rows[:, :, chosen],
        rows=program.rows[:, :, chosen],
        width=program.width[kept],
        led=program.led[kept],
        heat=program.heat[kept],
    )


def _joined_rows(programs: list[Program], own: list[Segments], columns: list[np.ndarray], segments: Segments):
    """Coupling rows of all scenarios and junction rows of those that do not lead, without rows that others imply."""
    rows = [row for program in programs for row in program.rows[0]]
    bounds = [bound for program in programs for bound in program.bounds[0]]
    names = [name for program in programs for name in program.row_names]
    for each, kept in zip(own, columns, strict=True):
        for led in np.unique(segments.led):
            if not np.isfinite(each.heat_cap[led]):
                continue
            here = segments.led == led
            if np.all(each.heat[kept][here] * segments.heat_cap[led] <= segments.heat[here] * each.heat_cap[led]):
                continue
            rows.append(np.append(np.where(here, each.heat[kept], 0.0), 0.0))
            bounds.append(each.heat_cap[led])
            names.append(f"junction {led}")
    rows, bounds = np.array(rows), np.array(bounds)
    kept = _needed(rows, bounds)
    return rows[kept], bounds[kept], tuple(names[i] for i in kept)


def _needed(rows: Array, bounds: Array) -> np.ndarray:
    """Rows that no other row implies: with the right-hand sides made equal, none is above them everywhere."""
    size = np.where(bounds > 0, bounds, np.maximum(-rows[:, -1], 1e-300))
    scaled, kind = rows / size[:, None], bounds > 0
    kept: list[int] = []
    for i in np.argsort(-scaled.sum(axis=1), kind="stable"):
        alike = [j for j in kept if kind[j] == kind[i]]
        if not alike or not np.any(np.all(scaled[alike] >= scaled[i], axis=1)):
            kept.append(int(i))
    return np.array(sorted(kept), dtype=int)
