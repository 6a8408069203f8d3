"""Build limits: each just inside and outside, and branch and bound against trying every whole choice."""

import itertools
from dataclasses import replace

import numpy as np
import pytest
from oracle.random_programs import any_program

from codesign import evaluate, load_problem, solve, verify
from codesign.build import Box, BuildLimit
from codesign.certificate_build import BuildLeaf, BuildSpace, BuildSplit, restricted, tree_bound
from codesign.errors import CertificateError, InfeasibleError, ProblemError
from codesign.limit_use import recipe_price
from codesign.problem import build_problem
from codesign.problem.files import problem_path, read_toml
from codesign.search.build import certify_build
from codesign.search.frontier import certify


def random_space(rng, leds: int) -> BuildSpace:
    """One to three limits over LEDs with 1 to 3 units, some of them must-have."""
    units = rng.integers(1, 4, leds) if rng.uniform() < 0.5 else np.ones(leds, dtype=np.int64)
    ones, none = np.ones(leds), np.zeros(leds)
    limits = [
        BuildLimit(name="LED channels", unit="", first=ones, each=none, bound=float(rng.integers(1, 4))),
        BuildLimit(name="board slots", unit="", first=none, each=rng.integers(1, 4, leds) * 1.0, bound=6.0),
        BuildLimit(name="price", unit="", first=none, each=rng.uniform(0, 3, leds), bound=float(rng.uniform(2, 8))),
    ]
    chosen = tuple(limit for limit in limits if rng.uniform() < 0.7) or (limits[0],)
    low = (rng.uniform(size=leds) < 0.1).astype(np.int64)
    return BuildSpace(units, chosen, Box(low, units))


@pytest.mark.parametrize("seed", range(50))
def test_branch_and_bound_equals_trying_every_choice(seed):
    rng = np.random.default_rng(seed)
    program = any_program(rng, leds=int(rng.integers(2, 5)))
    space = random_space(rng, program.heat_cap.size)
    best = 0.0
    for choice in itertools.product(*(range(a, b + 1) for a, b in zip(space.root.low, space.units, strict=True))):
        units = np.array(choice)
        fits = all(limit.cost(units).sum() <= limit.bound * (1 + 1e-9) for limit in space.limits)
        assert fits == space.allows(units)
        if fits:
            best = max(best, certify(restricted(program, space, Box(units, units))[0], 1e-5).value)
    found = certify_build([program], space, 1e-3)
    assert found.value <= best * (1 + 2e-5) + 1e-7
    assert found.bound >= best * (1 - 1e-6) - 1e-7
    assert found.bound <= max(found.value * (1 + 1e-3), 1e-7)
    assert tree_bound([program], space, found.proof) == pytest.approx(found.bound, rel=1e-9)


def test_checker_refuses_a_tree_that_leaves_something_out():
    rng = np.random.default_rng(4)
    program = any_program(rng, leds=3)
    ones = np.ones(3, dtype=np.int64)
    limit = BuildLimit(name="LED channels", unit="", first=np.ones(3), each=np.zeros(3), bound=2.0)
    space = BuildSpace(ones, (limit,), Box(0 * ones, ones))
    with pytest.raises(CertificateError, match="said to be empty"):
        tree_bound([program], space, BuildLeaf(None))
    with pytest.raises(CertificateError, match="outside their range"):
        tree_bound([program], space, BuildSplit(0, 1, BuildLeaf(None), BuildLeaf(None)))


def bruise(**build):
    """The bruise demo with a build section."""
    path = problem_path("bruise")
    return build_problem({**read_toml(path), "build": build}, folder=path.parent, where="bruise")


@pytest.mark.parametrize(
    ("build", "name"),
    [
        ({"max_led_channels": 1}, "LED channels"),
        ({"board_slots": 7, "emitters": "free"}, "board slots"),
        ({"price_budget": 915}, "price"),
    ],
)
def test_limit_holds_in_the_recipe_and_the_proof_is_checked(build, name):
    solution = solve(bruise(**build), alternatives=0)
    use = next(limit for limit in solution.recipe.limits if limit.name == name)
    assert use.met
    assert solution.certificate.gap <= 1e-3
    assert verify(solution).value == pytest.approx(solution.certificate.value)


def test_each_limit_is_met_at_its_bound_and_missed_just_below():
    problem = bruise(max_led_channels=2, board_slots=12, price_budget=5000)
    design = solve(bruise(max_led_channels=2), alternatives=0).recipe.design
    assert evaluate(problem, design).feasible
    lit = len(design.drive_ma)
    assert lit == 2
    price = recipe_price(problem, design)
    for key, value in (("max_led_channels", 1), ("board_slots", 11), ("price_budget", price * (1 - 1e-4))):
        spec = problem.spec.model_copy(update={"build": problem.spec.build.model_copy(update={key: value})})
        assert len(evaluate(replace(problem, spec=spec), design).violated) == 1
    at_price = problem.spec.build.model_copy(update={"price_budget": price})
    assert evaluate(replace(problem, spec=problem.spec.model_copy(update={"build": at_price})), design).feasible


def test_must_have_parts_are_bought_and_must_not_parts_left():
    free = solve(load_problem("bruise"), alternatives=0).recipe.design
    without = solve(bruise(must_not=[free.filter]), alternatives=0)
    assert without.recipe.design.filter != free.filter
    needed = next(f.id for f in load_problem("bruise").filters if f.id not in ("none", free.filter))
    assert solve(bruise(must_have=[needed]), alternatives=0).recipe.design.filter == needed


def test_conflicts_and_unknown_names_are_said():
    with pytest.raises(ProblemError, match=r"must_have names 'no-such'"):
        bruise(must_have=["no-such"])
    leds = [channel.id for channel in load_problem("bruise").channels[:2]]
    with pytest.raises(InfeasibleError, match="LED channels"):
        solve(bruise(max_led_channels=1, must_have=leds))
    with pytest.raises(InfeasibleError, match="price"):
        solve(bruise(price_budget=10))


@pytest.mark.parametrize(("demo", "price"), [("yellow-stain", 100.0), ("fast-web", 1460.0)])
def test_money_for_the_camera_alone_leaves_ambient_light(demo, price):
    problem = load_problem(demo)
    build = problem.spec.build.model_copy(update={"price_budget": price})
    solution = solve(replace(problem, spec=problem.spec.model_copy(update={"build": build})), alternatives=0)
    assert not solution.recipe.leds and solution.recipe.cnr > 0
    verify(solution)
