"""Radiation screening: from a recipe to hazard-weighted light at the eye, and how it is told."""

from __future__ import annotations

import itertools
import json
import math
from dataclasses import replace
from pathlib import Path

import pytest
from command_line import PROBLEM, cnr
from hostile import assert_plain
from small_problems import small_design, small_problem

from codesign import Design, evaluate
from codesign.design import Shot
from codesign.errors import ProblemError
from codesign.physics import radiation as hazard
from codesign.report.cautions import cautions
from codesign.report.layout import duration
from codesign.report.radiation_text import DEFERENCE, DISCLAIMER, radiation_dict, radiation_rows, radiation_text
from codesign.study.radiation import NAMES, Screening, screening

BLUE = {"red.peak_nm": 450.0, "red.fwhm_nm": 0.5, "red.emitting_area_mm2": 1.0}


def blue_problem(folder: Path, changes: dict | None = None):
    """The small problem with its red LED turned blue; it looks at 420 to 800 nm then."""
    wide = {"grid.from_nm": 430.0, "grid.step_nm": 0.5}
    return small_problem(folder, {**wide, **BLUE, **(changes or {})})


def screened(problem, design: Design | None = None, distance_mm: float = 200.0) -> Screening:
    return screening(problem, evaluate(problem, design or small_design()), distance_mm)


def rows(found: Screening, name: str):
    return [row for row in found.exposures if row.hazard == name]


def test_worked_blue_chip(tmp_path):
    # Worked from definitions in the reference list: 1 W at 450 nm from 1 mm², at 200 mm E 7.9577 W/m²,
    # L_B 299211 W/m²/sr, t 3.342 s. Here 0.1 W, so a tenth of the light and ten times the time.
    small, large = rows(screened(blue_problem(tmp_path)), "blue light")
    assert small.mean == pytest.approx(0.7480, rel=1e-3)
    assert large.mean == pytest.approx(29921.1, rel=1e-3)
    assert large.seconds == pytest.approx(33.42, rel=1e-3)
    assert small.seconds == math.inf  # 0.748 is below 1 W/m², the limit of a source below 11 mrad beyond 100 s
    assert screened(blue_problem(tmp_path)).seconds("blue light") == math.inf


def test_blue_light_is_reached_once_both_of_its_rows_are(tmp_path):
    found = screened(blue_problem(tmp_path, {"lighting.emitters_per_channel": 20}))
    small, large = rows(found, "blue light")
    assert small.seconds == pytest.approx(100 / 14.96, rel=1e-3)
    assert large.seconds == pytest.approx(33.42, rel=1e-3)  # more emitters are no brighter
    assert found.seconds("blue light") == large.seconds
    assert found.reached == {"blue light": large.seconds}


@pytest.mark.parametrize("distance_mm", [50.0, 400.0, 1000.0])
def test_irradiance_falls_with_the_square_of_the_distance_and_radiance_stays(tmp_path, distance_mm):
    problem = blue_problem(tmp_path)
    near, far = screened(problem), screened(problem, distance_mm=distance_mm)
    for a, b in zip(near.exposures, far.exposures, strict=True):
        if a.quantity == "irradiance":
            assert b.mean == pytest.approx(a.mean * (200 / distance_mm) ** 2, rel=1e-12)
    assert rows(far, "blue light")[1].mean == rows(near, "blue light")[1].mean


def test_light_and_hazard_grow_with_drive(tmp_path):
    problem = blue_problem(tmp_path, {"lighting.emitters_per_channel": 40, "lighting.board_k_per_w": 0.0})
    found = [screened(problem, small_design(drive_ma={"red": ma})) for ma in (20.0, 50.0, 100.0, 200.0)]
    for low, high in itertools.pairwise(found):
        for a, b in zip(low.exposures, high.exposures, strict=True):
            assert b.mean >= a.mean and b.seconds <= a.seconds and b.ratio >= a.ratio
    assert found[-1].exposures[2].mean == pytest.approx(10 * found[0].exposures[2].mean, rel=1e-9)


def test_junction_temperature_dims_and_shifts_the_light(tmp_path):
    cool = blue_problem(tmp_path)
    warm = blue_problem(tmp_path, {"red.flux_temperature_coefficient_per_k": -0.002, "red.peak_shift_nm_per_k": 0.5})
    state = evaluate(warm, small_design()).leds[0]
    rise = state.junction_c - 25.0
    a, b = rows(screened(cool), "blue light")[0], rows(screened(warm), "blue light")[0]
    peak = 450.0 + 0.5 * rise
    weight = float(hazard.blue_light_weight(peak)) / float(hazard.blue_light_weight(450.0))
    assert b.mean / a.mean == pytest.approx((1 - 0.002 * rise) * weight, rel=2e-3)


