"""Limits on hazard-weighted light at the eye: one more sum over the LEDs, respected with proof everywhere."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from small_problems import small_design, small_problem
from test_tolerance import some_draws

from codesign import evaluate, sensitivities, solve, verify
from codesign.errors import ProblemError
from codesign.limits import sum_limits
from codesign.limits_eye import WEIGHTS, eye_weight
from codesign.physics import radiation
from codesign.study.draws import scenario
from codesign.study.fields import Axis
from codesign.study.fleet import Fleet
from codesign.study.fleet_limits import limit_shares
from codesign.study.radiation import screening
from codesign.study.tolerance import tolerance
from codesign.study.vary import vary

#: The small problem's red LED turned blue, Lambertian as all without a stated beam.
BLUE = {"red.peak_nm": 450.0, "red.fwhm_nm": 0.5, "grid.from_nm": 430.0, "grid.step_nm": 0.5}
#: So little time that light is what is wanting.
SHORT = {"timing.exposure_max_us": 300.0}
FIELDS = {
    "actinic": "actinic_w_per_m2", "ultraviolet_a": "ultraviolet_a_w_per_m2", "blue_light": "blue_light_w_per_m2",
    "infrared": "infrared_w_per_m2",
}  # fmt: skip
STROBE = {"lighting.mode": "strobe", "timing.frame_rate_hz": 100.0}
#: Weighted irradiance of 0.1 W at 450 nm, 200 mm away: 0.1 · 0.94 / (π · 0.04) W/m² (definitions).
WORKED = 0.1 * 0.94 / (math.pi * 0.04)


def problem_with(folder: Path, limit: float | None = None, **changes):
    """The blue problem with a limit on blue light at the eye."""
    limits = {} if limit is None else {"limits.blue_light_w_per_m2": limit}
    return small_problem(folder, {**BLUE, **limits, **changes})


def use_of(problem, design, name="blue light at 200 mm"):
    return next(limit for limit in evaluate(problem, design).limits if limit.name == name)


def test_weight_of_a_narrow_lambertian_led_is_that_of_the_definitions(tmp_path):
    led = problem_with(tmp_path).channel("red").led
    assert eye_weight(led, "blue_light") == pytest.approx(WORKED / 0.1, rel=5e-4)
    assert eye_weight(led, "infrared") == eye_weight(led, "actinic") == 0.0


@pytest.mark.parametrize(("quantity", "peak_nm"), [("actinic", 280.0), ("ultraviolet_a", 365.0), ("infrared", 940.0)])
def test_every_weighting_has_its_limit(tmp_path, quantity, peak_nm):
    led = small_problem(tmp_path).channel("red").led.replaced(peak_nm=peak_nm, fwhm_nm=0.5)
    weight = {"actinic": float(radiation.actinic_weight(280.0)), "ultraviolet_a": 1.0, "infrared": 1.0}[quantity]
    assert eye_weight(led, quantity) == pytest.approx(weight / (math.pi * 0.04), rel=2e-3)


def test_the_warmest_and_the_coldest_led_weigh_no_more_than_the_limit_counts(tmp_path):
    led = problem_with(tmp_path).channel("red").led.replaced(peak_nm=410.0, fwhm_nm=10.0, peak_shift_nm_per_k=0.05)
    for junction_c in np.linspace(-40.0, led.max_junction_c, 37):
        shifted = led.replaced(peak_nm=410.0 + 0.05 * (junction_c - 25.0), peak_shift_nm_per_k=0.0)
        assert eye_weight(shifted, "blue_light") <= eye_weight(led, "blue_light") * (1 + 2e-3)


def test_point_just_inside_and_just_outside(tmp_path):
    problem = problem_with(tmp_path, WORKED)
    inside, outside = (use_of(problem, small_design(drive_ma={"red": ma})) for ma in (99.9, 100.1))
    assert inside.met and not outside.met
    assert inside.unit == "W/m2" and outside.shortfall().startswith("blue light at 200 mm 0.748")


def test_limit_counts_emitters_and_the_mean_of_pulses(tmp_path):
    one = use_of(problem_with(tmp_path, 1.0), small_design()).value
    many = problem_with(tmp_path, 1.0, **{"lighting.emitters_per_channel": 7})
    strobed = problem_with(tmp_path, 1.0, **STROBE)
    assert use_of(many, small_design()).value == pytest.approx(7 * one, rel=1e-12)
    assert use_of(strobed, small_design(exposure_us=2000.0)).value == pytest.approx(0.2 * one, rel=1e-12)


def test_limit_is_never_below_what_the_screening_finds(tmp_path):
    warm = {"red.peak_shift_nm_per_k": 0.05, "red.flux_temperature_coefficient_per_k": -0.002}
    problem = problem_with(tmp_path, 1.0, **warm)
    for ma in (10.0, 100.0, 200.0):
        design = small_design(drive_ma={"red": ma})
        found = next(
            row for row in screening(problem, evaluate(problem, design)).exposures if row.hazard == "blue light"
        )
        assert found.mean <= use_of(problem, design).value * (1 + 2e-3)


@pytest.mark.oracle
@pytest.mark.parametrize("changes", [{}, STROBE], ids=["steady", "strobe"])
def test_optimum_stays_inside_with_a_checked_proof(tmp_path, changes):
    changes = {**changes, **SHORT}
    free = solve(problem_with(tmp_path, **changes), gap=1e-5)
    used = use_of(problem_with(tmp_path, 1.0, **changes), free.recipe.design).value
    limited = problem_with(tmp_path, used / 3, **changes)
    tight = solve(limited, gap=1e-5)
    assert verify(tight).configurations == tight.certificate.configurations
    assert "blue light at 200 mm" in tight.binding
    assert use_of(limited, tight.recipe.design).met
    assert tight.certificate.bound < free.recipe.cnr
    loose = solve(problem_with(tmp_path, 3 * used, **changes), gap=1e-5)
    assert loose.recipe.cnr == pytest.approx(free.recipe.cnr, rel=1e-4)
    # brute force: no grid point inside all limits beats the bound
    best = 0.0
    steps = (np.linspace(0, 200, 41), np.linspace(0, 200, 21), np.array([150.0, 299.0, 300.0]))
    for red, green, exposure in itertools.product(*steps):
        drive = {"red": float(red), "green": float(green)}
        found = evaluate(limited, replace(tight.recipe.design, drive_ma=drive, exposure_us=float(round(exposure))))
        best = max(best, found.cnr if found.feasible else 0.0)
    assert 0.9 * tight.recipe.cnr < best <= tight.certificate.bound * (1 + 1e-9)


def test_limit_on_light_that_no_led_has_changes_nothing(tmp_path):
    plain, limited = solve(problem_with(tmp_path)), solve(problem_with(tmp_path, **{"limits.infrared_w_per_m2": 1e-6}))
    assert limited.recipe.cnr == pytest.approx(plain.recipe.cnr, rel=1e-6)
    assert verify(limited)


def test_shadow_price_is_the_slope_of_the_certified_optimum(tmp_path):
    def optimum(limit: float) -> float:
        return solve(problem_with(tmp_path, limit, **SHORT), gap=1e-8, alternatives=0).certificate.value

    limit = 0.5
    found = sensitivities(solve(problem_with(tmp_path, limit, **SHORT), gap=1e-8, alternatives=0), changes=False)
    price = next(x for x in found.limits if x.name == "blue light at 200 mm")
    step = 1e-3 * limit
    assert price.binds and price.unit == "W/m2" and price.price > 0
    assert price.price == pytest.approx((optimum(limit + step) - optimum(limit - step)) / (2 * step), rel=2e-3)


def test_sweep_over_the_limit_never_falls(tmp_path):
    axis = Axis(key="limits.blue_light_w_per_m2", values=(0.02, 0.1, 0.3, 2.0))
    found = vary(problem_with(tmp_path, 1.0, **SHORT), axes=[axis])
    assert axis.label == "blue light [W/m²]"
    for low, high in itertools.pairwise(found.points):
        assert high.bound >= low.cnr * (1 - 1e-9)
    assert found.points[-1].cnr > 1.2 * found.points[0].cnr


def test_rigs_of_real_parts_miss_it_as_the_forward_model_says(tmp_path):
    problem = problem_with(tmp_path, WORKED, **{"tolerance.led_flux_percent": 5.0})
    design = small_design(exposure_us=500.0)
    found = tolerance(problem, design, draws=200)
    assert 0.3 < found.missed["blue light at 200 mm"] < 0.7  # at the limit: half the rigs have more light
    draws = some_draws(problem, design, 6)
    (_, block), *_ = Fleet(problem, design, draws).blocks()
    shares = limit_shares(block, block.light(np.full(6, 500e-6)))["blue light at 200 mm"]
    for k, share in enumerate(shares):
        expected = use_of(scenario(problem, draws, k), design)
        assert share == pytest.approx(expected.share, rel=1e-9)


def test_exposure_set_anew_on_each_rig_keeps_it(tmp_path):
    problem = problem_with(tmp_path, 0.2 * WORKED, **STROBE, **{"tolerance.led_flux_percent": 5.0})
    found = tolerance(problem, small_design(exposure_us=1990.0), draws=100, retune=True)
    assert found.within.share > 0.99


def test_problem_states_each_limit_once_and_positive(tmp_path):
    every = {f"limits.{field}": 1.0 for field in FIELDS.values()}
    assert [limit.quantity for limit in sum_limits(problem_with(tmp_path, **every))] == list(FIELDS) == list(WEIGHTS)
    with pytest.raises(ProblemError, match=r"limits\.blue_light_w_per_m2 is 0\.0, must be > 0"):
        problem_with(tmp_path, 0.0)
