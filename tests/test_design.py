"""The forward model: a published value end to end, and what must hold for any recipe."""

import math
from dataclasses import replace

import numpy as np
import pytest
from demo_names import DEMOS
from small_problems import QUANTUM_EFFICIENCY, small_design, small_problem

from codesign import evaluate
from codesign.errors import ProblemError


@pytest.fixture
def build(tmp_path):
    """Build the small problem with changes."""
    return lambda changes=None: small_problem(tmp_path, changes)


def reading(performance, name):
    return next(surface for surface in performance.surfaces if surface.id == name)


def electrons(problem, design, name="background"):
    return reading(evaluate(problem, design), name).led_e


# --- published -------------------------------------------------------------------------------------------------


@pytest.mark.published
def test_electrons_end_to_end_match_the_worked_imaging_chain(build):
    # Camera equation with EMVA 1288 photon count: 10 W/m2 at 630 nm, reflectance 0.5, lens 0.9, f/4, magnification
    # 0.1, 3.45 um pixel, 1 ms: 2193.56 photons; quantum efficiency 0.6: 1316.13 electrons.
    found = electrons(build(), small_design())
    assert found == pytest.approx(1316.13, abs=0.01)
    assert found / QUANTUM_EFFICIENCY == pytest.approx(2193.56, abs=0.01)


@pytest.mark.published
def test_measured_irradiance_replaces_the_geometry(build):
    problem = build({"lighting.led": {"red": {"measured_irradiance_w_per_m2": 20.0}}})
    assert electrons(problem, small_design()) == pytest.approx(2 * 1316.13, abs=0.02)


@pytest.mark.published
def test_lambertian_emitter_lights_the_object_as_its_intensity_says(build):
    # I(0) = flux / pi for a Lambertian emitter, E = I / d^2: 0.1 W at 0.5 m gives 0.12732 W/m2.
    problem = build({"lighting.delivery_per_m2": None, "lighting.distance_mm": 500.0})
    assert electrons(problem, small_design()) == pytest.approx(1316.13 * 0.1 / math.pi / 0.25 / 10, rel=1e-5)


@pytest.mark.published
def test_dark_current_doubles_by_its_step(build):
    # EMVA 1288, dark current against temperature: 2^((T - Tref) / Td).
    dark = [evaluate(build({"temperature.sensor_c": c}), small_design()).surfaces[0].dark_e for c in (25, 32, 46)]
    assert dark == pytest.approx([0.1, 0.2, 0.8])


@pytest.mark.published
@pytest.mark.parametrize(("cnr", "rate"), [(1, 0.308538), (2, 0.158655), (3, 0.0668072), (4, 0.0227501)])
def test_error_rate_follows_from_the_cnr(build, cnr, rate):
    # Green and Swets 1966: miss = false alarm = Phi(-d'/2) at the middle threshold.
    lo, hi = 1.0, 5000.0
    problem = build()
    for _ in range(60):
        middle = (lo + hi) / 2
        reached = evaluate(problem, small_design(exposure_us=middle))
        lo, hi = (middle, hi) if reached.cnr < cnr else (lo, middle)
    assert reached.error_rate == pytest.approx(rate, rel=1e-5)


# --- linear light ----------------------------------------------------------------------------------------------


@pytest.mark.property
@pytest.mark.parametrize("factor", [0.25, 0.5, 1.7, 2.0])
def test_electrons_are_linear_in_drive_and_in_time(build, factor):
    problem = build()
    once = electrons(problem, small_design())
    assert electrons(problem, small_design(drive_ma={"red": 100 * factor})) == pytest.approx(factor * once)
    assert electrons(problem, small_design(exposure_us=1000 * factor)) == pytest.approx(factor * once)


@pytest.mark.property
def test_colours_add(build):
    problem = build()
    both = electrons(problem, small_design(drive_ma={"red": 70.0, "green": 30.0}))
    each = [electrons(problem, small_design(drive_ma={led: ma})) for led, ma in (("red", 70.0), ("green", 30.0))]
    assert both == pytest.approx(sum(each), rel=1e-12)


@pytest.mark.property
@pytest.mark.parametrize("factor", [0.5, 3.0])
def test_more_light_for_a_shorter_time_gives_the_same_electrons(build, factor):
    plain = evaluate(build(), small_design())
    bright = evaluate(build({"lighting.delivery_per_m2": 100.0 * factor}), small_design(exposure_us=1000.0 / factor))
    assert bright.signal_e == pytest.approx(plain.signal_e, rel=1e-12)


