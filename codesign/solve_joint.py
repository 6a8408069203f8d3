"""The optimum of one configuration and its junction temperatures together, to the last digits.

The conditions of `codesign.search.stationary` and the balance of each lit junction,

    T − air − R (duty / t) Σ heat·charge = 0,

are one system F(z) = 0 in z = (u, τ, μ, λ, T): the recipe is the best at the very temperatures it leads to.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from codesign.build import choosing
from codesign.design import Design
from codesign.errors import SolveError
from codesign.limits import Setting, thermal_resistance
from codesign.problem import Problem
from codesign.program import Array, Program
from codesign.recipe_choice import Choice, level_rank, narrowed, point_of, programs_of, setting_of_choice, shares
from codesign.search.stationary import Stationary, stationary

#: Gain (relative CNR per share of an LED) below which an unlit LED stays off.
WORTHLESS = 1e-9
LARGEST_NUMBER_OF_ROUNDS = 30


@dataclass(frozen=True, slots=True)
class Rig:
    """One configuration of a narrowed problem, whose arrays hang on the junction temperatures."""

    problem: Problem
    choice: Choice
    rank: int

    @classmethod
    def of(cls, problem: Problem, choice: Choice, leds: Sequence[str] | None = None) -> Rig:
        """Narrow a problem to a configuration and some LEDs."""
        part = narrowed(problem, choice, leds)
        return cls(part, choice, level_rank(part, choice))

    def at(self, problem: Problem) -> Rig:
        """The same configuration of a nudged twin of the narrowed problem."""
        return replace(self, problem=problem)

    @property
    def leds(self) -> tuple[str, ...]:
        """Ids of its LEDs."""
        return tuple(channel.id for channel in self.problem.channels)

    @property
    def setting(self) -> Setting:
        """Its discrete setting."""
        return setting_of_choice(self.problem, self.choice, self.rank)

    def programs(self, junction_c: Array) -> list[Program]:
        """Arrays of each pair."""
        return programs_of(self.problem, self.choice, self.rank, junction_c)

    def _resistance(self) -> Array:
        """Rise per mean heat of all emitters there could be. (L,) [K/W]"""
        own = np.array([thermal_resistance(self.problem, channel) for channel in self.problem.channels])
        return own / shares(self.problem, self.choice)

    def balance(self, program: Program, y: Array, junction_c: Array) -> Array:
        """Junction temperature assumed minus that reached, of each LED. (L,) [K]"""
        heat = np.bincount(program.led, program.heat * y[:-1], minlength=junction_c.size)
        rise = self._resistance() * heat * self._per_second(y)
        return junction_c - self.problem.spec.temperature.air_c - rise

    def _per_second(self, y: Array) -> float:
        """Frames, or exposures without a pause, per second."""
        return self.problem.spec.timing.frame_rate_hz if self.problem.strobe else 1.0 / y[-1]

    def balance_slope(self, program: Program, y: Array) -> Array:
        """Derivative of the balance along charges and exposure. (L, n+1)"""
        resistance = self._resistance()
        slope = np.zeros((resistance.size, y.size))
        per_charge = -resistance[program.led] * program.heat * self._per_second(y)
        slope[program.led, np.arange(program.segments)] = per_charge
        if not self.problem.strobe:
            slope[:, -1] = -(slope[:, :-1] @ y[:-1]) / y[-1]
        return slope


@dataclass(frozen=True, slots=True)
class Optimum:
    """Self-consistent optimum of one configuration over its lit LEDs."""

    rig: Rig
    state: Stationary

    @property
    def cnr(self) -> float:
        """CNR reached."""
        return float(np.exp(self.state.value))

    def design(self, like: Design) -> Design:
        """Return a design with the currents and exposure of the optimum."""
        y, program = self.state.point, self.state.programs[0]
        share = shares(self.rig.problem, self.rig.choice)
        amps = np.bincount(program.led, y[:-1], minlength=share.size) / y[-1] / share
        drive = {c.id: float(a * 1e3) for c, a in zip(self.rig.problem.channels, amps, strict=True)}
        return replace(like, drive_ma=drive, exposure_us=float(y[-1] * 1e6))


def optimum_near(problem: Problem, choice: Choice, design: Design, junction_c: Mapping[str, float]) -> Optimum:
    """The optimum of a configuration to the last digits, temperatures settled, from a recipe close to it.

    LEDs are lit or put out as the multipliers ask, but under build limits those lit stay the ones chosen. LEDs that are
    off stay at ``junction_c``. [deg C]
    """
    full = Rig.of(problem, choice)
    known = dict(junction_c)
    lit = [name for name in full.leds if design.drive_ma.get(name, 0.0) > 0]
    for _ in range(LARGEST_NUMBER_OF_ROUNDS):
        rig = Rig.of(problem, choice, lit)
        junction = np.array([known[name] for name in rig.leds])
        found = settled(rig, point_of_rig(rig, design, junction), junction)
        known.update(zip(rig.leds, found.state.junction_c, strict=True))
        joining = [] if choosing(problem) else _joining(full, found, np.array([known[name] for name in full.leds]))
        if not joining:
            return found
        lit += joining
        design = found.design(design)  # so that it can be read in another set of columns
    raise SolveError("no settled set of lit LEDs was found near the optimum")


def point_of_rig(rig: Rig, design: Design, junction_c: Array) -> Array:
    """Charges and exposure of a design in the columns of a rig. (n+1,)"""
    return point_of(rig.problem, rig.choice, rig.rank, design, junction_c)


def settled(rig: Rig, point: Array, junction_c: Array) -> Optimum:
    """The optimum over the LEDs of a narrowed problem at which junction temperatures and recipe agree."""
    return Optimum(rig, stationary(rig.programs(junction_c), point, rig, junction_c))


def _joining(full: Rig, found: Optimum, junction_c: Array) -> list[str]:
    """LEDs that are off and whose light would raise the CNR, the best first few."""
    own = np.array([full.leds.index(name) for name in found.rig.leds], dtype=int)
    if own.size == len(full.leds):
        return []
    state, programs = found.state, full.programs(junction_c)
    y = np.zeros(programs[0].segments + 1)
    y[np.append(np.isin(programs[0].led, own), True)] = state.point
    column = np.append(programs[0].width, 1.0) * programs[0].time_high[0]
    gain = -(state.price[: programs[0].rows.shape[1]] / state.scale.row) @ programs[0].rows[0]
    for program, weight in zip(programs, state.weight, strict=True):
        noise = program.noise_rows[0]
        spread = program.floor[0] + program.shot[0] @ y + np.sum((noise @ y) ** 2)
        slope = program.shot[0] + 2 * (noise @ y) @ noise
        gain = gain + weight * (program.signal[0] / (program.signal[0] @ y) - slope / (2 * spread))
    worth = np.full(len(full.leds), -np.inf)
    np.maximum.at(worth, programs[0].led, (gain * column)[:-1])
    worth[own] = -np.inf
    best = np.argsort(-worth)[:3]
    return [full.leds[i] for i in best if worth[i] > WORTHLESS]
