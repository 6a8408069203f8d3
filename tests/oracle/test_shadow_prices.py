"""Multipliers against central differences of problems solved again: random programs, and every demo."""

from dataclasses import dataclass, replace

import numpy as np
import pytest
from demo_names import DEMOS
from random_programs import any_program

from codesign.assemble import exposure_window
from codesign.errors import CatalogError, SolveError
from codesign.limits import sum_limits
from codesign.problem.nudge import NUDGES, nudged
from codesign.program import Program, row_scale, violation
from codesign.recipe_choice import choice_of
from codesign.search.frontier import certify
from codesign.search.stationary import Stationary, stationary
from codesign.solve_joint import Optimum, optimum_near, settled
from codesign.study.binding import what_binds
from codesign.study.limit_moves import WELL_HEADROOM, moved
from codesign.study.tangent import Tangent

pytestmark = pytest.mark.oracle

#: Share by which bounds are moved, and relative gap of the proof that a re-solved optimum is the best there is.
STEP, GAP = 1e-3, 1e-6
#: Steps of nudges by unit.
NUDGE = {"1": 1e-3, "nm": 0.02, "deg": 0.02, "K": 0.05}


@dataclass(frozen=True)
class Bound:
    """One bound of a program, and the position of its multiplier."""

    position: int
    scaled: str
    index: int | None

    def moved(self, program: Program, factor: float) -> Program:
        value = getattr(program, self.scaled).copy()
        where = (0, self.index) if value.ndim == 2 else (0 if self.index is None else self.index,)
        value[where] *= factor
        return replace(program, **{self.scaled: value})

    def elasticity(self, program: Program, found: Stationary) -> float:
        """Relative gain of CNR per relative change of the bound, from the multipliers."""
        price = found.price[self.position]
        if self.scaled == "bounds":
            return price * program.bounds[0, self.index] / row_scale(program)[0, self.index]
        if self.scaled == "heat_cap":
            return price * program.heat_cap[self.index] / found.scale.heat[self.index]
        if self.scaled == "width":
            return price * found.u[-1]
        return price if self.scaled == "time_high" else -price * program.time_low[0] / program.time_high[0]


def bounds_of(program: Program) -> list[Bound]:
    rows, leds, n = program.rows.shape[1], program.heat_cap.size, program.segments
    found = [Bound(i, "bounds", i) for i in range(rows) if program.bounds[0, i] > 0]
    found += [Bound(rows + i, "heat_cap", i) for i in range(leds) if np.isfinite(program.heat_cap[i])]
    found += [Bound(rows + leds + j, "width", j) for j in range(n)]
    if program.time_high[0] > program.time_low[0] * (1 + 2 * STEP):
        found += [Bound(-2, "time_high", None), Bound(-1, "time_low", None)]
    return found


def solved_again(program: Program, start: np.ndarray) -> tuple[float, Stationary] | None:
    """Log CNR of a program, certified; None where the optimum cannot be polished."""
    proven = certify(program, GAP)
    found = stationary([program], proven.point)
    assert violation(program, found.point[None])[0] <= 1e-9
    assert proven.value * (1 - 1e-9) <= np.exp(found.value) <= proven.bound * (1 + 1e-9)
    return found.value, found


def test_prices_of_random_programs_equal_central_differences():
    """100 programs with contrast; each limit that binds and a few that do not, where the same limits go on binding."""
    rng = np.random.default_rng(4)
    programs, compared, skipped, worst = 0, 0, 0, 0.0
    while programs < 100:
        program = any_program(rng)
        proven = certify(program, GAP)
        if proven.value <= 0:
            continue
        programs += 1
        found = stationary([program], proven.point)
        bounds = bounds_of(program)
        binding = [b for b in bounds if found.price[b.position] > 1e-6]
        idle = [b for b in bounds if not found.active[b.position]]
        for bound in (*binding[:3], *idle[:1]):
            ends = [solved_again(bound.moved(program, 1 + sign * STEP), found.point) for sign in (-1, 1)]
            if any((end[1].active != found.active).any() for end in ends):
                skipped += 1
                continue
            difference = (ends[1][0] - ends[0][0]) / (2 * STEP)
            price = bound.elasticity(program, found)
            assert price == pytest.approx(difference, rel=0.01, abs=1e-5), (programs, bound)
            if abs(difference) > 1e-3:
                worst = max(worst, abs(price / difference - 1))
            compared += 1
    assert compared > 200
    assert skipped < 0.1 * compared
    assert worst < 0.002


