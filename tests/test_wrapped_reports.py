"""Reports that wrap and group instead of cutting: limits of a what-if, routes, the least that is enough, tolerances."""

import json
from dataclasses import replace

import pytest
from command_line import PROBLEM, cnr

from codesign import load_problem
from codesign.least_cost import least_cost
from codesign.report.layout import table
from codesign.report.sensitivity_text import changes, sensitivity_text
from codesign.report.text import solution_text
from codesign.study.sensitivity import Elasticity, Sensitivities, Shifted


@pytest.fixture
def job(tmp_path):
    """A folder with a small problem."""
    (tmp_path / "job.toml").write_text(PROBLEM, encoding="utf-8")
    return tmp_path


@pytest.mark.parametrize("width", [40, 60, 80])
@pytest.mark.parametrize("flow", [1, 2])
def test_a_column_that_flows_loses_no_word(width, flow):
    names = ["well, apple-sound", "pulse width", "current, nir-850-a", "an entry that is longer than its column is"]
    row = ["200", "5.511", "B"]
    row[flow] = "; ".join(names)
    lines = table(("distance", "CNR", "use"), [row, ["300", "5.2", "A"]], width, left=(flow,), flow=flow)
    assert max(map(len, lines)) <= width
    assert "…" not in "".join(lines)
    column = slice(lines[0].index("CNR" if flow == 1 else "use"), None)
    if flow == 2:
        assert " ".join(" ".join(line[column].split()) for line in lines[1:-1]) == row[flow]


def test_entries_that_fit_stand_whole_in_a_line():
    lines = table(("a", "b"), [["1", "one, two; three, four; five"]], 22, left=(1,), flow=1)
    assert lines[1:] == [" 1  one, two;", "    three, four; five"]


def test_limits_of_a_what_if_are_all_there(job):
    sweep = ["--sweep", "timing.frame_rate_hz=10,50", "--set", "limits.supply_w=3"]
    text = cnr("vary", job / "job.toml", *sweep).out
    points = json.loads(cnr("vary", job / "job.toml", *sweep, "--json").out)["points"]
    section = text.split("─ TIMING.FRAME_RATE_HZ")[1].split("─ WHAT TO USE")[0]
    assert "…" not in section and max(map(len, text.splitlines())) <= 80
    said = " ".join(section.split())
    assert all("; ".join(point["binding"]) in said for point in points if len(point["binding"]) < 3)
    assert all(name in said for point in points for name in point["binding"])


def test_the_limit_that_least_adds_is_marked():
    found = least_cost(load_problem("fast-web"), "leds", 3.5)
    lines = solution_text(found.solution, least=found).splitlines()
    (row,) = [line for line in lines if line.startswith(" ► LED channels * ")]
    assert "≤ 2 " in row
    assert " * the limit that --least leds tightens to find the least that is enough" in lines
    assert not [line for line in solution_text(found.solution).splitlines() if " *" in line]
    assert max(map(len, lines)) <= 80


def moved(name: str, part: str | None, low: Shifted, high: Shifted) -> Elasticity:
    """A quantity with a tolerance of 5 % and what happens at both ends."""
    return Elasticity(
        parameter=name, part=part, unit="1", tolerance=0.05, retuned=0.1, fixed=0.2, low=low, high=high
    )  # fmt: skip


def test_changes_within_tolerances_are_told_once_per_limit():
    quiet = Shifted(amount=0.05, cnr_retuned=5.1, cnr_fixed=5.0)
    first = Shifted(amount=-0.05, cnr_retuned=4.9, cnr_fixed=4.8, starts=("current, red",), stops=("LED blue lit",))
    second = replace(first, amount=0.05, at=0.02, starts=("current, red", "rig heat"), stops=())
    third = replace(first, at=-0.01, starts=("LED green lit",), stops=("rig heat",), other="another camera")
    parameters = (
        moved("LED flux", "red", first, quiet),
        moved("PRNU", None, quiet, second),
        moved("delivery", "blue", third, quiet),
    )
    found = Sensitivities(
        problem=load_problem("fast-web"), cnr=5.0, configuration="camera", binding=(), limits=(), parameters=parameters
    )
    assert changes(found) == [
        "another camera wins and LED green lit and rig heat stops binding: delivery (blue) from -1 %",
        "current, red starts to bind: LED flux (red) at -5 %; PRNU from +2 %",
        "LED blue dark: LED flux (red) at -5 %",
        "rig heat starts to bind: PRNU from +2 %",
    ]
    text = sensitivity_text(found)
    assert " - current, red starts to bind: LED flux (red) at -5 %; PRNU from +2 %" in text
    assert max(map(len, text.splitlines())) <= 80
