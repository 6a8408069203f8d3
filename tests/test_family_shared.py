"""A rig in common of a family, as the command and its reports tell it. The search itself has tests of its own."""

import csv
import io
import json
from dataclasses import replace
from pathlib import Path

import pytest
from command_line import cnr
from family_runs import run, write_family
from figure_checks import check_figure, words

from codesign import evaluate, load_family
from codesign.design import Design
from codesign.family.shared import (
    SharedFamily,
    filter_wheel_family,
    outcome_on,
    rig_letter,
    rig_set_family,
    shared_family,
)
from codesign.report.family_files import _figure
from codesign.report.family_sets import rig_set_text, wheel_text
from codesign.report.family_shared import shared_dict, shared_text
from codesign.study.shared_rig import Help

COUNT = 6


@pytest.fixture(scope="module")
def place(tmp_path_factory) -> tuple[Path, Path]:
    """A family in which one row is wrong, and its store."""
    family = write_family(tmp_path_factory.mktemp("family"), COUNT, cap_04="cap-bleu,cap-green,[],100,2,")
    return family, family.with_name("store.sqlite")


@pytest.fixture(scope="module")
def found(place) -> SharedFamily:
    return shared_family(load_family(place[0]), run(*place), max_led_channels=1)


def test_each_variant_has_its_recipe_on_the_rig_and_its_regret(place, found):
    family, rig = load_family(place[0]), found.rig
    assert len(rig.leds) == 1
    assert [entry.name for entry in found.entries] == [entry.name for entry in found.own.solved]
    for entry in found.entries:
        outcome = entry.outcome
        design = Design(
            **{name: getattr(outcome, name) for name in ("camera", "channel", "gain_db", "filter", "f_number")},
            exposure_us=outcome.exposure_us,
            drive_ma=outcome.drive_ma,
        )
        said = evaluate(family.problem(entry.name), design)
        assert said.feasible and outcome.cnr == pytest.approx(said.cnr, rel=1e-12)
        assert set(outcome.drive_ma) <= set(rig.leds)
        own = found.own_entry(entry.name).outcome
        assert outcome.best_cnr <= own.bound * (1 + 1e-9)
        assert rig.outcomes[entry.name].regret == pytest.approx(max(1 - outcome.best_cnr / own.best_cnr, 0.0))
    worst = min(found.entries, key=lambda entry: entry.outcome.best_cnr)
    assert rig.limiting == worst.name
    assert rig.value == pytest.approx(worst.outcome.best_cnr, rel=1e-3)


def test_the_text_tells_rig_limit_regret_and_failures(found):
    text, rig = shared_text(found), found.rig
    assert "variants    5 with one rig for all" in text
    assert f"LEDs        1 {rig.leds[0]} (at most 1)" in text
    assert f"limited by  {rig.limiting}" in text
    rows = [line.split() for line in text.split("EACH VARIANT ON IT")[1].splitlines()[2 : COUNT + 1]]
    assert rows[0][0] == rig.limiting
    assert [float(row[1]) for row in rows] == sorted(float(row[1]) for row in rows)
    assert "1 VARIANT WITHOUT A RECIPE" in text and "cap-bleu" in text


def test_changes_that_help_and_other_ends(found):
    helps = (Help(change="one more LED channel", helped=5, worst_cnr=20.0, worst_gain=0.25),)
    told = shared_text(replace(found, rig=replace(found.rig, helps=helps)))
    assert "one more LED channel: helps 5 variants, worst CNR 20.00 (+25.0 %)" in told
    stopped = replace(found.rig, status="stopped", bound=2 * found.rig.value)
    assert "stopped before the gap asked for: 100.0 % is proven" in shared_text(replace(found, rig=stopped))
    count = replace(found.rig, goal="count", value=4.0, bound=5.0)
    assert "most variants at the CNR they need: 4 of 5, no rig more than 5" in shared_text(replace(found, rig=count))
    cost = replace(found.rig, goal="cost", value=100.0, bound=99.0)
    assert "cheaper" in shared_text(replace(found, rig=cost))


@pytest.mark.parametrize("width", [60, 80])
def test_no_line_is_longer_than_the_page(found, width):
    assert max(map(len, shared_text(found, width).splitlines())) <= width


def test_a_variant_the_rig_shows_nothing_of(found):
    name = found.entries[2].name
    blind = replace(found.rig.outcomes[name], optimum=None, recipe=None)
    entries = tuple(replace(e, outcome=outcome_on(blind)) if e.name == name else e for e in found.entries)
    dark = replace(found, entries=entries, rig=replace(found.rig, outcomes={**found.rig.outcomes, name: blind}))
    rows = shared_text(dark).split("EACH VARIANT ON IT")[1].splitlines()
    assert rows[2].split()[:2] == [name, "none"]
    assert shared_dict(dark)["summary"]["solved"] == len(found.entries) - 1
    check_figure(_figure(dark))


def test_the_figure_names_the_rig(found):
    figure = _figure(found)
    check_figure(figure)
    assert f"rig in common: mono-5mp, filter none, f/{found.rig.f_number:g}" in words(figure)


def test_the_command_writes_recipes_of_the_rig(place, found, tmp_path):
    table = tmp_path / "recipes.csv"
    options = ("--store", place[1], "--shared", "--max-leds", 1, "--csv", table, "--json")
    code, out, err = cnr("family", place[0], *options)
    assert (code, err) == (1, "")
    result = json.loads(out)
    assert result["schema"] == "codesign.shared/1"
    assert result["rig"]["leds"] == list(found.rig.leds) and result["rig"]["max_led_channels"] == 1
    assert [each["own_cnr"] for each in result["variants"]] == [e.outcome.best_cnr for e in found.own.solved]
    assert [each["status"] for each in result["own"]].count("bad") == 1
    rows = list(csv.DictReader(io.StringIO(table.read_text(encoding="utf-8"))))
    assert {row["f_number"] for row in rows} == {repr(found.rig.f_number)}
    assert [float(row["cnr"]) for row in rows] == [entry.outcome.cnr for entry in found.entries]


