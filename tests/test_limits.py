"""Each kind of limit: a recipe just inside meets it, one just outside is told which limit and by how much."""

import math

import numpy as np
import pytest
from small_problems import small_design, small_problem

from codesign import evaluate
from codesign.assemble import Assembly, exposure_window
from codesign.design import setting_of
from codesign.errors import InfeasibleError
from codesign.limits import dark_rate, pulse_levels, saturation_electrons, well_bound


@pytest.fixture
def build(tmp_path):
    """Build the small problem with changes."""
    return lambda changes=None: small_problem(tmp_path, changes)


STROBE = {"lighting.mode": "strobe", "timing.frame_rate_hz": 100.0}
#: 500 mA in pulses to 200 us, 300 mA in pulses to 1 ms, duty 10 % and 5 %.
PULSES = {
    **STROBE,
    "timing.frame_rate_hz": 40.0,
    "red.pulse": [
        {"max_width_us": 200, "max_duty": 0.1, "max_current_ma": 500},
        {"max_width_us": 1000, "max_duty": 0.05, "max_current_ma": 300},
    ],
}
DIM = {"drive_ma": {"red": 1.0}}

#: limit, changes to the problem, recipe just inside, recipe just outside
CASES = [
    # 10 000 e- x 0.9 against the background, the brightest without the bright guard: 1316.23 e- per ms
    ("well, background", {"scene.guards": []}, {"exposure_us": 6837.0}, {"exposure_us": 6839.0}),
    # the guard has reflectance 0.9: 2369.04 + 0.1 e- per ms
    ("well, bright", {}, {"exposure_us": 3798.0}, {"exposure_us": 3800.0}),
    ("camera longest exposure", {}, {"exposure_us": 100000.0, **DIM}, {"exposure_us": 100001.0, **DIM}),
    ("camera shortest exposure", {}, {"exposure_us": 10.0}, {"exposure_us": 9.0}),
    ("wanted longest exposure", {"timing.exposure_max_us": 700.0}, {"exposure_us": 700.0}, {"exposure_us": 701.0}),
    ("wanted shortest exposure", {"timing.exposure_min_us": 50.0}, {"exposure_us": 50.0}, {"exposure_us": 49.0}),
    # 500 mm/s, magnification 0.1, 3.45 um: one pixel in 69.0 us (kinematics, published worked value)
    (
        "motion blur",
        {"motion.speed_mm_per_s": 500.0, "motion.max_blur_px": 1.0},
        {"exposure_us": 69.0},
        {"exposure_us": 69.1},
    ),
    # 50 frames per second leave 20 ms, of which reading takes 5 ms
    (
        "frame period",
        {"timing.frame_rate_hz": 50.0, "camera.readout_ms": 5.0},
        {"exposure_us": 15000.0, **DIM},
        {"exposure_us": 15001.0, **DIM},
    ),
    # 100 e-/s at 25 deg C, 1600 e-/s at 53 deg C; 0.1 % of 10 000 e- fills in 6.25 ms
    (
        "dark signal in the well",
        {"limits.dark_well_share": 0.001, "temperature.sensor_c": 53.0},
        {"exposure_us": 6250.0, **DIM},
        {"exposure_us": 6251.0, **DIM},
    ),
    # half of the read-noise variance of 9 e-^2 after 4.5 / 1600 s
    (
        "dark shot noise",
        {"limits.dark_noise_share": 0.5, "temperature.sensor_c": 53.0},
        {"exposure_us": 2812.0, **DIM},
        {"exposure_us": 2813.0, **DIM},
    ),
    # 2 V at 100 mA, half of it light: 0.1 W of heat, 0.2 W of power per emitter
    ("rig heat", {"limits.rig_heat_w": 0.1}, {}, {"drive_ma": {"red": 101.0}}),
    ("supply power", {"limits.supply_w": 0.2}, {}, {"drive_ma": {"red": 101.0}}),
    # a tenth of the time on: 0.02 W of mean power
    ("supply power", {**STROBE, "limits.supply_w": 0.02}, {}, {"exposure_us": 1001.0}),
    ("rig heat", {**STROBE, "limits.rig_heat_w": 0.01}, {}, {"exposure_us": 1001.0}),
    ("supply peak power", {**STROBE, "limits.supply_peak_w": 0.2}, {}, {"drive_ma": {"red": 101.0}}),
    ("current, red", {}, {"drive_ma": {"red": 200.0}}, None),
    ("current, red", {"lighting.driver_max_ma": 80.0}, {"drive_ma": {"red": 80.0}}, {"drive_ma": {"red": 81.0}}),
    (
        "current, red",
        {"lighting.led": {"red": {"max_current_ma": 60.0}}},
        {"drive_ma": {"red": 60.0}},
        {"drive_ma": {"red": 61.0}},
    ),
    # pulse brackets: what may flow depends on how long; 40 Hz x 200 us is 0.8 % duty
    (
        "current, red",
        PULSES,
        {"exposure_us": 200.0, "drive_ma": {"red": 500.0}},
        {"exposure_us": 201.0, "drive_ma": {"red": 500.0}},
    ),
    (
        "current, red",
        PULSES,
        {"exposure_us": 1000.0, "drive_ma": {"red": 300.0}},
        {"exposure_us": 1001.0, "drive_ma": {"red": 300.0}},
    ),
    # at 100 Hz 5 % duty ends the second bracket at 500 us
    (
        "current, red",
        {**PULSES, "timing.frame_rate_hz": 100.0},
        {"exposure_us": 500.0, "drive_ma": {"red": 300.0}},
        {"exposure_us": 501.0, "drive_ma": {"red": 300.0}},
    ),
    # 40 K/W and 0.1 W per 100 mA: 4 K above 25 deg C
    ("junction, red", {"limits.junction_max_c": 29.0}, {}, {"drive_ma": {"red": 101.0}}),
    ("junction, red", {"red.max_junction_c": 29.0}, {}, {"drive_ma": {"red": 101.0}}),
    # a tenth of the time on: 0.4 K
    ("junction, red", {**STROBE, "limits.junction_max_c": 25.4}, {}, {"drive_ma": {"red": 101.0}}),
    # 2 N c (1 + m) / m^2 with c = 3.45 um and m = 0.1: 3.036 mm at f/4 (thin lens)
    ("depth of field", {"optics.required_depth_mm": 3.03}, {}, {"f_number": 3.98}),
]


