"""Hostile names show as plain text in everything the commands print and write."""

from __future__ import annotations

import csv
import io
import json
import tomllib
import unicodedata
from dataclasses import replace
from pathlib import Path
from xml.etree import ElementTree

import pandas as pd
import pytest
from catalog_files import toml_value, write_catalog
from command_line import cnr
from hostile import (
    ALL,
    MARK,
    STRINGS,
    assert_inert,
    assert_no_formula,
    assert_plain,
    channel_name,
    file_name,
    hostile_problem,
    write_hostile,
)

from codesign import evaluate, load_problem, load_recipe, solve
from codesign.cli import app
from codesign.report.layout import columns, cut, heading, wrap
from codesign.report.machine import as_json
from codesign.report.output import csv_text, plain, shown
from codesign.report.recipe_file import recipe_toml


@pytest.fixture(scope="module")
def job(tmp_path_factory) -> Path:
    """The hostile problem as a file, all trouble at once, with its recipe beside it."""
    folder = tmp_path_factory.mktemp("hostile")
    path = write_hostile(folder)
    cnr("solve", path, "--recipe", folder / "recipe.toml")
    return path


#: Arguments of each command that work on the hostile problem; others are called with the problem alone.
ARGUMENTS = {
    "solve": ("--verify",),
    "check": ("recipe.toml",),
    "radiation": ("recipe.toml",),
    "sensitivity": ("--quick",),
    "vary": ("--sweep", "temperature.air_c=20:30:2", "--set", f"notes={STRINGS['terminal']}"),
    "tolerance": ("--draws", "200"),
    "robust": ("--scenarios", "3", "--worst"),
    "routes": ("--cnr", "5"),
    "calibrate": ("readings.csv",),
}
#: Commands that take no problem.
WITHOUT_PROBLEM = {"parts", "new", "schema", "demos"}
#: Commands that take a file of another kind, tested with it.
ELSEWHERE = {"family"}


def commands() -> list[str]:
    return sorted(command.name or command.callback.__name__ for command in app.registered_commands)


def run(job: Path, command: str, *more: str | Path):
    """Run a command; names of files among its arguments are taken in the folder of the problem."""
    folder = job.parent
    readings = folder / "readings.csv"
    if command == "calibrate" and not readings.exists():
        write_readings(job, readings)
    given = [folder / a if a.endswith((".toml", ".csv")) else a for a in ARGUMENTS.get(command, ())]
    return cnr(command, job, *given, *more)


def write_readings(job: Path, path: Path) -> None:
    """Grey values as the model predicts them, each LED alone and all off."""
    problem = load_problem(job)
    best = load_recipe(job.parent / "recipe.toml")
    out = io.StringIO()
    table = csv.writer(out)
    table.writerow(
        ["gain_db", "filter", "f_number", "exposure_us", "pixels", "drive_ma.red", "drive_ma.green"]
        + [f"grey_dn.{surface.id}" for surface in problem.surfaces]
    )
    for red, green in ((20, 0), (0, 20), (0, 0), (10, 10)):
        design = replace(best, gain_db=0.0, filter="none", exposure_us=500.0, drive_ma={"red": red, "green": green})
        greys = [reading.grey_dn for reading in evaluate(problem, design).surfaces]
        table.writerow([0, "none", design.f_number, 500, 400, red, green, *greys])
    path.write_text(out.getvalue(), encoding="utf-8")


@pytest.mark.parametrize("command", [name for name in commands() if name not in WITHOUT_PROBLEM | ELSEWHERE])
def test_every_command_prints_hostile_names_as_plain_text(job, command):
    outcome = run(job, command)
    assert outcome.code in (0, 3), outcome.err
    assert_plain(outcome.out, 80)
    assert_plain(outcome.err)
    assert MARK in outcome.out.lower(), "the names are shown, not dropped"


@pytest.mark.parametrize("command", [name for name in commands() if name not in WITHOUT_PROBLEM | ELSEWHERE])
def test_every_command_gives_valid_json_that_keeps_the_names(job, command):
    outcome = run(job, command, "--json")
    assert outcome.code in (0, 3), outcome.err
    assert_plain(outcome.out)
    assert json.loads(outcome.out)["problem"]["title"] == load_problem(job).spec.title


