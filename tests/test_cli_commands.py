"""The commands as a user runs them: results, exit codes, files."""

import json

import pytest
from command_line import PROBLEM, RECIPE, cnr, spoiled
from demo_names import DEMOS

import codesign
from codesign import load_problem, load_recipe


@pytest.fixture
def job(tmp_path):
    """A folder with a problem and a recipe, both good."""
    (tmp_path / "job.toml").write_text(PROBLEM, encoding="utf-8")
    (tmp_path / "mine.toml").write_text(RECIPE, encoding="utf-8")
    return tmp_path


def test_version_is_shown():
    assert cnr("--version") == (0, f"cnr {codesign.__version__}\n", "")


def test_no_command_shows_help():
    outcome = cnr()
    assert outcome.code == 2
    assert "solve" in outcome.out + outcome.err


@pytest.mark.parametrize("command", ["solve", "check", "parts", "new", "schema", "demos"])
def test_every_command_has_help_with_an_example(command):
    outcome = cnr(command, "--help")
    assert outcome.code == 0
    assert f"Example: cnr {command}" in outcome.out


def test_solve_writes_a_recipe_that_check_finds_good_and_equal(job):
    solved = cnr("solve", job / "job.toml", "--json", "--verify", "--recipe", job / "r.toml")
    assert (solved.code, solved.err) == (0, "")
    result = json.loads(solved.out)
    assert result["verified"]["configurations"] == result["certificate"]["configurations"]
    checked = cnr("check", job / "job.toml", job / "r.toml", "--json")
    assert (checked.code, checked.err) == (0, "")
    again = json.loads(checked.out)
    assert again["settings"] == result["recipe"]["settings"]
    assert again["cnr"] == result["recipe"]["cnr"]


def test_solve_prints_a_recipe_and_nothing_on_stderr(job):
    outcome = cnr("solve", job / "job.toml")
    assert (outcome.code, outcome.err) == (0, "")
    assert "WHAT TO SET" in outcome.out
    assert max(map(len, outcome.out.splitlines())) <= 80


def test_options_reach_the_solver(job):
    outcome = cnr("solve", job / "job.toml", "--json", "--gap", "0.2", "--alternatives", "0")
    result = json.loads(outcome.out)
    assert result["certificate"]["gap"] <= 0.2
    assert result["alternatives"] == []


def test_result_is_shown_before_a_recipe_cannot_be_written(job):
    outcome = cnr("solve", job / "job.toml", "--recipe", job / "nowhere" / "r.toml")
    assert outcome.code == 2
    assert "WHAT TO SET" in outcome.out
    assert outcome.err.startswith("cnr: ")
    assert "does not exist" in outcome.err


def test_check_of_a_good_recipe(job):
    outcome = cnr("check", job / "job.toml", job / "mine.toml")
    assert (outcome.code, outcome.err) == (0, "")
    assert "all limits  are met" in outcome.out


@pytest.mark.parametrize("flags", [(), ("--json",)], ids=["text", "json"])
def test_check_of_a_recipe_over_limits_names_each_and_by_how_much(flags, job):
    recipe = job / "mine.toml"
    recipe.write_text(spoiled(RECIPE, "300", "690").replace("400", "900"), encoding="utf-8")
    outcome = cnr("check", job / "job.toml", recipe, *flags)
    assert outcome.code == 3
    assert len(outcome.err.splitlines()) == 1
    for text in (outcome.err, outcome.out):
        assert "motion blur 2 pixel is 1 pixel above the limit 1 pixel" in " ".join(text.split())
        assert "current, blue-470-a 900 mA is 100 mA above the limit 800 mA" in " ".join(text.split())
    if flags:
        result = json.loads(outcome.out)
        assert result["feasible"] is False
        assert result["cnr"] > 0
        assert len(result["violated"]) >= 2
    else:
        assert " CNR " in outcome.out


def test_new_writes_a_problem_that_runs(tmp_path):
    file = tmp_path / "start.toml"
    outcome = cnr("new", file)
    assert outcome.code == 0
    assert "start.toml" in outcome.out
    assert [path.name for path in tmp_path.iterdir()] == ["start.toml"]
    solved = cnr("solve", file, "--json")
    assert solved.code == 0, solved.err
    result = json.loads(solved.out)
    assert result["required_cnr_met"]
    assert len(result["recipe"]["settings"]["drive_ma"]) > 1