@pytest.mark.property
def test_electrons_fall_with_the_square_of_the_f_number(build):
    problem = build()
    ratio = electrons(problem, small_design(f_number=4.0)) / electrons(problem, small_design(f_number=8.0))
    assert ratio == pytest.approx(4.0, rel=1e-12)


@pytest.mark.property
def test_electrons_fall_with_the_square_of_one_plus_magnification(build):
    far, near = (electrons(build({"optics.magnification": m}), small_design()) for m in (0.0, 1.0))
    assert far / near == pytest.approx(4.0, rel=1e-12)


@pytest.mark.property
def test_electrons_grow_with_the_pixel_area(build):
    small, large = (electrons(build({"camera.pixel_pitch_um": p}), small_design()) for p in (3.0, 6.0))
    assert large / small == pytest.approx(4.0, rel=1e-12)


@pytest.mark.property
def test_emitters_multiply_the_light(build):
    assert electrons(build({"lighting.emitters_per_channel": 7}), small_design()) == pytest.approx(
        7 * electrons(build(), small_design())
    )


@pytest.mark.property
def test_identity_filter_changes_nothing(build):
    problem = build()
    open_, clear = (evaluate(problem, small_design(filter=name)) for name in ("none", "clear"))
    assert clear.surfaces == open_.surfaces
    assert clear.cnr == pytest.approx(open_.cnr, rel=1e-12)


@pytest.mark.property
def test_neutral_filter_halves_the_light(build):
    problem = build()
    half = electrons(problem, small_design(filter="half"))
    assert half == pytest.approx(electrons(problem, small_design()) / 2, rel=1e-6)


@pytest.mark.property
def test_band_pass_keeps_its_colour_and_blocks_the_other(build):
    problem = build()
    for led, kept in (("red", 0.9), ("green", 1e-4)):
        lit = {"drive_ma": {led: 100.0}}
        ratio = electrons(problem, small_design(filter="red-pass", **lit)) / electrons(problem, small_design(**lit))
        assert ratio == pytest.approx(kept, rel=1e-2)


@pytest.mark.property
def test_tilted_band_pass_loses_its_colour(build):
    # At 40 deg an effective index of 1.8 moves 630 nm to 588 nm, and the 40 nm wide band off the LED.
    straight = electrons(build(), small_design(filter="red-pass"))
    assert electrons(build({"optics.field_angle_deg": 40.0}), small_design(filter="red-pass")) < 0.01 * straight


@pytest.mark.property
def test_mirror_like_light_adds_to_the_diffuse(build):
    changes = {"specular": {"target": 0.05}, "lighting.specular_weight": 2.0}
    assert electrons(build(changes), small_design(), "target") == pytest.approx(1316.13, abs=0.02)  # 0.4 + 2 x 0.05
    assert electrons(build({"specular": {"target": 0.05}}), small_design(), "target") == pytest.approx(
        0.8 * 1316.13, abs=0.02
    )


@pytest.mark.property
def test_ambient_light_adds_and_is_no_light_of_the_rig(build):
    lamp = {"illuminant": "D65", "illuminance_lx": 500.0}
    dark, lit = build(), build({"scene.ambient": [lamp]})
    before, after = (evaluate(problem, small_design()) for problem in (dark, lit))
    assert reading(after, "target").led_e == pytest.approx(reading(before, "target").led_e)
    assert reading(before, "target").ambient_e == 0.0
    twice = evaluate(build({"scene.ambient": [lamp, lamp]}), small_design())
    assert reading(twice, "target").ambient_e == pytest.approx(2 * reading(after, "target").ambient_e) != 0


# --- contrast --------------------------------------------------------------------------------------------------


@pytest.mark.property
def test_swapping_target_and_background_keeps_the_cnr_and_turns_the_sign(build):
    plain = evaluate(build(), small_design())
    swapped = evaluate(build({"scene.target": "background", "scene.background": "target"}), small_design())
    assert swapped.cnr == pytest.approx(plain.cnr, rel=1e-12)
    assert (plain.sign, swapped.sign) == ("darker", "brighter")
    assert swapped.signal_e == pytest.approx(-plain.signal_e)


