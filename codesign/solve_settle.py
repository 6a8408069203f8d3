"""A recipe of one configuration that is best at the very junction temperatures it leads to.

The optimum at given temperatures is a recipe that leads to others, and so on. Mostly this settles in two or three
rounds. Where two recipes are equally good, each may heat the other's way, and the rounds would toggle for ever: then a
recipe between the two is worked out whose own temperatures make it as good as the best there (`codesign.solve_joint`).
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np

from codesign.assemble import Assembly, flipped
from codesign.build import Units, free
from codesign.certificate import FEASIBILITY_TOLERANCE
from codesign.certificate_build import build_space
from codesign.certificate_pairs import worst_contrast
from codesign.design import Design, evaluate, junctions_at
from codesign.errors import SolveError
from codesign.problem import Problem
from codesign.program import Array, Program, violation
from codesign.recipe import Found, design_at, point_at
from codesign.recipe_choice import choice_of
from codesign.search.build import Built, polish_build
from codesign.search.frontier import Hint, certify
from codesign.search.pairs import polish_pairs
from codesign.search.relaxation import feasible
from codesign.search.walk import Configuration, Walk
from codesign.solve_joint import optimum_near

#: Junction temperatures assumed and reached agree to this. [K]
JUNCTION_TOLERANCE_K = 0.002
#: Once they agree to this, nothing more is done. [K]
SETTLED_K = 1e-4
#: Times a recipe that is too hot at its own temperatures is dimmed.
LARGEST_NUMBER_OF_DIMMINGS = 5
#: A recipe this little below the best at its own temperatures counts as as good. [1]
AS_GOOD = 1e-7
#: Recipes tried one after the other before temperatures become unknowns too, and in all.
PLAIN_TRIALS, LARGEST_NUMBER_OF_TRIALS = 4, 10


@dataclass(frozen=True, slots=True)
class Settled:
    """Where a configuration settles.

    ``residual_k`` is how far the temperatures it was worked out at are from those its recipe leads to, ``junction_c``
    (L,) are those to go on with, ``design`` is the recipe that leads there, None where that is the one found, and
    ``value`` its CNR there.
    """

    residual_k: float
    junction_c: Array
    design: Design | None = None
    value: float = 0.0

    def lit_at(self, problem: Problem, others: Array) -> Array:
        """Its temperatures where an LED is lit, others elsewhere: those of LEDs in use in other recipes. (L,)"""
        drive = {} if self.design is None else self.design.drive_ma
        lit = np.array([channel.id in drive for channel in problem.channels])
        return np.where(lit, self.junction_c, others)


@dataclass(slots=True)
class _Trial:
    """A recipe, the temperatures it leads to, the best recipe there, and the CNR of both at these temperatures.

    Recipes are charges and exposure, (L+1,).
    """

    recipe: Array
    junction_c: Array
    design: Design
    best: Array
    value: float
    best_value: float

    @property
    def good(self) -> bool:
        """Whether it is as good as the best at its temperatures."""
        return self.value >= self.best_value * (1 - AS_GOOD)


def settle(problem: Problem, configuration: Configuration, found: Found, junction: Array, gap: float) -> Settled:
    """Bring one configuration's recipe and junction temperatures together, from its optimum at ``junction`` (L,)."""
    return _Settling(problem, configuration, found, gap, Assembly(problem, junction)).run()


