"""Robust recipes: limits in every scenario, never worse than the nominal one, nothing above the bound."""

from __future__ import annotations

import json
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from command_line import PROBLEM, cnr

from codesign import evaluate, load_problem, solve
from codesign.errors import InfeasibleError, ProblemError
from codesign.problem.load import build_problem
from codesign.problem.tolerances import Tolerance
from codesign.program import violation
from codesign.study.draws import scenario
from codesign.study.robust import Robust, robust, scenario_draws
from codesign.study.robust_settings import on_scenarios
from codesign.study.scenarios import ScenarioAssembly, ScenarioWalk

SCENARIOS = 8


@cache
def found(name: str, quantile: float = 0.0) -> Robust:
    return robust(load_problem(name), scenarios=SCENARIOS, quantile=quantile)


CASES = [
    ("yellow-stain", 0.0),
    ("yellow-stain", 0.25),
    ("rust-outdoors", 0.0),
    ("rust-outdoors", 0.25),
    ("cap-colour", 0.0),
]


@pytest.mark.parametrize(("name", "quantile"), CASES)
def test_limits_hold_in_every_scenario_and_values_are_those_of_the_forward_model(name: str, quantile: float) -> None:
    result = found(name, quantile)
    draws = scenario_draws(result.problem, SCENARIOS, 1)
    reached = []
    for k in range(SCENARIOS):
        performance = evaluate(scenario(result.problem, draws, k), result.robust.design)
        assert performance.feasible
        reached.append(performance.cnr)
    assert result.robust.cnr == pytest.approx(np.array(reached), rel=1e-9)
    assert result.value == pytest.approx(np.sort(reached)[int(quantile * SCENARIOS)], rel=1e-9)


@pytest.mark.parametrize(("name", "quantile"), CASES)
def test_never_worse_than_the_nominal_recipe(name: str, quantile: float) -> None:
    result = found(name, quantile)
    assert result.value >= result.nominal.level(quantile)
    assert result.cautious is None or result.value >= result.cautious.level(quantile)
    assert result.price >= -1e-4  # the nominal recipe is the best as stated, but for its rounding
    assert result.junction_residual_k <= 0.5


@pytest.mark.parametrize(("name", "quantile"), CASES)
def test_gap_is_stated_and_small(name: str, quantile: float) -> None:
    result = found(name, quantile)
    assert result.bound >= result.value
    assert result.gap < (0.05 if quantile else 0.02)


def test_the_quantile_is_never_below_the_worst_case() -> None:
    for name in ("yellow-stain", "rust-outdoors"):
        assert found(name, 0.25).value >= found(name).value * (1 - 1e-6)
        assert found(name, 0.25).bound >= found(name).value


@pytest.mark.oracle
def test_no_random_recipe_exceeds_the_bound() -> None:
    """Recipes around the best: those that keep all limits in all scenarios stay below the proven bound."""
    result = found("rust-outdoors")
    problem, best = result.problem, result.robust.design
    draws, rng = scenario_draws(problem, SCENARIOS, 1), np.random.default_rng(5)
    tried = 0
    for _ in range(150):
        drive = {
            c.id: float(best.drive_ma.get(c.id, 0.0) * rng.uniform(0.7, 1.3) + 300 * rng.random())
            for c in problem.channels
        }
        drive = {led: min(ma, 3000.0) for led, ma in drive.items() if rng.random() < 0.6}
        trial = on_scenarios(problem, replace(best, drive_ma=drive, exposure_us=30.0), draws)
        tried += not trial.missed.any()
        assert trial.level() <= result.bound * (1 + 1e-3)  # junctions of other recipes differ from those of the proof
    assert tried > 10


def test_one_scenario_is_that_problem_solved() -> None:
    problem = load_problem("rust-outdoors")
    result = robust(problem, scenarios=1, gap=1e-3)
    alone = solve(scenario(problem, scenario_draws(problem, 1, 1), 0), alternatives=0)
    assert result.robust.reached[0] == pytest.approx(alone.recipe.cnr, rel=5e-3)
    assert result.bound == pytest.approx(alone.certificate.bound, rel=3e-3)