@pytest.mark.parametrize("name", STRINGS)
def test_each_kind_of_trouble_stays_inside_80_columns(tmp_path, name):
    path = write_hostile(tmp_path, STRINGS[name])
    solved = cnr("solve", path, "--recipe", tmp_path / "recipe.toml")
    assert solved.code == 0, solved.err
    assert_plain(solved.out, 80)
    recipe = tomllib.loads((tmp_path / "recipe.toml").read_text(encoding="utf-8"))
    assert recipe["channel"] == load_problem(path).cameras[0].channel_names[0]
    checked = cnr("check", path, tmp_path / "recipe.toml")
    assert checked.code == 0, checked.err
    assert_plain(checked.out, 80)


def test_recipes_of_hostile_names_come_back_the_same(tmp_path):
    solution = solve(hostile_problem(tmp_path))
    path = tmp_path / "r.toml"
    path.write_text(recipe_toml(solution.recipe.design, plain(ALL)), encoding="utf-8")
    again = load_recipe(path)
    assert again.channel == solution.recipe.design.channel == channel_name(ALL).strip()
    assert evaluate(solution.problem, again).cnr == solution.recipe.cnr


def test_tables_and_figures_of_hostile_names(job, tmp_path):
    table, figure = tmp_path / "t.csv", tmp_path / "f.svg"
    outcome = run(job, "vary", "--csv", table, "--figure", figure)
    assert outcome.code == 0, outcome.err
    assert_no_formula(table.read_text(encoding="utf-8"))
    assert len(table.read_text(encoding="utf-8").splitlines()) == 3
    svg = figure.read_text(encoding="utf-8")
    assert_inert(svg)
    words = "".join(ElementTree.fromstring(svg).itertext())
    assert "$\\frac{1}{" in words, "a dollar sign is a dollar sign"
    names = tmp_path / "n.csv"
    swept = cnr("vary", job, "--sweep", f"title={STRINGS['plus']},b", "--csv", names)
    assert swept.code == 0, swept.err
    assert_no_formula(names.read_text(encoding="utf-8"))
    worth = tmp_path / "w.csv"
    assert cnr("worth", job, "--csv", worth).code == 0
    assert_no_formula(worth.read_text(encoding="utf-8"))


@pytest.mark.parametrize("start", ["=1+1", "+1+x", "-x", "@SUM(A1)", "\t=1", "\r\n=1", " =1"])
def test_cells_that_look_like_formulas_are_text(start):
    table = pd.DataFrame({start: [start, "plain"], "number": [-1.5, 2.0], "whole": [-3, 4]})
    text = csv_text(table)
    assert_no_formula(text)
    again = pd.read_csv(io.StringIO(text))
    assert list(again["number"]) == [-1.5, 2.0] and list(again["whole"]) == [-3, 4]
    assert again.iloc[0, 0] == f"'{plain(start)}" == again.columns[0]
    assert again.iloc[1, 0] == "plain"


def test_catalogues_of_hostile_names(tmp_path):
    root = write_catalog(tmp_path)
    (root / "catalog.toml").write_text(f"name = {toml_value(ALL)}\nsource = {toml_value(ALL)}\n", encoding="utf-8")
    for kind in ("led", "filter", "camera", "surface"):
        file = root / f"{kind}s.toml"
        text = file.read_text(encoding="utf-8").replace('source = "test"', f"source = {toml_value(ALL)}")
        file.write_text(text + f"description = {toml_value(ALL)}\n", encoding="utf-8")
    for arguments in (("leds",), ("surfaces",), ("cameras",), ("filters",), (), ("--id", "nir-850-a")):
        outcome = cnr("parts", *arguments, "--catalog", root)
        assert outcome.code == 0, outcome.err
        assert_plain(outcome.out, 80)
        told = cnr("parts", *arguments, "--catalog", root, "--json")
        assert_plain(told.out)
        json.loads(told.out)


