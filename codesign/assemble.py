"""From a problem to programs: every discrete choice as rows of arrays, limits and noise included."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import cached_property
from threading import get_ident

import numpy as np

from codesign.assemble_build import with_build_rows
from codesign.assemble_segments import Segments, light_segments, optimistic
from codesign.catalog import Camera
from codesign.design import JOINT
from codesign.errors import InfeasibleError
from codesign.limits import (
    Setting,
    TimeLimit,
    dark_rate,
    depth_shortfall,
    pulse_levels,
    sum_limits,
    sum_weights,
    time_limits,
    well_bound,
)
from codesign.noise import Sensor, noise_model
from codesign.problem import Problem
from codesign.program import Array, Program
from codesign.radiometry import Rates, RateTable, main_reflectances, reflectances


@dataclass(frozen=True, slots=True)
class Window:
    """Exposure range of one setting and the limits at its two ends."""

    low: TimeLimit
    high: TimeLimit

    @property
    def open(self) -> bool:
        """Whether any exposure is possible."""
        return self.low.time <= self.high.time * (1 + 1e-12)


def exposure_window(problem: Problem, setting: Setting) -> Window:
    """Tightest of the limits on the exposure alone."""
    limits = time_limits(problem, setting)
    return Window(
        low=max((x for x in limits if x.floor), key=lambda x: x.time),
        high=min((x for x in limits if not x.floor), key=lambda x: x.time),
    )


class Assembly:
    """All programs of a problem at given junction temperatures.

    Parameters
    ----------
    problem : Problem
    junction_c : (L,) array
        Junction temperatures assumed. [deg C]
    """

    def __init__(self, problem: Problem, junction_c: Array) -> None:
        self._set(problem, RateTable(problem, junction_c))

    def _set(self, problem: Problem, table: RateTable) -> None:
        self.problem = problem
        self.junction_c = table.junction_c
        self._table = table
        self._held: dict[int, tuple[tuple, Rates]] = {}
        self._segments: dict[tuple[str, bool], Segments] = {}

    @cached_property
    def settings(self) -> tuple[Setting, ...]:
        """All discrete choices but the filter that leave an exposure range.

        Raises InfeasibleError naming the limits in conflict when there is none.
        """
        found, conflicts = [], []
        for setting in self._all_settings():
            short = depth_shortfall(self.problem, setting.camera, setting.f_number)
            window = exposure_window(self.problem, setting)
            if short is None and window.open:
                found.append(setting)
            else:
                conflicts.append((setting, window, short))
        if not found:
            raise self._conflict(conflicts)
        return tuple(self._without_dominated(found))

    def at(self, junction_c: Array, *, hand_over: bool = False) -> Assembly:
        """Return the same problem at other junction temperatures; the discrete choices do not depend on them.

        ``hand_over`` gives it the rates of all filters worked out here, where these are done with.
        """
        self.forget()
        other = Assembly.__new__(Assembly)
        other._set(self.problem, self._table.at(junction_c, hand_over=hand_over))
        other.settings = self.settings
        return other

    def _all_settings(self) -> Iterator[Setting]:
        spec = self.problem.spec
        wanted = spec.candidates
        for camera in self.problem.cameras:
            for channel in self._channels(camera):
                for gain in camera.gain_settings():
                    if wanted.gains_db is not None and all(abs(gain.gain_db - g) > 1e-9 for g in wanted.gains_db):
                        continue
                    for f_number in spec.optics.f_numbers:
                        for level in pulse_levels(self.problem):
                            yield Setting(camera=camera, channel=channel, gain=gain, f_number=f_number, level=level)

    def _channels(self, camera: Camera) -> list[str]:
        """Channels of a camera to choose from, joined where they are read together."""
        wanted = self.problem.spec.candidates.channels
        names = [name for name in camera.channel_names if wanted == "all" or name in _listed(wanted)]
        return [JOINT.join(names)] if names and self.problem.spec.detection.combine_channels else names

    def _without_dominated(self, settings: list[Setting]) -> Iterator[Setting]:
        """Drop pulse levels longer than any exposure allowed while a shorter one already covers it."""
        covered: set[tuple] = set()
        for setting in settings:
            key = (setting.camera.id, setting.channel, setting.gain.gain_db, setting.f_number)
            if key in covered:
                continue
            if exposure_window(self.problem, replace(setting, level=_UNBOUNDED)).high.time <= setting.level.longest_s:
                covered.add(key)
            yield setting

    def _conflict(self, conflicts: list) -> InfeasibleError:
        where = self.problem.where
        if not conflicts:
            wanted = self.problem.spec.candidates
            return InfeasibleError(
                f"{where}: no camera offers channels {wanted.channels!r} at gains {wanted.gains_db}; loosen candidates",
                ["candidates"],
            )
        shallow = [c for c in conflicts if c[2] is not None]
        if len(shallow) == len(conflicts):
            setting, _, depth = max(shallow, key=lambda c: c[2])
            return InfeasibleError(
                f"{where}: depth of field reaches {depth:.3g} mm at f/{setting.f_number:g} at most, "
                f"optics.required_depth_mm is {self.problem.spec.optics.required_depth_mm:g}; allow larger f-numbers",
                ["depth of field"],
            )
        setting, window, _ = max(
            (c for c in conflicts if c[2] is None), key=lambda c: c[1].high.time / max(c[1].low.time, 1e-300)
        )
        low, high = window.low, window.high
        return InfeasibleError(
            f"{where}: limits in conflict: {low.name} asks for {low.time * 1e6:.5g} us or more, {high.name} "
            f"({high.bound:.5g} {high.unit}) allows {high.time * 1e6:.5g} us at most "
            f"(camera {setting.camera.id!r}); loosen one",
            [low.name, high.name],
        )

    def rates(self, setting: Setting, filters: slice | np.ndarray = slice(None), *, coarse: bool = False) -> Rates:
        """Electron rates of a setting's camera channel and f-number behind some filters.

        A filter in front of the lens does not see the f-number: one product serves all, scaled by 1/N². The last
        slice each thread asked for is kept, for other gains and pulse levels of the same camera, until `forget`.
        """
        optics = self.problem.spec.optics
        base = optics.f_numbers[0] if optics.filter_position == "front" else setting.f_number
        channel = (setting.camera.id, setting.channel, base)
        if isinstance(filters, slice):
            key = (*channel, filters.start, filters.stop, filters.step, coarse)
            held = self._held.get(get_ident())
            if held is None or held[0] != key:
                held = key, self._table.rates(setting.camera, setting.channel, base, filters, coarse)
                self._held[get_ident()] = held
            found = held[1]
        else:
            found = self._table.rates(setting.camera, setting.channel, base, filters, coarse)
        return found.scaled((base / setting.f_number) ** 2)

    def forget(self) -> None:
        """Let go of the rates kept."""
        self._held.clear()

    def segments(self, setting: Setting, coarse: bool = False) -> Segments:
        """Drive segments of a setting's pulse level, kept for the settings that share it."""
        key = (setting.level.name, coarse)
        if key not in self._segments:
            found = light_segments(self.problem, setting, self.junction_c)
            self._segments[key] = optimistic(found) if coarse else found
        return self._segments[key]

    def program(
        self, setting: Setting, filters: slice | np.ndarray = slice(None), *, coarse: bool = False, pair: int = 0
    ) -> Program:
        """Programs of one setting for some filters and one pair, target brighter than background (see `flipped`).

        ``coarse`` gives the relaxation of `optimistic`: one column per LED, bounds only. Programs of all pairs share
        their columns and limits.
        """
        problem, rates = self.problem, self.rates(setting, filters, coarse=coarse)
        surfaces = len(problem.surfaces)
        segments = self.segments(setting, coarse)
        photo = np.empty((*rates.ambient.shape, segments.width.size + 1))
        np.multiply(rates.led[:, :, segments.led], segments.flux, out=photo[:, :, :-1])
        photo[:, :, -1] = rates.ambient
        dark = np.append(np.zeros(segments.width.size), dark_rate(problem, setting))
        noise = noise_model(Sensor.of(setting.camera, setting.gain), problem.spec.averaging)
        window = exposure_window(problem, setting)
        kept, clutter = photo[:, :surfaces], photo[:, surfaces:]
        chosen = problem.pairs[pair]
        spread = np.concatenate([clutter[:, self._clutter_rows(surface, coarse)] for surface in chosen], axis=1)
        weight = np.append(np.full(segments.width.size, noise.linear[0]), noise.linear[1])
        target, background = photo[:, chosen[0]], photo[:, chosen[1]]
        rows, bounds, names = with_build_rows(
            problem, setting, segments, filters, _rows(problem, setting, segments, kept + dark)
        )
        return Program(
            signal=target - background,
            shot=(target + background) / 2 * weight + noise.linear[2] * dark,
            noise_rows=np.concatenate(
                [photo[:, list(chosen)] * (noise.relative / np.sqrt(2)), spread * np.sqrt(noise.clutter_share / 2)],
                axis=1,
            ),
            floor=np.full(len(photo), noise.constant),
            rows=rows,
            bounds=bounds,
            row_names=names,
            width=segments.width,
            led=segments.led,
            heat=segments.heat,
            heat_cap=segments.heat_cap,
            time_low=np.full(len(photo), window.low.time),
            time_high=_time_high(rows, bounds, window),
        )

    def _clutter_rows(self, surface: int, coarse: bool) -> slice:
        """Clutter rows of a surface; dropping the weak ones keeps a relaxation a relaxation."""
        return (main_reflectances if coarse else reflectances)(self.problem).rows_of[surface]


