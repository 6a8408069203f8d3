"""``cnr solve --figures`` and ``cnr check --figures``: what is written, and mistakes told before the search."""

from xml.etree import ElementTree

import pytest
from command_line import PROBLEM, RECIPE, cnr
from hostile import STRINGS, write_hostile

ALWAYS = {"recipe-sheet", "spectral-story", "simulated-view", "noise-budget", "use-of-limits"}


@pytest.fixture
def files(tmp_path):
    """A small problem and a recipe typed for it, as files."""
    (tmp_path / "problem.toml").write_text(PROBLEM, encoding="utf-8")
    (tmp_path / "recipe.toml").write_text(RECIPE, encoding="utf-8")
    return tmp_path


def test_check_draws_a_typed_recipe_beside_plain_light(files):
    result = cnr("check", files / "problem.toml", files / "recipe.toml", "--figures", files / "drawn")
    drawn = {path.stem: path for path in (files / "drawn").iterdir()}
    assert set(drawn) == ALWAYS
    assert "wrote 5 figures" in result.err
    assert all(ElementTree.parse(path).getroot().get("width") for path in drawn.values())
    text = "".join(ElementTree.parse(drawn["simulated-view"]).getroot().itertext())
    assert "alone, no filter: CNR" in text and "With the recipe: CNR" in text


def test_solve_draws_beside_the_present_recipe(files):
    folder = files / "drawn"
    folder.mkdir()
    drawing = ("--figures", folder, "--format", "pdf", "--present", files / "recipe.toml")
    result = cnr("solve", files / "problem.toml", *drawing)
    assert result.code == 0
    assert {path.name for path in folder.iterdir()} == {f"{name}.pdf" for name in ALWAYS}
    assert all(path.read_bytes()[:5] == b"%PDF-" for path in folder.iterdir())


def test_hostile_problems_are_drawn(tmp_path):
    path = write_hostile(tmp_path, STRINGS["mathtext"])
    result = cnr("solve", path, "--figures", tmp_path / "drawn", "--alternatives", 0)
    assert result.code == 0, result.err
    sheet = ElementTree.parse(tmp_path / "drawn" / "recipe-sheet.svg").getroot()
    assert STRINGS["mathtext"] in "".join(sheet.itertext())


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (["--format", "png"], "--format belongs to --figures"),
        (["--present", "x.toml"], "--present belongs to --figures"),
        (["--figures", "{folder}", "--format", "bmp"], "--format is 'bmp', must be svg, png, pdf"),
        (["--figures", "{folder}/file"], "is a file; name a folder"),
        (["--figures", "{folder}/a/b"], "does not exist; create it first"),
        (["--figures", "{folder}", "--present", "{folder}/none.toml"], "none.toml"),
    ],
)
def test_mistakes_are_told_before_the_search(tmp_path, options, said):
    (tmp_path / "file").write_text("")
    result = cnr("solve", "moisture", *(option.format(folder=tmp_path) for option in options))
    assert result.code == 2
    assert said in result.err and len(result.err.splitlines()) == 1
    assert result.out == ""
