"""``cnr vary`` and ``cnr worth`` as a user runs them."""

import csv
import json

import pytest
from command_line import PROBLEM, cnr


@pytest.fixture
def job(tmp_path):
    """A folder with a small problem."""
    (tmp_path / "job.toml").write_text(PROBLEM, encoding="utf-8")
    return tmp_path


@pytest.mark.parametrize("command", ["vary", "worth"])
def test_help_has_an_example(command):
    outcome = cnr(command, "--help")
    assert outcome.code == 0 and f"Example: cnr {command}" in outcome.out


def test_a_field_is_set(job):
    outcome = cnr("vary", job / "job.toml", "--set", "averaging.frames=4")
    assert (outcome.code, outcome.err) == (0, "")
    assert "averaging.frames = 4" in outcome.out and "as it is" in outcome.out
    assert max(map(len, outcome.out.splitlines())) <= 80


def test_a_sweep_gives_table_and_figure(job):
    table, figure = job / "t.csv", job / "f.svg"
    outcome = cnr(
        "vary", job / "job.toml", "--sweep", "timing.frame_rate_hz=10:50:3", "--csv", table, "--figure", figure
    )
    assert (outcome.code, outcome.err) == (0, "")
    rows = list(csv.DictReader(table.read_text(encoding="utf-8").splitlines()))
    assert [row["timing.frame_rate_hz"] for row in rows] == ["10", "30", "50"]
    assert all(float(row["cnr_bound"]) >= float(row["cnr"]) for row in rows)
    assert figure.read_text(encoding="utf-8").lstrip().startswith("<?xml")
    assert "frame rate [Hz]" in figure.read_text(encoding="utf-8")


def test_two_axes_give_a_map(job):
    arguments = ["--sweep", "limits.rig_heat_w=1,2", "--sweep2", "lighting.distance_mm=100:300:3"]
    outcome = cnr("vary", job / "job.toml", *arguments, "--figure", job / "m.png")
    assert (outcome.code, outcome.err) == (0, "")
    assert "CNR AND WHAT TO USE" in outcome.out
    assert max(map(len, outcome.out.splitlines())) <= 80
    assert (job / "m.png").read_bytes().startswith(b"\x89PNG")


def test_json_names_conflicts(job):
    outcome = cnr("vary", job / "job.toml", "--sweep", "timing.exposure_min_us=10,19000,100", "--json")
    assert (outcome.code, outcome.err) == (0, "")
    result = json.loads(outcome.out)
    assert result["schema"] == "codesign.variation/1"
    assert [point["possible"] for point in result["points"]] == [True, False, True]
    assert "motion blur" in result["points"][1]["limits"]
    assert result["points"][0]["cnr"] == pytest.approx(result["base"]["cnr"], rel=2e-5)


def test_an_unused_part_left_out_changes_nothing(job):
    used = json.loads(cnr("solve", job / "job.toml", "--json").out)["optimum"]["settings"]["drive_ma"]
    spare = next((led for led in ("blue-470-a", "red-625-a") if led not in used), None)
    if spare is None:
        pytest.skip("both LEDs are in use")
    result = json.loads(cnr("vary", job / "job.toml", "--without", f"led:{spare}", "--json").out)
    assert result["points"][0]["cnr"] == pytest.approx(result["base"]["cnr"], rel=2e-5)


def test_worth_lists_the_parts_in_use(job):
    outcome = cnr("worth", job / "job.toml", "--csv", job / "w.csv")
    assert (outcome.code, outcome.err) == (0, "")
    assert "IF IT WERE NOT IN STOCK" in outcome.out and "camera mono-5mp" in outcome.out
    assert (job / "w.csv").read_text(encoding="utf-8").startswith("kind,id,role,cnr")
    result = json.loads(cnr("worth", job / "job.toml", "--json").out)
    assert result["schema"] == "codesign.worth/1"


@pytest.mark.parametrize(
    "arguments, words",
    [
        ([], "nothing to vary"),
        (["--set", "limits.rig_heat=1"], "did you mean 'rig_heat_w'?"),
        (["--set", "limits.rig_heat_w"], "is not a field and its value"),
        (["--set", "averaging.frames=0"], "averaging.frames is 0, must be >= 1"),
        (["--set", "averaging.frames=2", "--set", "averaging.frames=3"], "set twice"),
        (["--sweep", "averaging.frames=1:2"], "is not a range"),
        (["--sweep", "averaging.frames=1,0"], "averaging.frames is 0"),
        (["--sweep2", "averaging.frames=1,2"], "--sweep2 without --sweep"),
        (["--sweep", "averaging.frames=1,2", "--sweep2", "averaging.frames=1,2"], "is given twice"),
        (["--sweep", "averaging.frames=1:1000:500", "--sweep2", "averaging.pixels=1:1000:500"], "points, must be"),
        (["--without", "blue-470-a"], "kind and id"),
        (["--without", "led:blue-470-x"], "did you mean 'blue-470-"),
        (["--without", "lens:x"], "no parts of kind 'lens'"),
        (["--with", "nope.toml"], "no such file"),
        (["--catalog", "nowhere"], "no catalog.toml"),
        (["--set", "averaging.frames=2", "--figure", "f.svg"], "needs an axis"),
        (["--sweep", "averaging.frames=1,2", "--figure", "f.gif"], "ending must be"),
        (["--sweep", "averaging.frames=1,2", "--csv", "nowhere/t.csv"], "does not exist"),
        (["--set", "averaging.frames=2", "--gap", "3"], "gap is 3"),
    ],
)
def test_bad_input_is_one_line(job, arguments, words):
    outcome = cnr("vary", job / "job.toml", *arguments)
    assert outcome.code == 2 and outcome.out == ""
    assert outcome.err.startswith("cnr: ") and outcome.err.count("\n") == 1
    assert words in outcome.err
