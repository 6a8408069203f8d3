"""Generated problems whose LEDs warm up a lot, so that recipes and junction temperatures hang together."""

from pathlib import Path

import numpy as np
from parametric_catalog import parametric_catalog, parametric_problem

from codesign.problem import Problem


def hot_problem(folder: Path, seed: int) -> Problem:
    """A problem over a small catalogue with boards of up to 30 K/W, steady or strobed."""
    rng = np.random.default_rng(seed)
    catalog = parametric_catalog(
        folder,
        leds=int(rng.integers(6, 25)),
        filters=int(rng.integers(3, 25)),
        cameras=int(rng.integers(1, 4)),
        samples=int(rng.choice([1, 4])),
        seed=seed,
    )
    mode = "strobe" if rng.uniform() < 0.3 else "continuous"
    lighting = {
        "mode": mode,
        "emitters_per_channel": int(rng.integers(1, 5)),
        "distance_mm": 300.0,
        "board_k_per_w": float(rng.choice([2.0, 6.0, 15.0, 30.0])),
    }
    sections = {"lighting": lighting, "limits": {"rig_heat_w": float(rng.choice([3.0, 8.0, 15.0, 40.0]))}}
    if mode == "strobe":
        sections["timing"] = {"frame_rate_hz": float(rng.choice([30.0, 100.0]))}
    return parametric_problem(catalog, folder, **sections)
