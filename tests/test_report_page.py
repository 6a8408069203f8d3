"""The one-file report as text: its structure, its escaping, its policy, and that it says what the result says."""

import json
import re
from dataclasses import replace
from itertools import pairwise

import pytest
from command_line import PROBLEM, RECIPE, cnr, spoiled
from demo_names import DEMOS
from hostile import MARK, STRINGS, assert_inert, hostile_problem
from page_outline import Outline, carried

from codesign import Design, evaluate, load_problem, load_recipe, solve, verify
from codesign.design import Shot
from codesign.least_cost import LeastCost
from codesign.report.machine import solution_dict
from codesign.report.page import figures, html
from codesign.report.page.document import check_html, report_html, write_report
from codesign.report.page.html import element, joined, name, words
from codesign.report.page.progress import Work

#: What a file to be mailed may hold at most. [byte]
LARGEST = 3_000_000
DATE = "2026-01-02"


@pytest.fixture(scope="module")
def solution(solved):
    return solved("yellow-stain")


@pytest.fixture(scope="module")
def text(reported):
    return reported("yellow-stain")


@pytest.fixture
def no_figures(monkeypatch):
    """Most tests are about words; figures take a second each."""
    monkeypatch.setattr(figures, "DRAWN", {})


@pytest.fixture(scope="module")
def outline(text):
    return Outline(text)


# --- markup ----------------------------------------------------------------------------------------------------


def test_plain_text_is_always_escaped():
    assert element("p", "<b>&\"'</b>") == "<p>&lt;b&gt;&amp;&quot;&#x27;&lt;/b&gt;</p>"
    assert element("p", element("b", "x"), " ", 3) == "<p><b>x</b> 3</p>"
    assert element("a", "x", title='"><script>') == '<a title="&quot;&gt;&lt;script&gt;">x</a>'


def test_attributes_without_a_value_and_absent_ones():
    assert element("input", checked=True, disabled=False, class_=None, aria_label="a") == (
        '<input checked aria-label="a">'
    )


def test_names_are_set_apart_and_lose_direction_characters():
    assert name("a\u202eb\u2066\nc") == "<bdi>a b c</bdi>"


def test_spaces_between_pieces_stay():
    assert joined(("a ", words("b"), None, " c")) == "a b c"


def test_text_of_several_lines_shows_what_cannot_be_seen():
    assert html.lines("a\r\n\u202eb\x07<") == "a\n[U+202E]b[U+0007]&lt;"


@pytest.mark.parametrize("text", STRINGS.values(), ids=STRINGS)
def test_data_blocks_hold_any_text_and_nothing_ends_them(text):
    block = html.data_block("d", {"x": text})
    inside = block.removeprefix('<script type="application/json" id="d">').removesuffix("</script>")
    assert not set(inside) & set("<>&\u2028\u2029")
    assert json.loads(inside) == {"x": text}


@pytest.mark.parametrize("text", STRINGS.values(), ids=STRINGS)
def test_strings_of_style_sheets_hold_codes_only(text):
    assert re.fullmatch(r'"(\\[0-9a-f]{6})*"', html.css_string(text))


def test_files_too_large_to_carry_are_no_link():
    assert html.download("x", "y" * (html.LARGEST_DOWNLOAD + 1), "z.txt") is None


# --- structure -------------------------------------------------------------------------------------------------


def test_page_is_one_document_with_landmarks(text, outline):
    assert text.startswith('<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8">')
    for landmark in ("header", "main", "nav", "footer"):
        assert text.count(f"<{landmark}") == 1 + (landmark == "header" and text.count("<header class"))
    assert [level for level, _ in outline.headings].count(1) == 1
    assert outline.headings[0] == (1, "Yellow stain on white cloth")


def test_headings_skip_no_level(outline):
    levels = [level for level, _ in outline.headings]
    assert all(after <= before + 1 for before, after in pairwise(levels))


def test_links_lead_somewhere_in_the_page_or_carry_their_file(outline):
    for href in outline.values("href"):
        if href.startswith("#"):
            assert href[1:] in outline.ids
        else:
            assert href.startswith("data:")
    assert "#recipe" in outline.values("href")


def test_ids_are_there_once(outline):
    assert len(outline.ids) == len(set(outline.ids))
    for key in ("aria-labelledby", "for"):
        assert {word for value in outline.values(key) for word in value.split()} <= set(outline.ids)


def test_tables_have_captions_and_heads_say_what_they_head(outline):
    assert len(outline.tables) >= 8
    assert all(table["caption"] and table["unscoped"] == 0 for table in outline.tables)


