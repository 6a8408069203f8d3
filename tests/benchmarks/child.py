"""One solve in a process of its own: prints seconds, processor time, gap and peak memory as JSON."""

import json
import resource
import sys
import tempfile
import time
from pathlib import Path

sys.path[:0] = [str(Path(__file__).parents[2]), str(Path(__file__).parents[1])]

from bench_problems import catalogue_problem
from bench_registry import timed

from codesign import solve


def main(kind: str, size: dict) -> dict:
    """Solve a generated catalogue, with single filters or with pairs of them."""
    sections = {"candidates": {"no_filter": False, "filter_pairs": True}} if kind == "pairs" else {}
    with tempfile.TemporaryDirectory() as folder:
        problem = catalogue_problem(Path(folder), samples=6, **size, **sections)
        before = time.process_time()
        found, seconds = timed(solve, problem, gap=1e-3, alternatives=0)
    processor = time.process_time() - before
    return {
        "seconds": seconds,
        "processor_s": processor,
        "gap": found.certificate.gap,
        "cnr": found.optimum.cnr,
        "configurations": found.certificate.configurations,
        "peak_gib": resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20,
    }


if __name__ == "__main__":
    sys.stdout.write(json.dumps(main(sys.argv[1], json.loads(sys.argv[2]))))
