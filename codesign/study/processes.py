"""Further processes that work beside this one and end with it."""

from __future__ import annotations

import signal
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from typing import Any

from codesign.errors import SolveError

_told_to_stop: Any = None


def in_processes(work: Callable, jobs: Sequence[tuple], workers: int, tick: Callable[[], None] | None) -> list:
    """Do the first job here, the others in further processes; return their results in order.

    ``work`` is a function of a module, called with each job's values and with a function to call after each piece of
    work: ``tick`` here. In the others it ends the work when this process has been interrupted or has failed; they leave
    interrupts from the keyboard to this one.
    """
    from concurrent.futures import ProcessPoolExecutor
    from multiprocessing import get_context

    context = get_context("spawn")  # forking a process that has threads may lock up
    stop = context.Event()
    with ProcessPoolExecutor(min(workers, len(jobs)) - 1, context, initializer=_begin, initargs=(stop,)) as pool:
        try:
            with _uninterrupted():  # new processes inherit it
                running = [pool.submit(_work, work, job) for job in jobs[1:]]
            return [work(*jobs[0], tick), *(future.result() for future in running)]
        except BaseException:
            stop.set()
            raise  # once they have seen it: a process that starts when this one has gone complains


def _begin(stop: Any) -> None:
    global _told_to_stop
    _told_to_stop = stop
    signal.signal(signal.SIGINT, signal.SIG_IGN)


def _work(work: Callable, job: tuple) -> Any:
    _end_if_told()
    return work(*job, _end_if_told)


def _end_if_told() -> None:
    if _told_to_stop.is_set():
        raise SolveError("ended with the process it worked for")


@contextmanager
def _uninterrupted() -> Iterator[None]:
    try:
        before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    except ValueError:  # not the main thread, which alone is interrupted
        yield
        return
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)
