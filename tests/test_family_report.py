"""What a family looks like: text, JSON, the table for a line controller, the figure, progress."""

import csv
import io
import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from command_line import cnr
from family_runs import run, write_family
from figure_checks import check_figure, words

from codesign import evaluate
from codesign.design import Design
from codesign.family import load_family
from codesign.family.batch import Entry, OwnRigs
from codesign.family.variants import Variant
from codesign.report.family_progress import FamilyProgress, family_line
from codesign.report.family_table import recipe_rows, threshold
from codesign.report.family_text import own_rigs_text
from codesign.report.figures.base import figure_bytes
from codesign.report.figures.families import family_figure

COUNT = 18
HOSTILE = "\x1b[31mred\u202e <b>$x$ " + "long " * 30


@pytest.fixture(scope="module")
def place(tmp_path_factory) -> tuple[Path, Path]:
    """A family in which one row is wrong and one cannot be met, and its store."""
    rows = {"cap_04": "cap-bleu,cap-green,[],100,2,", "cap_09": "cap-blue,cap-green,[],10000000,2,"}
    family = write_family(tmp_path_factory.mktemp("family"), COUNT, **rows)
    return family, family.with_name("store.sqlite")


@pytest.fixture(scope="module")
def found(place) -> OwnRigs:
    return run(*place)


def hostile(found: OwnRigs) -> OwnRigs:
    """The same with names that would like to leave their place."""
    first, *rest = found.entries
    bad = next(entry for entry in found.entries if not entry.outcome.solved)
    named = replace(bad, variant=Variant(name=HOSTILE, where="x.csv:2"), outcome=replace(bad.outcome, reason=HOSTILE))
    entries = (replace(first, variant=Variant(name=HOSTILE, where="x.csv:2")), *rest, named)
    return replace(found, title=HOSTILE, entries=entries)


def test_the_text_says_how_many_are_served_and_which_are_worst(found):
    text = own_rigs_text(found)
    assert "variants    18, each with the rig best for it: 16 solved, 1 whose limits cannot" in text
    assert "required    12 of 16 variants reach the CNR they need (CNR 3 to 30)" in text
    rows = [line.split() for line in text.split("WORST OFF FIRST")[1].splitlines()[2:18]]
    shares = [float(row[1]) / float(row[2]) for row in rows]
    assert shares == sorted(shares)
    assert {row[0] for row in rows if row[3] == "!"} == {entry.name for entry in found.entries if entry.met is False}
    assert "camera      mono-5mp 16" in text
    assert "2 VARIANTS WITHOUT A RECIPE" in text
    assert "caps.csv:6: variant 'cap-04': scene.target is 'cap-bleu', no such surface" in text
    assert "cap-09: limits in conflict: " in text


def test_the_distribution_counts_every_variant_once(found):
    lines = own_rigs_text(found).split("CNR OF THE RECIPES")[1].split("WORST OFF")[0].splitlines()[2:-1]
    counts = [int(line.split()[3]) for line in lines if " to " in line and "█" in line]
    assert sum(counts) == len(found.solved)


@pytest.mark.parametrize("width", [60, 80])
def test_no_line_is_longer_than_the_page_and_none_holds_control_characters(found, width):
    for one in (found, hostile(found), replace(found, entries=found.failed), replace(found, entries=found.entries[:1])):
        text = own_rigs_text(one, width)
        assert max(map(len, text.splitlines())) <= width
        assert all(character.isprintable() or character == "\n" for character in text)


def test_a_family_that_stops_at_time_limits_says_so(found):
    entries = [replace(e, outcome=replace(e.outcome, proven=False)) if e.outcome.solved else e for e in found.entries]
    assert "for 16 variants the search stopped at a time limit" in own_rigs_text(replace(found, entries=tuple(entries)))


