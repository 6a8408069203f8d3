"""Trade-off curves: certified frontiers of CNR that neither fall nor cross, few points, agreeing with brute force."""

import itertools
from dataclasses import replace

import numpy as np
import pytest

from codesign import load_problem, solve, verify
from codesign.errors import ProblemError
from codesign.least_cost import least_cost, with_limit
from codesign.limit_use import recipe_price
from codesign.problem import Problem, build_problem
from codesign.problem.files import problem_path, read_toml
from codesign.study.fields import varied
from codesign.study.trade import AGAINST, MOST, Trade, trade
from codesign.study.trade_curve import Curve

QUANTITIES = tuple(AGAINST)


def demo(name: str, **candidates: object) -> Problem:
    """A demo problem with other candidates."""
    path = problem_path(name)
    table = read_toml(path)
    table["candidates"].update(candidates)
    return build_problem(table, folder=path.parent, where=path.name)


@pytest.fixture(scope="module")
def web() -> Problem:
    """Few parts with clear differences."""
    leds = ["orange-610-a", "red-625-a", "red-660-a"]
    return demo("fast-web", leds=leds, filters=["bp-635-60"], cameras=["fast-1mp"])


@pytest.fixture(scope="module")
def curves(web) -> dict[str, Trade]:
    return {name: trade(web, name) for name in QUANTITIES}


@pytest.mark.property
@pytest.mark.parametrize("against", QUANTITIES)
def test_a_curve_never_falls_and_values_stay_below_bounds(curves, against):
    points = curves[against].possible
    assert len(points) >= 3
    for low, high in itertools.pairwise(points):
        assert low.used < high.used and low.limit < high.limit
        assert low.optimum.cnr <= high.optimum.cnr
        assert low.optimum.bound <= high.optimum.bound
        assert not low.recipe_cnr > high.recipe_cnr
    for point in points:
        assert point.used <= point.limit * (1 + 1e-6)
        assert 0 < point.optimum.cnr <= point.optimum.bound <= point.optimum.cnr * (1 + 2e-3)
        assert not point.recipe_cnr > point.optimum.bound * (1 + 1e-6)


@pytest.mark.parametrize("against", QUANTITIES)
def test_points_equal_cold_solves_under_the_same_limit(web, curves, against):
    for point in curves[against].possible[::3]:
        cold = solve(with_limit(web, against, point.limit), alternatives=0)
        assert point.optimum.cnr == pytest.approx(cold.optimum.cnr, rel=1.1e-3)
        assert cold.optimum.cnr <= point.optimum.bound * (1 + 1e-6)


@pytest.fixture(scope="module")
def every_choice(web) -> list[tuple[int, float, float]]:
    """Number of LEDs, price and best CNR of every choice of LEDs and filter."""
    found = []
    for leds, part in itertools.product(subsets(web.channels), web.filters):
        own = replace(web, channels=leds, filters=(part,))
        best = solve(own, alternatives=0, gap=3e-3).optimum
        found.append((len(leds), recipe_price(own, best.design), best.cnr))
    return found


def subsets(items: tuple) -> list[tuple]:
    return [chosen for count in range(1, len(items) + 1) for chosen in itertools.combinations(items, count)]


@pytest.mark.parametrize("against", ["leds", "price"])
def test_steps_equal_trying_every_choice_of_parts(curves, every_choice, against):
    for point in curves[against].possible:
        cheap = [cnr for count, price, cnr in every_choice if (count if against == "leds" else price) <= point.limit]
        if cheap:  # else: ambient light alone
            assert point.optimum.cnr == pytest.approx(max(cheap), rel=4e-3)


