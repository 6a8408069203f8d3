"""For tests of the live page: a bare document around it, random settings, and what page and library make of them."""

from __future__ import annotations

import json
import math
from collections.abc import Iterator
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
from test_detection_combined import CHANNELS, SHOTS

from codesign import build_problem, evaluate, solve
from codesign.design import Design, Performance, Shot
from codesign.problem import Problem
from codesign.problem.schema import Temperature
from codesign.report.house import css_properties
from codesign.report.page.live import LiveFragment
from codesign.solve import Solution

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
        "junction_max_c": 90, "actinic_w_per_m2": 1, "ultraviolet_a_w_per_m2": 1, "blue_light_w_per_m2": 5,
        "infrared_w_per_m2": 1,
    },
    "build": {
        "max_led_channels": 2, "board_slots": 6, "emitters": "free", "price_budget": 2000, "must_have": ["red-625-a"],
    },
    "averaging": {"pixels": 4, "frames": 2},
    "solver": {"gap": 0.03, "alternatives": 1},
}  # fmt: skip
#: Light at the eye is a mean over all shots.
LIMITED_SHOTS = {**SHOTS, "limits": {**SHOTS.get("limits", {}), "infrared_w_per_m2": 5.0}}
SPECIAL = {"built": BUILT, "channels": CHANNELS, "shots": LIMITED_SHOTS}


@cache
def special(name: str) -> Solution:
    """Solution of one of these, roughly."""
    return solve(build_problem(SPECIAL[name]), gap=0.5)


#: Escaped in the data, as the document does it.
ESCAPED = {ord(c): f"\\u{ord(c):04x}" for c in "<>&\u2028\u2029"}


def document(fragment: LiveFragment) -> str:
    """A page that holds the live part and nothing else."""
    data = json.dumps(fragment.data, ensure_ascii=False, allow_nan=False).translate(ESCAPED)
    ground = "body{background:var(--paper);font:16px/1.45 sans-serif;margin:0 auto;max-width:76rem;padding:1rem}"
    scripts = "".join(f"<script>{script}</script>" for script in fragment.scripts)
    return (
        '<!doctype html><html lang="en"><head><meta charset="utf-8"><title>Live page</title>'
        '<meta name="viewport" content="width=device-width,initial-scale=1">'
        f"<style>{css_properties()}{ground}{fragment.css}</style></head><body>{fragment.html}"
        f'<script type="application/json" id="live-data">{data}</script>{scripts}</body></html>'
    )


def written(fragment: LiveFragment, folder: Path) -> Path:
    """The same as a file."""
    path = folder / "live.html"
    path.write_text(document(fragment), encoding="utf-8")
    return path


def random_settings(problem: Problem, count: int, rng: np.random.Generator) -> Iterator[dict[str, Any]]:
    """Settings of the page, most of them far from any limit's good side: any part, any drive, any surroundings."""
    shots, own = problem.spec.detection.shots, problem.spec.temperature
    for _ in range(count):
        camera = problem.cameras[rng.integers(len(problem.cameras))]
        names = _channels(problem, camera)
        parts = [(_exposure(camera, rng), _drives(problem, rng)) for _ in range(shots)]
        home = rng.random() < 0.25
        yield {
            "camera": camera.id,
            "channel": "+".join(names) if problem.spec.detection.combine_channels else str(rng.choice(names)),
            "gain_db": float(rng.choice([gain.gain_db for gain in _gains(problem, camera)])),
            "filter": problem.filters[int(rng.integers(len(problem.filters)))].id,
            "f_number": float(rng.choice(problem.spec.optics.f_numbers)),
            "exposure_us": sum(exposure for exposure, _ in parts),
            "drive_ma": parts[0][1] if shots == 1 else {},
            "emitters": _emitters(problem, parts, rng),
            "shots": [{"exposure_us": e, "drive_ma": drives} for e, drives in parts] if shots > 1 else [],
            "air_c": own.air_c if home else float(rng.uniform(-20, 80)),
            "sensor_c": own.sensor_c if home else float(rng.uniform(-20, 90)),
            "ambient_factor": 1.0 if home else float(rng.uniform(0, 4)),
        }


def _exposure(camera, rng: np.random.Generator) -> float:
    """From below the camera's shortest to beyond its longest. [us]"""
    low, high = camera.exposure_min_us / 2, min(camera.exposure_max_us, 1e6) * 1.5
    return float(np.exp(rng.uniform(np.log(low), np.log(high))))