def test_the_recipe_table_is_what_the_forward_model_says(place, found):
    family = load_family(place[0])
    for row in recipe_rows(found.entries):
        if row["status"] != "solved":
            assert row["reason"] and row["camera"] is None and row["drive_ma.blue-470-a"] is None
            continue
        drives = {key.removeprefix("drive_ma."): ma for key, ma in row.items() if key.startswith("drive_ma.")}
        names = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us")
        problem = family.problem(row["variant"])
        said = evaluate(problem, Design(**{name: row[name] for name in names}, drive_ma=drives))
        assert said.feasible
        assert row["cnr"] == pytest.approx(said.cnr, rel=1e-12)
        grey = {reading.role: reading.grey_dn for reading in said.surfaces}
        assert (row["target_grey_dn"], row["background_grey_dn"]) == (grey["target"], grey["background"])
        assert row["threshold_dn"] == (grey["target"] + grey["background"]) / 2
        assert row["cnr"] <= row["cnr_bound"]
        assert row["required_met"] == (row["cnr"] >= row["required_cnr"])


def test_the_threshold_lies_between_the_nearest_of_several(found):
    outcome = found.entries[0].outcome
    grey = (("target", 10.0), ("target", 20.0), ("background", 50.0), ("background", 40.0), ("guard", 25.0))
    readings = [replace(outcome.readings[0], role=role, grey_dn=dn) for role, dn in grey]
    darker = replace(outcome, readings=tuple(readings), sign="darker")
    assert threshold(darker) == 30.0
    assert threshold(replace(darker, weights={"red": 1.0})) is None
    swapped = [replace(r, role={"target": "background", "background": "target"}.get(r.role, r.role)) for r in readings]
    assert threshold(replace(outcome, readings=tuple(swapped), sign="brighter")) == 30.0


def test_combined_readings_have_columns_of_their_own(found):
    shots = ({"exposure_us": 10.0, "drive_ma": {"a": 5.0}}, {"exposure_us": 20.0, "drive_ma": {"b": 7.0}})
    outcome = replace(found.entries[0].outcome, shots=shots, drive_ma={}, emitters={"a": 3})
    row = recipe_rows([replace(found.entries[0], outcome=outcome)])[0]
    assert (row["exposure_us.shot-2"], row["drive_ma.shot-1.a"], row["drive_ma.shot-1.b"]) == (20.0, 5.0, 0.0)
    assert (row["emitters.a"], row["threshold_dn"]) == (3, None)


def test_command_writes_table_and_json_and_figure(place, found, tmp_path):
    family, store = place
    table, picture = tmp_path / "recipes.csv", tmp_path / "family.svg"
    options = ("--store", store, "--csv", table, "--figure", picture, "--json")
    code, out, err = cnr("family", family, *options)
    assert (code, err) == (1, "")
    result = json.loads(out)
    assert result["schema"] == "codesign.family/1"
    assert result["summary"] == {
        "variants": 18, "solved": 16, "impossible": 1, "bad": 1, "met": 12, "judged": 16,
        "cnr_worst": pytest.approx(min(e.outcome.cnr for e in found.solved)),
        "cnr_median": pytest.approx(np.median([e.outcome.cnr for e in found.solved])),
        "cnr_best": pytest.approx(max(e.outcome.cnr for e in found.solved)),
    }  # fmt: skip
    assert result["recipe_table"] == json.loads(json.dumps(recipe_rows(found.entries)))
    assert result["parts"]["camera"] == [{"id": "mono-5mp", "variants": 16}]
    rows = list(csv.DictReader(io.StringIO(table.read_text(encoding="utf-8"))))
    assert [row["variant"] for row in rows] == [entry.name for entry in found.entries]
    for row, entry in zip(rows, found.entries, strict=True):
        assert row["status"] == entry.outcome.status
        if entry.outcome.solved:  # all digits, so that nothing is lost on the way to the line
            assert float(row["cnr"]) == entry.outcome.cnr
            assert float(row["drive_ma.blue-470-a"]) == entry.outcome.drive_ma.get("blue-470-a", 0.0)
    assert picture.read_bytes().startswith(b"<?xml")


def test_only_some_variants_and_a_good_end(place):
    family, store = place
    code, out, err = cnr("family", family, "--store", store, "--only", "cap-03", "--only", "cap-01")
    assert (code, err) == (0, "")
    assert "variants    2, each with the rig best for it: 2 solved" in out
    code, _, err = cnr("family", family, "--store", store, "--only", "cap-3")
    assert code == 2 and "caps.toml: no variant 'cap-3'; did you mean 'cap-13'?" in err