@pytest.mark.parametrize("against", QUANTITIES)
def test_the_least_that_is_enough_agrees_with_bisection(web, curves, against):
    wanted = {"exposure": 3.0, "heat": 3.0, "leds": 3.5, "price": 3.2}[against]
    curve = curves[against] if wanted == web.spec.required_cnr else trade(web, against, required_cnr=wanted)
    least = least_cost(web, against, wanted)
    assert curve.enough.bound < least.value and least.bound < curve.enough.value  # both brackets hold the truth
    if against == "leds":
        assert (curve.enough.value, curve.enough.bound) == (least.value, least.bound)
    else:
        assert curve.enough.value == pytest.approx(least.value, rel=0.03)
        assert curve.enough.value <= curve.enough.bound * 1.03
    (mark,) = [point for point in curve.points if point.mark == "enough"]
    assert mark.recipe_cnr >= wanted
    assert mark.used == pytest.approx(curve.enough.value, rel=0.011)


def test_every_proof_of_a_curve_stands_up_to_the_checker(web):
    curve = Curve.of(web, "price", steps=True, gap=1e-3)
    curve.trace(6, 3.5, None)
    checked = [verify(solved.found.solution()) for solved in curve.solved if solved.recipe is not None]
    assert len(checked) >= 5


def test_the_own_limit_is_a_point_and_the_curve_looks_beyond_it():
    stain = varied(load_problem("yellow-stain"), {"limits.rig_heat_w": 2})
    found = trade(stain, "heat", points=5)
    (own,) = [point for point in found.points if point.mark == "own"]
    assert own.limit == found.own_limit == 2
    assert own.optimum.cnr == pytest.approx(solve(stain, alternatives=0).optimum.cnr, rel=1e-3)
    assert found.points[-1].used > 2 and found.points[-1].optimum.cnr > own.optimum.cnr
    assert len(found.points) <= 6  # and the least that is enough


def test_ambient_light_that_is_enough_asks_for_no_heat():
    found = trade(load_problem("yellow-stain"), "heat", points=3)
    assert (found.enough.value, found.enough.bound) == (0.0, 0.0)
    assert not [point for point in found.points if point.mark]


def test_a_cnr_out_of_reach_has_no_least(web):
    found = trade(web, "leds", required_cnr=50)
    assert not found.enough.reached and found.enough.value == np.inf
    assert found.enough.bound == found.points[-1].limit  # proven up to there
    assert found.most.cnr == pytest.approx(MOST * found.points[-1].recipe_cnr)
    assert found.most.reached


def test_what_the_camera_cannot_do_ends_the_curve():
    # The shortest exposure of the camera is already the best one.
    found = trade(load_problem("rust-outdoors"), "exposure")
    assert [round(point.used) for point in found.points] == [30] and found.resolves == 1
    assert found.enough.value == pytest.approx(30) and found.enough.bound == pytest.approx(30, rel=1e-5)


def test_tables_of_all_curves_have_the_same_columns(curves):
    table = curves["heat"].table()
    assert list(table.columns[:6]) == ["against", "unit", "limit", "used", "cnr", "cnr_bound"]
    assert "enough" in set(table["mark"]) and (table["unit"] == "W").all()
    assert all(list(curve.table().columns) == list(table.columns) for curve in curves.values())


@pytest.mark.parametrize(
    "against, options, words",
    [
        ("weight", {}, "known: exposure, heat, leds, price"),
        ("heat", {"points": 1}, "points is 1, must be from 2 to 100"),
        ("heat", {"required_cnr": 0.0}, "must be above 0"),
        ("heat", {"required_cnr": float("nan")}, "must be above 0"),
        ("heat", {"gap": 3.0}, "gap is 3"),
    ],
)
def test_bad_arguments_are_refused(web, against, options, words):
    with pytest.raises(ProblemError, match=words):
        trade(web, against, **options)


def test_combined_readings_are_refused():
    table = read_toml(problem_path("cap-colour"))
    table["detection"] = {"combine_channels": True}
    problem = build_problem(table, folder=problem_path("cap-colour").parent, where="combined.toml")
    with pytest.raises(ProblemError, match=r"combined\.toml: readings combined by weights have no trade-off curve"):
        trade(problem, "heat")