def test_every_section_is_in_the_contents(text, outline):
    contents = re.search(r"<nav.*?</nav>", text, re.DOTALL)[0]
    listed = re.findall(r'href="#([a-z]+)"', contents)
    sections = re.findall(r'<section id="([a-z]+)" aria-labelledby', text)
    assert [key for key in listed if key != "live"] == sections
    assert {"recipe", "result", "limits", "proof", "noise", "story", "sensitivities", "alternatives", "assumptions",
            "parts", "cautions", "radiation", "reproduce"} <= set(sections)  # fmt: skip


# --- policy ----------------------------------------------------------------------------------------------------


def test_policy_names_every_style_and_script_and_nothing_else(outline):
    hashes = {kind: {html.content_hash(text) for text in texts} for kind, texts in outline.inline.items()}
    rules = dict(rule.strip().split(" ", 1) for rule in outline.policy.split(";"))
    assert rules.pop("default-src") == "'none'"
    assert rules.pop("img-src") == "data:"
    assert rules.pop("base-uri") == rules.pop("form-action") == "'none'"
    assert {key: set(value.split()) for key, value in rules.items()} == {
        "style-src": hashes["style"], "script-src": hashes["script"],
    }  # fmt: skip
    assert len(hashes["style"]) >= 1


def test_nothing_is_fetched_and_no_attribute_runs_anything(outline):
    names = {key for _, key, _ in outline.attributes}
    assert not {key for key in names if key.startswith("on")}
    assert not names & {"style", "src", "srcset", "action", "background", "formaction"}
    tags = {tag for tag, _, _ in outline.attributes}
    assert not tags & {"link", "iframe", "object", "embed", "base", "img"}
    pictures = [value for tag, key, value in outline.attributes if tag == "image" and key == "href"]
    assert all(value.startswith("data:image/png;base64,") for value in pictures)
    assert "@import" not in "".join(outline.inline["style"])
    assert "url(" not in "".join(outline.inline["style"])


# --- what it says ----------------------------------------------------------------------------------------------


def test_recipe_carried_is_the_recipe(outline, solution, tmp_path):
    files = [href for href in outline.values("href") if href.startswith("data:text/plain")]
    (tmp_path / "r.toml").write_text(carried(files[0]), encoding="utf-8")
    again = evaluate(solution.problem, load_recipe(tmp_path / "r.toml"))
    assert again.cnr == solution.recipe.cnr
    assert carried(files[0]).strip() in outline.words


def test_result_carried_is_that_of_the_library(outline, solution):
    files = [href for href in outline.values("href") if href.startswith("data:application/json")]
    assert json.loads(carried(files[0])) == json.loads(json.dumps(solution_dict(solution, verify(solution))))


def test_problem_file_is_carried_word_for_word(outline, solution):
    file = (solution.problem.folder / solution.problem.where).read_text(encoding="utf-8")
    files = [href for href in outline.values("href") if href.startswith("data:text/plain")]
    assert carried(files[1]) == file
    assert file.strip() in outline.words


@pytest.mark.usefixtures("no_figures")
def test_changed_problem_is_carried_as_it_was_solved(solution):
    spec = solution.problem.spec.model_copy(update={"required_cnr": 9.0})
    other = replace(solution, problem=replace(solution.problem, spec=spec))
    outline = Outline(report_html(other, made=DATE))
    assert "not from a file" in outline.words
    files = [href for href in outline.values("href") if href.startswith("data:")]
    tables = [json.loads(carried(f)) for f in files if carried(f).startswith("{")]
    assert any(table.get("required_cnr") == 9.0 for table in tables)


@pytest.mark.parametrize("name", DEMOS)
def test_page_says_what_the_result_says(name, solved, reported):
    solution = solved(name)
    recipe, design = solution.recipe, solution.recipe.design
    said = Outline(reported(name)).words
    for word in (design.camera, f"f/{design.f_number:g}", f"{design.exposure_us:.10g} µs", f"{recipe.cnr:.4g}"):
        assert word in said
    for led, ma in design.drive_ma.items():
        assert led in said and f"{ma:.10g} mA" in said
    for limit in recipe.limits:
        assert limit.name in said
    for surface in recipe.surfaces:
        assert surface.id in said and f"{surface.grey_dn:.1f}" in said
    assert f"above {solution.certificate.bound:.6g}" in said
    assert solution.problem.spec.title in said


def test_assumptions_hold_every_value_of_the_problem(outline, solution):
    dump = solution.problem.spec.model_dump()
    for section in ("optics", "lighting", "timing", "temperature", "limits", "averaging", "detection", "solver"):
        for key, value in (dump[section] or {}).items():
            assert (f"{section}.{key}" in outline.words) == (value not in (None, (), {})), key


def test_sources_of_all_parts_in_use_are_there(outline, solution):
    words = outline.words
    for part in (solution.problem.camera("mono-5mp"), solution.problem.filter("bp-405-35"), *solution.problem.surfaces):
        assert part.id in words and part.source in words
    assert "Invented parts are in use" in words