@pytest.mark.parametrize(("name", "changes", "inside", "outside"), CASES)
def test_limit_holds_just_inside_and_not_just_outside(build, name, changes, inside, outside):
    problem = build(changes)
    good = evaluate(problem, small_design(**inside))
    assert good.feasible, [limit.shortfall() for limit in good.violated]
    assert 0.97 < next(limit for limit in good.limits if limit.name == name).share <= 1 + 1e-6
    if outside is None:  # the LED's largest rating cannot be exceeded at all
        return
    bad = evaluate(problem, small_design(**outside))
    assert not bad.feasible
    assert name in [limit.name for limit in bad.violated]


def test_all_kinds_of_limit_are_among_the_cases():
    from test_demos import KINDS

    kinds = {name.split(",")[0] for name, *_ in CASES}
    assert kinds == KINDS - {"pulse width", "pulse duty"}  # brackets end in a lower current, see the cases above


def test_shortfall_says_which_limit_and_by_how_much(build):
    bad = evaluate(build({"timing.exposure_max_us": 700.0}), small_design(exposure_us=750.0))
    assert [limit.shortfall() for limit in bad.violated] == [
        "wanted longest exposure 750 us is 50 us above the limit 700 us"
    ]


def test_shortfall_of_a_floor_says_below(build):
    bad = evaluate(build({"timing.exposure_min_us": 70.0}), small_design(exposure_us=50.0))
    assert [limit.shortfall() for limit in bad.violated] == [
        "wanted shortest exposure 50 us is 20 us below the limit 70 us"
    ]


# --- saturation ------------------------------------------------------------------------------------------------


def setting(problem, **changes):
    return setting_of(problem, small_design(**changes))


