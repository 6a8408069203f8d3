"""The commands ``cnr routes`` and ``cnr calibrate``: text, JSON, files written, mistakes in one line."""

import json
import re
from pathlib import Path

import pytest
from command_line import PROBLEM, cnr, spoiled

DATA = Path(__file__).parent / "data"
EXAMPLE = DATA / "calibration-problem.toml"
READINGS = DATA / "calibration-readings.csv"


@pytest.fixture
def problem(tmp_path: Path) -> Path:
    path = tmp_path / "problem.toml"
    path.write_text(PROBLEM, encoding="utf-8")
    return path


def _readings(tmp_path: Path, *rows: str) -> Path:
    path = tmp_path / "readings.csv"
    path.write_text("\n".join(rows) + "\n", encoding="utf-8")
    return path


def test_routes_print_levers_pair_parts_and_ceiling(problem: Path) -> None:
    found = cnr("routes", problem, "--cnr", 40)
    assert found.code == 0 and found.err == ""
    for title in (
        "ONE LEVER ALONE",
        "TWO LEVERS BY ONE FACTOR",
        "A PART THAT DOES NOT EXIST YET",
        "WHAT NO RIG CAN PASS",
    ):
        assert title in found.out
    assert all(len(line) <= 80 for line in found.out.splitlines())
    assert "…" not in found.out  # what changes is wrapped, not cut
    assert re.search(r"^ lever +what changes +factor +CNR$", found.out, re.M)
    assert re.search(r"^ delivery +largest delivery 15\.9 → 1\d\d 1/m² +9\.\d+ × +40", found.out, re.M)
    assert re.search(r"^ exposure +longest blur 1 → 100 pixel +100 × +at most 39", found.out, re.M)
    assert "emitters per channel 2 → 20 " in found.out  # fewest and most are the same
    pair = found.out.split("─ TWO LEVERS BY ONE FACTOR")[1]
    assert pair.index("largest delivery 15.9 → ") < pair.index(", each by ")


def test_routes_as_json(problem: Path) -> None:
    found = cnr("routes", problem, "--cnr", 40, "--json")
    table = json.loads(found.out)
    assert table["schema"] == "codesign.routes/1" and table["wanted_cnr"] == 40 and not table["met"]
    for route in table["levers"]:
        if route["factor"] is not None:
            assert route["cnr"] >= 40 > route["not_enough_cnr_bound"]
            assert route["factor"] > route["not_enough"] >= 1
            assert route["settings"]["camera"] == "mono-5mp"
    assert table["ceilings"][0]["any_light"] >= table["cnr_bound"]


@pytest.mark.parametrize("value", ["0", "-3", "nan"])
def test_routes_to_no_cnr_is_one_line(problem: Path, value: str) -> None:
    found = cnr("routes", problem, f"--cnr={value}")
    assert found.code == 2 and found.err.count("\n") == 1 and "must be > 0" in found.err


def test_calibrate_prints_factors_and_writes_only_when_asked(tmp_path: Path) -> None:
    before = EXAMPLE.read_bytes()
    found = cnr("calibrate", EXAMPLE, READINGS, "--fit", "offset")
    assert found.code == 0 and "blue-470-a" in found.out and "0.85" in found.out
    assert EXAMPLE.read_bytes() == before and not list(tmp_path.iterdir())
    target = tmp_path / "new.toml"
    found = cnr("calibrate", EXAMPLE, READINGS, "--fit", "offset", "--update", target)
    assert found.code == 0 and "wrote" in found.err
    assert cnr("calibrate", target, READINGS, "--fit", "offset").out.count("1.00") >= 3
    assert all(len(line) <= 80 for line in found.out.splitlines())


def test_calibrate_as_json() -> None:
    table = json.loads(cnr("calibrate", EXAMPLE, READINGS, "--fit", "offset, gain", "--json").out)
    assert table["schema"] == "codesign.calibration/1"
    assert {led["id"] for led in table["leds"]} >= {"blue-470-a", "amber-590-a"}
    assert len(table["residuals"]) == 60 and table["gain"]["factor"] == pytest.approx(1, abs=0.05)


HEADER = "f_number,exposure_us,drive_ma.blue-470-a,grey_dn.cap-blue"


