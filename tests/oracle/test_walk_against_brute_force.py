"""The catalogue walk on random small problems against certifying every configuration on its own."""

import copy
import functools
from typing import Any

import numpy as np
import pytest
from random_problems import random_problem, random_table, twin

from codesign import build_problem, solve, verify
from codesign.assemble import Assembly
from codesign.certificate import check_point, no_exposure
from codesign.errors import CodesignError, InfeasibleError, SolveError
from codesign.problem import Problem
from codesign.program import Array, contrast_to_noise, stack, violation
from codesign.search.frontier import certify
from codesign.search.walk import Walk

pytestmark = pytest.mark.oracle

GAP = 1e-3
#: Rounds of a walk no small problem needs; a walk that goes round in circles fails instead of hanging.
ENDLESS = 300


def patient(rounds: int = ENDLESS):
    """Progress callback that stops an endless walk."""
    left = iter(range(rounds))

    def count(value: float, bound: float) -> None:
        assert next(left, None) is not None, f"still between {value} and {bound} after {rounds} rounds"

    return count


def assembly_of(problem: Problem) -> Assembly:
    return Assembly(problem, np.full(len(problem.channels), problem.spec.temperature.air_c))


def walk_of(problem: Problem) -> Walk:
    return Walk(assembly_of(problem), GAP, patient())


def solvable(seeds: range) -> list[int]:
    """Seeds whose problem has configurations at all."""
    found = []
    for seed in seeds:
        try:
            problem = random_problem(np.random.default_rng(seed))
            if assembly_of(problem).settings:
                found.append(seed)
        except CodesignError:
            continue
    return found


#: Random problems shared by the tests below, so that each is built and solved once.
SEEDS = solvable(range(100, 118))
FEW = SEEDS[:4]


@functools.cache
def walked(seed: int) -> tuple[Walk, int | None, Array]:
    """The walk of a random problem, its winner, and the CNR of every configuration certified on its own."""
    walk = walk_of(random_problem(np.random.default_rng(seed)))
    best = walk.best()
    values = np.zeros(walk.upper.size)
    for i in range(values.size):
        program = walk.programs(np.array([i]), coarse=False)
        found = certify(program, 1e-5)
        values[i] = found.value
        if not no_exposure(program)[0]:
            check_point(program, found.point, found.value)
    return walk, best, values


@pytest.mark.parametrize("seed", SEEDS)
def test_walk_finds_the_best_of_all_configurations(seed):
    walk, best, values = walked(seed)
    value = walk.found[best].value if best is not None else 0.0
    assert value <= max(values.max(), 0.0) * (1 + 1e-5)
    assert value >= values.max() / (1 + GAP) - 1e-12
    assert walk.upper.max() <= value * (1 + GAP) * (1 + 1e-9)
    if best is not None:
        check_point(walk.programs(np.array([best]), coarse=False), walk.found[best].point, value)


@pytest.mark.property
@pytest.mark.parametrize("seed", SEEDS)
def test_no_configuration_beats_its_bound_pruned_or_not(seed):
    walk, _, values = walked(seed)
    assert (walk.upper >= values * (1 - 1e-9)).all()


