"""Rung 0 of the walk: closed-form bounds of every configuration, in blocks, on both cores."""

from __future__ import annotations

import itertools
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from codesign.assemble import Assembly
from codesign.program import Array
from codesign.search import never
from codesign.search.bounds import both_bounds
from codesign.search.parallel import side_by_side

#: Filters bounded together: arrays stay in the cache, and memory bounded.
FILTERS_TOGETHER = 384
#: Most pairs of target and background whose bounds are worked out for every configuration.
QUICK_PAIRS = 3
#: Fewer signed configurations are bounded sooner than threads start.
WORTH_THREADS = 20000


def blocks(filters: int) -> list[slice]:
    """All filters in blocks of those bounded together."""
    return [slice(s, min(s + FILTERS_TOGETHER, filters)) for s in range(0, filters, FILTERS_TOGETHER)]


def closed_form(
    assembly: Assembly, pairs: list[int], stop: Callable[[], bool] = never
) -> tuple[Array, NDArray[np.bool_]]:
    """Bounds of all settings, filters and both signs: the least of any of the pairs. (settings, F, 2)

    A task is a block of filters in all settings of one camera channel, which share their rates. Of many tasks, those
    left when it is time to ``stop`` are passed over but the first: also returned is which. (settings, F)
    """
    settings = assembly.settings
    least = np.full((len(settings), len(assembly.problem.filters), 2), np.inf)
    skipped = np.zeros(least.shape[:2], dtype=bool)
    channels: dict[tuple[str, str], list[int]] = {}
    for number, setting in enumerate(settings):
        channels.setdefault((setting.camera.id, setting.channel), []).append(number)
        assembly.segments(setting, coarse=True)

    def bound(task: tuple[list[int], slice]) -> None:
        numbers, part = task
        if least.size >= WORTH_THREADS and task is not tasks[0] and stop():
            skipped[numbers, part] = True
            return
        for number, pair in itertools.product(numbers, pairs):
            program = assembly.program(settings[number], part, coarse=True, pair=pair)
            least[number, part] = np.minimum(least[number, part], both_bounds(program))

    # All cameras with the first filters, then with the next: what is left undone is spread over all of them.
    tasks = [(numbers, part) for part in blocks(least.shape[1]) for numbers in channels.values()]
    if least.size < WORTH_THREADS:
        for task in tasks:
            bound(task)
    else:
        side_by_side(bound, tasks)
    assembly.forget()
    return least, skipped


def limiting_pairs(assembly: Assembly) -> list[int]:
    """The pairs that most often have the least bound, judged by one setting; these do for rung 0."""
    count = len(assembly.problem.pairs)
    if count <= QUICK_PAIRS:
        return list(range(count))
    setting, part = assembly.settings[0], blocks(len(assembly.problem.filters))[0]
    bounds = [both_bounds(assembly.program(setting, part, coarse=True, pair=pair)) for pair in range(count)]
    often = np.bincount(np.argmin(bounds, axis=0).ravel(), minlength=count)
    return [int(pair) for pair in np.argsort(-often, kind="stable")[:QUICK_PAIRS]]