@pytest.mark.parametrize("name", ["rust-outdoors", "two-inks"])
def test_joint_programs_hold_the_limits_of_each_scenario(name: str) -> None:
    """Random points scaled into the joint limits keep those of each scenario; those on its edge touch one of them."""
    problem, rng = load_problem(name), np.random.default_rng(3)
    draws = scenario_draws(problem, 4, 2)
    worlds = [scenario(problem, draws, k) for k in range(4)]
    junction = np.full((4, len(problem.channels)), 45.0)
    assembly = ScenarioAssembly(problem, worlds, junction, range(4))
    walk = ScenarioWalk.blank(assembly)
    chosen = walk.configuration(0)
    joint = assembly.joint(chosen.setting, chosen.filter, chosen.sign)
    assert len(joint) == 4 * len(problem.pairs)
    own = [
        part.program(assembly.own(k, chosen.setting), np.array([chosen.filter]))
        for k, part in enumerate(assembly.parts)
    ]
    if any(program.segments != joint[0].segments for program in own):
        pytest.skip("a scenario drops segments")
    for _ in range(200):
        t = rng.uniform(joint[0].time_low[0], joint[0].time_high[0])
        q = joint[0].width * t * rng.random(joint[0].segments) * (rng.random(joint[0].segments) < 0.3)
        for factor in (1e-3, 0.03, 0.3, 1.0):
            y = np.append(q * factor, t)[None]
            each = max(float(violation(program, y)[0]) for program in own)
            assert (float(violation(joint[0], y)[0]) <= 0) == (each <= 0)


def test_hot_air_is_named() -> None:
    with pytest.raises(InfeasibleError, match=r"air reaches .* deg C in one of 20 scenarios"):
        robust(load_problem("moisture"))


@pytest.mark.parametrize("wrong", [{"scenarios": 0}, {"seed": -1}, {"quantile": 0.7}, {"quantile": 0.01}])
def test_bad_arguments_are_refused(wrong) -> None:
    with pytest.raises(ProblemError):
        robust(load_problem("yellow-stain"), **wrong)


def test_no_spread_no_price() -> None:
    problem = load_problem("yellow-stain")
    from codesign.problem.tolerances import SPREADS

    still = Tolerance(**dict.fromkeys(SPREADS, 0.0))
    result = robust(replace(problem, spec=problem.spec.model_copy(update={"tolerance": still})), scenarios=2)
    assert result.nominal.missed.sum() == 0
    assert result.value >= result.nominal.performance.cnr * (1 - 1e-9)
    assert abs(result.price) < 1e-4


def test_build_limits_hold(tmp_path) -> None:
    import tomllib

    table = tomllib.loads(PROBLEM + "\n[build]\nmax_led_channels = 1\n")
    result = robust(build_problem(table, folder=tmp_path), scenarios=4)
    assert len(result.robust.design.drive_ma) == 1
    assert result.gap < 0.03


def test_commands(tmp_path) -> None:
    path = tmp_path / "problem.toml"
    path.write_text(PROBLEM, encoding="utf-8")
    shown = cnr("robust", path, "--worst", "--scenarios", "4", "--recipe", tmp_path / "recipe.toml")
    assert shown.code == 0
    assert "nominal, less light" in shown.out
    assert "gap" in shown.out
    assert max(map(len, shown.out.splitlines())) <= 80
    assert cnr("check", path, tmp_path / "recipe.toml").code == 0
    table = json.loads(cnr("robust", path, "--quantile", "0.25", "--scenarios", "4", "--json").out)
    assert table["schema"] == "codesign.robust/1"
    assert table["bound"] >= table["value"] > 0
    assert all(s["limits_met"] for s in table["robust"]["scenarios"])
    wrong = cnr("robust", path, "--quantile", "0.9")
    assert wrong.code == 2
    assert wrong.err.count("\n") == 1