def test_deference_and_screening_are_labelled(outline):
    assert "Local codes hold" in outline.words
    assert "never a classification" in outline.words
    assert "200 mm" in outline.words


def test_date_command_and_version_are_told(outline):
    assert (
        DATE in outline.words and "cnr solve yellow-stain --report" in outline.words and "codesign 0." in outline.words
    )


@pytest.mark.usefixtures("no_figures")
def test_check_of_the_proof_is_told_where_it_was_run(outline, solution):
    assert "worked out again from the problem up" in outline.words
    assert "--verify does" in Outline(report_html(solution, made=DATE)).words


@pytest.mark.usefixtures("no_figures")
def test_gain_that_is_still_possible_is_counted_from_the_recipe(solution):
    loose = replace(solution, certificate=replace(solution.certificate, bound=1.25 * solution.recipe.cnr))
    words = Outline(report_html(loose, made=DATE)).words
    assert "no other setting of the candidates gains more than 25.0 %" in words
    assert "20.0 % below it" in words


@pytest.mark.usefixtures("no_figures")
def test_search_that_was_stopped_says_so(solution):
    stopped = Outline(report_html(replace(solution, status="stopped"), made=DATE)).words
    assert "Stopped early" in stopped and "Proven" not in stopped


@pytest.mark.usefixtures("no_figures")
def test_required_cnr_missed_is_told(solution):
    spec = solution.problem.spec.model_copy(update={"required_cnr": 100.0})
    harder = replace(solution, problem=replace(solution.problem, spec=spec))
    assert "needed 100: not met" in Outline(report_html(harder, made=DATE)).words


@pytest.mark.usefixtures("no_figures")
def test_left_out_parts_are_all_listed(solution):
    names = tuple(f"led x{k}: too far" for k in range(20))
    words = Outline(report_html(replace(solution, problem=replace(solution.problem, left_out=names)))).words
    assert all(text in words for text in names)


def test_report_with_figures_can_be_mailed(text):
    assert text.count('<div class="picture') == 4
    assert len(text.encode()) <= LARGEST


@pytest.mark.usefixtures("no_figures")
def test_report_is_written_whole(solution, tmp_path):
    write_report(tmp_path / "r.html", solution, made=DATE)
    assert (tmp_path / "r.html").read_text(encoding="utf-8") == report_html(solution, made=DATE)
    assert [path.name for path in tmp_path.iterdir()] == ["r.html"]


@pytest.mark.usefixtures("no_figures")
def test_least_cost_report_says_what_is_least(solution):
    numbers = {"value": 3.5, "bound": 3.25, "required_cnr": 6.0, "steps": 9, "seconds": 1.0}
    cost = LeastCost(quantity="heat", unit="W", status="proven", solution=solution, **numbers)
    notes = {"sensitivities": "they belong to the greatest CNR"}
    words = Outline(report_html(solution, cost=cost, notes=notes, made=DATE)).words
    assert "Asked for: the least heat that reaches CNR 6. Found: 3.5 W; proven that none does with 3.25 W" in words
    assert "Not in this report: they belong to the greatest CNR" in words


# --- recipes that were typed -----------------------------------------------------------------------------------


def bench(tmp_path, *changes):
    text = PROBLEM
    for old, new in changes:
        text = spoiled(text, old, new)
    (tmp_path / "job.toml").write_text(text, encoding="utf-8")
    return load_problem(tmp_path / "job.toml")


def typed(**changes):
    plain = {"camera": "mono-5mp", "channel": "mono", "gain_db": 0, "filter": "none", "f_number": 4, "exposure_us": 300}
    return Design(**{**plain, **changes})


@pytest.mark.usefixtures("no_figures")
def test_missed_limits_of_a_typed_recipe_come_first(tmp_path):
    problem = bench(tmp_path)
    performance = evaluate(problem, typed(exposure_us=690, drive_ma={"blue-470-a": 800}))
    words = Outline(check_html(problem, performance, made=DATE)).words
    assert "Not met: 1 of" in words or f"Not met: {len(performance.violated)} of" in words
    assert performance.violated[0].shortfall() in words
    assert "Proven" not in words and "nothing was searched" in words


@pytest.mark.usefixtures("no_figures")
def test_saturated_recipe_is_told_beside_its_cnr(tmp_path):
    problem = bench(tmp_path)
    for exposure, told in ((20000, 2), (300, 0)):
        performance = evaluate(problem, typed(exposure_us=exposure, drive_ma={"blue-470-a": 800}))
        words = Outline(check_html(problem, performance, made=DATE)).words
        assert words.count("a picture does not show this CNR") == told


def test_dark_recipe_has_a_page(tmp_path):
    problem = bench(tmp_path)
    words = Outline(check_html(problem, evaluate(problem, typed()), made=DATE)).words
    assert "All LEDs are off" in words
    assert "Radiation screening" not in words