def filling(optimum: Optimum) -> list[int]:
    """Which drive segments are empty, partly filled, full: a corner of the droop curve binds between two of these."""
    program, y = optimum.state.programs[0], optimum.state.point
    share = y[:-1] / (program.width * y[-1])
    return [0 if s < 1e-6 else 2 if s > 1 - 1e-6 else 1 for s in share]


def same(a: Optimum, b: Optimum) -> bool:
    """Whether the same limits bind, corners of droop curves included."""
    return what_binds(a) == what_binds(b) and filling(a) == filling(b)


def cases(optimum: Optimum):
    """Name, step and nudged problem by signed amount: all quantities (of one lit LED), all limits that bind."""
    rig, setting, binding = optimum.rig, optimum.rig.setting, what_binds(optimum)
    lit = next(name for name in rig.leds if f"LED {name} lit" in binding)
    for name, parameter in NUDGES.items():
        part = lit if parameter.owner == "led" else None
        yield name, NUDGE[parameter.unit], lambda x, name=name, part=part: nudged(rig.problem, name, x, part)
    names = [name for name in binding if name.partition(", ")[0] in ("current", "junction")][:2]
    names += [name for name in binding if ", " not in name and " lit" not in name and not name.startswith("saturation")]
    names += [WELL_HEADROOM] if any(name.startswith("well, ") for name in binding) else []
    for name in names:
        step = STEP * bound_size(optimum, name)
        yield name, step, lambda x, name=name: moved(rig.problem, setting, name, x)


def bound_size(optimum: Optimum, name: str) -> float:
    """Rough size of a bound in its unit, for the step."""
    problem, setting = optimum.rig.problem, optimum.rig.setting
    window = exposure_window(problem, setting)
    known = {limit.name: abs(limit.bound) for limit in (window.low, window.high, *sum_limits(problem))}
    return known.get(name, 50.0)


@pytest.mark.parametrize("name", DEMOS)
def test_demo_derivatives_equal_central_differences(solved, name):
    """Every quantity and limit, temperatures settled again, each re-solved optimum checked to be the best there is."""
    solution = solved(name)
    try:
        choice = choice_of(solution.problem, solution.optimum)
    except SolveError:
        pytest.skip("several readings are combined")
    optimum = optimum_near(solution.problem, choice, solution.optimum.design, solution.certificate.junction_c)
    assert optimum.cnr == pytest.approx(solution.optimum.cnr, rel=1e-4)
    tangent, compared, kinks = Tangent(optimum), 0, []
    for label, step, problem in cases(optimum):
        ends = [again(optimum, problem, amount) for amount in (-step, step)]
        if None in ends:  # a corner within the step: closer by
            ends = [again(optimum, problem, amount) for amount in (-0.1 * step, 0.1 * step)]
        # Where a data sheet or a corner of the droop curve ends at the limit, the lower side alone is compared.
        if ends[1] is None and ends[0] is not None and ", " in label:
            ends[1] = optimum, 0.0
        if None in ends:
            kinks.append(label)
            continue
        (low, start), (high, end) = ends
        difference = (high.state.value - low.state.value) / (end - start)
        slope = tangent.slope(low.rig.problem, high.rig.problem, end - start)
        slack = 1e-5 / (NUDGES[label].sigma if label in NUDGES else 50 * step)
        assert slope == pytest.approx(difference, rel=0.01, abs=slack), label
        if compared % 6 == 0 and len(low.state.programs) == 1:
            assert low.cnr >= certify(low.state.programs[0], 1e-5).value * (1 - 1e-5)
        compared += 1
    assert compared >= 0.75 * (compared + len(kinks)), kinks


def again(optimum: Optimum, problem, amount: float) -> tuple[Optimum, float] | None:
    """Optimum of a nudged problem, and the amount; None where there is none or something else binds there."""
    try:
        rig = optimum.rig.at(problem(amount))
        junction = optimum.state.junction_c
        if rig.programs(junction)[0].segments + 1 != optimum.state.u.size:
            return None
        found = settled(rig, optimum.state.point, junction)
    except (CatalogError, SolveError):
        return None
    return (found, amount) if same(found, optimum) else None
