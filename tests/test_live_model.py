"""The forward model of the live page against the library: same numbers at any setting."""

import numpy as np
import pytest
from demo_names import DEMOS
from live_shell import by_library, by_page, differences, random_settings, written
from test_detection_combined import CHANNELS, SHOTS

from codesign import build_problem, solve
from codesign.report.page import live_parts
from codesign.report.page.live import live_fragment

#: What the page must reach.
ALLOWED = 1e-6
#: Settings per demo, 207 in all, and as many around its recipe.
SETTINGS = 23

#: Several targets, stacked filters at the sensor, free numbers of emitters, every optional limit.
BUILT = {
    "title": "several of everything",
    "scene": {
        "target": ["steel-rust", "steel-film"], "background": "steel-bare", "guards": ["card-white"],
        "ambient": [{"illuminant": "D65", "illuminance_lx": 300}],
    },
    "candidates": {
        "leds": ["white-4000k-a", "blue-470-a", "green-525-a", "red-625-a"],
        "filters": ["bp-525-60", "sp-650", "bp-450-30"], "filter_pairs": True, "cameras": "mono-5mp", "gains_db": [0],
    },
    "optics": {
        "f_numbers": [4, 8], "magnification": 0.08, "filter_position": "sensor", "field_angle_deg": 5,
        "required_depth_mm": 3,
    },
    "lighting": {
        "mode": "strobe", "emitters_per_channel": 4, "distance_mm": 200, "board_k_per_w": 8, "specular_weight": 0.3,
    },
    "motion": {"speed_mm_per_s": 100, "max_blur_px": 5},
    "timing": {"frame_rate_hz": 20, "exposure_min_us": 5, "exposure_max_us": 2000},
    "temperature": {"air_c": 25, "sensor_c": 40},
    "limits": {
        "rig_heat_w": 5, "supply_w": 10, "supply_peak_w": 60, "dark_well_share": 0.1, "dark_noise_share": 1.0,
        "junction_max_c": 90,
    },
    "build": {
        "max_led_channels": 2, "board_slots": 6, "emitters": "free", "price_budget": 2000, "must_have": ["red-625-a"],
    },
    "averaging": {"pixels": 4, "frames": 2},
    "solver": {"gap": 0.03, "alternatives": 1},
}  # fmt: skip
SPECIAL = {"built": BUILT, "channels": CHANNELS, "shots": SHOTS}


@pytest.fixture(scope="module")
def special():
    return {name: solve(build_problem(table), gap=0.5) for name, table in SPECIAL.items()}


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
def test_page_equals_library_for_pairs_build_limits_and_combined_readings(browser, special, tmp_path, name):
    found = sampled(browser, special[name], tmp_path, 30)
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
