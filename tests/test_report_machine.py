"""The JSON result: every key documented, plain values, equal to the result itself."""

import json
import math
import re
from dataclasses import replace

import pytest
from demo_names import DEMOS

from codesign import solution_dict, verify
from codesign.report import machine


def keys_of(value) -> set[str]:
    """All keys of a result but the names of parts, which are the user's."""
    if isinstance(value, list):
        return set().union(*(keys_of(inner) for inner in value)) if value else set()
    if not isinstance(value, dict):
        return set()
    found = set()
    for key, inner in value.items():
        found.add(key)
        if key not in ("drive_ma", "junction_c", "emitters"):
            found |= keys_of(inner)
    return found


@pytest.mark.parametrize("name", DEMOS)
def test_result_is_plain_json_and_survives_it(name, solved):
    table = solution_dict(solved(name))
    assert json.loads(machine.as_json(table)) == table


def test_every_key_is_documented(solved):
    solution = solved("yellow-stain")
    tables = solution_dict(solution, verify(solution)), machine.performance_dict(solution.problem, solution.recipe)
    words = set(re.findall(r"[a-z0-9_]+", machine.__doc__))
    assert keys_of(list(tables)) <= words


def test_keys_stay_as_they_are(solved):
    table = solution_dict(solved("yellow-stain"))
    assert list(table) == [
        "schema",
        "program",
        "problem",
        "recipe",
        "optimum",
        "required_cnr_met",
        "certificate",
        "verified",
        "rounding_loss",
        "binding",
        "alternatives",
        "left_out",
        "cautions",
        "seconds",
    ]
    assert table["schema"] == "codesign.solution/1"


@pytest.mark.parametrize("name", DEMOS)
def test_numbers_are_those_of_the_solution(name, solved):
    solution = solved(name)
    table = solution_dict(solution)
    assert table["recipe"]["cnr"] == solution.recipe.cnr
    assert table["certificate"]["cnr_bound"] == solution.certificate.bound
    assert table["certificate"]["gap"] == pytest.approx(
        table["certificate"]["cnr_bound"] / table["certificate"]["cnr"] - 1
    )
    assert table["recipe"]["settings"]["drive_ma"] == dict(solution.recipe.design.drive_ma)
    assert math.isclose(sum(term["share"] for term in table["recipe"]["noise"]), 1)
    values = [entry["cnr"] for entry in table["alternatives"]]
    assert values == sorted(values, reverse=True)
    assert table["binding"] == list(solution.binding)


def test_numbers_that_do_not_exist_are_null(solved):
    solution = solved("yellow-stain")
    limit = replace(solution.recipe.limits[0], share=math.inf)
    recipe = replace(solution.recipe, limits=(limit,))
    table = machine.performance_dict(solution.problem, recipe)
    assert table["limits"][0]["share"] is None
    machine.as_json(table)