@dataclass(slots=True)
class _Settling:
    """One configuration of a problem, and what is known of its optimum."""

    problem: Problem
    configuration: Configuration
    found: Found
    gap: float
    assembly: Assembly
    #: A design with its parts, and its numbers of emitters.
    like: Design = field(init=False)

    def run(self) -> Settled:
        """Find where the configuration settles, from its optimum at the temperatures of the assembly."""
        self.like = self._design(self.found.point)
        start = self._recipe(self.like)
        before = self.assembly.junction_c
        residual = float(np.max(np.abs(self._reached(start, before) - before), initial=0.0))
        if residual <= SETTLED_K:
            return Settled(residual, before)
        return replace(self._search(start), residual_k=residual)

    def _search(self, recipe: Array) -> Settled:
        """Go from best to best; where that does not settle, take recipe and temperatures as unknowns together.

        Where nothing settles, the recipe that does best at its own temperatures is taken.
        """
        tried: list[_Trial] = []
        for number in range(LARGEST_NUMBER_OF_TRIALS):
            tried.append(self._tried(recipe))
            if tried[-1].good:
                break
            recipe = tried[-1].best if number < PLAIN_TRIALS else (tried[-1].recipe + tried[-1].best) / 2
            joint = self._joint(tried[-1]) if number >= PLAIN_TRIALS - 1 else None
            if joint is not None:
                tried.append(self._tried(joint))
                if tried[-1].good:
                    break
        best = tried[-1] if tried[-1].good else self._climbed(tried)
        return Settled(0.0, best.junction_c, best.design, best.value)

    def _climbed(self, tried: list[_Trial]) -> _Trial:
        """The best of the recipes tried, each at its own temperatures, and of those between them."""
        best = max(tried, key=lambda trial: trial.value)
        recipe, value = best.recipe, best.value
        ends = [end for trial in tried for end in (trial.recipe, trial.best)]
        for share in (0.5, 0.25, 0.12, 0.06, 0.03):
            for end in ends:
                other = recipe + share * (end - recipe)
                found = evaluate(self.problem, self._as_design(other))
                if found.feasible and found.cnr > value:
                    recipe, value = other, found.cnr
        return best if recipe is best.recipe else max(best, self._tried(recipe), key=lambda trial: trial.value)

    def _joint(self, trial: _Trial) -> Array | None:
        """Recipe and temperatures by Newton steps from those of a trial, None where there is no way."""
        known = dict(zip((c.id for c in self.problem.channels), trial.junction_c, strict=True))
        choice = choice_of(self.problem, evaluate(self.problem, trial.design))
        choice = replace(choice, exposure_s=self.configuration.setting.level.longest_s)
        try:
            found = optimum_near(self.problem, choice, self._as_design(trial.recipe), known)
        except SolveError:
            return None
        return self._recipe(found.design(trial.design))

    def _tried(self, recipe: Array) -> _Trial:
        """The best recipe at the temperatures a recipe leads to, and how good that recipe is there."""
        for _ in range(LARGEST_NUMBER_OF_DIMMINGS):
            junction = self._reached(recipe, self.assembly.junction_c)
            self.assembly = self.assembly.at(junction)
            programs = self._programs()
            design = self._as_design(recipe)
            point = _inside(programs, point_at(self.assembly, self.configuration.setting, design, self._units))
            design = self._design(point)
            inside = self._recipe(design)
            if np.max(np.abs(self._reached(inside, junction) - junction), initial=0.0) <= SETTLED_K:
                break
            recipe = inside  # one that is too hot dims, and is cooler for it
        self._certify(programs)
        best = self._recipe(self._design(self.found.point))
        value = worst_contrast(programs, point)
        return _Trial(inside, junction, design, best, value, self.found.value)

    def _certify(self, programs: list[Program]) -> None:
        if isinstance(self.found, Built):
            space = build_space(self.problem, self.configuration.setting.camera, self.configuration.filter)
            self.found = polish_build(programs, space, replace(self.found, value=0.0), self.gap)
        elif len(programs) > 1:
            self.found = polish_pairs(programs, self.found)
        else:
            self.found = certify(programs[0], self.gap, 0.0, self._hint(programs[0]))

    def _hint(self, program: Program) -> Hint | None:
        """Start from the LEDs lit so far and the multipliers of the last ceiling."""
        if self.found.point.size != program.segments + 1:
            return None
        lit = np.unique(program.led[self.found.point[:-1] > 0])
        return Hint(self.found.proof.ceiling, lit, self.found.value) if lit.size else None

    def _programs(self) -> list[Program]:
        setting, part = self.configuration.setting, np.array([self.configuration.filter])
        found = [self.assembly.program(setting, part, pair=pair) for pair in range(len(self.problem.pairs))]
        return found if self.configuration.sign > 0 else [flipped(program) for program in found]

    def _reached(self, recipe: Array, assumed: Array) -> Array:
        """Junction temperatures a recipe leads to; LEDs that are off keep those they last had, so that none looks
        cooler than it would be in use. (L,)
        """
        return junctions_at(self.problem, self._as_design(recipe), assumed)

    @property
    def _units(self) -> Units | None:
        return getattr(self.found, "units", None)

    def _design(self, point: Array) -> Design:
        return design_at(self.assembly, self.configuration.setting, self.configuration.filter, point, self._units)

    def _recipe(self, design: Design) -> Array:
        t = design.exposure_us * 1e-6
        return np.array([*(design.drive_ma.get(c.id, 0.0) * t for c in self.problem.channels), t])

    def _as_design(self, recipe: Array) -> Design:
        t = float(recipe[-1])
        drive = {c.id: float(q) / t for c, q in zip(self.problem.channels, recipe, strict=False) if q > 0}
        return replace(self.like, exposure_us=t * 1e6, drive_ma=drive)


def offer(walk: Walk, number: int, design: Design, gap: float) -> None:
    """Have a walk keep a settled recipe of a configuration that it has certified, also where another does better there.

    That other one would lead to other temperatures, at which it does worse.
    """
    units = getattr(walk.found[number], "units", None)
    if units is not None and design != _with_units(design, units, walk.assembly.problem):
        return
    found = walk.polish(number, gap)
    programs = walk.every_pair(number)
    point = _inside(programs, point_at(walk.assembly, walk.configuration(number).setting, design, units))
    value = worst_contrast(programs, point)
    if value > 0:
        walk.found[number] = replace(found, point=point, value=value, bound=max(found.bound, value))
        walk.settled.add(number)


def _with_units(design: Design, units: Units, problem: Problem) -> Design:
    """The design with those numbers of emitters, where these are free."""
    if not free(problem):
        return design
    counts = {c.id: int(n) for c, n in zip(problem.channels, units, strict=True) if n > 0}
    return replace(design, emitters=counts)


def _inside(programs: list[Program], point: Array) -> Array:
    """A point nearly feasible, brought inside all limits."""
    if float(violation(programs[0], point[None])[0]) <= FEASIBILITY_TOLERANCE / 2:
        return point
    return feasible(programs[0], point[None])[0]
