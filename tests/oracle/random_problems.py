"""Seeded random problems over a handful of demonstration parts: small enough to certify every configuration."""

from __future__ import annotations

from typing import Any

from numpy.random import Generator

from codesign import build_problem
from codesign.catalog import load_catalog
from codesign.problem import Problem

LEDS = ("violet-405-a", "blue-450-a", "blue-470-a", "cyan-505-a", "green-525-a", "lime-560-a", "amber-590-a",
        "red-625-a", "red-660-a", "far-red-730-a", "white-4000k-a")  # fmt: skip
FILTERS = ("bp-405-35", "bp-450-30", "bp-470-60", "bp-525-60", "bp-590-30", "bp-635-60", "lp-515", "sp-650", "nd-06",
           "glass-red", "window-clear")  # fmt: skip
CAMERAS = ("mono-5mp", "colour-5mp", "fast-1mp", "deep-2mp", "small-2mp")
PAIRS = (("ink-a", "ink-b"), ("cap-red", "cap-yellow"), ("cap-blue", "cap-green"), ("steel-film", "steel-bare"),
         ("cloth-stain-yellow", "cloth-white"), ("grey-50", "tile-white"))  # fmt: skip


def some(rng: Generator, choices: tuple[str, ...], least: int, most: int) -> list[str]:
    """A random few of ``choices``."""
    return [str(c) for c in rng.choice(choices, int(rng.integers(least, most + 1)), replace=False)]


def random_table(rng: Generator, *, leds: int = 4, filters: int = 3) -> dict[str, Any]:
    """Table of a random problem, steady or strobed, in the dark or in strong ambient light."""
    target, background = PAIRS[rng.integers(len(PAIRS))]
    strobe = bool(rng.integers(2))
    bright = float(rng.choice([0.0, 500.0, 2e4, 3e6]))
    table: dict[str, Any] = {
        "title": "Random problem",
        "scene": {"target": target, "background": background},
        "candidates": {
            "leds": some(rng, LEDS, 1, leds),
            "filters": some(rng, FILTERS, 1, filters),
            "cameras": some(rng, CAMERAS, 1, 2),
            "no_filter": bool(rng.integers(2)),
        },
        "optics": {"f_numbers": [2.8, 5.6][: int(rng.integers(1, 3))], "magnification": 0.05},
        "lighting": {
            "mode": "strobe" if strobe else "continuous",
            "distance_mm": float(rng.uniform(100.0, 600.0)),
            "emitters_per_channel": int(rng.integers(1, 9)),
            "board_k_per_w": float(rng.uniform(5.0, 60.0)),
            "driver_max_ma": float(rng.uniform(300.0, 3000.0)),
        },
        "motion": {"speed_mm_per_s": float(10.0 ** rng.uniform(1.0, 3.5)), "max_blur_px": 1.0},
        "timing": {"frame_rate_hz": float(rng.uniform(2.0, 60.0))},
        "temperature": {"air_c": float(rng.uniform(10.0, 60.0)), "sensor_c": 40.0},
        "limits": {},
        "grid": {"step_nm": 5.0, "from_nm": 360.0, "to_nm": 800.0},
    }
    if bright:
        table["scene"]["ambient"] = [{"illuminant": "fluorescent", "illuminance_lx": bright}]
    if rng.integers(2):
        table["limits"]["rig_heat_w"] = float(rng.uniform(1.0, 30.0))
    if rng.integers(2):
        table["limits"]["supply_peak_w"] = float(rng.uniform(5.0, 100.0))
    return table


def twin(kind: str, part: str, name: str) -> dict[str, Any]:
    """Table of a catalogue part under another id."""
    found = getattr(load_catalog("demo"), f"{kind}s")[part]
    return {**found.model_dump(mode="json", exclude_none=True, exclude_defaults=True), "id": name, "source": "test"}


def random_problem(rng: Generator, **sizes: int) -> Problem:
    """Build a random problem."""
    return build_problem(random_table(rng, **sizes))
