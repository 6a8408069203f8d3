"""Sensitivities of small problems: columns, prices, changes within the tolerance, and how they are told."""

import json
import re

import numpy as np
import pytest
from command_line import cnr
from small_problems import small_problem

from codesign import evaluate, solve
from codesign.errors import CodesignError
from codesign.problem.nudge import NUDGES, nudged
from codesign.report import sensitivity_text as report
from codesign.study.sensitivity import sensitivities

#: Relative ones and the others.
STEPS = {"1": 1e-3, "nm": 0.02, "deg": 0.05, "K": 0.1}


def problem_of(folder, **changes):
    """Red against green light on ambient light, exposure bound to 5 ms."""
    base = {
        "scene.ambient": [{"illuminant": "E", "irradiance_w_per_m2": 0.2}],
        "timing.exposure_max_us": 5000.0,
        "lighting.delivery_per_m2": 10.0,
        "red.flux_temperature_coefficient_per_k": -0.004,
        "solver.gap": 1e-5,
        "solver.alternatives": 0,
    }
    return small_problem(folder, {**base, **{key.replace("__", "."): value for key, value in changes.items()}})


@pytest.fixture(scope="module")
def found(tmp_path_factory):
    return sensitivities(solve(problem_of(tmp_path_factory.mktemp("small"))))


def value(found, name):
    return next(x for x in found.limits if x.name == name)


def re_solved(problem, amount_to_problem, step):
    """Central difference of log CNR of problems solved from the start."""
    low, high = (solve(amount_to_problem(problem, sign * step), gap=1e-7).optimum.cnr for sign in (-1, 1))
    return np.log(high / low) / (2 * step)


@pytest.mark.oracle
@pytest.mark.parametrize(
    "name", ["LED flux", "quantum efficiency", "air temperature", "ambient light", "target reflectance"]
)
def test_retuned_column_equals_problems_solved_from_the_start(tmp_path, found, name):
    problem = problem_of(tmp_path)
    row = next(x for x in found.parameters if x.parameter == name)
    nudge = lambda p, amount: nudged(p, name, amount, row.part)  # noqa: E731
    step = 10 * STEPS[row.unit]
    assert row.retuned == pytest.approx(re_solved(problem, nudge, step), rel=0.01, abs=1e-5)


def test_fixed_column_is_that_of_the_forward_model(tmp_path, found):
    problem = problem_of(tmp_path)
    design = solve(problem).optimum.design
    for row in found.parameters:
        step = STEPS[row.unit]
        ends = [evaluate(nudged(problem, row.parameter, sign * step, row.part), design).cnr for sign in (-1, 1)]
        assert row.fixed == pytest.approx((ends[1] - ends[0]) / (2 * step * found.cnr), rel=0.01, abs=1e-6)
        held = evaluate(nudged(problem, row.parameter, row.tolerance, row.part), design).cnr
        assert row.high.cnr_fixed == pytest.approx(held, rel=1e-6)


def test_tuning_again_never_does_worse_where_the_recipe_stays_allowed(found):
    for row in found.parameters:
        for end in (row.low, row.high):
            if not end.missed:
                assert end.cnr_retuned >= end.cnr_fixed * (1 - 1e-4), (row.parameter, row.part)


def test_price_of_exposure_is_the_gain_per_microsecond(tmp_path, found):
    limit = value(found, "wanted longest exposure")
    assert limit.binds
    assert limit.unit == "us"
    ends = [solve(problem_of(tmp_path, timing__exposure_max_us=t), gap=1e-7).optimum.cnr for t in (4950.0, 5050.0)]
    assert limit.price == pytest.approx((ends[1] - ends[0]) / 100, rel=0.01)


def test_limits_that_do_not_bind_cost_nothing(found):
    idle = [x for x in found.limits if not x.binds]
    assert idle
    assert all(x.price == 0 for x in idle)


def test_prices_of_wells_sum_to_that_of_the_headroom(tmp_path):
    solution = solve(problem_of(tmp_path, lighting__delivery_per_m2=2000.0))
    found = sensitivities(solution, parameters=["LED flux"], changes=False)
    wells = [x for x in found.limits if x.name.startswith("well, ") and x.binds]
    headroom = value(found, "well headroom")
    saturation = wells[0].bound / (headroom.bound / 100)
    assert headroom.price == pytest.approx(sum(x.price for x in wells) * saturation / 100, rel=1e-6)
    assert headroom.price > 0


@pytest.mark.parametrize(
    "changes",
    [
        {"scene__target": ["target", "twin"], "scene__background": "dim"},
        {"lighting__mode": "strobe", "timing__frame_rate_hz": 50.0},
        {"build__board_slots": 9, "build__emitters": "free", "lighting__emitters_per_channel": 6},
        {"build__max_led_channels": 1, "green__radiant_flux_w": 0.08},
        {"limits__supply_peak_w": 0.3},
        {"limits__junction_max_c": 32.0},
    ],
    ids=["pairs", "strobe", "free emitters", "one channel", "peak power", "junction"],
)
def test_every_kind_of_problem_has_sensitivities(tmp_path, changes):
    """Derivative along the light of the lit LED against problems solved anew."""
    problem = problem_of(tmp_path, **changes)
    found = sensitivities(solve(problem), parameters=["LED flux"], changes=False)
    row = found.parameters[0]
    difference = re_solved(problem, lambda p, amount: nudged(p, "LED flux", amount, row.part), 0.005)
    assert row.retuned == pytest.approx(difference, rel=0.01, abs=2e-5)
    whole = [x for x in found.limits if x.name in ("board slots", "LED channels")]
    assert all(x.price is None for x in whole)
    assert len(whole) == sum(key.startswith(("build__board", "build__max")) for key in changes)


