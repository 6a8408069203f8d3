"""From an optimum to settings a person can dial in: whole steps of current and exposure, never over a limit."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

import numpy as np

from codesign.assemble import Assembly
from codesign.assemble_segments import Segments
from codesign.build import Units, free
from codesign.certificate_pairs import worst_contrast
from codesign.design import Design, Performance, evaluate
from codesign.limits import Setting
from codesign.problem import Problem
from codesign.program import Array, Program
from codesign.search.build import Built
from codesign.search.frontier import Certified
from codesign.search.pairs import CertifiedPairs

Found = Certified | CertifiedPairs | Built

#: Currents below this share of a setting step count as off. [1]
OFF = 1e-6
#: Share of the optimum's CNR that is not worth another step.
GOOD_ENOUGH = 1e-4
#: Currents tried in turn, as shares of the design's, where it exceeds a limit at the temperatures it leads to. [1]
DIMMINGS = (1.0, 0.995, 0.99, 0.98, 0.96, 0.92, 0.85, 0.7, 0.5)
#: Rounds of looking for a better neighbour.
LARGEST_NUMBER_OF_ROUNDS = 60


def design_at(
    assembly: Assembly, setting: Setting, filter_index: int, point: Array, units: Units | None = None
) -> Design:
    """Translate an optimiser's point ``(q_1 .. q_n, t)`` into currents: the light of each LED, segments in order.

    ``units`` (L,) are those in use under build limits; the charge is a mean over all emitters there could be.
    """
    problem = assembly.problem
    segments = assembly.segments(setting)
    t = float(point[-1])
    drive, emitters = {}, {}
    counted = units is not None and free(problem)
    lit = set(segments.led[point[:-1] > 0].tolist())
    for index, channel in enumerate(problem.channels):
        if counted and units[index] > 0:
            emitters[channel.id] = int(units[index])
        if index not in lit:
            continue
        own = segments.led == index
        share = units[index] / channel.emitters if counted else 1.0
        flux = float(segments.flux[own] @ point[:-1][own]) / t / max(share, 1e-300)
        reached = np.concatenate([[0.0], np.cumsum(segments.flux[own] * segments.width[own])])
        current = np.concatenate([[0.0], np.cumsum(segments.width[own])])
        amps = float(np.interp(flux, reached, current))
        if amps * 1e3 > OFF * problem.spec.lighting.drive_step_ma:
            drive[channel.id] = amps * 1e3
    return Design(
        camera=setting.camera.id,
        channel=setting.channel,
        gain_db=setting.gain.gain_db,
        filter=problem.filters[filter_index].id,
        f_number=setting.f_number,
        exposure_us=t * 1e6,
        drive_ma=drive,
        emitters=emitters,
    )


def point_at(assembly: Assembly, setting: Setting, design: Design, units: Units | None = None) -> Array:
    """The inverse of `design_at`: charges of the segments, filled in order, and exposure. (n+1,)"""
    problem = assembly.problem
    share = np.ones(len(problem.channels))
    if units is not None and free(problem):
        share = units / np.array([channel.emitters for channel in problem.channels])
    return charges(problem, assembly.segments(setting), design, share)


def charges(problem: Problem, segments: Segments, design: Design, share: Array) -> Array:
    """Charges of a design in drive segments, filled in order, and its exposure. (n+1,)

    ``share`` (L,) of the emitters of each LED are in use.
    """
    start = np.cumsum(segments.width) - segments.width
    start = start - start[np.searchsorted(segments.led, segments.led)]
    amps = np.array([design.drive_ma.get(channel.id, 0.0) * 1e-3 for channel in problem.channels])
    t = design.exposure_us * 1e-6
    filled = np.clip(amps[segments.led] - start, 0.0, segments.width)
    return np.append(filled * share[segments.led] * t, t)


def lit_only(assembly: Assembly, setting: Setting, found: Found, design: Design, programs: Sequence[Program]) -> Found:
    """What was found without the charges of LEDs too dim to be in its design: its value is then that of the design.

    A charge left out loosens every limit, so the point stays feasible and bounds are not touched.
    """
    lit = np.array([channel.id in design.drive_ma for channel in assembly.problem.channels])
    charges = np.where(lit[assembly.segments(setting).led], found.point[:-1], 0.0)
    if np.array_equal(charges, found.point[:-1]):
        return found
    point = np.append(charges, found.point[-1])
    return replace(found, point=point, value=worst_contrast(programs, point))


def settable(problem: Problem, design: Design) -> tuple[Design, Performance] | None:
    """Round a design to steps inside all limits and climb from there. None when no step fits."""
    reference = evaluate(problem, design).cnr
    for dimming in DIMMINGS:
        trials = [evaluate(problem, trial) for trial in _rounded_down(problem, design, dimming)]
        start = max((result for result in trials if result.feasible), key=lambda result: result.cnr, default=None)
        if start is not None:
            return _climb(problem, design, start, reference)
    return None


def _rounded_down(problem: Problem, design: Design, dimming: float) -> Iterator[Design]:
    """Currents in whole steps, not above those of the design; exposures to either side."""
    step_ma = problem.spec.lighting.drive_step_ma
    for exposure in _exposures(problem, design):
        lower = {led: _steps(np.floor(ma * dimming / step_ma + 1e-6), step_ma) for led, ma in design.drive_ma.items()}
        yield replace(design, exposure_us=exposure, drive_ma={k: v for k, v in lower.items() if v > 0})


def _steps(count: float, step: float) -> float:
    """A whole number of steps without the dust of binary fractions."""
    return float(round(count * step, 9))


def _exposures(problem: Problem, design: Design) -> list[float]:
    step = problem.camera(design.camera).exposure_step_us
    low, high = np.floor(design.exposure_us / step + 1e-6), np.ceil(design.exposure_us / step - 1e-6)
    return [_steps(count, step) for count in dict.fromkeys((low, high)) if count > 0]


def _climb(problem: Problem, optimum: Design, start: Performance, reference: float) -> tuple[Design, Performance]:
    """Take the best feasible neighbour until none is better, or the optimum is as good as reached."""
    best = start
    for _ in range(LARGEST_NUMBER_OF_ROUNDS):
        if best.cnr >= reference * (1 - GOOD_ENOUGH):
            break
        trials = (evaluate(problem, trial) for trial in _neighbours(problem, optimum, best.design))
        better = max((r for r in trials if r.feasible), key=lambda r: r.cnr, default=None)
        if better is None or better.cnr <= best.cnr * (1 + 1e-12):
            break
        best = better
    return best.design, best


def _neighbours(problem: Problem, optimum: Design, design: Design) -> Iterator[Design]:
    """One step of one current, of the exposure, or of the exposure against one current."""
    step_ma = problem.spec.lighting.drive_step_ma
    step_us = problem.camera(design.camera).exposure_step_us
    exposures = [_steps(round(design.exposure_us / step_us) + k, step_us) for k in (0, -1, 1)]
    for exposure in exposures:
        if exposure <= 0:
            continue
        if exposure != design.exposure_us:
            yield replace(design, exposure_us=exposure)
        for led in optimum.drive_ma:
            top = problem.channel(led).led.largest_current_ma
            count = round(design.drive_ma.get(led, 0.0) / step_ma)
            for change in (-1, 1):
                ma = _steps(count + change, step_ma)
                if 0 <= ma <= top:
                    drive = {**design.drive_ma, led: ma}
                    yield replace(design, exposure_us=exposure, drive_ma={k: v for k, v in drive.items() if v > 0})
