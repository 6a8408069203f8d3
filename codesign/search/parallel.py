"""Both cores for array work: the same function on many parts, side by side."""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import TypeVar

Part = TypeVar("Part")

#: More threads than this bring nothing: the passes over arrays wait for memory. They also cost memory each.
MOST_THREADS = 4


def side_by_side(function: Callable[[Part], None], parts: Sequence[Part]) -> None:
    """Call ``function`` on every part, in threads when there are several parts and cores.

    Array operations let other threads run. The matrix library is kept to one thread each meanwhile: its own threads
    wait actively and would slow the others down.
    """
    threads = min(os.cpu_count() or 1, len(parts), MOST_THREADS)
    if threads < 2:
        for part in parts:
            function(part)
        return
    from threadpoolctl import threadpool_limits

    with threadpool_limits(limits=1, user_api="blas"), ThreadPoolExecutor(threads) as pool:
        try:
            list(pool.map(function, parts))
        except BaseException:
            pool.shutdown(cancel_futures=True)
            raise
