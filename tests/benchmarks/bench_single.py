"""One configuration: time to a certified optimum, and the worst case over pairs of surfaces."""

from __future__ import annotations

import statistics
from pathlib import Path

from bench_problems import catalogue_problem, one_program, random_configurations, warm_assembly
from bench_registry import Figure, benchmark, timed

from codesign import build_problem, solve
from codesign.search.frontier import certify


@benchmark(
    tiny={"leds": 8, "filters": 10, "cameras": 2, "count": 5, "repeats": 1, "bars_ms": (None, None)},
    full={"leds": 60, "filters": 1000, "cameras": 20, "count": 200, "repeats": 3, "bars_ms": (5.0, 20.0)},
)
def one_configuration(folder: Path, *, leds, filters, cameras, count, repeats, bars_ms) -> list[Figure]:
    """Random configurations, each cold; the least time of a few calls, the median over the configurations."""
    figures = []
    for samples, name in ((6, "with clutter"), (1, "without clutter")):
        assembly = warm_assembly(
            catalogue_problem(folder, leds=leds, filters=filters, cameras=cameras, samples=samples)
        )
        programs = [one_program(assembly, *chosen) for chosen in random_configurations(assembly, count, seed=7)]
        for gap, bar in zip((1e-3, 1e-6), bars_ms, strict=True):
            runs = [[timed(certify, program, gap) for _ in range(repeats)] for program in programs]
            times = [min(seconds for _, seconds in own) * 1e3 for own in runs]
            proven = statistics.mean(own[0][0].gap <= gap * (1 + 1e-9) for own in runs)
            figures += [
                Figure(what=f"certified to {gap:g}, {name}", value=statistics.median(times), unit="ms", at_most=bar),
                Figure(what=f"share that reached {gap:g}, {name}", value=proven, unit="1", at_least=1.0),
            ]
    return figures


#: Three bright caps against four dark surfaces, all parts of the demo catalogue to choose from.
PAIRS = {
    "title": "twelve pairs",
    "scene": {
        "target": ["cap-red", "cap-yellow", "cap-white"],
        "background": ["cap-green", "cap-blue", "belt-blue", "belt-black"],
    },
    "optics": {"f_numbers": [4.0], "magnification": 0.1},
    "lighting": {"mode": "continuous", "emitters_per_channel": 2, "distance_mm": 300.0},
    "motion": {"speed_mm_per_s": 200.0, "max_blur_px": 1.0},
    "temperature": {"air_c": 25.0, "sensor_c": 40.0},
    "limits": {"rig_heat_w": 15.0},
}


@benchmark(
    tiny={"parts": {"leds": "peak_nm > 600", "filters": "none", "cameras": "mono-5mp"}, "bar_s": None},
    full={"parts": {}, "bar_s": 10.0},
)
def worst_of_twelve_pairs(folder: Path, *, parts, bar_s) -> list[Figure]:
    """Max-min CNR over 3 targets x 4 backgrounds, gap 1 %."""
    problem = build_problem({**PAIRS, "candidates": parts}, folder=folder)
    found, seconds = timed(solve, problem, gap=1e-2, alternatives=0)
    return [
        Figure(what="pairs", value=len(problem.pairs), unit="1"),
        Figure(what="signed configurations", value=found.certificate.configurations, unit="1"),
        Figure(what="solve", value=seconds, unit="s", at_most=bar_s),
        Figure(what="gap proven", value=found.certificate.gap, unit="1", at_most=1e-2),
    ]