@pytest.mark.property
@pytest.mark.parametrize("seed", SEEDS[6:14])
def test_one_column_per_led_is_a_relaxation(seed):
    """The coarse optimum is never below the full one, and equals it for the same light where droop does not bind."""
    walk = walk_of(random_problem(np.random.default_rng(seed)))
    index = np.arange(walk.upper.size)
    coarse = walk.programs(index[:2], coarse=True)
    assert coarse.segments == np.unique(coarse.led).size
    for i in index[:: max(index.size // 6, 1)]:
        full = certify(walk.programs(np.array([i]), coarse=False), 1e-6)
        relaxed = certify(walk.programs(np.array([i]), coarse=True), 1e-6)
        assert relaxed.bound >= full.value * (1 - 1e-9)


@pytest.mark.property
@pytest.mark.parametrize("seed", SEEDS[6:14])
def test_every_full_recipe_is_a_coarse_recipe_of_the_same_light(seed):
    """Point by point: moving all light of an LED to its first segment keeps the signal and every limit."""
    rng = np.random.default_rng(seed)
    walk = walk_of(random_problem(rng))
    setting = walk.assembly.settings[0]
    fine, coarse = walk.assembly.segments(setting), walk.assembly.segments(setting, coarse=True)
    index = np.array([0])
    full, relaxed = walk.programs(index, coarse=False), walk.programs(index, coarse=True)
    if no_exposure(full)[0]:
        return
    best = certify(full, 1e-2).point
    for _ in range(50):
        point = best.copy()
        point[:-1] *= rng.uniform(size=full.segments) * rng.integers(0, 2, full.segments)
        assert violation(full, point[None])[0] <= 1e-9
        light = np.bincount(fine.led, fine.flux * point[:-1], minlength=fine.heat_cap.size)
        twin_point = np.append(light[coarse.led] / coarse.flux, point[-1])
        assert violation(relaxed, twin_point[None])[0] <= 1e-9
        a, b = contrast_to_noise(full, point[None])[0], contrast_to_noise(relaxed, twin_point[None])[0]
        assert abs(b) >= abs(a) * (1 - 1e-9)


@functools.cache
def answer_of(seed: int) -> float:
    """Certified CNR of an unchanged random problem."""
    return answer(random_table(np.random.default_rng(seed)))


def answer(table: dict[str, Any]) -> float:
    """Certified CNR of a problem, 0 when nothing can be seen."""
    try:
        walk = walk_of(build_problem(table))
        best = walk.best()
    except InfeasibleError:
        return 0.0
    return 0.0 if best is None else walk.found[best].value


def changed(table: dict[str, Any], path: str, value: Any) -> dict[str, Any]:
    """The table with one key set."""
    table = copy.deepcopy(table)
    *sections, key = path.split(".")
    inside = table
    for section in sections:
        inside = inside.setdefault(section, {})
    inside[key] = value
    return table


@pytest.mark.property
@pytest.mark.parametrize("seed", FEW)
def test_order_of_parts_changes_nothing(seed):
    table = random_table(np.random.default_rng(seed))
    turned = copy.deepcopy(table)
    for kind in ("leds", "filters", "cameras"):
        turned["candidates"][kind].reverse()
    turned["optics"]["f_numbers"].reverse()
    assert answer(turned) == pytest.approx(answer_of(seed), rel=1.1 * GAP)


@pytest.mark.property
@pytest.mark.parametrize("seed", FEW)
def test_swapping_target_and_background_changes_nothing(seed):
    table = random_table(np.random.default_rng(seed))
    scene = table["scene"]
    turned = changed(changed(table, "scene.target", scene["background"]), "scene.background", scene["target"])
    assert answer(turned) == pytest.approx(answer_of(seed), rel=1.1 * GAP)


@pytest.mark.property
@pytest.mark.parametrize("seed", FEW)
def test_duplicate_filters_and_cameras_change_nothing(seed):
    table = random_table(np.random.default_rng(seed))
    twice = copy.deepcopy(table)
    for kind in ("filter", "camera"):
        part = table["candidates"][f"{kind}s"][0]
        copied = twin(kind, part, "again")
        if "curve" in copied or any("curve" in channel for channel in copied.get("channels", ())):
            continue  # curve files are relative to their catalogue
        twice[kind] = [copied]
        twice["candidates"][f"{kind}s"] = [*table["candidates"][f"{kind}s"], "again"]
    assert answer(twice) == pytest.approx(answer_of(seed), rel=1.1 * GAP)


@pytest.mark.property
@pytest.mark.parametrize("seed", FEW)
def test_more_parts_are_never_worse(seed):
    table = random_table(np.random.default_rng(seed))
    value = answer_of(seed)
    more = {"leds": "blue-470-a", "filters": "nd-06", "cameras": "deep-2mp"}
    for kind, part in more.items():
        wider = changed(table, f"candidates.{kind}", [*dict.fromkeys([*table["candidates"][kind], part])])
        assert answer(wider) >= value / (1 + GAP) - 1e-12


@pytest.mark.property
@pytest.mark.parametrize("seed", FEW)
def test_tighter_limits_are_never_better(seed):
    table = random_table(np.random.default_rng(seed))
    value = answer_of(seed)
    tighter = {
        "limits.well_headroom": 0.5,
        "limits.rig_heat_w": 0.5 * table["limits"].get("rig_heat_w", 10.0),
        "limits.supply_peak_w": 0.5 * table["limits"].get("supply_peak_w", 20.0),
        "lighting.driver_max_ma": 0.5 * table["lighting"]["driver_max_ma"],
        "motion.max_blur_px": 0.4,
        "limits.junction_max_c": 70.0,
    }
    for path, bound in tighter.items():
        assert answer(changed(table, path, bound)) <= value * (1 + GAP) + 1e-12


def test_programs_with_other_columns_cannot_be_stacked():
    """A proof over configurations of two pulse levels would be checked with the current limits of the first."""
    for seed in SEEDS:
        assembly = assembly_of(random_problem(np.random.default_rng(seed)))
        levels = {setting.level.name: setting for setting in assembly.settings}
        if len(levels) > 1:
            break
    first, second = (assembly.program(setting, np.array([0])) for setting in list(levels.values())[:2])
    assert stack([first, first]).size == 2
    with pytest.raises(SolveError, match="columns"):
        stack([first, second])


@pytest.mark.parametrize("seed", SEEDS[14:17])
def test_solved_and_verified(seed):
    try:
        solution = solve(random_problem(np.random.default_rng(seed)), progress=patient())
    except InfeasibleError:
        return
    assert verify(solution).value == solution.certificate.value