@pytest.mark.property
def test_cnr_is_the_stated_formula(build):
    result = evaluate(build(), small_design())
    target, background = (reading(result, name) for name in ("target", "background"))
    variance = sum(t + b for t, b in result.noise.values()) / 2
    assert result.cnr == pytest.approx(abs(target.total_e - background.total_e) / math.sqrt(variance), rel=1e-12)


def test_cnr_is_zero_without_light(build):
    result = evaluate(build(), small_design(drive_ma={}))
    assert result.cnr == 0.0
    assert result.error_rate == 0.5


def test_gloss_alone_shows_only_where_the_light_is_mirrored(build):
    gloss = {"scene.target": "twin", "specular": {"twin": 0.05}}
    assert evaluate(build(gloss), small_design()).cnr == 0.0
    seen = evaluate(build({**gloss, "lighting.specular_weight": 2.0}), small_design())
    assert seen.signal_e == pytest.approx(0.2 * 1316.13, abs=0.01)


def test_several_targets_count_by_the_worst(build):
    changes = {"scene.target": ["target", "bright"], "scene.guards": []}
    mixed = evaluate(build({**changes, "scene.background": "background"}), small_design())
    assert mixed.cnr == 0.0  # one is darker, the other brighter than the background
    assert len(mixed.pairs) == 2
    both = evaluate(build({"scene.target": ["target", "background"], "scene.background": "bright"}), small_design())
    assert both.cnr == min(pair.cnr for pair in both.pairs) > 0


@pytest.mark.property
@pytest.mark.parametrize("name", DEMOS)
def test_swapped_demo_keeps_its_cnr(solved, name):
    solution = solved(name)
    problem = solution.problem
    swapped = replace(problem, targets=problem.backgrounds, backgrounds=problem.targets)
    assert evaluate(swapped, solution.recipe.design).cnr == pytest.approx(solution.recipe.cnr, rel=1e-12)


@pytest.mark.property
@pytest.mark.parametrize("name", DEMOS)
def test_optimiser_and_forward_model_agree_on_each_demo(solved, name):
    assert solved(name).certificate.forward_residual < 1e-9


@pytest.mark.property
@pytest.mark.parametrize("name", DEMOS)
def test_evaluating_a_demo_recipe_again_gives_the_same(solved, name):
    solution = solved(name)
    assert evaluate(solution.problem, solution.recipe.design) == solution.recipe


# --- grey values -----------------------------------------------------------------------------------------------


def test_grey_value_is_black_level_plus_gain_times_electrons(build):
    surface = reading(evaluate(build(), small_design()), "background")
    assert surface.grey_dn == pytest.approx(10 + 0.4 * surface.total_e)


def test_grey_value_stops_at_the_top(build):
    result = evaluate(build(), small_design(exposure_us=20000.0))
    assert reading(result, "bright").grey_dn == 4095
    assert not result.feasible


def test_gain_in_decibels_multiplies_the_grey_value(build):
    plain, doubled = (reading(evaluate(build(), small_design(gain_db=g)), "target") for g in (0.0, 6.0))
    assert (doubled.grey_dn - 10) / (plain.grey_dn - 10) == pytest.approx(10 ** (6 / 20))


# --- junction temperature --------------------------------------------------------------------------------------

WARM = {
    "red.flux_temperature_coefficient_per_k": -0.006,
    "red.peak_shift_nm_per_k": 0.1,
    "red.reference_junction_c": 25,
    "temperature.air_c": 40.0,
}


def iterated_junction(problem, drive_ma, duty):
    """T <- air + R (P - F(T)) until it stands still, as one would do by hand."""
    led = problem.channel("red").led
    resistance = (led.thermal_resistance_k_per_w + problem.spec.lighting.board_k_per_w) * duty
    power, flux = drive_ma / 1000 * led.forward_voltage_v, led.flux_w() * drive_ma / led.rated_current_ma
    junction = problem.spec.temperature.air_c
    for _ in range(200):
        warm = 1 + led.flux_temperature_coefficient_per_k * (junction - led.reference_junction_c)
        junction = problem.spec.temperature.air_c + resistance * (power - flux * max(warm, 0.0))
    return junction


