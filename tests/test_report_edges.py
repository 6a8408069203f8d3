"""Reports of recipes at the edge: wells that fill, no light, several defects, filters open beyond their data sheet."""

from dataclasses import replace

import numpy as np
import pytest
from live_shell import written

from codesign import evaluate, load_problem, solve
from codesign.errors import InfeasibleError, nearest
from codesign.report.cautions import cautions
from codesign.report.figures.base import words_of
from codesign.report.figures.limits import limit_use
from codesign.report.figures.sheet import performance_sheet
from codesign.report.figures.spectral import spectral_story
from codesign.report.figures.view import View, defects, display_reach, picture
from codesign.report.page.live import live_fragment
from codesign.report.text import light_words, performance_text
from codesign.study.fields import varied


def legends(figure) -> list[str]:
    """Words of all legends of a figure."""
    return [text.get_text() for axes in figure.axes if axes.get_legend() for text in axes.get_legend().get_texts()]


@pytest.fixture
def two_defects():
    """Two defects on steel, one of them in the near infrared only."""
    return varied(load_problem("thin-film"), {"scene.target": ["steel-film", "steel-rust"], "scene.guards": []})


# --- what a picture shows ------------------------------------------------------------------------------------------


def test_picture_of_a_full_well_is_white(solved):
    solution = solved("bruise")
    flooded = replace(solution.recipe.design, exposure_us=40 * solution.recipe.design.exposure_us)
    side = View(solution.problem, evaluate(solution.problem, flooded), "flooded")
    seen = picture(side, defects(2, 12, np.random.default_rng(1)), 1)
    assert all(s.saturation_share > 2 for s in side.performance.surfaces if s.role != "guard")
    assert seen.min() > display_reach([side.performance.cnr])


def test_contrast_of_the_next_worst_pair_is_drawn_beside_the_worst(two_defects):
    design = solve(two_defects, alternatives=0, time_limit=10).recipe.design
    found = evaluate(two_defects, design)
    _, better = sorted(found.pairs, key=lambda pair: pair.cnr)
    story = spectral_story(two_defects, found)
    assert sum(text.startswith(f"{better.target} minus {better.background}, CNR") for text in legends(story)) == 1


def test_difference_by_wavelength_in_the_page_adds_up_to_that_of_the_recipe(browser, solved, tmp_path):
    """Thin film on steel: its mirror-like light is part of the difference, and of the other sign."""
    solution = solved("thin-film")
    browser.open(written(live_fragment(solution), tmp_path))
    total, mirrored = browser.run(
        "const { model, result, setting } = codesignLive.page, at = codesignLive.differenceOf(model, result);"
        "const t = setting.exposure_us * 1e-6, sum = (f) => model.grid.reduce((all, _, k) => all + f(k), 0) * t;"
        "return [sum(at), sum((k) => result.light.shine[k])]"
    )
    assert total == pytest.approx(solution.recipe.signal_e, rel=1e-9)
    assert mirrored > 0


# --- what is said ----------------------------------------------------------------------------------------------


def test_sheet_counts_missed_limits_that_do_not_fit(solved):
    solution = solved("bruise")
    flooded = replace(solution.recipe.design, exposure_us=1e4 * solution.recipe.design.exposure_us)
    performance = evaluate(solution.problem, flooded)
    figure = performance_sheet(solution.problem, performance)
    (line,) = (
        t for part in figure.findobj() if hasattr(part, "get_text") and (t := part.get_text()).startswith("misses")
    )
    assert len(performance.violated) > 5 and line.split()[-1] == "more" and "…" not in line
    assert light_words(solution.problem, performance) == "LEDs never off: exposure beyond the frame"


def test_limits_of_a_typed_recipe_are_reached_and_bind_nothing(solved):
    solution = solved("bruise")
    assert any(limit.share >= 0.999 for limit in solution.recipe.limits)
    text = performance_text(solution.problem, solution.recipe)
    assert "► reached: used to 99.9 % or more" in text and "binds" not in text
    said = words_of(limit_use(solution.recipe, binding=None)).description
    assert "reached" in said and "binds" not in said


def test_light_that_passes_a_filter_beyond_its_stated_blocking_is_warned_of():
    spec = {"candidates.filters": ["bp-405-35", "bp-850-60"]}
    problem = varied(load_problem("thin-film"), spec)
    design = solve(problem, alternatives=0).recipe.design
    lit = replace(design, filter="bp-405-35", drive_ma={"nir-850-a": 200.0}, emitters={})
    (said,) = (text for text in cautions(problem, evaluate(problem, lit)) if text.startswith("Filter"))
    assert "for 340 to 650 nm" in said and "99.5 % of the electrons" in said
    shaded = varied(problem, {"scene.ambient[0].illuminance_lx": 0.0})
    own = evaluate(shaded, replace(lit, drive_ma={"violet-405-a": 200.0}))
    assert not any(text.startswith("Filter") for text in cautions(shaded, own))


def test_shots_that_do_not_fit_into_a_frame_are_said_to():
    problem = varied(
        load_problem("bruise"), {"detection.shots": 2, "timing.frame_rate_hz": 60.0, "candidates.cameras": ["mono-5mp"]}
    )
    with pytest.raises(InfeasibleError, match=r"2 shots in a frame take 26\.04 ms at least"):
        solve(problem)


def test_words_of_a_name_in_another_order_are_recognised():
    assert nearest("white-tile", ["web-hole", "tile-white", "white-tiles-2"]) == "did you mean 'tile-white'?"