def test_every_line_commented_out_in_the_new_problem_is_a_known_key(tmp_path):
    file = tmp_path / "start.toml"
    cnr("new", file)
    lines = file.read_text(encoding="utf-8").splitlines()
    opened = [
        line[2:] if line.startswith("# ") and ("=" in line.split("#")[1] or line[2] == "[") else line for line in lines
    ]
    text = "\n".join(line for line in opened if not line.startswith(("supply_w", "Repeat")))
    file.write_text(text, encoding="utf-8")
    assert load_problem(file).spec.timing.exposure_min_us == 20


def test_new_refuses_to_replace_without_force(tmp_path):
    file = tmp_path / "start.toml"
    file.write_text("mine", encoding="utf-8")
    outcome = cnr("new", file)
    assert outcome.code == 2
    assert outcome.err.splitlines() == [f"cnr: {file}: exists already; choose another name, or --force to replace it"]
    assert file.read_text(encoding="utf-8") == "mine"
    assert cnr("new", file, "--force").code == 0
    assert "[scene]" in file.read_text(encoding="utf-8")


def test_demos_lists_every_demo():
    outcome = cnr("demos")
    assert outcome.code == 0
    for name in DEMOS:
        assert name in outcome.out


@pytest.mark.parametrize("kind", ["leds", "filters", "cameras", "surfaces"])
def test_parts_lists_all_of_a_kind(kind):
    outcome = cnr("parts", kind)
    assert outcome.code == 0
    assert max(map(len, outcome.out.splitlines())) <= 80
    listed = json.loads(cnr("parts", kind, "--json").out)
    lines = outcome.out.splitlines()
    assert len(lines) == len(listed) + 2
    assert [line.split()[0] for line in lines[1:-1]] == [part["id"] for part in listed]


def test_parts_are_filtered_by_expression():
    listed = json.loads(cnr("parts", "leds", "700 < peak_nm < 800", "--json").out)
    assert listed
    assert all(700 < part["peak_nm"] < 800 for part in listed)


def test_parts_without_a_kind_counts():
    counts = json.loads(cnr("parts", "--json").out)
    assert counts["name"] == "demo"
    text = cnr("parts").out
    assert f"leds        {len(counts['leds'])}" in text


@pytest.mark.parametrize("arguments", [("--id", "nir-2mp"), ("cameras", "--id", "nir-2mp")])
def test_one_part_is_shown_in_full(arguments):
    outcome = cnr("parts", *arguments)
    assert outcome.code == 0
    assert "pixel_pitch_um" in outcome.out
    assert "silicon.collection_depth_um = 22," in outcome.out
    part = json.loads(cnr("parts", *arguments, "--json").out)
    assert part["channels"][0]["silicon"]["collection_depth_um"] == 22


@pytest.mark.parametrize("kind", ["problem", "recipe"])
def test_schema_is_json(kind):
    schema = json.loads(cnr("schema", kind).out)
    assert schema["$schema"].startswith("https://json-schema.org")
    assert schema["type"] == "object"


def test_schema_knows_every_key_of_the_demo_problems():
    import tomllib

    schema = json.loads(cnr("schema").out)
    for name in DEMOS:
        path = load_problem(name).folder / f"{name}.toml"
        for section, value in tomllib.loads(path.read_text(encoding="utf-8")).items():
            entry = schema["properties"][section]
            model = next((part["$ref"] for part in (entry, *entry.get("anyOf", ())) if "$ref" in part), None)
            if model and isinstance(value, dict):
                assert set(value) <= set(schema["$defs"][model.rsplit("/")[-1]]["properties"]), (name, section)


def test_recipe_of_solve_states_what_it_is_for(job):
    cnr("solve", job / "job.toml", "--recipe", job / "r.toml")
    first = (job / "r.toml").read_text(encoding="utf-8").splitlines()[0]
    assert first.startswith("# Recipe for Blue cap among green caps (job.toml), predicted CNR ")
    assert load_recipe(job / "r.toml").camera == "mono-5mp"
