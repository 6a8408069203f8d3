"""Tolerances: rigs together against one by one, yields against a closed form, variance shares against known ones."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from command_line import PROBLEM, RECIPE, cnr

from codesign import evaluate, load_problem
from codesign.errors import ProblemError
from codesign.problem.nudge import NUDGES
from codesign.problem.tolerances import SPREADS, Tolerance
from codesign.study.draws import cause_names, draws_from, scenario, standard_normal
from codesign.study.fleet import Fleet
from codesign.study.fleet_limits import limit_shares
from codesign.study.indices import variance_shares
from codesign.study.tolerance import Rate, run, spreads_of, tolerance


def with_tolerance(problem, **section):
    """The problem with another ``[tolerance]`` section."""
    return replace(problem, spec=problem.spec.model_copy(update={"tolerance": Tolerance(**section)}))


def only(problem, **section):
    """The problem in which nothing varies but what is given."""
    return with_tolerance(problem, **{key: 0.0 for key in SPREADS if key not in section}, **section)


def some_draws(problem, design, count, seed=3):
    listed = spreads_of(problem, design)
    return draws_from(listed, standard_normal(cause_names(listed), count, seed), count)


WIDE = {"led_ageing_percent": (0, 30), "ambient_off_probability": 0.3, "uniform": ("led_peak_nm", "filter_tilt_deg")}


@pytest.mark.parametrize("name", ["yellow-stain", "rust-outdoors", "thin-film", "two-inks", "glue-bead"])
def test_rigs_side_by_side_equal_nudged_problems(solved, name: str) -> None:
    solution = solved(name)
    problem, design = with_tolerance(solution.problem, **WIDE), solution.recipe.design
    draws = some_draws(problem, design, 12)
    fleet = Fleet(problem, design, draws)
    (_, block), *_ = fleet.blocks()
    light = block.light(np.full(12, design.exposure_us * 1e-6))
    cnr, shares = block.contrast(light), limit_shares(block, light)
    for k in range(12):
        expected = evaluate(scenario(problem, draws, k), design)
        signed = expected.cnr if expected.sign == fleet.nominal.sign else 0.0
        assert cnr[k] == pytest.approx(signed, rel=1e-9)
        assert sorted(shares) == sorted(limit.name for limit in expected.limits)
        for limit in expected.limits:
            assert shares[limit.name][k] == pytest.approx(limit.share, rel=1e-9)


def test_rigs_side_by_side_with_filter_pairs_and_few_emitters(solved) -> None:
    solution = solved("yellow-stain")
    spec = solution.problem.spec
    spec = spec.model_copy(
        update={
            "candidates": spec.candidates.model_copy(update={"filter_pairs": True}),
            "optics": spec.optics.model_copy(update={"filter_position": "sensor", "field_angle_deg": 0.0}),
        }
    )
    from codesign.problem.load import build_problem

    problem = build_problem(spec.model_dump(exclude_defaults=True), folder=solution.problem.folder)
    design = replace(solution.recipe.design, filter="bp-405-35 + window-clear")
    draws = some_draws(problem, design, 6)
    outcome = run(Fleet(problem, design, draws))
    for k in range(6):
        assert outcome.cnr[k] == pytest.approx(evaluate(scenario(problem, draws, k), design).cnr, rel=1e-9)


def test_same_seed_same_rigs(solved) -> None:
    solution = solved("yellow-stain")
    first, again, other = (
        tolerance(solution.problem, solution.recipe.design, draws=500, seed=seed) for seed in (7, 7, 8)
    )
    assert np.array_equal(first.outcome.cnr, again.outcome.cnr)
    assert (first.passed, first.causes) == (again.passed, again.causes)
    assert not np.array_equal(first.outcome.cnr, other.outcome.cnr)


def test_yield_equals_closed_form_of_one_gaussian_scale(solved) -> None:
    """A factor g on all light: CNR ≥ r means v² g² ≥ r² (c + s g + q g²), a quadratic; the yield is a normal tail."""
    from scipy.special import ndtr

    solution = solved("yellow-stain")
    problem = only(solution.problem, quantum_efficiency_percent=20)
    best = solution.recipe.design
    design = replace(best, drive_ma={led: ma / 4 for led, ma in best.drive_ma.items()})  # far below the well
    nominal = evaluate(problem, design)
    mean = {name: (a + b) / 2 for name, (a, b) in nominal.noise.items()}
    shot = mean["light shot noise"] + mean["ambient shot noise"]
    square = mean["photo-response fixed pattern"] + mean["surface clutter"]
    constant = sum(mean.values()) - shot - square
    required = 0.97 * nominal.cnr
    a = nominal.signal_e**2 - required**2 * square
    factor = (required**2 * shot + np.sqrt(required**4 * shot**2 + 4 * a * required**2 * constant)) / (2 * a)
    expected = float(ndtr((1 - factor) / 0.2))
    assert 0.05 < expected < 0.95
    found = tolerance(problem, design, draws=20_000, required=required)
    assert found.within.share == 1.0
    assert found.passed.share == pytest.approx(expected, abs=4 * np.sqrt(expected * (1 - expected) / 20_000))
    assert found.passed.low < expected < found.passed.high
    assert [cause.cause for cause in found.causes] == ["quantum efficiency"]
    assert found.causes[0].first_order == pytest.approx(1, abs=0.02)


@pytest.mark.oracle
@pytest.mark.parametrize(("hits", "count"), [(0, 50), (1, 50), (37, 50), (50, 50)])
def test_confidence_interval_against_scipy(hits: int, count: int) -> None:
    from scipy.stats import binomtest

    expected = binomtest(hits, count).proportion_ci(method="exact")
    rate = Rate.of(hits, count)
    assert (rate.low, rate.high) == pytest.approx((expected.low, expected.high), abs=1e-9)


def test_variance_shares_of_a_known_function() -> None:
    """z1 + 2 z2 + z1 z3 has variance 1 + 4 + 1: first orders 1/6, 4/6, 0, totals 2/6, 4/6, 1/6."""
    found = variance_shares(lambda z: z["a"] + 2 * z["b"] + z["a"] * z["c"], ("a", "b", "c"), 4096, 1)
    shares = {share.cause: share for share in found}
    assert [share.cause for share in found] == ["b", "a", "c"]
    for name, first, total in (("a", 1 / 6, 2 / 6), ("b", 4 / 6, 4 / 6), ("c", 0, 1 / 6)):
        assert shares[name].first_order == pytest.approx(first, abs=0.02)
        assert shares[name].total == pytest.approx(total, abs=0.02)
        low, high = shares[name].total_interval
        assert low < total < high
    assert variance_shares(lambda z: np.ones_like(z["a"]), ("a",), 64, 1) == ()


def test_retuned_exposure_is_the_longest_allowed(solved) -> None:
    solution = solved("bruise")
    problem, design = solution.problem, solution.recipe.design
    draws = some_draws(problem, design, 8)
    outcome = run(Fleet(problem, design, draws), retune=True)
    step = problem.camera(design.camera).exposure_step_us
    for k in range(8):
        rig, exposure = scenario(problem, draws, k), round(float(outcome.exposure_s[k]) * 1e6 / step) * step
        own = evaluate(rig, replace(design, exposure_us=exposure))
        assert own.feasible
        assert outcome.cnr[k] == pytest.approx(own.cnr, rel=1e-9)
        # A limit counts as met up to 1e-6 over it: two steps longer must break one.
        assert not evaluate(rig, replace(design, exposure_us=exposure + 2 * step)).feasible


def test_retuned_exposure_raises_the_yield(solved) -> None:
    solution = solved("bruise")
    fixed, retuned = (
        tolerance(solution.problem, solution.recipe.design, draws=1000, retune=retune) for retune in (False, True)
    )
    assert retuned.passed.share > 0.99 > fixed.passed.share
    assert fixed.missed
    assert not retuned.missed


def test_spreads_are_as_stated(solved) -> None:
    solution = solved("rust-outdoors")
    problem, design = solution.problem, solution.recipe.design
    problem = only(
        problem, led_flux_percent=10, led_flux_shared=0.5, led_peak_nm=4, led_peak_shared=0.0, uniform=("led_peak_nm",),
        ambient_off_probability=0.25, air_k=None, air_c_range=(20, 40), led_ageing_percent=(10, 20),
    )  # fmt: skip
    draws = some_draws(problem, design, 20_000)
    first, second, *_ = (led for led, ma in design.drive_ma.items() if ma > 0)
    bins = {part: amounts for name, part, amounts in draws.entries if name == "LED flux"}
    assert np.std(bins[first]) == pytest.approx(0.1, rel=0.03)
    assert np.corrcoef(bins[first], bins[second])[0, 1] == pytest.approx(0.5, abs=0.03)
    assert bins[None].min() >= -0.2
    assert bins[None].max() <= -0.1
    peak = draws.shift("LED peak", first)
    assert np.max(np.abs(peak)) <= 4
    assert np.std(peak) == pytest.approx(4 / np.sqrt(3), rel=0.02)
    assert np.mean(draws.factor("ambient light on or off") == 0) == pytest.approx(0.25, abs=0.015)
    air = problem.spec.temperature.air_c + draws.shift("air temperature")
    assert 20 <= air.min() < 20.1
    assert 39.9 < air.max() <= 40


def test_every_nudge_has_a_spread() -> None:
    grouped = {"target reflectance", "background reflectance"}
    assert set(SPREADS.values()) == set(NUDGES) - grouped


@pytest.mark.parametrize(
    ("section", "said"),
    [
        ({"led_ageing_percent": (30, 10)}, "least, most"),
        ({"air_k": 3, "air_c_range": (10, 20)}, "only one of the two"),
        ({"uniform": ("led_flux",)}, "uniform names 'led_flux'"),
        ({"led_flux_shared": 1.5}, "less than or equal to 1"),
    ],
)
def test_bad_sections_are_refused(section, said: str) -> None:
    with pytest.raises(ValueError, match=said):
        Tolerance(**section)


def test_bad_arguments_are_refused(solved) -> None:
    solution = solved("yellow-stain")
    for wrong in ({"draws": 0}, {"seed": -1}, {"required": -2.0}):
        with pytest.raises(ProblemError, match="must be"):
            tolerance(solution.problem, solution.recipe.design, **wrong)


def test_nothing_varies_nothing_is_lost(solved) -> None:
    solution = solved("yellow-stain")
    found = tolerance(only(solution.problem), solution.recipe.design, draws=10)
    assert found.causes == ()
    assert found.outcome.cnr == pytest.approx(np.full(10, solution.recipe.cnr), rel=1e-12)
    assert found.passed.share == 1.0


def test_no_light_at_all() -> None:
    problem = load_problem("yellow-stain")
    from codesign import Design

    design = Design(
        camera="mono-5mp", channel="mono", gain_db=0.0, filter="none", f_number=4.0, exposure_us=12000.0, drive_ma={}
    )
    found = tolerance(problem, design, draws=20)
    expected = evaluate(problem, design).cnr
    assert found.nominal.cnr == expected
    assert np.isfinite(found.outcome.cnr).all()


def test_command_reports_yield_and_causes() -> None:
    result = cnr("tolerance", "yellow-stain", "--draws", "200", "--required", "7.2")
    assert result.code == 0
    assert "reach CNR 7.2 within all limits" in result.out
    assert "main causes" in result.out
    assert max(map(len, result.out.splitlines())) <= 80


def test_command_gives_json_of_a_recipe_file(tmp_path: Path) -> None:
    (tmp_path / "problem.toml").write_text(PROBLEM + "\n[tolerance]\nled_flux_percent = 5\n", encoding="utf-8")
    (tmp_path / "recipe.toml").write_text(RECIPE, encoding="utf-8")
    files = tmp_path / "problem.toml", tmp_path / "recipe.toml"
    result = cnr("tolerance", *files, "--draws", "50", "--json", "--retune-exposure")
    assert result.code == 0
    table = json.loads(result.out)
    assert table["schema"] == "codesign.tolerance/1"
    assert 0 <= table["yield"]["low"] <= table["yield"]["share"] <= table["yield"]["high"] <= 1
    assert table["retuned"]
    assert next(s for s in table["spreads"] if s["quantity"] == "LED flux")["size"] == 0.05
    wrong = cnr("tolerance", files[0], files[1], "--draws", "0")
    assert wrong.code == 2
    assert wrong.err.count("\n") == 1