def test_narrow_beams_put_more_light_on_axis(tmp_path):
    wide, narrow = (
        rows(screened(blue_problem(tmp_path, {"red.beam_half_angle_deg": angle})), "blue light")[0].mean
        for angle in (60.0, 20.0)
    )
    m = -math.log(2) / math.log(math.cos(math.radians(20)))
    assert narrow / wide == pytest.approx((m + 1) / 2, rel=1e-9)  # cosᵐ beam, m = 1 at 60°


def test_without_emitting_areas_all_light_comes_from_the_smallest_spot(tmp_path):
    known = blue_problem(tmp_path, {"red.emitting_area_mm2": 1e-4})
    unknown = blue_problem(tmp_path, {"red.emitting_area_mm2": None})
    a, b = screened(known), screened(unknown)
    assert len(rows(b, "blue light")) == 1
    for name in ("retinal heat", "retinal heat, infrared"):
        assert rows(a, name)[0].ratio == pytest.approx(rows(b, name)[0].ratio, rel=1e-9)
    assert "no emitting area stated (red)" in " ".join(b.assumptions)
    assert "no emitting area" not in " ".join(a.assumptions)


@pytest.mark.parametrize("area_mm2", [1e-3, 0.1, 1.0, 10.0, 1000.0])
def test_not_knowing_the_area_never_looks_safer(tmp_path, area_mm2):
    known = screened(blue_problem(tmp_path, {"red.emitting_area_mm2": area_mm2, "lighting.emitters_per_channel": 30}))
    unknown = screened(blue_problem(tmp_path, {"red.emitting_area_mm2": None, "lighting.emitters_per_channel": 30}))
    for name in NAMES:
        assert unknown.seconds(name) <= known.seconds(name) * 1.06, name


def test_brightest_emitters_are_taken_together(tmp_path):
    """A dim, large LED beside a bright, small one must not dilute it."""
    alone = blue_problem(tmp_path, {"green.emitting_area_mm2": 500.0})
    a = rows(screened(alone), "retinal heat")[0]
    b = rows(screened(alone, small_design(drive_ma={"red": 100.0, "green": 5.0})), "retinal heat")[0]
    assert b.mean >= a.mean * (1 - 1e-12) and b.ratio >= a.ratio * (1 - 1e-12)


STROBE = {"lighting.mode": "strobe", "timing.frame_rate_hz": 100.0}


def test_pulses_count_by_their_mean_and_heat_of_the_retina_by_pulse_or_mean(tmp_path):
    steady, strobed = blue_problem(tmp_path), blue_problem(tmp_path, STROBE)
    a, b = screened(steady), screened(strobed)  # 1 ms at 100 Hz: a tenth of the time
    for x, y in zip(a.exposures, b.exposures, strict=True):
        if x.while_on > 0:
            assert x.while_on == x.mean and y.mean == pytest.approx(0.1 * y.while_on, rel=1e-9)
    heat = rows(b, "retinal heat")[0]
    pulse = heat.while_on / hazard.retinal_thermal_limit(0.005, 1e-3)
    mean = heat.mean / hazard.retinal_thermal_limit(0.005, 10.0)
    assert heat.ratio == pytest.approx(max(pulse, mean), rel=1e-9)
    assert heat.counts == ("while on" if pulse > mean else "mean")


def test_shots_count_by_the_strongest_and_by_their_sum(tmp_path):
    problem = blue_problem(tmp_path, {**STROBE, "detection.shots": 2, "scene.guards": []})
    shots = (
        Shot(exposure_us=500.0, drive_ma={"red": 100.0}),
        Shot(exposure_us=500.0, drive_ma={"red": 50.0, "green": 10.0}),
    )
    two = small_design(drive_ma={}, exposure_us=1000.0, shots=shots)
    row = rows(screened(problem, two), "blue light")[0]
    one = [
        rows(screened(problem, replace(two, shots=(shot,), exposure_us=shot.exposure_us)), "blue light")[0]
        for shot in shots
    ]
    assert row.while_on == pytest.approx(max(x.while_on for x in one), rel=1e-6)
    assert row.mean == pytest.approx(sum(x.mean for x in one), rel=1e-6)


