"""Figures of recipes: every demo and every kind of problem; words fit, apart, legible; what is shown is right."""

from dataclasses import replace

import numpy as np
import pytest
from demo_names import DEMOS
from figure_checks import check_figure, words
from hostile import hostile_problem
from small_problems import GREEN, LED, small_design, small_problem, small_table, write_curves

from codesign import build_problem, evaluate, load_problem
from codesign.catalog import Catalog
from codesign.design import Shot
from codesign.design_simulation import expected
from codesign.report.figures.alternatives import alternatives
from codesign.report.figures.base import figure_bytes
from codesign.report.figures.collection import performance_figures, solution_figures, write_figures
from codesign.report.figures.limits import limit_use
from codesign.report.figures.noise import noise_budget
from codesign.report.figures.sensitivity import sensitivity_figure
from codesign.report.figures.spectral import spectral_story
from codesign.report.figures.view import View, defects, display_reach, picture, simulated_view
from codesign.study.plain_light import is_white, plain_light
from codesign.study.sensitivity import LimitPrice, Sensitivities, sensitivities

LONG = "a-name-that-goes-on-" + "and-on-" * 12 + "to-its-end"


def check_all(figures):
    """Check each figure; returns the words of each."""
    found = {}
    for name, draw in figures.items():
        try:
            found[name] = check_figure(draw())
        except AssertionError as error:
            raise AssertionError(f"{name}: {error}") from None
    return found


# --- every demo ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", DEMOS)
def test_every_figure_of_each_demo_is_whole_and_legible(solved, name):
    solution = solved(name)
    before = View(solution.problem, dimmed(solution), "With half the light")
    check_all(solution_figures(solution, before=before))


def dimmed(solution):
    design = solution.recipe.design
    return evaluate(solution.problem, replace(design, exposure_us=design.exposure_us / 2))


# --- every kind of problem -------------------------------------------------------------------------------------


def check_recipe(problem, design, *, sheet=False):
    """All figures of a typed recipe are whole; returns their words. The sheet, which takes longest, on demand."""
    figures = performance_figures(problem, evaluate(problem, design))
    return check_all({name: draw for name, draw in figures.items() if sheet or name != "recipe-sheet"})


def test_figures_of_several_pairs_name_them_all(tmp_path):
    changes = {"scene.target": ["target", "dim"], "scene.background": ["background", "twin"]}
    found = check_recipe(small_problem(tmp_path, changes), small_design())
    assert all(name in found["spectral-story"] for name in ("target", "dim", "background", "twin"))


def test_figures_under_build_limits_show_them(tmp_path):
    changes = {"build.max_led_channels": 1, "build.price_budget": 40.0, "camera.price": 30.0}
    changes |= {"red.price": 4.0, "green.price": 5.0, "candidates.filters": "none"}
    found = check_recipe(small_problem(tmp_path, changes), small_design())
    assert "LED channels" in found["use-of-limits"] and "price" in found["use-of-limits"]


def two_channels(folder):
    channels = [
        {"name": name, "curve": "qe.csv", "quantity": "quantum_efficiency", "unit": "fraction"}
        for name in ("red $x$", "<b>green</b>")
    ]
    return small_problem(folder, {"camera.channels": channels, "detection.combine_channels": True})


def test_figures_of_combined_channels_name_each(tmp_path):
    problem = two_channels(tmp_path)
    found = check_recipe(problem, small_design(channel="red $x$+<b>green</b>", weights={"red $x$": 1.0}))
    assert "target, red $x$" in found["spectral-story"]
    assert "background, <b>green</b>" in found["spectral-story"]
    assert "weighted sum" in found["simulated-view"]


def test_figures_of_shots_tell_their_light_apart(tmp_path):
    changes = {"lighting.mode": "strobe", "timing.frame_rate_hz": 10.0, "detection.shots": 2}
    shots = (Shot(exposure_us=500.0, drive_ma={"red": 100.0}), Shot(exposure_us=900.0, drive_ma={"green": 50.0}))
    design = replace(small_design(), shots=shots, drive_ma={}, exposure_us=1400.0)
    found = check_recipe(small_problem(tmp_path, changes), design)
    assert "LEDs in shot 1" in found["spectral-story"] and "LEDs in shot 2" in found["spectral-story"]


def many_leds(folder, count, name):
    """A problem with so many LEDs, and a recipe that lights them all."""
    table = small_table({"required_cnr": 3.0})
    ids = [name.format(k) for k in range(count)]
    table["led"] = [
        {**LED, "id": led, "peak_nm": 560.0 + 50.0 * k / max(count - 1, 1), "fwhm_nm": 8} for k, led in enumerate(ids)
    ]
    table["candidates"]["leds"] = "all"
    write_curves(folder)
    problem = build_problem(table, folder=folder, catalog=Catalog(name="test", source="test"))
    return problem, small_design(drive_ma={led: 10.0 for led in ids})


