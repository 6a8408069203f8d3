"""All benchmarks in one table: ``python tests/benchmarks/run.py [name ...]``, see README.md."""

from __future__ import annotations

import argparse
import os
import sys
import tempfile
from collections.abc import Iterable, Iterator
from pathlib import Path

sys.path[:0] = [str(Path(__file__).parents[2]), str(Path(__file__).parents[1]), str(Path(__file__).parent)]

import bench_catalogue
import bench_family
import bench_page
import bench_rivals
import bench_shared
import bench_single
import bench_tolerance
import bench_vary
from bench_registry import REGISTRY, Benchmark, Figure

# Importing registers.
MODULES = (
    bench_catalogue,
    bench_family,
    bench_page,
    bench_rivals,
    bench_shared,
    bench_single,
    bench_tolerance,
    bench_vary,
)


def figures(benchmarks: Iterable[Benchmark], *, tiny: bool, **changes) -> Iterator[tuple[Benchmark, Figure]]:
    """Run some benchmarks one after the other."""
    for one in benchmarks:
        with tempfile.TemporaryDirectory() as folder:
            for figure in one.run(Path(folder), tiny=tiny, **changes):
                yield one, figure


def line(name: str, figure: Figure) -> str:
    """One line of the table."""
    verdict = {True: "met", False: "NOT MET", None: ""}[figure.met]
    value = f"{figure.value:.4g}" if abs(figure.value) < 1e4 else f"{figure.value:.0f}"
    return f"{name:<28} {figure.what:<50} {value:>10} {figure.unit:<4} {figure.bar:<9} {verdict}".rstrip()


def print_table(benchmarks: Iterable[Benchmark], *, tiny: bool = False, **changes) -> list[Figure]:
    """Print each figure as it comes and return them all."""
    found = []
    load = os.getloadavg()[0] if hasattr(os, "getloadavg") else float("nan")
    sys.stdout.write(f"{os.cpu_count()} cores, load before the run {load:.2f}\n")
    for one, figure in figures(benchmarks, tiny=tiny, **changes):
        sys.stdout.write(line(one.name, figure) + "\n")
        sys.stdout.flush()
        found.append(figure)
    return found


def main() -> int:
    """Command line."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("names", nargs="*", help="parts of the names of benchmarks; all by default")
    parser.add_argument("--tiny", action="store_true", help="at the size of the smoke test")
    parser.add_argument("--sample", type=int, help="configurations that rivals' times are extrapolated from")
    parser.add_argument("--repeats", type=int, help="repeats that medians are taken of")
    options = parser.parse_args()
    chosen = [one for name, one in REGISTRY.items() if not options.names or any(n in name for n in options.names)]
    changes = {k: v for k, v in (("sample", options.sample), ("repeats", options.repeats)) if v is not None}
    found = print_table(chosen, tiny=options.tiny, **changes)
    return int(any(figure.met is False for figure in found))


if __name__ == "__main__":
    raise SystemExit(main())
