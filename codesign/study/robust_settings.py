"""Recipes in whole setting steps that keep all limits in every scenario."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from codesign.design import Design, Performance
from codesign.problem import Problem
from codesign.study.draws import Draws
from codesign.study.fleet import Fleet
from codesign.study.fleet_limits import broken, limit_shares, longest_exposure

Array = NDArray[np.float64]

#: Halvings of the interval of a common factor on all currents.
HALVINGS = 12
#: Rounds of looking for a better neighbour, and the relative gain that is worth one.
ROUNDS, GAIN = 20, 1e-5


@dataclass(frozen=True, slots=True, kw_only=True)
class Trial:
    """A recipe on the rig as stated and on K scenarios: CNR ``reached`` (K,), whether limits are ``missed`` (K,)."""

    design: Design
    performance: Performance
    reached: Array = field(repr=False)
    missed: NDArray[np.bool_] = field(repr=False)

    @property
    def cnr(self) -> Array:
        """CNR of each scenario, 0 where a limit is missed. (K,)"""
        return np.where(self.missed, 0.0, self.reached)

    def level(self, quantile: float = 0.0) -> float:
        """CNR that all scenarios but a share ``quantile`` reach."""
        spare = int(np.floor(quantile * self.reached.size + 1e-9))
        return float(np.sort(self.cnr)[spare])


def on_scenarios(problem: Problem, design: Design, draws: Draws) -> Trial:
    """Evaluate a recipe on all scenarios."""
    fleet = Fleet(problem, design, draws)
    reached, missed = [], []
    for _, block in fleet.blocks():
        light = block.light(np.full(block.rigs.size, design.exposure_us * 1e-6))
        reached.append(block.contrast(light))
        missed.append(np.any(list(broken(limit_shares(block, light)).values()), axis=0))
    return Trial(
        design=design, performance=fleet.nominal, reached=np.concatenate(reached), missed=np.concatenate(missed)
    )


def cautious(problem: Problem, design: Design, draws: Draws) -> Design | None:
    """The recipe with the largest common factor on its currents, then the longest exposure, inside all limits."""
    low, high, best = 0.0, 1.0, None
    for factor in (1.0, *(None,) * HALVINGS):
        factor = (low + high) / 2 if factor is None else factor
        trial = _exposed(problem, _scaled(problem, design, factor), draws)
        if trial is not None:
            low, best = factor, trial
            if factor == 1.0:
                break
        else:
            high = factor
    return best


def _scaled(problem: Problem, design: Design, factor: float) -> Design:
    step = problem.spec.lighting.drive_step_ma
    drive = {led: round(float(np.floor(ma * factor / step + 1e-6)) * step, 9) for led, ma in design.drive_ma.items()}
    return replace(design, drive_ma={led: ma for led, ma in drive.items() if ma > 0})


def _exposed(problem: Problem, design: Design, draws: Draws) -> Design | None:
    """The longest exposure inside all limits of all scenarios, None where there is none."""
    if not design.drive_ma:
        return None
    fleet = Fleet(problem, design, draws)
    shortest = min(float(longest_exposure(block).exposure_s.min()) for _, block in fleet.blocks())
    step = problem.camera(design.camera).exposure_step_us
    for steps in (0, 1):  # warmer junctions than at one's own exposure may cost one step more
        exposure = round((round(shortest * 1e6 / step) - steps) * step, 9)
        if exposure > 0:
            trial = replace(design, exposure_us=exposure)
            if not on_scenarios(problem, trial, draws).missed.any():
                return trial
    return None


def settable_in_all(problem: Problem, design: Design, draws: Draws) -> Design | None:
    """Round an optimum to whole steps inside all limits of all scenarios, and climb from there."""
    start = cautious(problem, _scaled(problem, design, 1.0), draws)
    if start is None:
        return None
    best, score = start, on_scenarios(problem, start, draws).level()
    for _ in range(ROUNDS):
        trials = (on_scenarios(problem, each, draws) for each in _neighbours(problem, design, best))
        better = max(trials, key=Trial.level)
        if not better.level() > score * (1 + GAIN):
            break
        best, score = better.design, better.level()
    return best


def _neighbours(problem: Problem, optimum: Design, design: Design) -> Iterator[Design]:
    """One step of one current or of the exposure."""
    step_us, step_ma = problem.camera(design.camera).exposure_step_us, problem.spec.lighting.drive_step_ma
    for change in (-1, 1):
        exposure = round((round(design.exposure_us / step_us) + change) * step_us, 9)
        if exposure > 0:
            yield replace(design, exposure_us=exposure)
        for led in optimum.drive_ma:
            ma = round((round(design.drive_ma.get(led, 0.0) / step_ma) + change) * step_ma, 9)
            if 0 <= ma <= problem.channel(led).led.largest_current_ma:
                drive = {**design.drive_ma, led: ma}
                yield replace(design, drive_ma={k: v for k, v in drive.items() if v > 0})
