"""The discrete side of a recipe by names, so that it can be found again in a nudged problem, and its programs alone."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from codesign.assemble import Assembly, flipped, light_segments
from codesign.build import build_limits, free
from codesign.design import Design, Performance, level_at
from codesign.errors import SolveError
from codesign.limits import Setting, pulse_levels
from codesign.problem import Problem
from codesign.problem.choices import JOINT, FilterChoices
from codesign.program import Array, Program
from codesign.recipe import charges

#: Between the names of channels read together.
JOINT_CHANNELS = "+"


@dataclass(frozen=True, slots=True, kw_only=True)
class Choice:
    """One configuration: parts by name, exposure that picks the pulse level [s], contrast sign, share of LEDs in use.

    ``share`` holds the emitters in use over those there could be, by LED id, absent for all.
    """

    camera: str
    channel: str
    gain_db: float
    f_number: float
    filter: str
    exposure_s: float
    sign: int
    share: Mapping[str, float]

    @property
    def words(self) -> str:
        """Parts and settings in one line."""
        return f"{self.camera} {self.channel}, {self.gain_db:g} dB, filter {self.filter}, f/{self.f_number:g}"

    def same_parts(self, other: Choice) -> bool:
        """Whether all but the exposure agree."""
        names = ("camera", "channel", "gain_db", "f_number", "filter", "sign", "share")
        return all(getattr(self, name) == getattr(other, name) for name in names)


def choice_of(problem: Problem, optimum: Performance) -> Choice:
    """The configuration of an optimum."""
    design = optimum.design
    if design.shots or JOINT_CHANNELS in design.channel:
        raise SolveError("several readings are combined: sensitivities are worked out for one reading only")
    share = {led: n / problem.channel(led).emitters for led, n in design.emitters.items()} if free(problem) else {}
    return Choice(
        camera=design.camera,
        channel=design.channel,
        gain_db=design.gain_db,
        f_number=design.f_number,
        filter=design.filter,
        exposure_s=design.exposure_us * 1e-6,
        sign=1 if optimum.sign == "brighter" else -1,
        share=share,
    )


def narrowed(problem: Problem, choice: Choice, leds: Sequence[str] | None = None) -> Problem:
    """The problem with the camera and filter of a choice only, and with some LEDs (all by default)."""
    names = choice.filter.split(JOINT)
    if len(names) > 1:
        base = tuple(part for part in FilterChoices.of(problem.filters).base if part.id in names)
        filters: Sequence = FilterChoices(base, np.array([[0, 1]]))
    else:
        filters = (problem.filter(choice.filter),)
    channels = problem.channels if leds is None else tuple(c for c in problem.channels if c.id in leds)
    return replace(problem, cameras=(problem.camera(choice.camera),), filters=filters, channels=channels)


def level_rank(problem: Problem, choice: Choice) -> int:
    """Which of a problem's pulse levels holds; a nudged problem keeps the rank, not the times."""
    return pulse_levels(problem).index(level_at(problem, choice.exposure_s))


def setting_of_choice(problem: Problem, choice: Choice, rank: int) -> Setting:
    """Its setting in a problem, which may be a nudged one."""
    camera = problem.camera(choice.camera)
    gain = next(g for g in camera.gain_settings() if abs(g.gain_db - choice.gain_db) < 1e-9)
    level = pulse_levels(problem)[rank]
    return Setting(camera=camera, channel=choice.channel, gain=gain, f_number=choice.f_number, level=level)


def shares(problem: Problem, choice: Choice) -> Array:
    """Share of its emitters each LED of a problem has in use. (L,)"""
    return np.array([choice.share.get(channel.id, 1.0) for channel in problem.channels])


def programs_of(problem: Problem, choice: Choice, rank: int, junction_c: Array) -> list[Program]:
    """Programs of a narrowed problem, one for each pair, for the numbers of emitters chosen."""
    assembly, setting = Assembly(problem, junction_c), setting_of_choice(problem, choice, rank)
    share = shares(problem, choice)
    whole = {limit.name for limit in build_limits(problem)}
    found = []
    for pair in range(len(problem.pairs)):
        program = assembly.program(setting, np.array([0]), pair=pair)
        program = program if choice.sign > 0 else flipped(program)
        own = [k for k, name in enumerate(program.row_names) if name not in whole]
        found.append(
            replace(
                program,
                rows=program.rows[:, own],
                bounds=program.bounds[:, own],
                row_names=tuple(program.row_names[k] for k in own),
                width=program.width * share[program.led],
                heat_cap=program.heat_cap * share,
            )
        )
    return found


def point_of(problem: Problem, choice: Choice, rank: int, design: Design, junction_c: Array) -> Array:
    """Charges and exposure of a design, in the columns of `programs_of`. (n+1,)"""
    segments = light_segments(problem, setting_of_choice(problem, choice, rank), junction_c)
    return charges(problem, segments, design, shares(problem, choice))