def test_change_of_what_binds_is_found_where_it_happens(tmp_path):
    """Light 10 % below the well: 11 % more flux fills it."""
    one = {"camera__gains": [{"gain_db": 0}], "camera__conversion_gain_dn_per_e": 0.2}
    fullest = max(s.total_e for s in solve(problem_of(tmp_path, camera__full_well_e=20000, **one)).optimum.surfaces)
    problem = problem_of(tmp_path, camera__full_well_e=fullest / 0.81, **one)
    found = sensitivities(solve(problem), parameters=["lens transmittance"], tolerances={"lens transmittance": 0.25})
    low, high = found.parameters[0].low, found.parameters[0].high
    assert not low.changed
    assert high.starts[-1].startswith("well, ")
    before = evaluate(nudged(problem, "lens transmittance", 0.8 * high.at), solve(problem).optimum.design)
    after = evaluate(nudged(problem, "lens transmittance", 1.2 * high.at), solve(problem).optimum.design)
    assert before.feasible
    assert not after.feasible


def test_another_configuration_is_said_and_proven(tmp_path):
    """A band that slips off the LED loses to a grey filter."""
    choices = {"candidates__filters": ["half", "red-pass"], "candidates__no_filter": False, "candidates__leds": ["red"]}
    problem = problem_of(tmp_path, lighting__delivery_per_m2=1.0, **choices)
    found = sensitivities(solve(problem), parameters=["filter centre"], tolerances={"filter centre": 60.0}).parameters[
        0
    ]
    for end in (found.low, found.high):
        again = solve(nudged(problem, "filter centre", end.amount, found.part)).optimum
        assert end.cnr_retuned == pytest.approx(again.cnr, rel=1e-3)
        assert (end.other is not None) == (again.design.filter != found.part)
    assert found.low.other
    assert "half" in found.low.other


def test_limits_that_cannot_be_met_any_more_are_said(tmp_path):
    problem = problem_of(tmp_path, limits__dark_well_share=0.0005, camera__exposure_min_us=4500)
    found = sensitivities(solve(problem), parameters=["sensor temperature"], tolerances={"sensor temperature": 40})
    row = found.parameters[0]
    assert row.high.cnr_retuned is None
    assert "dark" in row.high.note
    assert "infeasible" in report.sensitivity_text(found)


def test_problem_states_its_own_tolerances(tmp_path):
    solution = solve(problem_of(tmp_path, tolerance__led_flux_percent=7.0, tolerance__air_k=2.0))
    names = ["LED flux", "air temperature", "PRNU"]
    stated = sensitivities(solution, parameters=names, changes=False)
    assert {x.parameter: x.tolerance for x in stated.parameters} == {
        "LED flux": pytest.approx(0.07), "air temperature": 2.0, "PRNU": NUDGES["PRNU"].sigma
    }  # fmt: skip
    given = sensitivities(solution, parameters=names, tolerances={"LED flux": 0.2}, changes=False)
    assert given.parameters[0].tolerance == 0.2


def test_tables_and_json_hold_all_rows_and_every_key_is_documented(found):
    assert len(found.limit_table()) == len(found.limits)
    assert len(found.parameter_table()) == len(found.parameters)
    table = report.sensitivity_dict(found)
    assert json.loads(json.dumps(table, allow_nan=False)) == json.loads(json.dumps(table))
    keys = {*table, *table["limits"][0], *table["parameters"][0], *table["parameters"][0]["low"]}
    assert not keys - set(re.findall(r"\w+", report.__doc__))


@pytest.mark.parametrize("width", [60, 80, 120])
def test_text_names_every_quantity_and_keeps_the_page(found, width):
    text = report.sensitivity_text(found, width)
    assert max(map(len, text.splitlines())) <= width
    assert "wanted longest" in text
    flat = " ".join(text.split())
    assert not [name for name in {x.parameter for x in found.parameters} if name[:12] not in flat]


def test_unknown_names_are_told_with_the_nearest(found):
    solution = type("Solved", (), {"problem": found.problem})()
    with pytest.raises(CodesignError, match="did you mean 'LED flux'"):
        sensitivities(solution, parameters=["LED flx"])


def test_command_shows_the_same_as_the_library(tmp_path):
    outcome = cnr("sensitivity", "yellow-stain", "--quick", "--json", "--tolerance", "LED flux=5%")
    assert outcome.code == 0
    table = json.loads(outcome.out)
    assert table["schema"] == report.SENSITIVITY_SCHEMA
    assert next(x for x in table["parameters"] if x["parameter"] == "LED flux")["tolerance"] == pytest.approx(0.05)


@pytest.mark.parametrize("text", ["LED flux", "LED flux=", "LED flux=-1", "LED flx=1", "LED flux=nan"])
def test_command_refuses_bad_tolerances_in_one_line(text):
    outcome = cnr("sensitivity", "yellow-stain", "--quick", "--tolerance", text)
    assert outcome.code == 2
    assert outcome.err.count("\n") == 1
    assert "LED flux" in outcome.err
