"""``cnr trade`` as a user runs it: text, files, JSON, figures of all curves, and every mistake in one line."""

import csv
import json

import pytest
from command_line import PROBLEM, cnr
from figure_checks import check_figure, words

from codesign.problem import load_problem
from codesign.report.figures.base import figure_bytes
from codesign.report.figures.combinations import LISTED, part_entries
from codesign.report.figures.ends import log_ticks, rounded_out, tick_words
from codesign.report.figures.trade import trade_figure
from codesign.report.trade_text import trade_text
from codesign.study.trade import AGAINST, Trade, trade


@pytest.fixture
def job(tmp_path):
    """A folder with a small problem."""
    (tmp_path / "job.toml").write_text(PROBLEM, encoding="utf-8")
    return tmp_path


@pytest.fixture(scope="module")
def curves(tmp_path_factory) -> list[Trade]:
    """All curves of the small problem, with an own limit on the heat."""
    path = tmp_path_factory.mktemp("trade") / "job.toml"
    path.write_text(PROBLEM.replace("rig_heat_w = 2", "rig_heat_w = 0.02"), encoding="utf-8")
    return [trade(load_problem(path), name, points=6) for name in AGAINST]


def test_help_has_an_example():
    outcome = cnr("trade", "--help")
    assert outcome.code == 0 and "Example: cnr trade" in outcome.out


def test_one_curve_as_text_table_and_figure(job):
    files = job / "t.csv", job / "t.svg"
    arguments = ["--against", "heat,price", "--points", "4", "--csv", files[0], "--figure", files[1]]
    outcome = cnr("trade", job / "job.toml", *arguments)
    assert (outcome.code, outcome.err) == (0, "")
    assert "CNR AGAINST RIG HEAT" in outcome.out and "CNR AGAINST PRICE" in outcome.out
    assert "◄ enough" in outcome.out and max(map(len, outcome.out.splitlines())) <= 80
    rows = list(csv.DictReader(files[0].read_text(encoding="utf-8").splitlines()))
    assert {row["against"] for row in rows} == {"heat", "price"}
    assert all(float(row["cnr_bound"]) >= float(row["cnr"]) for row in rows if row["cnr"])
    assert files[1].read_text(encoding="utf-8").startswith("<?xml")


def test_json_holds_points_brackets_and_settings(job):
    outcome = cnr("trade", job / "job.toml", "--against", "leds", "--cnr", "2", "--json")
    assert (outcome.code, outcome.err) == (0, "")
    result = json.loads(outcome.out)
    assert result["schema"] == "codesign.trade/1"
    (curve,) = result["curves"]
    assert (curve["against"], curve["field"], curve["enough"]["cnr"]) == ("leds", "build.max_led_channels", 2.0)
    assert [point["used"] for point in curve["points"]] == list(range(1, len(curve["points"]) + 1))
    assert curve["points"][0]["recipe"]["drive_ma"]


def test_the_least_agrees_with_solve(job):
    curve = json.loads(cnr("trade", job / "job.toml", "--against", "heat", "--json").out)["curves"][0]
    least = json.loads(cnr("solve", job / "job.toml", "--least", "heat", "--json").out)["least"]
    assert curve["enough"]["bound"] < least["value"] and least["bound"] < curve["enough"]["value"]
    assert curve["enough"]["value"] == pytest.approx(least["value"], rel=0.03)


@pytest.mark.parametrize("width", [60, 80, 120])
def test_text_keeps_to_the_page(curves, width):
    lines = trade_text(curves, width).splitlines()
    assert max(map(len, lines)) <= width
    assert sum("◄ limit" in line for line in lines) == 1
    assert sum("◄ enough" in line for line in lines) >= 2


@pytest.mark.parametrize("count", [1, 2, 3, 4])
def test_figures_hold_all_words(curves, count):
    figure = trade_figure(curves[:count])
    check_figure(figure)
    said = words(figure)
    assert "proven: nothing is above" in said and "required 3" in said
    assert "exposure [µs]" in said and ("limit: 0.02 W" in said) == (count >= 2)


@pytest.mark.parametrize("width", [100.0, 170.0])
def test_figures_hold_long_and_hostile_names(curves, width):
    title = "Ein sehr langer Titel <b>mit</b> $Zeichen$ " * 5
    worse = [Trade(**{**{name: getattr(curve, name) for name in curve.__slots__}, "title": title}) for curve in curves]
    figure = trade_figure(worse, width=width)
    check_figure(figure)
    assert "$Zeichen$" in words(figure)


def test_figures_are_the_same_for_the_same_curves(curves):
    assert figure_bytes(trade_figure(curves), "svg") == figure_bytes(trade_figure(curves), "svg")


def test_many_combinations_are_counted_not_cut():
    names = {f"L{k}": f"camera, filter, led-{k}" for k in range(LISTED + 3)}
    entries = part_entries(names)
    assert len(entries) == LISTED + 1 and entries[-1][1] == "and 3 more combinations, see the table"


@pytest.mark.parametrize(("low", "high"), [(0.0005, 0.6), (2, 20), (10, 1000), (50, 70000), (30, 31), (1e-7, 1e5)])
def test_ends_of_a_logarithmic_axis_are_ticks(low, high):
    ticks = log_ticks(low, high)
    assert ticks[0] == low and ticks[-1] == high and ticks == sorted(set(ticks))
    assert len(ticks) <= 11


@pytest.mark.parametrize("value", [0.00053, 1.0, 1.01, 9.99, 30, 25841])
def test_round_ends_enclose_what_is_shown(value):
    low, high = rounded_out(value, value)
    assert 0.6 * value <= low <= value * (1 + 1e-9) and value * (1 - 1e-9) <= high <= 1.6 * value
    assert float(tick_words(low)) == pytest.approx(low)


@pytest.mark.parametrize(
    "arguments, words",
    [
        (["--against", "weight"], "--against is 'weight', must be exposure, heat, leds, price or all"),
        (["--against", "heat,heat"], "names heat twice"),
        (["--points", "1"], "points is 1, must be from 2 to 100"),
        (["--points", "many"], "--points is 'many'"),
        (["--cnr", "0"], "CNR required is 0, must be above 0"),
        (["--gap", "3"], "gap is 3"),
        (["--figure", "t.gif"], "ending must be"),
        (["--csv", "nowhere/t.csv"], "does not exist"),
    ],
)
def test_bad_input_is_one_line(job, arguments, words):
    outcome = cnr("trade", job / "job.toml", *arguments)
    assert outcome.code == 2 and outcome.out == ""
    assert ": " in outcome.err and outcome.err.count("\n") == 1
    assert words in outcome.err


def test_limits_that_cannot_be_met_are_one_line(job):
    text = (job / "job.toml").read_text(encoding="utf-8")
    (job / "job.toml").write_text(text.replace("frame_rate_hz = 50", "frame_rate_hz = 50\nexposure_min_us = 19000"))
    outcome = cnr("trade", job / "job.toml", "--against", "heat")
    assert outcome.code == 3 and outcome.out == "" and outcome.err.count("\n") == 1
    assert "limits in conflict" in outcome.err