def _drives(problem: Problem, rng: np.random.Generator) -> dict[str, float]:
    """One to six LEDs at any current. [mA]"""
    count = min(int(rng.integers(1, 7)), len(problem.channels))
    leds = [problem.channels[k].led for k in rng.choice(len(problem.channels), size=count, replace=False)]
    return {led.id: float(rng.uniform(0.0, led.largest_current_ma)) for led in leds}


def _emitters(problem: Problem, parts: list, rng: np.random.Generator) -> dict[str, int]:
    if problem.spec.build.emitters == "fixed":
        return {}
    lit = {led for _, drives in parts for led in drives}
    return {led: int(rng.integers(1, problem.channel(led).emitters + 1)) for led in lit if rng.random() < 0.7}


def _channels(problem: Problem, camera) -> list[str]:
    wanted = problem.spec.candidates.channels
    return [name for name in camera.channel_names if wanted == "all" or name in wanted]


def _gains(problem: Problem, camera) -> list:
    wanted = problem.spec.candidates.gains_db
    return [gain for gain in camera.gain_settings() if wanted is None or gain.gain_db in wanted]


def by_library(problem: Problem, setting: dict[str, Any]) -> Performance:
    """What the library says of a setting of the page."""
    temperature = Temperature(air_c=setting["air_c"], sensor_c=setting["sensor_c"])
    spec = problem.spec.model_copy(update={"temperature": temperature})
    there = replace(problem, spec=spec, ambient=problem.ambient * setting["ambient_factor"])
    names = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us", "drive_ma", "emitters")
    shots = tuple(Shot(**shot) for shot in setting["shots"])
    return evaluate(there, Design(**{name: setting[name] for name in names}, shots=shots))


#: Evaluates settings in the page; infinities travel as text, and settings too: the driver would sort their keys.
_EVALUATE = """
const keep = (name, value) => ['light', 'led', 'level', 'picture'].includes(name) ? undefined
  : typeof value === 'number' && !Number.isFinite(value) ? String(value) : value;
return JSON.parse(arguments[0]).map((setting) => JSON.stringify(codesignLive.page.model.evaluate(setting), keep));
"""


def by_page(browser, settings: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """What the page that is open says of settings."""
    return [json.loads(text) for text in browser.run(_EVALUATE, json.dumps(settings))]


def differences(page: dict[str, Any], library: Performance) -> dict[str, float]:
    """Relative differences of everything shown, the largest of each kind; names and order must agree."""
    found = {"cnr": relative(page["cnr"], library.cnr), "error rate": relative(page["error_rate"], library.error_rate)}
    assert page["sign"] == library.sign and len(page["pairs"]) == len(library.pairs)
    electrons = ("led_e", "ambient_e", "dark_e", "grey_dn", "saturation_share")
    kinds = {
        "surfaces": (page["surfaces"], library.surfaces, electrons),
        "limits": (page["limits"], library.limits, ("value", "bound", "share")),
        "LEDs": (page["leds"], library.leds, ("drive_ma", "electrical_w", "optical_w", "junction_c", "emitters")),
        "pairs": (page["pairs"], library.pairs, ("signal_e", "cnr")),
    }
    for kind, (own, others, fields) in kinds.items():
        assert len(own) == len(others)
        for mine, other in zip(own, others, strict=True):
            same = ("id", "role", "name", "unit", "floor", "met", "target", "background")
            assert all(mine[name] == getattr(other, name) for name in same if hasattr(other, name)), (mine, other)
            for field in fields:
                found[f"{kind} {field}"] = max(
                    found.get(f"{kind} {field}", 0.0), relative(mine[field], getattr(other, field))
                )
    assert [term["name"] for term in page["noise"]] == list(library.noise)
    assert list(page["weights"]) == list(library.weights)
    for name, weight in library.weights.items():
        found["weights"] = max(found.get("weights", 0.0), abs(page["weights"][name] - weight))
    for term in page["noise"]:
        for side, value in zip(("target", "background"), library.noise[term["name"]], strict=True):
            found["noise"] = max(found.get("noise", 0.0), relative(term[side], value))
    return found


def relative(own: float | str, other: float) -> float:
    """Difference relative to the other."""
    own = float(own.replace("Infinity", "inf")) if isinstance(own, str) else own
    if own == other or (math.isinf(own) and math.isinf(other)):
        return 0.0
    return abs(own - other) / max(abs(other), 1e-300)
