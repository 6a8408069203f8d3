"""Families: 200 variants with the whole demo catalogue, in one process and in two, and the memory of a worker."""

from __future__ import annotations

import os
from pathlib import Path

import ink_family
from bench_registry import Figure, benchmark, timed

from codesign.family import Family, load_family
from codesign.family.batch import OwnRigs, own_rigs
from codesign.family.engine import Engine, HereEngine, ProcessEngine
from codesign.family.store import Store

#: Bars hold for families of this size.
FULL = 200


@benchmark(tiny={"count": 2}, full={"count": FULL})
def family_of_inks(folder: Path, *, count: int) -> list[Figure]:
    """Own rig of each variant: time with two processes, against one, and peak memory of a worker.

    Processor time of all processes is told too: with other work on the machine it says more than the clock.
    """
    family = load_family(ink_family.write_family(folder, count))
    full = count >= FULL
    before = os.times()
    memory: list[float] = []
    engine = ProcessEngine(2)
    two, clock_two = timed(_run, family, folder / "two.sqlite", engine, lambda *_: memory.extend(_peaks(engine)))
    middle = os.times()
    one, clock_one = timed(_run, family, folder / "one.sqlite", HereEngine(), None)
    after = os.times()
    same = [a.outcome == b.outcome for a, b in zip(one.entries, two.entries, strict=True)]
    gap = max(entry.outcome.gap for entry in two.solved)
    what = f"{count} variants"
    return [
        Figure(what=f"{what}, 2 processes", value=clock_two, unit="s", at_most=120 if full else None),
        Figure(what=f"{what}, 1 process", value=clock_one, unit="s"),
        Figure(what=f"{what}, 1 process / 2", value=clock_one / clock_two, unit="x", at_least=1.7 if full else None),
        Figure(what=f"{what}, 2 processes, processor time", value=_busy(before, middle), unit="s"),
        Figure(what=f"{what}, 1 process, processor time", value=_busy(middle, after), unit="s"),
        Figure(what=f"{what}, peak memory of a worker", value=max(memory, default=0.0), unit="MiB", at_most=500),
        Figure(what=f"{what}, share that is equal to the last digit", value=sum(same) / count, unit="1", at_least=1),
        Figure(what=f"{what}, largest gap proven", value=gap, unit="1", at_most=1e-3),
    ]


def _run(family: Family, store: Path, engine: Engine, progress) -> OwnRigs:
    with Store(store) as opened:
        return own_rigs(family, opened, engine, progress=progress)


def _busy(before: os.times_result, after: os.times_result) -> float:
    """Processor time of this process and its ended children in between. [s]"""
    return sum(after[:4]) - sum(before[:4])


def _peaks(engine: ProcessEngine) -> list[float]:
    """Peak resident memory of each worker, where the system tells. [MiB]"""
    found = []
    for process in engine.pids():
        try:
            status = Path(f"/proc/{process}/status").read_text()
        except OSError:
            continue
        found += [int(line.split()[1]) / 1024 for line in status.splitlines() if line.startswith("VmHWM")]
    return found
