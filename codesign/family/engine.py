"""Where variants are solved: in this process, in local processes, or on a cluster; all through `concurrent.futures`."""

from __future__ import annotations

import os
from collections.abc import Callable
from concurrent.futures import BrokenExecutor, Future, ProcessPoolExecutor
from typing import Any, Protocol

from codesign.errors import CodesignError
from codesign.family.worker import start_worker

#: Processes at most; more would wait for memory and for the parcels.
MOST_PROCESSES = 256


class Engine(Protocol):
    """What a batch needs of the place where its variants are solved."""

    #: Tasks that can be worked on at once.
    workers: int
    #: Whether the end of one worker takes all tasks in flight with it.
    one_fate: bool

    def submit(self, function: Callable[[Any], Any], task: Any) -> Future:
        """Start a task."""

    def lost(self, error: BaseException) -> bool:
        """Whether an error says that the worker of a task ended, rather than that the task failed."""

    def failed(self, error: BaseException) -> CodesignError | None:
        """What the error of a task says about the engine as a whole; None where nothing."""

    def renew(self) -> None:
        """Make it work again after workers were lost."""

    def check(self) -> None:
        """Raise CodesignError when it cannot get any further; called now and then while waiting."""

    def close(self, *, now: bool = False) -> None:
        """Give workers back; ``now`` without waiting for what they do."""


class HereEngine:
    """One task after the other in this process."""

    workers = 1
    one_fate = False

    def submit(self, function: Callable[[Any], Any], task: Any) -> Future:
        """Do the task."""
        future: Future = Future()
        future.set_result(function(task))
        return future

    def lost(self, error: BaseException) -> bool:
        """No worker is lost without this process."""
        return False

    def failed(self, error: BaseException) -> CodesignError | None:
        """This process is here."""
        return None

    def renew(self) -> None:
        """Nothing to do."""

    def check(self) -> None:
        """Nothing to do."""

    def close(self, *, now: bool = False) -> None:
        """Nothing to do."""


class ProcessEngine:
    """Local processes, started anew rather than forked: forking a process that has threads may lock up."""

    one_fate = True

    def __init__(self, processes: int) -> None:
        self.workers = processes
        self._pool: ProcessPoolExecutor | None = None

    def submit(self, function: Callable[[Any], Any], task: Any) -> Future:
        """Start a task; a pool found broken only now gives a future with that error."""
        if self._pool is None:
            from multiprocessing import get_context

            self._pool = ProcessPoolExecutor(self.workers, mp_context=get_context("spawn"), initializer=start_worker)
        try:
            return self._pool.submit(function, task)
        except BrokenExecutor as error:
            future: Future = Future()
            future.set_exception(error)
            return future

    def pids(self) -> list[int]:
        """Process ids of the workers there are now."""
        return [] if self._pool is None else list(self._pool._processes or ())

    def lost(self, error: BaseException) -> bool:
        """A process that ends breaks the whole pool."""
        return isinstance(error, BrokenExecutor)

    def failed(self, error: BaseException) -> CodesignError | None:
        """Processes fail one by one."""
        return None

    def renew(self) -> None:
        """Start a new pool with the next task."""
        self.close(now=True)

    def check(self) -> None:
        """A broken pool says so by itself."""

    def close(self, *, now: bool = False) -> None:
        """End the processes."""
        if self._pool is None:
            return
        processes = list((self._pool._processes or {}).values()) if now else []
        for process in processes:
            process.kill()
        self._pool.shutdown(wait=True, cancel_futures=True)
        self._pool = None


def local_engine(processes: int | None, tasks: int) -> Engine:
    """Return the engine for a number of local processes; by default as many as there are cores, where it pays.

    Raises CodesignError when the number cannot be used.
    """
    if processes is not None and not 1 <= processes <= MOST_PROCESSES:
        raise CodesignError(f"processes is {processes}, must be 1 to {MOST_PROCESSES}")
    wanted = processes or (cores() if tasks >= LEAST_FOR_PROCESSES else 1)
    return HereEngine() if wanted == 1 else ProcessEngine(wanted)


#: Fewer variants than this are done before processes would have started.
LEAST_FOR_PROCESSES = 8


def cores() -> int:
    """Cores this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