def test_files_that_cannot_be_written_are_told_before_the_work(place, tmp_path):
    for option, file in (("--csv", "nowhere/x.csv"), ("--figure", "nowhere/x.svg"), ("--figure", "x.bmp")):
        store = tmp_path / "store.sqlite"
        code, out, err = cnr("family", place[0], "--store", store, option, tmp_path / file)
        assert (code, out, err.count("\n"), store.exists()) == (2, "", 1, False)


# --- the figure --------------------------------------------------------------------------------------------------


def many(found: OwnRigs, count: int) -> list[Entry]:
    """As many variants as wished, of various CNR."""
    rng, solved = np.random.default_rng(count), found.solved
    entries = []
    for number in range(count):
        entry = solved[number % len(solved)]
        outcome = replace(entry.outcome, cnr=entry.outcome.cnr * rng.uniform(0.8, 1.2))
        entries.append(replace(entry, variant=Variant(name=f"variant {number}", where="x"), outcome=outcome))
    return entries


@pytest.mark.parametrize("count", [1, 24, 200])
@pytest.mark.parametrize("common", [False, True])
def test_the_figure_is_legible(found, count, common):
    entries = many(found, count)
    shared = {e.name: replace(e.outcome, cnr=0.7 * e.outcome.cnr) for e in entries} if common else None
    figure = family_figure(entries, shared, "Caps on a line")
    check_figure(figure)
    shown = words(figure)
    assert "Caps on a line" in shown and "CNR needed" in shown
    assert ("rig in common" in shown) == common
    assert ("camera mono-5mp" in shown) != common
    assert ("variant 23" in shown) == (count == 24)


def test_the_figure_counts_what_it_does_not_draw_and_survives_names(found):
    figure = family_figure(hostile(found).entries, None, HOSTILE)
    check_figure(figure)
    assert "3 without a recipe are not drawn" in words(figure).replace("\n", " ")
    first, second = (figure_bytes(family_figure(hostile(found).entries, None, HOSTILE)) for _ in range(2))
    assert first == second
    check_figure(family_figure(found.failed, None, "Nothing"))


def test_bars_show_the_drive(found):
    figure = family_figure(found.entries, None, "Caps")
    names = [label.get_text() for label in figure.axes[1].get_yticklabels()]
    row = names.index("LED blue-470-a")
    drives = [e.outcome.drive_ma.get("blue-470-a", 0.0) for e in sorted(found.solved, key=lambda e: e.outcome.cnr)]
    tops = {}
    for patch in figure.axes[1].collections:
        box = patch.get_datalim(figure.axes[1].transData)
        if int(box.y1) == row:
            tops |= {place: box.height for place in range(round(box.x0 + 0.42), round(box.x1 - 0.42) + 1)}
    for place, drive in enumerate(drives):
        assert tops.get(place, 0.0) == pytest.approx(0.82 * drive / max(drives), abs=1e-9)


# --- progress ----------------------------------------------------------------------------------------------------


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_progress_tells_what_is_done_failed_and_left():
    assert family_line(0, 10, 0, 0, 1.0) == "░" * 24 + " 0 of 10 variants"
    assert family_line(10, 10, 2, 10, 60.0) == "█" * 24 + " 10 of 10 variants, 2 failed"
    assert family_line(5, 10, 0, 5, 60.0).endswith(" 5 of 10 variants, about 60 s left")
    # Those from the store took no time.
    assert family_line(5, 10, 0, 1, 60.0).endswith("about 5 min left")


def test_progress_is_shown_to_who_watches_and_wiped(monkeypatch):
    for stream, shown in ((Terminal(), True), (io.StringIO(), False)):
        with FamilyProgress(stream) as progress:
            progress(1, 4, 0, 1)
            if progress.watched:
                progress.draw()
        assert ("1 of 4 variants" in stream.getvalue()) == shown
        assert stream.getvalue().endswith("\r") == shown
