"""Two filters stacked."""

from dataclasses import replace

import numpy as np
import pytest

from codesign import evaluate, solve, verify
from codesign.problem import build_problem
from codesign.problem.choices import FilterChoices
from codesign.problem.files import problem_path, read_toml
from codesign.radiometry import transmittances


def bruise(**candidates):
    """The bruise demo with other candidates."""
    path = problem_path("bruise")
    table = read_toml(path)
    table["candidates"] = {**table["candidates"], **candidates}
    return build_problem(table, folder=path.parent, where="bruise")


def test_pair_transmits_the_product_and_costs_the_sum():
    problem = bruise(filter_pairs=True)
    singles = sum(1 for part in problem.filters if part.kind not in ("none", "stack"))
    assert len(problem.filters) == 1 + singles + singles * (singles - 1) // 2
    pair = problem.filters[len(problem.filters) - 1]
    first, second = (problem.filter(name) for name in pair.parts)
    curves = transmittances(problem, 2.8)
    ids = [part.id for part in problem.filters]
    product = curves[ids.index(first.id)] * curves[ids.index(second.id)]
    np.testing.assert_allclose(curves[ids.index(pair.id)], product, rtol=1e-12)
    assert pair.price == pytest.approx(first.price + second.price)
    assert problem.filter(f"{second.id} + {first.id}").id == pair.id


def test_pairs_are_never_worse_and_the_forward_model_agrees():
    alone, paired = solve(bruise(), alternatives=0), solve(bruise(filter_pairs="price < 1000"), alternatives=0)
    assert paired.certificate.bound >= alone.certificate.value * (1 - 1e-3)
    verify(paired)
    problem = bruise(filter_pairs=True)
    pair = problem.filters[len(problem.filters) - 1]
    design = replace(alone.recipe.design, filter=pair.id)
    assert evaluate(problem, design).cnr >= 0


def test_choices_keep_their_order_when_cut():
    problem = bruise(filter_pairs=True)
    choices = FilterChoices.of(problem.filters)
    assert [part.id for part in choices[3:6]] == [choices[k].id for k in (3, 4, 5)]