@pytest.mark.parametrize(
    ("rows", "words"),
    [
        ((HEADER,), ("0 readings",)),
        ((HEADER, "4,300,100,abc"), ("readings.csv:2", "grey_dn.cap-blue", "'abc'")),
        ((HEADER, "# note", "4,300,100,nan"), ("readings.csv:3", "grey_dn.cap-blue", "finite")),
        ((HEADER, "4,300,-1,50"), ("readings.csv:2", "drive_ma.blue-470-a", "-1")),
        ((HEADER, "4,300,99999,50"), ("readings.csv:2", "drive_ma.blue-470-a", "99999")),
        ((HEADER, "4,0,100,50"), ("readings.csv:2", "exposure_us", "0")),
        ((HEADER, "4,300,100"), ("readings.csv:2", "3 cells", "4")),
        ((HEADER, "4,3,00,100,50"), ("readings.csv:2", "5 cells", "decimal commas")),
        ((HEADER, ",300,100,50"), ("readings.csv:2", "f_number", "4.0, 8.0")),
        ((HEADER, "4,300,100,"), ("readings.csv:2", "no grey value")),
        ((HEADER.replace("blue-470-a", "blue-470-x"), "4,300,100,50"), ("readings.csv:1", "blue-470-x", "blue-470-a")),
        ((HEADER.replace("cap-blue", "cap-blau"), "4,300,100,50"), ("readings.csv:1", "cap-blau", "did you mean")),
        ((HEADER.replace("f_number", "fnumber"), "4,300,100,50"), ("readings.csv:1", "fnumber", "f_number")),
        ((HEADER + ",grey_dn.cap-blue", "4,300,100,50,50"), ("readings.csv:1", "twice")),
        ((HEADER + ",error_dn.cap-green", "4,300,100,50,1"), ("readings.csv:1", "grey_dn.cap-green")),
        ((HEADER + ",error_dn.cap-blue", "4,300,100,50,0"), ("readings.csv:2", "error_dn.cap-blue", "> 0")),
        ((HEADER + ",pixels", "4,300,100,50,2.5"), ("readings.csv:2", "pixels", "2.5")),
        ((HEADER + ",camera", "4,300,100,50,mono-9mp"), ("readings.csv:2", "mono-9mp")),
        ((HEADER.replace(",", ";"), "4;300;100;50"), ("readings.csv:1", "semicolons")),
        (("f_number,exposure_us,drive_ma.blue-470-a", "4,300,100"), ("readings.csv:1", "grey_dn.<surface id>")),
        ((HEADER, "4,300,0,50"), ("no LED is lit",)),
        ((HEADER, "4,300,100,4095"), ("clipped",)),
    ],
)
def test_mistakes_in_readings_are_one_line(problem: Path, tmp_path: Path, rows: tuple[str, ...], words) -> None:
    found = cnr("calibrate", problem, _readings(tmp_path, *rows))
    assert found.code == 2 and found.err.count("\n") == 1 and found.out == ""
    assert all(word in found.err for word in words), found.err


def test_other_mistakes_are_one_line(problem: Path, tmp_path: Path) -> None:
    good = _readings(tmp_path, HEADER, "4,300,100,50", "8,300,100,25")
    target = tmp_path / "folder"
    target.mkdir()
    inline = tmp_path / "inline.toml"
    inline.write_text(
        spoiled(PROBLEM, "[motion]", '[lighting.led]\n"blue-470-a" = { emitters = 2 }\n\n[motion]'), "utf-8"
    )
    cases = [
        (("calibrate", problem, tmp_path / "none.csv"), "no such file"),
        (("calibrate", problem, tmp_path), "cannot be read"),
        (("calibrate", problem, good, "--fit", "offsets"), "did you mean 'offset'?"),
        (("calibrate", problem, good, "--update", target), "folder"),
        (("calibrate", inline, good, "--update", tmp_path / "new.toml"), "cannot be edited line by line"),
        (("calibrate", problem, good, "--update", tmp_path / "no" / "new.toml"), "does not exist"),
    ]
    for arguments, words in cases:
        found = cnr(*arguments)
        assert found.code == 2 and found.err.count("\n") == 1 and words in found.err, (arguments, found.err)
    assert not (tmp_path / "new.toml").exists()