def test_well_saturates_where_the_full_well_is_smaller(build):
    camera = build().cameras[0]
    assert saturation_electrons(camera, camera.gain_settings()[0]) == 10000  # (4095 - 10) / 0.4 = 10 212


def test_grey_value_saturates_where_the_gain_is_high(build):
    camera = build().cameras[0]
    gain = camera.gain_settings()[1]
    assert saturation_electrons(camera, gain) == pytest.approx(4085 / (0.4 * 10 ** (6 / 20)))


def test_headroom_is_a_share_of_saturation(build):
    problem = build({"limits.well_headroom": 0.5})
    assert well_bound(problem, setting(problem)) == 5000


def test_dark_rate_is_that_of_the_sensor_temperature(build):
    problem = build({"temperature.sensor_c": 39.0, "temperature.air_c": 80.0})
    assert dark_rate(problem, setting(problem)) == pytest.approx(400.0)


# --- pulse brackets --------------------------------------------------------------------------------------------


def test_continuous_light_has_one_level(build):
    levels = pulse_levels(build({"red.pulse": PULSES["red.pulse"]}))
    assert [level.longest_s for level in levels] == [math.inf]
    assert levels[0].current_ma == (200.0, 200.0)


def test_pulse_levels_are_the_brackets_of_the_data_sheet(build):
    levels = pulse_levels(build(PULSES))
    assert [level.longest_s for level in levels] == pytest.approx([200e-6, 1000e-6, math.inf])
    assert [level.current_ma for level in levels] == [(500.0, 200.0), (300.0, 200.0), (200.0, 200.0)]
    assert [level.cause for level in levels] == ["pulse width", "pulse width", ""]


def test_fast_frames_end_a_bracket_by_duty(build):
    levels = pulse_levels(build({**PULSES, "timing.frame_rate_hz": 100.0}))
    assert [level.longest_s for level in levels] == pytest.approx([200e-6, 500e-6, math.inf])
    assert [level.cause for level in levels] == ["pulse width", "pulse duty", ""]


def test_driver_caps_every_level(build):
    levels = pulse_levels(build({**PULSES, "lighting.driver_max_ma": 250.0}))
    assert [level.current_ma for level in levels] == [(250.0, 200.0), (200.0, 200.0)]


def test_bracket_no_better_than_the_continuous_rating_is_no_level(build):
    assert len(pulse_levels(build({**PULSES, "lighting.driver_max_ma": 100.0}))) == 1


# --- limits together -------------------------------------------------------------------------------------------


def test_exposure_window_names_the_tightest_limits(build):
    changes = {
        "motion.speed_mm_per_s": 500.0,
        "motion.max_blur_px": 1.0,
        "timing.exposure_max_us": 500.0,
        "timing.exposure_min_us": 20.0,
    }
    problem = build(changes)
    window = exposure_window(problem, setting(problem))
    assert (window.low.name, window.high.name) == ("wanted shortest exposure", "motion blur")
    assert (window.low.time, window.high.time) == pytest.approx((20e-6, 69e-6))
    assert window.open


@pytest.mark.parametrize(
    ("changes", "named"),
    [
        (
            {"motion.speed_mm_per_s": 5000.0, "motion.max_blur_px": 1.0},
            ["camera shortest exposure", "motion blur"],
        ),
        (
            {"timing.exposure_min_us": 30000.0, "timing.frame_rate_hz": 50.0},
            ["wanted shortest exposure", "frame period"],
        ),
        (
            {"timing.exposure_min_us": 9000.0, "limits.dark_well_share": 0.001, "temperature.sensor_c": 53.0},
            ["wanted shortest exposure", "dark signal in the well"],
        ),
        ({"optics.required_depth_mm": 50.0}, ["depth of field"]),
    ],
)
def test_limits_in_conflict_are_named(build, changes, named):
    problem = build(changes)
    with pytest.raises(InfeasibleError) as caught:
        _ = Assembly(problem, np.full(2, 25.0)).settings
    assert list(caught.value.limits) == named
    assert all(name in str(caught.value) for name in named)
    assert "\n" not in str(caught.value)
