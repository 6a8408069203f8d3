"""The forward model of the live page against the library: same numbers at any setting."""

import numpy as np
import pytest
from demo_names import DEMOS
from live_shell import SPECIAL, by_library, by_page, differences, random_settings, special, written

from codesign.report.page import live_parts
from codesign.report.page.live import live_fragment

#: What the page must reach.
ALLOWED = 1e-6
#: Settings per demo, 207 in all, and as many around its recipe.
SETTINGS = 23


def around(setting: dict, rng: np.random.Generator) -> dict:
    """A setting near another: currents and exposures up to a tenth lower, surroundings within a few degrees."""

    def near(value):
        return float(value * rng.uniform(0.9, 1.0))

    shots = [
        {"exposure_us": near(s["exposure_us"]), "drive_ma": {k: near(v) for k, v in s["drive_ma"].items()}}
        for s in setting["shots"]
    ]
    moved = {"air_c": setting["air_c"] + rng.uniform(-5, 5), "sensor_c": setting["sensor_c"] + rng.uniform(-5, 5)}
    return {
        **setting, **moved, "drive_ma": {k: near(v) for k, v in setting["drive_ma"].items()}, "shots": shots,
        "exposure_us": sum(s["exposure_us"] for s in shots) if shots else near(setting["exposure_us"]),
    }  # fmt: skip


def worst(browser, problem, settings: list[dict]) -> dict[str, float]:
    """Largest relative differences between the page that is open and the library."""
    found: dict[str, float] = {}
    for setting, page in zip(settings, by_page(browser, settings), strict=True):
        for what, value in differences(page, by_library(problem, setting)).items():
            found[what] = max(found.get(what, 0.0), value)
    return found


def sampled(browser, solution, folder, count: int) -> dict[str, float]:
    """Differences at random settings and around the recipe."""
    browser.open(written(live_fragment(solution), folder))
    rng = np.random.default_rng(20)
    recipe = browser.run("return codesignLive.page.setting")
    settings = list(random_settings(solution.problem, count, rng)) + [around(recipe, rng) for _ in range(count)]
    return worst(browser, solution.problem, settings)


@pytest.mark.oracle
@pytest.mark.parametrize("name", DEMOS)
def test_page_equals_library_at_random_settings(browser, solved, tmp_path, name):
    found = sampled(browser, solved(name), tmp_path, SETTINGS)
    assert max(found.values()) < ALLOWED, found
    assert found["cnr"] < 1e-8 and found["limits share"] < 1e-9
    assert browser.console() == []


@pytest.mark.oracle
@pytest.mark.parametrize("name", SPECIAL)
def test_page_equals_library_for_pairs_build_limits_and_combined_readings(browser, tmp_path, name):
    found = sampled(browser, special(name), tmp_path, 30)
    assert max(found.values()) < ALLOWED, found


@pytest.mark.oracle
@pytest.mark.parametrize("name", ["thin-film", "two-inks"])
def test_page_with_short_numbers_still_equals_the_library(browser, solved, tmp_path, monkeypatch, name):
    """Where a catalogue is large, curves that all surfaces share are rounded to 24 bits."""
    long = written(live_fragment(solved(name)), tmp_path).stat().st_size
    monkeypatch.setattr(live_parts, "KINDS", ("f4",))
    found = sampled(browser, solved(name), tmp_path, SETTINGS)
    assert (tmp_path / "live.html").stat().st_size < long
    assert max(found.values()) < ALLOWED, found
