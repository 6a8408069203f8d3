"""Least price, heat or exposure for a required CNR."""

import pytest

from codesign import load_problem, solve, verify
from codesign.errors import InfeasibleError, ProblemError
from codesign.least_cost import least_cost, limited_to, used


@pytest.mark.parametrize("quantity", ["price", "exposure"])
def test_recipe_reaches_the_cnr_and_the_bound_is_below(quantity):
    found = least_cost(load_problem("bruise"), quantity, 4.5, gap=0.05)
    assert found.solution.recipe.cnr >= 4.5
    assert found.solution.recipe.feasible
    assert 0 < found.bound <= found.value
    assert used(found.solution.problem, quantity, found.solution.recipe) == found.value
    verify(found.solution)


def test_greatest_cnr_is_said_when_it_cannot_be_reached():
    with pytest.raises(InfeasibleError, match=r"CNR 50 cannot be reached; the greatest reached is 5\."):
        least_cost(load_problem("bruise"), "heat", 50)


def test_unknown_quantity_is_refused():
    with pytest.raises(ProblemError, match="must be one of price, heat, exposure, leds"):
        least_cost(load_problem("bruise"), "weight", 4)


def test_fewest_led_channels_agree_with_counting():
    # fast-web lights five channels at best; how many are enough is found here one by one.
    problem = load_problem("fast-web")
    found = least_cost(problem, "leds", 3.9)
    reached = [solve(limited_to(problem, "leds", n), alternatives=0) for n in (1, 2, 3)]
    enough = [solution.recipe.cnr >= 3.9 for solution in reached]
    assert found.value == 1 + enough.index(True) == 3
    assert found.bound == 2 and reached[1].certificate.bound < 3.9
    assert len(found.solution.recipe.leds) == 3


def test_what_setting_steps_cost_does_not_keep_the_bound_away():
    # In steps of 10 mA the recipe misses what the optimum reaches; the proof does not look at steps.
    found = least_cost(load_problem("cap-colour"), "heat")
    below = solve(limited_to(load_problem("cap-colour"), "heat", found.bound), alternatives=0)
    assert below.certificate.bound < found.required_cnr
    assert found.gap < 0.02


def test_light_too_dim_to_set_is_left_out_of_the_proof_as_well():
    # Ambient light alone is enough here; what a solver leaves on an LED no recipe can hold.
    solution = least_cost(load_problem("yellow-stain"), "heat", 4).solution
    verify(solution)
    assert solution.certificate.forward_residual < 1e-9
    assert not solution.optimum.design.drive_ma and not solution.point[:-1].any()
