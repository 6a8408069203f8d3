"""Whole catalogues: time against the bare matrix product, memory, growth."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

from bench_problems import bare_product, catalogue_problem
from bench_registry import Figure, alternating, benchmark, timed

from codesign import solve

CHILD = Path(__file__).with_name("child.py")


def proof_against_product(folder: Path, *, leds, filters, cameras, samples, repeats, bar_s, bar_ratio) -> list[Figure]:
    problem = catalogue_problem(folder, leds=leds, filters=filters, cameras=cameras, samples=samples)
    product, found = bare_product(problem), []

    def search() -> None:
        found.append(solve(problem, gap=1e-3, alternatives=0))

    seconds, bare = alternating(repeats, search, product)
    return [
        Figure(what="signed configurations", value=found[0].certificate.configurations, unit="1"),
        Figure(what="solve, settable recipe and proof included", value=seconds, unit="s", at_most=bar_s),
        Figure(what="gap proven", value=max(one.certificate.gap for one in found), unit="1", at_most=1e-3),
        Figure(what="bare matrix product", value=bare, unit="s"),
        Figure(what="solve / bare product", value=seconds / bare, unit="x", at_most=bar_ratio),
    ]


TINY = {"leds": 8, "filters": 12, "cameras": 2, "repeats": 1, "bar_s": None, "bar_ratio": None}
FULL = {"leds": 60, "filters": 1000, "cameras": 20, "repeats": 5, "bar_s": 5.0, "bar_ratio": 20.0}


@benchmark(tiny={**TINY, "samples": 6}, full={**FULL, "samples": 6})
def catalogue_with_clutter(folder: Path, **size) -> list[Figure]:
    """Six samples of each surface."""
    return proof_against_product(folder, **size)


@benchmark(tiny={**TINY, "samples": 1}, full={**FULL, "samples": 1})
def catalogue_without_clutter(folder: Path, **size) -> list[Figure]:
    """One sample of each surface: the product is a sixth, everything else the same."""
    return proof_against_product(folder, **size)


@benchmark(
    tiny={"small": {"leds": 8, "filters": 10, "cameras": 2}, "large": {"leds": 8, "filters": 20, "cameras": 2},
          "bar_s": None, "bar_gib": None, "growth": False},
    full={"small": {"leds": 60, "filters": 1000, "cameras": 20}, "bar_s": 60.0, "bar_gib": 2.0, "growth": True,
          "large": {"leds": 60, "filters": 2000, "cameras": 30, "f_numbers": 9}},
)  # fmt: skip
def a_million_configurations(folder: Path, *, small, large, bar_s, bar_gib, growth) -> list[Figure]:
    """Each in a process of its own, whose peak memory counts; time per configuration must not grow."""
    first, last = child("catalogue", small), child("catalogue", large)
    each = [one["seconds"] / one["configurations"] for one in (first, last)]
    return [
        Figure(what="signed configurations", value=last["configurations"], unit="1"),
        Figure(what="solve", value=last["seconds"], unit="s", at_most=bar_s),
        Figure(what="processor time of both cores", value=last["processor_s"], unit="s"),
        Figure(what="gap proven", value=last["gap"], unit="1", at_most=1e-3),
        Figure(what="peak memory of the process", value=last["peak_gib"], unit="GiB", at_most=bar_gib),
        Figure(
            what=f"time per configuration / that of {first['configurations']}",
            value=each[1] / each[0],
            unit="x",
            at_most=1.0 if growth else None,
        ),
    ]


@benchmark(
    tiny={"size": {"leds": 6, "filters": 5, "cameras": 1}, "bar_s": None, "bar_gib": None},
    full={"size": {"leds": 60, "filters": 1000, "cameras": 1}, "bar_s": 60.0, "bar_gib": 2.0},
)
def stacked_pairs(folder: Path, *, size, bar_s, bar_gib) -> list[Figure]:
    """Every two of the filters as a stack: with 1,000 filters half a million pairs, a million signed configurations."""
    found = child("pairs", size)
    return [
        Figure(what="signed configurations", value=found["configurations"], unit="1"),
        Figure(what="solve", value=found["seconds"], unit="s", at_most=bar_s),
        Figure(what="processor time of both cores", value=found["processor_s"], unit="s"),
        Figure(what="gap proven", value=found["gap"], unit="1", at_most=1e-3),
        Figure(what="peak memory of the process", value=found["peak_gib"], unit="GiB", at_most=bar_gib),
    ]


def child(kind: str, size: dict) -> dict:
    """Run `child.py` and return what it measured."""
    done = subprocess.run(
        [sys.executable, str(CHILD), kind, json.dumps(size)], capture_output=True, text=True, check=False
    )
    if done.returncode:
        raise RuntimeError(f"{CHILD.name} {kind} failed:\n{done.stderr}")
    return json.loads(done.stdout)


@benchmark(
    tiny={"leds": 6, "filters": 10, "cameras": 2, "channels": 2, "bar_s": None},
    full={"leds": 60, "filters": 1000, "cameras": 1, "channels": 4, "bar_s": 30.0},
)
def at_most_k_led_channels(folder: Path, *, leds, filters, cameras, channels, bar_s) -> list[Figure]:
    """Build limit on the number of LED types, gap 1 %."""
    problem = catalogue_problem(
        folder, leds=leds, filters=filters, cameras=cameras, samples=6, build={"max_led_channels": channels}
    )
    found, seconds = timed(solve, problem, gap=1e-2, alternatives=0)
    return [
        Figure(what=f"solve with at most {channels} of {leds} LED types", value=seconds, unit="s", at_most=bar_s),
        Figure(what="gap proven", value=found.certificate.gap, unit="1", at_most=1e-2),
    ]
