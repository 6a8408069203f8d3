"""Least price, heat or exposure for a required CNR."""

import pytest

from codesign import load_problem, verify
from codesign.errors import InfeasibleError, ProblemError
from codesign.least_cost import least_cost, used


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
    with pytest.raises(ProblemError, match="must be one of price, heat, exposure"):
        least_cost(load_problem("bruise"), "weight", 4)
