"""Settable recipes: whole steps, inside every limit, close to the proven bound."""

import pytest
from demo_names import DEMOS, FOLDER
from small_problems import small_problem

from codesign import build_problem, evaluate, solve
from codesign.errors import InfeasibleError
from codesign.problem import read_toml
from codesign.recipe import settable


def in_whole_steps(value: float, step: float) -> bool:
    return abs(value / step - round(value / step)) < 1e-6


@pytest.mark.parametrize("name", DEMOS)
def test_recipe_is_in_whole_steps(solved, name):
    solution = solved(name)
    design, problem = solution.recipe.design, solution.problem
    assert in_whole_steps(design.exposure_us, problem.camera(design.camera).exposure_step_us)
    for milliamperes in design.drive_ma.values():
        assert milliamperes > 0
        assert in_whole_steps(milliamperes, problem.spec.lighting.drive_step_ma)


@pytest.mark.parametrize("name", DEMOS)
def test_recipe_keeps_the_parts_of_the_optimum(solved, name):
    solution = solved(name)
    kept = ("camera", "channel", "gain_db", "filter", "f_number")
    optimum, recipe = solution.optimum.design, solution.recipe.design
    assert [getattr(recipe, key) for key in kept] == [getattr(optimum, key) for key in kept]


@pytest.mark.parametrize("name", DEMOS)
def test_recipe_is_feasible_and_its_stated_loss_is_true(solved, name):
    solution = solved(name)
    again = evaluate(solution.problem, solution.recipe.design)
    assert again.feasible
    assert again.cnr == pytest.approx(solution.recipe.cnr, rel=1e-12)
    assert solution.rounding_loss == pytest.approx(1 - again.cnr / solution.certificate.bound, abs=1e-12)
    assert 0 <= solution.rounding_loss < 5e-3


STEPS = (0.5, 1.0, 7.0, 20.0, 60.0, 150.0)


@pytest.mark.property
@pytest.mark.parametrize("step_ma", STEPS)
@pytest.mark.parametrize("name", ["yellow-stain", "rust-outdoors", "cap-colour"])
def test_coarser_drivers_still_get_a_feasible_recipe(solved, name, step_ma):
    """Rounding never goes over a limit, and never beats the bound, however coarse the current can be set."""
    solution = solved(name)
    table = read_toml(FOLDER / f"{name}.toml")
    table["lighting"]["drive_step_ma"] = step_ma
    problem = build_problem(table, folder=FOLDER)
    design, performance = settable(problem, solution.optimum.design)
    assert performance.feasible
    assert performance.cnr <= solution.certificate.bound
    assert all(in_whole_steps(ma, step_ma) for ma in design.drive_ma.values())
    assert evaluate(problem, design).cnr == performance.cnr


@pytest.mark.property
@pytest.mark.parametrize("name", ["yellow-stain", "cap-colour"])
def test_finer_steps_come_closer_to_the_optimum(solved, name):
    solution = solved(name)
    table = read_toml(FOLDER / f"{name}.toml")
    lost = []
    for step_ma in (100.0, 0.01):
        table["lighting"]["drive_step_ma"] = step_ma
        _, performance = settable(build_problem(table, folder=FOLDER), solution.optimum.design)
        lost.append(1 - performance.cnr / solution.optimum.cnr)
    assert lost[1] <= lost[0]
    assert lost[1] < 2e-4


def test_optimum_already_in_whole_steps_stays(tmp_path):
    problem = small_problem(tmp_path, {"timing.exposure_max_us": 1000.0, "candidates.leds": ["red"]})
    solution = solve(problem)
    assert solution.recipe.design.exposure_us == 1000.0
    assert solution.recipe.design.drive_ma == {"red": 200.0}
    assert solution.recipe.cnr == pytest.approx(solution.optimum.cnr, rel=1e-9)


def test_recipe_sees_what_rounding_up_would_break(tmp_path):
    """The optimum sits between steps at a heat limit: the recipe takes the step below."""
    changes = {"limits.rig_heat_w": 0.1057, "timing.exposure_max_us": 1000.0, "candidates.leds": ["red"]}
    solution = solve(small_problem(tmp_path, changes))
    assert solution.optimum.design.drive_ma["red"] == pytest.approx(105.7, rel=1e-6)
    assert solution.recipe.design.drive_ma == {"red": 105.0}


def test_no_recipe_where_no_step_fits(tmp_path):
    """The camera cannot set an exposure as short as the motion wants."""
    changes = {
        "camera.exposure_step_us": 100,
        "motion.speed_mm_per_s": 500.0,
        "motion.max_blur_px": 1.0,
        "candidates.leds": ["red"],
    }
    with pytest.raises(InfeasibleError, match="whole steps") as caught:
        solve(small_problem(tmp_path, changes))
    assert list(caught.value.limits) == ["setting steps"]