@pytest.mark.oracle
@pytest.mark.parametrize("drive_ma", [1.0, 50.0, 100.0, 200.0])
@pytest.mark.parametrize("board_k_per_w", [0.0, 30.0, 200.0])
def test_junction_in_closed_form_is_where_the_iteration_ends(build, drive_ma, board_k_per_w):
    problem = build({**WARM, "lighting.board_k_per_w": board_k_per_w})
    state = evaluate(problem, small_design(drive_ma={"red": drive_ma})).leds[0]
    assert state.junction_c == pytest.approx(iterated_junction(problem, drive_ma, 1.0), abs=1e-9)


@pytest.mark.oracle
def test_strobed_junction_sees_the_mean_heat(build):
    problem = build({**WARM, "lighting.mode": "strobe", "timing.frame_rate_hz": 200.0})
    result = evaluate(problem, small_design())
    assert result.duty == pytest.approx(0.2)
    assert result.leds[0].junction_c == pytest.approx(iterated_junction(problem, 100.0, 0.2), abs=1e-9)


def test_continuous_light_has_full_duty(build):
    assert evaluate(build(), small_design(exposure_us=10.0)).duty == 1.0


def test_led_far_too_hot_gives_no_light_rather_than_negative(build):
    problem = build({"red.flux_temperature_coefficient_per_k": -0.02, "lighting.board_k_per_w": 1000.0})
    state = evaluate(problem, small_design(drive_ma={"red": 200.0})).leds[0]
    assert state.optical_w == 0.0
    assert state.junction_c == pytest.approx(25 + 1010 * 0.4)


def test_assumed_junction_scales_the_flux(build):
    problem = build(WARM)
    cool, hot = (evaluate(problem, small_design(), junction_c={"red": t}) for t in (25.0, 75.0))
    assert reading(hot, "target").led_e / reading(cool, "target").led_e == pytest.approx(
        0.7 * (630 + 5) / 630, rel=1e-4
    )  # 0.6 % less flux per kelvin; the peak moved 5 nm up, and a watt there holds more photons


@pytest.mark.property
@pytest.mark.parametrize("name", DEMOS)
def test_demo_junctions_balance_heat_and_temperature(solved, name):
    """T = air + resistance x duty x (electrical - optical power) holds for every lit LED."""
    solution = solved(name)
    problem = solution.problem
    for state in solution.recipe.leds:
        led = problem.channel(state.id).led
        resistance = led.thermal_resistance_k_per_w + problem.spec.lighting.board_k_per_w
        heat = state.electrical_w - state.optical_w
        expected = problem.spec.temperature.air_c + resistance * solution.recipe.duty * heat
        assert state.junction_c == pytest.approx(expected, abs=1e-9)


# --- bad recipes -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"camera": "bench-kamera"}, ["camera", "bench-camera"]),
        ({"channel": "red"}, ["channel", "mono"]),
        ({"gain_db": 3.0}, ["gain_db", "0, 6"]),
        ({"filter": "red-pas"}, ["filter", "red-pass"]),
        ({"exposure_us": 0.0}, ["exposure_us", "> 0"]),
        ({"exposure_us": -5.0}, ["exposure_us", "> 0"]),
        ({"exposure_us": math.nan}, ["exposure_us", "> 0"]),
        ({"f_number": 0.0}, ["f_number", "> 0"]),
        ({"f_number": math.inf}, ["f_number", "> 0"]),
        ({"drive_ma": {"blue": 5.0}}, ["blue", "green", "red"]),
        ({"drive_ma": {"red": 201.0}}, ["drive_ma.red", "200"]),
        ({"drive_ma": {"red": -1.0}}, ["drive_ma.red", "0 to 200"]),
        ({"drive_ma": {"red": math.nan}}, ["drive_ma.red", "0 to 200"]),
    ],
)
def test_recipe_that_cannot_be_set_says_what_can(build, changes, words):
    with pytest.raises(ProblemError) as caught:
        evaluate(build(), small_design(**changes))
    message = str(caught.value)
    assert "\n" not in message
    assert all(word in message for word in words), message


def test_led_at_zero_is_an_led_left_out(build):
    problem = build()
    with_zero = evaluate(problem, small_design(drive_ma={"red": 100.0, "green": 0.0}))
    without = evaluate(problem, small_design())
    assert with_zero.surfaces == without.surfaces
    assert with_zero.leds == without.leds


def test_numbers_of_a_performance_are_finite(build):
    result = evaluate(build(), small_design())
    assert np.isfinite([result.cnr, *(value for pair in result.noise.values() for value in pair)]).all()