def test_options_default_to_the_family_file(place, found, monkeypatch):
    asked = []

    def note(problems, **options):
        asked.append(options)
        return found.rig

    monkeypatch.setattr("codesign.family.shared.shared_rig", note)
    other = place[0].with_name("with-shared.toml")
    other.write_text(place[0].read_text() + '\n[shared]\nmax_led_channels = 3\ngoal = "count"\nrequired_cnr = 5\n')
    family = load_family(other)
    assert shared_family(family, found.own).max_led_channels == 3
    shared_family(family, found.own, max_led_channels=2, goal="worst", required_cnr=6, gap=0.1)
    names = ("max_led_channels", "goal", "required_cnr", "gap")
    assert [tuple(one.get(name) for name in names) for one in asked] == [(3, "count", 5, None), (2, "worst", 6, 0.1)]
    assert asked[0]["own"] == {entry.name: entry.outcome.best_cnr for entry in found.own.solved}


@pytest.fixture(scope="module")
def rigs(place) -> SharedFamily:
    """As few rigs of one LED as there need to be: blue caps ask for another light than red ones."""
    return rig_set_family(load_family(place[0]), run(*place), max_led_channels=1, required_cnr=12)


@pytest.fixture(scope="module")
def wheel(place) -> SharedFamily:
    return filter_wheel_family(load_family(place[0]), run(*place), max_led_channels=2, required_cnr=12)


def test_a_set_of_rigs_is_told_by_letters(rigs):
    text, rig = rig_set_text(rigs), rigs.rig
    assert rig.number == 2 and rig.status == "proven"
    assert "variants    5 on 2 rigs" in text
    for number, one in enumerate(rig.rigs):
        assert f" {rig_letter(number)}           {one.camera}, filter {one.filter}" in text
    rows = {line.split()[0]: line.split()[1] for line in text.split("EACH VARIANT")[1].splitlines()[2 : COUNT + 1]}
    assert rows == {name: rig_letter(use) for name, use in rig.rig_of.items()}
    assert "no fewer rigs serve all variants" in text
    assert all(entry.outcome.cnr >= 12 * (1 - 1e-2) for entry in rigs.entries)
    for entry in rigs.entries:
        assert set(entry.outcome.leds) <= set(rigs.leds_of(entry.name))
    assert "best of 2 rigs" in words(_figure(rigs))


def test_a_filter_wheel_is_told_by_its_filters(wheel):
    text, rig = wheel_text(wheel), wheel.rig
    assert "5 on 1 filter of a wheel, the rest in common" in text
    assert f"{rig.filters[0]}: 5 variants: cap-00, cap-01" in text
    assert "one is enough" in text
    assert "1 filter on a wheel" in words(_figure(wheel))


def test_what_a_proof_leaves_open_is_told(rigs, wheel):
    for found, text in ((rigs, rig_set_text), (wheel, wheel_text)):
        rig = replace(found.rig, bound=0, status="stopped")
        assert "at least 0" in text(replace(found, rig=rig)) and "stopped at its time limit" in text(
            replace(found, rig=rig)
        )
        assert "the proof leaves this open" in " ".join(text(replace(found, rig=replace(rig, status="open"))).split())
        assert max(map(len, text(found, 60).splitlines())) <= 60


@pytest.mark.parametrize(
    "option, schema, number", [("--rigs", "codesign.rigs/1", 2), ("--wheel", "codesign.wheel/1", 1)]
)
def test_the_command_finds_rigs_and_filters(place, tmp_path, option, schema, number):
    leds = 1 if option == "--rigs" else 2
    picture, table = tmp_path / "x.svg", tmp_path / "x.csv"
    options = ("--store", place[1], option, "--max-leds", leds, "--cnr", 12, "--figure", picture, "--csv", table)
    code, out, err = cnr("family", place[0], *options, "--json")
    assert (code, err) == (1, "")
    result = json.loads(out)
    assert (result["schema"], result["number"], result["bound"]) == (schema, number, number)
    assert all(each["place"] for each in result["variants"])
    assert picture.exists() and len(table.read_text().splitlines()) == COUNT
    places = result["rigs"] if option == "--rigs" else result["filters"]
    assert sorted(name for each in places for name in each["variants"]) == [v["variant"] for v in result["variants"]]


def test_letters_go_on_after_z():
    assert [rig_letter(n) for n in (0, 25, 26, 27, 52)] == ["A", "Z", "AA", "AB", "BA"]


def test_options_of_a_rig_in_common_need_one(place):
    for option, value in (("--goal", "worst"), ("--max-leds", 2), ("--cnr", 3), ("--time-limit", 5)):
        code, out, err = cnr("family", place[0], option, value)
        assert (code, out) == (2, "")
        assert err == f"cnr: {option} is for rigs in common; add --shared, --rigs or --wheel, or leave it out\n"
    code, _, err = cnr("family", place[0], "--shared", "--goal", "best")
    assert code == 2 and err.count("\n") == 1 and "'worst', 'count', 'cost'" in err
    code, _, err = cnr("family", place[0], "--rigs", "--goal", "worst")
    assert (code, err) == (2, "cnr: --goal is for --shared; --rigs serves all variants at the CNR they need\n")
    code, _, err = cnr("family", place[0], "--rigs", "--wheel")
    assert (code, err) == (2, "cnr: --rigs and --wheel are different questions; ask one at a time\n")