#: Command lines that hold hostile text where something else is asked for; TEXT and FILE stand for it.
MISTAKES = [
    ("solve", "FILE"), ("solve", "PROBLEM", "--gap", "TEXT"), ("solve", "PROBLEM", "--least", "TEXT"),
    ("check", "PROBLEM", "FILE"), ("radiation", "PROBLEM", "FILE"),
    ("parts", "leds", "TEXT"), ("parts", "TEXT"), ("parts", "--id", "TEXT"), ("parts", "--catalog", "FILE"),
    ("sensitivity", "PROBLEM", "--tolerance", "TEXT"), ("vary", "PROBLEM", "--set", "TEXT"),
    ("vary", "PROBLEM", "--sweep", "TEXT"), ("vary", "PROBLEM", "--without", "TEXT"),
    ("vary", "PROBLEM", "--with", "FILE"), ("vary", "PROBLEM", "--csv", "FOLDER"),
    ("worth", "PROBLEM", "--from", "FILE"),
    ("calibrate", "PROBLEM", "FILE"), ("calibrate", "PROBLEM", "FILE", "--fit", "TEXT"), ("schema", "TEXT"),
    ("robust", "PROBLEM", "--quantile", "TEXT"), ("TEXT",), ("solve", "PROBLEM", "TEXT"), ("solve", "--TEXT"),
]  # fmt: skip


@pytest.mark.parametrize("arguments", MISTAKES, ids=" ".join)
def test_mistakes_with_hostile_text_are_one_plain_line(job, arguments):
    text = ALL.replace("\x00", "")  # no operating system passes it on
    given = {
        "TEXT": text, "--TEXT": f"--{MARK}{STRINGS['terminal']}".replace("\x00", ""), "PROBLEM": job,
        "FILE": job.parent / file_name(f"missing {ALL}"), "FOLDER": job.parent / file_name(STRINGS["lines"]) / "x",
    }  # fmt: skip
    outcome = cnr(*[given.get(argument, argument) for argument in arguments])
    assert outcome.code == 2
    assert outcome.out == ""
    assert outcome.err.count("\n") == 1, outcome.err
    assert_plain(outcome.err)


def test_hostile_text_inside_files_is_told_in_one_plain_line(tmp_path, job):
    text = job.read_text(encoding="utf-8")
    for old, new in (
        ("required_cnr = 3.0", f"required_cnr = {toml_value(ALL)}"),
        ("required_cnr = 3.0", f"required_cnr = 3.0\n{toml_value(ALL)} = 1"),
        ("fwhm_nm = 2", f"fwhm_nm = {toml_value([ALL])}"),
        ('id = "green"', f"id = {toml_value(ALL)}"),
    ):
        spoiled = job.parent / "spoiled.toml"
        spoiled.write_text(text.replace(old, new, 1), encoding="utf-8")
        outcome = cnr("solve", spoiled)
        assert outcome.code == 2 and outcome.err.count("\n") == 1, outcome.err
        assert_plain(outcome.err)


# --- the means ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", STRINGS)
def test_json_text_shows_and_comes_back(name):
    text = STRINGS[name]
    told = as_json({text: [text, 1.5]})
    assert_plain(told)
    assert json.loads(told) == {text: [text, 1.5]}


def test_nothing_but_visible_characters_and_line_ends_reaches_a_terminal():
    every = "".join(map(chr, [*range(0x3000), *range(0xD800, 0xE000), *range(0xFE00, 0x10000), 0xE0001, 0x1F4A1]))
    for encoding in ("utf-8", "ascii", None, "latin-1"):
        assert_plain(shown(every, encoding))
    assert shown("a\n\nb ─ °\n", "utf-8") == "a\n\nb ─ °\n"


@pytest.mark.parametrize(
    ("text", "size"), [("abc", 3), ("光学", 4), ("e\u0301\u0302", 1), ("\U0001f4a1", 2), ("שלום", 4), ("é°─", 3)]
)
def test_columns_of_a_terminal(text, size):
    assert columns(text) == size


def test_wide_letters_wrap_and_cut_by_columns():
    text = "検査" * 40 + " word " + "é" * 90
    lines = wrap(text, 20)
    assert max(map(columns, lines)) <= 20
    assert "".join(lines).replace(" ", "") == text.replace(" ", "")
    assert columns(cut(text, 15)) <= 15 and cut(text, 15).endswith("…")
    assert columns(heading(text, 60)) == 60
    assert unicodedata.east_asian_width(text[0]) == "W"
