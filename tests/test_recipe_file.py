"""Recipe files: what is written is read back to the last digit."""

import tomllib

import pytest
from command_line import PROBLEM, RECIPE
from hypothesis import given
from hypothesis import strategies as st

from codesign import Design, load_problem, load_recipe
from codesign.report.recipe_file import recipe_schema, recipe_toml

positive = st.floats(min_value=1e-9, max_value=1e9, allow_nan=False)
slugs = st.from_regex(r"[a-z0-9]+(-[a-z0-9]+)*", fullmatch=True)
words = st.text(st.characters(codec="utf-8"), min_size=1).filter(lambda text: text == text.strip())
designs = st.builds(
    Design,
    camera=slugs,
    channel=words,
    gain_db=st.floats(-40, 80),
    filter=slugs,
    f_number=st.floats(0.5, 64),
    exposure_us=positive,
    drive_ma=st.dictionaries(slugs, st.floats(0, 1e6), max_size=5),
    emitters=st.dictionaries(slugs, st.integers(1, 1000), max_size=3),
)


@pytest.mark.property
@given(design=designs)
def test_recipe_survives_the_file(design, tmp_path_factory):
    file = tmp_path_factory.getbasetemp() / "recipe.toml"
    file.write_bytes(recipe_toml(design, "first line\nsecond line").encode())
    assert load_recipe(file) == design


def test_design_knows_its_file(tmp_path):
    file = tmp_path / "mine.toml"
    file.write_text(RECIPE, encoding="utf-8")
    assert load_recipe(file).where == "mine.toml"


def test_comment_stays_a_comment():
    design = Design(camera="a", channel="mono", gain_db=0, filter="none", f_number=4, exposure_us=1)
    text = recipe_toml(design, "camera = 5\n\n[x]")
    assert tomllib.loads(text)["camera"] == "a"


def test_byte_order_mark_is_accepted(tmp_path):
    file = tmp_path / "mine.toml"
    file.write_bytes(b"\xef\xbb\xbf" + RECIPE.encode())
    assert load_recipe(file).camera == "mono-5mp"
    (tmp_path / "job.toml").write_bytes(b"\xef\xbb\xbf" + PROBLEM.encode())
    assert load_problem(tmp_path / "job.toml").spec.required_cnr == 3


def test_schema_asks_for_every_setting():
    schema = recipe_schema()
    assert set(schema["required"]) == {"camera", "channel", "gain_db", "filter", "f_number"}
    assert schema["oneOf"] == [{"required": ["exposure_us", "drive_ma"]}, {"required": ["shot"]}]
    assert schema["additionalProperties"] is False