def test_emitters_of_the_recipe_count(tmp_path):
    problem = blue_problem(tmp_path, {"lighting.emitters_per_channel": 8, "build.emitters": "free"})
    few, all_ = (screened(problem, small_design(emitters={"red": n})) for n in (2, 8))
    assert rows(all_, "blue light")[0].mean == pytest.approx(4 * rows(few, "blue light")[0].mean, rel=1e-3)


def test_ambient_light_is_left_out(tmp_path):
    bright = blue_problem(tmp_path, {"scene.ambient": [{"illuminant": "E", "irradiance_w_per_m2": 500.0}]})
    assert screened(bright).exposures == screened(blue_problem(tmp_path)).exposures


def test_dark_recipe_has_no_rows(tmp_path):
    problem = blue_problem(tmp_path)
    found = screened(problem, small_design(drive_ma={}))
    assert found.exposures == () and found.reached == {}
    assert "all off" in radiation_text(problem, found)


@pytest.mark.parametrize("distance_mm", [0.0, -5.0, 19.9, 1e6, math.nan, math.inf])
def test_impossible_distance_is_refused(tmp_path, distance_mm):
    with pytest.raises(ProblemError, match="must be 20 to 100000"):
        screened(blue_problem(tmp_path), distance_mm=distance_mm)


def test_caution_names_limits_reached_within_eight_hours(tmp_path):
    strong = blue_problem(tmp_path, {"lighting.emitters_per_channel": 20})
    text = " ".join(cautions(strong, evaluate(strong, small_design())))
    assert "published limit of blue light after 33 s" in text and "warning aid" in text
    weak = blue_problem(tmp_path)
    assert "published limit" not in " ".join(cautions(weak, evaluate(weak, small_design())))


FORBIDDEN = ("risk group", "RG0", "RG1", "RG2", "RG3", "exempt", "is safe", "classified")


def test_text_warns_and_never_classifies(solved):
    solution = solved("yellow-stain")
    found = screening(solution.problem, solution.recipe)
    for width in (60, 80, 120):
        text = radiation_text(solution.problem, found, width)
        assert_plain(text, width)
        flat = " ".join(text.split())
        assert "reaches the published limit of blue light after" in flat
        assert DEFERENCE in flat.replace(" - ", " ") and DISCLAIMER in flat
        assert not [word for word in FORBIDDEN if word.lower() in flat.lower()]
        assert width < 80 or "…" not in text
    assert "risk group" not in json.dumps(radiation_rows(found)).lower()


def test_rows_for_pages_are_words(solved):
    solution = solved("bruise")
    for row in radiation_rows(screening(solution.problem, solution.recipe)):
        assert set(row) == {"quantity", "value", "unit", "limit", "share", "time", "note"}
        assert all(isinstance(value, str) and value for value in row.values())
        assert row["time"] == "not reached" or row["time"].startswith("reached after ")


def test_dictionary_is_valid_json_with_none_for_never(solved):
    solution = solved("bruise")
    table = json.loads(
        json.dumps(radiation_dict(solution.problem, screening(solution.problem, solution.recipe)), allow_nan=False)
    )
    assert table["schema"] == "codesign.radiation/1"
    assert {row["hazard"] for row in table["exposures"]} == set(NAMES)
    assert all(row["seconds"] is None or row["seconds"] > 0 for row in table["exposures"])


@pytest.mark.parametrize(
    ("seconds", "words"),
    [(1e-5, "10 µs"), (2.5e-3, "2.5 ms"), (0.25, "250 ms"), (3.342, "3.3 s"), (119.0, "119 s"), (600.0, "10 min"),
     (28800.0, "8 h")],
)  # fmt: skip
def test_durations_read_well(seconds, words):
    assert duration(seconds) == words


def test_command_screens_best_and_given_recipes(tmp_path):
    problem, recipe = tmp_path / "p.toml", tmp_path / "r.toml"
    problem.write_text(PROBLEM, encoding="utf-8")
    cnr("solve", problem, "--recipe", recipe)
    best, given = cnr("radiation", problem), cnr("radiation", problem, recipe, "--distance-mm", "200")
    assert best.code == given.code == 0 and best.out == given.out
    assert_plain(best.out, 80)
    table = json.loads(cnr("radiation", problem, recipe, "--json", "--distance-mm", "400").out)
    assert table["distance_mm"] == 400
    refused = cnr("radiation", problem, "--distance-mm", "1")
    assert refused.code == 2 and refused.err.count("\n") == 1 and "distance" in refused.err