def flipped(program: Program) -> Program:
    """The same programs for the other contrast sign."""
    return replace(program, signal=-program.signal)


def _listed(choice) -> tuple[str, ...]:
    return (choice,) if isinstance(choice, str) else tuple(choice)


def _rows(problem: Problem, setting: Setting, segments: Segments, electrons: Array):
    """Coupling rows: the wells of all surfaces, then sums of power and light. Shapes (P, m, n+1), (P, m)."""
    count = len(electrons)
    names = [f"well, {surface.id}" for surface in problem.surfaces]
    rows, bounds = [electrons], [np.full((count, len(names)), well_bound(problem, setting))]
    emitters = np.array([channel.emitters for channel in problem.channels])[segments.led]
    optical = segments.power - segments.heat
    for limit in sum_limits(problem):
        electrical, light = sum_weights(problem, limit.quantity)
        per_charge = emitters * (electrical * segments.power + light[segments.led] * optical)
        if problem.strobe and limit.mean:
            row, bound = np.append(per_charge * problem.spec.timing.frame_rate_hz, 0.0), limit.bound
        else:
            row, bound = np.append(per_charge, -limit.bound), 0.0
        rows.append(np.broadcast_to(row, (count, 1, row.size)))
        bounds.append(np.full((count, 1), bound))
        names.append(limit.name)
    return np.concatenate(rows, axis=1), np.concatenate(bounds, axis=1), tuple(names)


def _time_high(rows: Array, bounds: Array, window: Window) -> Array:
    """Longest exposure, also cut where ambient light and dark current alone would fill a well. (P,)"""
    rate = rows[:, :, -1]
    alone = np.min(np.where(rate > 0, bounds / np.maximum(rate, 1e-300), np.inf), axis=1)
    return np.minimum(window.high.time, alone)


class _Unbounded:
    longest_s = np.inf


_UNBOUNDED = _Unbounded()