@pytest.mark.parametrize("count", [1, 12])
def test_figures_of_one_and_of_twelve_leds_name_each(tmp_path, count):
    found = check_recipe(*many_leds(tmp_path, count, "led-{:02d}-of-the-mix"))
    assert all(f"led-{k:02d}-of-the-mix 10 mA" in found["spectral-story"] for k in range(count))


def test_figures_of_very_long_names_keep_their_ends(tmp_path):
    problem, design = many_leds(tmp_path, 12, LONG.replace("its-end", "led-{:02d}"))
    found = check_recipe(problem, design, sheet=True)
    assert "led-07" in found["spectral-story"] and "led-11" in found["use-of-limits"]


def test_figures_of_hostile_names_are_whole(tmp_path):
    problem = hostile_problem(tmp_path)
    camera = problem.cameras[0]
    check_recipe(problem, small_design(channel=camera.channel_names[0]), sheet=True)


def test_figures_of_a_recipe_in_the_dark_and_of_one_too_bright(tmp_path):
    """No light, no contrast; and wells that are full."""
    problem = small_problem(tmp_path, {"camera.black_level_dn": 0})
    dark = check_recipe(problem, small_design(drive_ma={}), sheet=True)
    bright = check_recipe(problem, small_design(exposure_us=60000.0))
    assert "CNR 0" in dark["simulated-view"]
    assert "pixels are full" in bright["simulated-view"] and "missed" in bright["use-of-limits"]


# --- what is shown ---------------------------------------------------------------------------------------------


def test_the_story_says_how_much_light_is_ambient(solved):
    solution = solved("cap-colour")
    reading = next(s for s in solution.recipe.surfaces if s.role == "background")
    share = reading.ambient_e / (reading.led_e + reading.ambient_e)
    assert f"of these by ambient light, {100 * share:.1f} %" in words(spectral_story(solution.problem, solution.recipe))


def test_the_budget_shows_terms_of_a_hundred_thousandth(solved):
    solution = solved("two-inks")
    figure = noise_budget(solution.problem, solution.recipe)
    found = words(figure)
    noise = {name: sum(pair) for name, pair in solution.recipe.noise.items()}
    shares = {name: value / sum(noise.values()) for name, value in noise.items() if value}
    assert max(shares.values()) > 0.98 and min(shares.values()) < 1e-5
    assert all(name in found for name in shares)
    low, high = figure.axes[-1].get_xlim()
    assert low <= min(shares.values()) and high == 1.0


def test_limits_that_bind_and_are_missed_are_marked_by_a_word(solved):
    solution = solved("yellow-stain")
    found = words(limit_use(solution.recipe, binding=solution.binding)).splitlines()
    assert found.count("binds") == len(solution.binding)
    longer = replace(solution.recipe.design, exposure_us=2 * solution.recipe.design.exposure_us)
    broken = evaluate(solution.problem, longer)
    assert words(limit_use(broken)).splitlines().count("missed") == len(broken.violated) > 0


def test_alternatives_stay_below_the_bound(solved):
    solution = solved("thin-film")
    figure = alternatives(solution)
    bars = [bar.get_width() for bar in figure.axes[0].patches]
    assert bars[0] == pytest.approx(solution.certificate.value)
    assert sorted(bars[1:], reverse=True) == pytest.approx(sorted((a.cnr for a in solution.alternatives), reverse=True))
    (bound,) = {line.get_xdata()[0] for line in figure.axes[0].lines if line.get_linestyle() == "-"}
    assert bound == solution.certificate.bound >= max(bars)


def test_sensitivities_are_drawn_where_the_study_puts_them(solved):
    study = sensitivities(solved("yellow-stain"), parameters=["LED flux", "PRNU"], changes=False)
    figure = sensitivity_figure(study)
    check_figure(figure)
    expected_ends = {round(100 * s * x.tolerance, 9) for x in study.parameters for s in (-x.retuned, x.retuned)}
    drawn = {round(float(x), 9) for line in figure.axes[0].lines if line.get_marker() in "v^" for x in line.get_xdata()}
    assert expected_ends <= drawn
    assert "well, cloth-white" in words(figure)


def test_sensitivities_without_prices_or_ends_are_drawn(tmp_path):
    problem = small_problem(tmp_path)
    whole = LimitPrice(name="LED channels", unit="", bound=1.0, share=1.0, binds=True, price=None)
    odd = LimitPrice(name="x" * 200, unit="us", bound=5.0, share=1.0, binds=True, price=float("nan"))
    empty = Sensitivities(problem=problem, cnr=5.0, configuration="", binding=(), limits=(whole,), parameters=())
    check_figure(sensitivity_figure(empty))
    found = words(sensitivity_figure(replace(empty, limits=(whole, odd))))
    assert "one-sided" in found and "LED channels" in found


