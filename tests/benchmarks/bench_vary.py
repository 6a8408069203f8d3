"""What-ifs: a map of re-solved points against as many solves from nothing."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np
from bench_registry import Figure, benchmark, timed

from codesign import load_problem, solve
from codesign.study.fields import parse_axis, varied
from codesign.study.vary import vary

#: Two axes for each demo: first and last value.
AXES: Mapping[str, tuple[str, str]] = {
    "yellow-stain": ("limits.supply_w=2:40", "lighting.distance_mm=200:1500"),
    "bruise": ("lighting.distance_mm=200:500", "timing.frame_rate_hz=10:50"),
    "thin-film": ("limits.supply_peak_w=4:40", "temperature.air_c=15:45"),
}
#: Bars hold for maps of this side at least, and for these demos; the third, with many near-equal rivals, is told only.
FULL_SIDE, BARRED = 21, ("yellow-stain", "bruise")


@benchmark(
    tiny={"demos": ("yellow-stain",), "side": 3, "sample": 2},
    full={"demos": tuple(AXES), "side": FULL_SIDE, "sample": 12},
)
def two_axis_sweep(folder: Path, *, demos: tuple[str, ...], side: int, sample: int) -> list[Figure]:
    """Time of a map with two processes, and of solves of a random sample of its points, half before and half after."""
    figures = []
    for name in demos:
        problem = load_problem(name)
        axes = [parse_axis(f"{text}:{side}") for text in AXES[name]]
        rng = np.random.default_rng(1)
        places = rng.integers(side, size=(sample, 2))
        chosen = [(axes[0].values[i], axes[1].values[j]) for i, j in places]
        problems = [varied(problem, {axes[0].key: first, axes[1].key: second}) for first, second in chosen]
        cold = [timed(solve, one, alternatives=0) for one in problems[: sample // 2]]
        found, seconds = timed(vary, problem, axes=axes, workers=2)
        cold += [timed(solve, one, alternatives=0) for one in problems[sample // 2 :]]
        figures += _figures(name, found, seconds, chosen, cold, full=side >= FULL_SIDE and name in BARRED)
    return figures


def _figures(name, found, seconds: float, chosen, cold, *, full: bool) -> list[Figure]:
    points = {point.values: point for point in found.points}
    off = max(abs(points[v].cnr / s.optimum.cnr - 1) for v, (s, _) in zip(chosen, cold, strict=True))
    gap = max(point.bound / point.cnr - 1 for point in found.points if point.possible)
    ratio = float(np.mean([t for _, t in cold])) * len(found.points) / seconds
    count = len(found.points)
    return [
        Figure(what=f"{name}, {count} points", value=seconds, unit="s", at_most=30 if full else None),
        Figure(what=f"{name}, {count} cold solves / these", value=ratio, unit="x", at_least=5 if full else None),
        Figure(what=f"{name}, largest gap proven", value=gap, unit="1", at_most=2 * found.gap),
        Figure(what=f"{name}, largest difference from a cold solve", value=off, unit="1", at_most=1e-3),
    ]
