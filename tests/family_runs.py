"""A small, quick family on files, and runs of it that can be killed without starting an interpreter for each.

As a program this is a server: it imports everything once, then forks a run for each store named on its standard input
and prints the run's process id; a run that ends by itself is told by a second line with its exit code.
"""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from pathlib import Path
from typing import Any

from command_line import PROBLEM

from codesign.family import Family, load_family
from codesign.family.batch import OwnRigs, own_rigs
from codesign.family.engine import ProcessEngine
from codesign.family.store import Store

ROOT = Path(__file__).parents[1]

FAMILY = """
title = "Caps on a line"
base = "caps-base.toml"
variants = "caps.csv"
"""

#: Pairs of surfaces of the demo catalogue that a rig of blue and red LEDs can tell apart.
PAIRS = (("cap-blue", "cap-green"), ("cap-red", "cap-green"), ("cap-yellow", "cap-blue"), ("cap-white", "cap-red"))


def write_family(folder: Path, count: int, **rows: str) -> Path:
    """Write a family of ``count`` variants; ``rows`` replace those of the names given, as text after the name."""
    lines = ["variant,scene.target,scene.background,scene.guards,motion.speed_mm_per_s,limits.rig_heat_w,required_cnr"]
    for number in range(count):
        target, background = PAIRS[number % len(PAIRS)]
        name = f"cap-{number:02d}"
        own = f"{target},{background},[],{100 + 7 * number},{2 if number % 3 else 1.5},{30 if number % 5 == 0 else ''}"
        lines.append(f"{name},{rows.pop(name.replace('-', '_'), own)}")
    assert not rows, f"no such variants: {rows}"
    (folder / "caps.csv").write_text("\n".join([*lines, ""]), encoding="utf-8")
    (folder / "caps-base.toml").write_text(PROBLEM, encoding="utf-8")
    path = folder / "caps.toml"
    path.write_text(FAMILY, encoding="utf-8")
    return path


def run(family: Path | Family, store: Path, engine: Any = None, **options: Any) -> OwnRigs:
    """Run a family on a store."""
    with Store(store) as opened:
        loaded = family if isinstance(family, Family) else load_family(family)
        return own_rigs(loaded, opened, engine, **options)


def content(store: Path) -> dict[tuple[str, str], str]:
    """What a store holds: outcome as text by variant and content key."""
    with Store(store) as opened:
        return {(variant, key): outcome for variant, key, outcome in opened.rows()}


def end_worker(_: Any) -> None:
    """What a variant does that takes all memory there is: its process is killed."""
    os.kill(os.getpid(), signal.SIGKILL)


class DeadlyEngine(ProcessEngine):
    """Local processes in which variants with one of these speeds kill their worker. [mm/s]"""

    def __init__(self, processes: int, speeds: set[float]) -> None:
        super().__init__(processes)
        self.speeds, self.deaths = speeds, 0

    def submit(self, function: Any, task: Any) -> Any:
        if task.problem.spec.motion.speed_mm_per_s in self.speeds:
            self.deaths += 1
            function = end_worker
        return super().submit(function, task)


class Server:
    """The server of runs, as the tests see it."""

    def __init__(self, family: Path) -> None:
        path = os.pathsep.join(filter(None, (str(ROOT), os.environ.get("PYTHONPATH"))))
        # One thread: a process with more must not be forked.
        env = {**os.environ, "PYTHONPATH": path, "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}
        self.process = subprocess.Popen(
            [sys.executable, __file__, str(family)], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True, env=env
        )

    def start(self, store: Path) -> int:
        """Start a run and return its process id."""
        self.process.stdin.write(f"{store}\n")
        self.process.stdin.flush()
        return int(self.process.stdout.readline())

    def code(self) -> int:
        """Exit code of the run started last, once it has ended; negative for the signal that ended it."""
        return int(self.process.stdout.readline())

    def close(self) -> None:
        """End the server."""
        self.process.stdin.close()
        assert self.process.wait(timeout=60) == 0
        self.process.stdout.close()


def serve(family: Path) -> None:
    """Fork a run for each line; one at a time."""
    loaded = load_family(family)
    run(loaded, family.with_name("warm-up.sqlite"))  # everything imported and cached, as in a long run
    for line in sys.stdin:
        child = os.fork()
        if child == 0:
            try:
                run(loaded, Path(line.rstrip("\n")))
            except BaseException:
                os._exit(1)
            os._exit(0)
        print(child, flush=True)
        print(os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]), flush=True)


if __name__ == "__main__":
    serve(Path(sys.argv[1]))