def test_pictures_share_one_scale_and_state_their_cnr(solved):
    solution = solved("thin-film")
    before = View(solution.problem, dimmed(solution), "With half the light")
    figure = simulated_view(solution.problem, solution.recipe, before)
    pictures = [axes.images[0] for axes in figure.axes if axes.images]
    assert len(pictures) == 2 and len({picture.get_clim() for picture in pictures}) == 1
    found = words(figure)
    assert f"CNR {solution.recipe.cnr:.4g}" in found and f"CNR {before.performance.cnr:.4g}" in found


def test_cells_of_a_picture_lie_where_the_model_says(solved):
    """Midway is zero and the unit is the noise: means of target and background are half the CNR to either side."""
    solution = solved("bruise")
    side = View(solution.problem, solution.recipe, "")
    want = expected(solution.problem, solution.recipe)
    values = [picture(side, np.full((3000, 1), share), 4) for share in (1.0, 0.0)]
    for cells, deviation, sign in zip(values, want.deviation_e, (-1, 1), strict=True):
        error = deviation / want.noise_e / np.sqrt(cells.size)
        assert abs(cells.mean() - sign * solution.recipe.cnr / 2) <= 4 * error


def test_defects_are_soft_and_inside_their_piece():
    shapes = defects(40, 40, np.random.default_rng(2))
    assert shapes.max() > 0.99 and shapes.min() >= 0.0
    assert np.max([shapes[:, 0], shapes[:, -1], shapes[:, :, 0], shapes[:, :, -1]]) < 0.05
    assert np.all((shapes.mean(axis=(1, 2)) > 0.04) & (shapes.mean(axis=(1, 2)) < 0.35))
    assert np.mean((shapes > 0.1) & (shapes < 0.9)) > 0.02


def test_a_weak_contrast_is_not_stretched_out_of_the_noise():
    assert display_reach([0.2, 0.1]) == pytest.approx(3.1)
    assert display_reach([500.0]) == 25.0


def test_plain_light_is_one_white_led_without_filter():
    problem = load_problem("yellow-stain")
    found = plain_light(problem)
    (led,) = found.performance.design.drive_ma
    assert is_white(found.problem.channel(led).led) and found.performance.design.filter == "none"
    assert 0 < found.performance.cnr < 3
    others = {k for k, led in problem.catalog.leds.items() if is_white(led)}
    assert others == {"white-3000k-a", "white-4000k-a", "white-6500k-a"}


def test_plain_light_is_any_one_led_where_white_shows_nothing(tmp_path):
    """Red and green are the only LEDs there are, and neither is white."""
    found = plain_light(small_problem(tmp_path, {"led": None}))
    assert set(found.performance.design.drive_ma) <= {LED["id"], GREEN["id"]}
    assert found.words.endswith("alone, no filter")


def test_no_plain_light_where_nothing_can_be_seen(tmp_path):
    assert plain_light(small_problem(tmp_path, {"scene.target": "twin", "specular": {"twin": 1e-9}})) is None


# --- files -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("form", ["svg", "pdf"])
def test_a_recipe_is_drawn_into_the_same_files_again(tmp_path, form):
    problem = small_problem(tmp_path)
    figures = performance_figures(problem, evaluate(problem, small_design()))
    wanted = {name: figures[name] for name in ("simulated-view", "noise-budget")}
    first = [path.read_bytes() for path in write_figures(tmp_path / "a", wanted, form)]
    second = [path.read_bytes() for path in write_figures(tmp_path / "b", wanted, form)]
    assert first == second


def test_pictures_stay_small(tmp_path):
    problem = small_problem(tmp_path)
    figures = performance_figures(problem, evaluate(problem, small_design()))
    assert len(figure_bytes(figures["spectral-story"]())) < 400_000
    assert len(figure_bytes(figures["simulated-view"]())) < 200_000


def test_the_sheet_is_one_page_of_a4_whose_words_can_be_searched(solved, tmp_path):
    from pypdf import PdfReader

    solution = solved("yellow-stain")
    wanted = {"recipe-sheet": solution_figures(solution)["recipe-sheet"]}
    (path,) = write_figures(tmp_path, wanted, "pdf")
    (page,) = PdfReader(path).pages
    size = [float(x) / 72 * 25.4 for x in page.mediabox[2:]]
    assert size == pytest.approx([210, 297], abs=0.1)
    text = page.extract_text()
    assert solution.problem.spec.title in text and "violet-405-a 450 mA × 12" in text