@pytest.mark.usefixtures("no_figures")
def test_shots_and_weights_have_a_page(tmp_path):
    problem = bench(tmp_path, ("[solver]", "[detection]\nshots = 2\n\n[solver]"))
    shots = (Shot(exposure_us=120, drive_ma={"blue-470-a": 400}), Shot(exposure_us=80, drive_ma={"red-625-a": 300}))
    performance = evaluate(problem, typed(exposure_us=200, shots=shots))
    words = Outline(check_html(problem, performance, made=DATE)).words
    assert "2 shots of 120, 80 µs" in words and "readings added up as shot 1" in words
    assert "400, 0 mA" in words and "0, 300 mA" in words


# --- command line ----------------------------------------------------------------------------------------------


@pytest.mark.usefixtures("no_figures")
def test_solve_writes_the_report_beside_its_result(tmp_path):
    file = tmp_path / "r.html"
    outcome = cnr("solve", "yellow-stain", "--json", "--report", file, "--quick", "--trade-off", "leds")
    assert outcome.code == 0
    assert json.loads(outcome.out)["schema"] == "codesign.solution/1"
    assert f"wrote {file}" in outcome.err and "sensitivities" in outcome.err and outcome.err.count("\n") == 1
    words = Outline(file.read_text(encoding="utf-8")).words
    assert f"cnr solve yellow-stain --json --report {file} --quick --trade-off leds" in words
    assert "CNR against LED channels" in words and "shadow prices" in words
    assert "white-6500k-a alone, no filter" in words


@pytest.mark.usefixtures("no_figures")
def test_interrupted_sensitivities_leave_a_report_without_them(tmp_path, monkeypatch):
    def interrupted(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr("codesign.study.sensitivity.sensitivities", interrupted)
    outcome = cnr("solve", "yellow-stain", "--report", tmp_path / "r.html")
    assert outcome.code == 130
    words = Outline((tmp_path / "r.html").read_text(encoding="utf-8")).words
    assert "Not in this report: interrupted" in words and "How sure it is" in words


def test_large_reports_are_told_of(tmp_path):
    (tmp_path / "r.html").write_bytes(bytes(3_100_000))
    assert "larger than 3 MB" in Work().told(tmp_path / "r.html")


@pytest.mark.usefixtures("no_figures")
def test_check_writes_the_report_even_of_a_recipe_that_misses_limits(tmp_path):
    bench(tmp_path)
    (tmp_path / "r.toml").write_text(spoiled(RECIPE, "blue-470-a = 400", "blue-470-a = 2000"), encoding="utf-8")
    outcome = cnr("check", tmp_path / "job.toml", tmp_path / "r.toml", "--report", tmp_path / "r.html")
    assert outcome.code == 3
    assert "Not met" in Outline((tmp_path / "r.html").read_text(encoding="utf-8")).words


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("--report", "r.pdf"), "must end in .html"),
        (("--report", "nowhere/r.html"), "folder 'nowhere' does not exist"),
        (("--quick",), "--quick belongs to --report"),
        (("--trade-off", "heat"), "--trade-off belongs to --report"),
        (("--report", "r.html", "--trade-off", "led"), "did you mean 'leds'"),
    ],
)
def test_bad_options_are_refused_before_the_search(arguments, said, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    outcome = cnr("solve", "yellow-stain", *arguments)
    assert outcome.code == 2 and said in outcome.err and outcome.out == ""
    assert outcome.err.count("\n") == 1 and not list(tmp_path.iterdir())


# --- hostile names ---------------------------------------------------------------------------------------------


@pytest.mark.usefixtures("no_figures")
def test_hostile_texts_are_words_only(tmp_path):
    problem = hostile_problem(tmp_path)
    found = solve(problem, alternatives=1)
    text = report_html(found, verdict=verify(found), command=f"cnr solve {STRINGS['closing']}", made=DATE)
    assert_inert(text)
    outline = Outline(text)
    assert outline.words.count(MARK) > 20
    bad = {c for c in text if c in "\u202a\u202b\u202d\u202e\u2066\u2067\u2068\x00\x07\x1b"}
    assert not bad


@pytest.mark.usefixtures("no_figures")
@pytest.mark.parametrize("text", STRINGS.values(), ids=STRINGS)
def test_each_hostile_title_leaves_the_structure_as_it_is(text, solution):
    spec = solution.problem.spec.model_copy(update={"title": text, "notes": text})
    problem = replace(solution.problem, spec=spec, where=text, left_out=(text,))
    plain, page = (check_html(each, solution.recipe, made=DATE, command=text) for each in (solution.problem, problem))
    hostile = Outline(page)
    assert hostile.headings[0] == (1, html.plain(text))
    assert {tag for tag, _, _ in hostile.attributes} == {tag for tag, _, _ in Outline(plain).attributes}
    assert_inert(page)
