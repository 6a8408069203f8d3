"""The table of benchmarks: each function adds itself, with a tiny size for the smoke test and the full one."""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path


@dataclass(frozen=True, kw_only=True)
class Figure:
    """One number of a benchmark and its bar: not above ``at_most``, not below ``at_least``; neither: told only."""

    what: str
    value: float
    unit: str
    at_most: float | None = None
    at_least: float | None = None

    @property
    def met(self) -> bool | None:
        """Whether the bar is met; None where there is none."""
        if self.at_most is not None:
            return self.value <= self.at_most
        return None if self.at_least is None else self.value >= self.at_least

    @property
    def bar(self) -> str:
        """The bar in words."""
        if self.at_most is not None:
            return f"<= {self.at_most:g}"
        return "" if self.at_least is None else f">= {self.at_least:g}"


@dataclass(frozen=True)
class Benchmark:
    """A function of (folder, **size) that returns figures."""

    name: str
    function: Callable[..., list[Figure]]
    tiny: Mapping
    full: Mapping

    def run(self, folder: Path, *, tiny: bool, **changes) -> list[Figure]:
        """Run at one of the two sizes; ``changes`` to it are taken where the benchmark knows them."""
        size = dict(self.tiny if tiny else self.full)
        size.update({key: value for key, value in changes.items() if key in size})
        return self.function(folder, **size)


REGISTRY: dict[str, Benchmark] = {}


def benchmark(*, tiny: Mapping, full: Mapping) -> Callable:
    """Register the decorated function under its name."""

    def register(function: Callable[..., list[Figure]]) -> Callable[..., list[Figure]]:
        name = function.__name__.replace("_", " ")
        REGISTRY[name] = Benchmark(name, function, tiny, full)
        return function

    return register


def timed(function: Callable, *arguments, **named) -> tuple[object, float]:
    """Result and wall time. [s]"""
    started = time.perf_counter()
    result = function(*arguments, **named)
    return result, time.perf_counter() - started


def alternating(repeats: int, *functions: Callable) -> list[float]:
    """Median wall time of each function, called in turn so that a busy machine slows all alike. [s]"""
    times = [[] for _ in functions]
    for _ in range(repeats):
        for function, own in zip(functions, times, strict=True):
            own.append(timed(function)[1])
    return [statistics.median(own) for own in times]
