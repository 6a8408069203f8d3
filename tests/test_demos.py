"""The demo problems: they load, solve with proof, and together touch every kind of limit."""

import re

import pytest
from demo_names import DEMOS, FOLDER, REGIMES

from codesign import build_problem, load_problem, solve
from codesign.limits import sum_limits
from codesign.problem import read_toml

#: Every kind of limit there is; single LEDs and surfaces are named after the comma.
KINDS = {
    "well",
    "camera longest exposure",
    "camera shortest exposure",
    "wanted longest exposure",
    "wanted shortest exposure",
    "motion blur",
    "frame period",
    "pulse width",
    "pulse duty",
    "dark signal in the well",
    "dark shot noise",
    "rig heat",
    "supply power",
    "supply peak power",
    "current",
    "junction",
    "depth of field",
}

#: The camera's own longest exposure is 10 ms to 10 s: the same limit on the exposure as the wanted one, only laxer.
INTERCHANGEABLE = {"camera longest exposure": "wanted longest exposure"}


def kind(limit: str) -> str:
    """'current, red-625-a' -> 'current'."""
    return limit.split(",")[0]


def readme_rows() -> dict[str, set[str]]:
    """Binding limits by demo name as problems/README.md tells them."""
    text = (FOLDER / "README.md").read_text(encoding="utf-8")
    rows = re.findall(r"^\| `([a-z0-9-]+)\.toml` \|.*\| ([^|]+) \|$", text, flags=re.MULTILINE)
    return {name: {word.strip() for word in limits.split(",")} for name, limits in rows}


def shows_depth_of_field(name: str, solution) -> bool:
    """Whether a demo without its required depth would see more, at a lower f-number with the same camera."""
    table = read_toml(FOLDER / f"{name}.toml")
    if table["optics"].pop("required_depth_mm", None) is None:
        return False
    design = solution.optimum.design
    table["optics"]["f_numbers"] = [n for n in table["optics"]["f_numbers"] if n < design.f_number]
    table["candidates"]["cameras"] = [design.camera]
    table["solver"] = {"alternatives": 0}
    shallow = solve(build_problem(table, folder=FOLDER))
    return shallow.optimum.cnr > solution.certificate.bound


def test_the_six_regimes_are_among_the_demos():
    assert set(REGIMES) <= set(DEMOS)


def test_the_readme_lists_every_demo():
    assert set(readme_rows()) == set(DEMOS)


def test_the_smallest_demo_keeps_its_title():
    assert load_problem("yellow-stain").spec.title == "Yellow stain on white cloth"


@pytest.mark.parametrize("name", DEMOS)
def test_demo_says_that_it_is_invented(name):
    assert "invented" in load_problem(name).spec.notes.lower()


@pytest.mark.parametrize("name", DEMOS)
def test_demo_uses_all_parts_it_asks_for(name):
    left_out = load_problem(name).left_out
    assert not [text for text in left_out if not text.startswith("filter")], left_out


@pytest.mark.parametrize("name", DEMOS)
def test_demo_solves_within_its_gap_and_reaches_the_cnr_it_needs(solved, name):
    solution = solved(name)
    assert 0 <= solution.certificate.gap <= solution.problem.spec.solver.gap
    assert solution.recipe.feasible
    assert solution.recipe.cnr <= solution.certificate.bound
    assert solution.recipe.cnr >= solution.problem.spec.required_cnr


@pytest.mark.parametrize("name", DEMOS)
def test_demo_binds_what_the_readme_says(solved, name):
    solution = solved(name)
    found = {kind(limit) for limit in solution.binding}
    claimed = readme_rows()[name]
    if "depth of field" in claimed and shows_depth_of_field(name, solution):
        found.add("depth of field")
    assert claimed <= found


def test_demos_together_bind_every_kind_of_limit(solved):
    solutions = {name: solved(name) for name in DEMOS}
    bound = {kind(limit) for solution in solutions.values() for limit in solution.binding}
    if shows_depth_of_field("thin-film", solutions["thin-film"]):
        bound.add("depth of field")
    missing = {INTERCHANGEABLE.get(k, k) for k in KINDS} - bound
    assert not missing


def test_no_kind_of_limit_is_unknown_here(solved):
    """A new kind of limit has to be added above, and to a demo in which it binds."""
    named = {kind(limit.name) for name in DEMOS for limit in solved(name).optimum.limits}
    named |= {limit.name for name in DEMOS for limit in sum_limits(load_problem(name))}
    assert named <= KINDS
