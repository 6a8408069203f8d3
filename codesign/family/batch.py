"""Each variant of a family solved on its own, as a batch that survives: what is done is kept, what is lost done again.

The parent alone writes to the store, a variant at a time. Workers that end in the middle cost time only: their pool is
started anew, the variants in flight run again one at a time, and one that ends its worker again is put aside.
"""

from __future__ import annotations

import signal
import threading
from collections import deque
from collections.abc import Callable, Iterator
from concurrent.futures import FIRST_COMPLETED, CancelledError, Future, wait
from contextlib import contextmanager
from dataclasses import dataclass, field

from codesign.display import Displayed
from codesign.errors import CodesignError
from codesign.family.engine import Engine, HereEngine
from codesign.family.load import Family
from codesign.family.outcome import Outcome
from codesign.family.sealed import Sealer, program
from codesign.family.store import Store
from codesign.family.variants import Variant
from codesign.family.worker import Done, Task, packed_reference, run_task
from codesign.problem import Problem, solver_settings

#: Tasks in flight for each worker, so that none waits for the next.
AHEAD = 2
#: How often a variant may end its worker, alone in it, before it is put aside.
MOST_DEATHS = 2
#: Variants lost in a row, without any result in between, after which the workers themselves are at fault.
MOST_LOST = 3
#: How often the engine is asked whether it is alive. [s]
HEARTBEAT_SECONDS = 1.0

Progress = Callable[[int, int, int, int], None]


class Interrupted(BaseException):
    """Ctrl-C; ``done`` of ``total`` variants are kept.

    Not a KeyboardInterrupt: a search keeps its best so far at one of those, and a variant would seem to be done.
    """

    def __init__(self, done: int = 0, total: int = 0) -> None:
        super().__init__(f"{done} of {total} variants done")
        self.done, self.total = done, total


@dataclass(frozen=True, slots=True, kw_only=True)
class Entry:
    """A variant with its outcome, and the CNR it needs (None: none stated)."""

    variant: Variant
    outcome: Outcome
    required_cnr: float | None = None

    @property
    def name(self) -> str:
        """Name of the variant."""
        return self.variant.name

    @property
    def met(self) -> bool | None:
        """Whether the recipe reaches the CNR needed; None where none is stated or there is no recipe."""
        if self.required_cnr is None or not self.outcome.solved:
            return None
        return self.outcome.cnr >= self.required_cnr


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class OwnRigs(Displayed):
    """Each variant with its own best rig, in the order of the family.

    ``gap`` is the relative gap proven, None where each variant's problem states its own; ``run_now`` how many were
    run, the others were in the store.
    """

    title: str
    where: str
    entries: tuple[Entry, ...]
    run_now: int

    @property
    def solved(self) -> tuple[Entry, ...]:
        """Those with a recipe."""
        return tuple(entry for entry in self.entries if entry.outcome.solved)

    @property
    def failed(self) -> tuple[Entry, ...]:
        """Those without."""
        return tuple(entry for entry in self.entries if not entry.outcome.solved)


@dataclass(slots=True)
class _Job:
    """A variant on its way."""

    place: int
    variant: Variant
    key: str
    task: Task
    required_cnr: float | None
    deaths: int = 0


def own_rigs(
    family: Family,
    store: Store,
    engine: Engine | None = None,
    *,
    gap: float | None = None,
    progress: Progress | None = None,
) -> OwnRigs:
    """Solve each variant of a family with proof; those in the store already are taken from there.

    Parameters
    ----------
    family : Family
    store : Store
        Where each result is kept as soon as it is known.
    engine : Engine, optional
        Where variants are solved; this process by default. Results do not depend on it.
    gap : float, optional
        Relative gap to prove; each problem's own by default. [1]
    progress : callable, optional
        Called with (variants done, in all, failed so far, run by now).

    Returns
    -------
    OwnRigs

    Raises
    ------
    CodesignError
        When the store or the engine fails; a variant that fails is part of the result.
    Interrupted
        Upon Ctrl-C; what is done is in the store.
    """
    return _Batch(family, store, engine or HereEngine(), gap, progress).run()


@dataclass
class _Batch:
    family: Family
    store: Store
    engine: Engine
    gap: float | None
    progress: Progress | None
    entries: dict[int, Entry] = field(default_factory=dict)
    flying: dict[Future, _Job] = field(default_factory=dict)
    suspects: deque[_Job] = field(default_factory=deque)
    run_now: int = 0
    failures: int = 0
    lost_in_a_row: int = 0

    def run(self) -> OwnRigs:
        total = len(self.family.variants)
        finished = False
        try:
            with _interrupts(), _one_thread():
                self._work()
            finished = True
        except Interrupted:
            raise Interrupted(len(self.entries), total) from None
        finally:
            self.engine.close(now=not finished)
        return OwnRigs(
            title=self.family.spec.title,
            where=self.family.where,
            entries=tuple(self.entries[place] for place in sorted(self.entries)),
            run_now=self.run_now,
        )

    def _work(self) -> None:
        waiting = self._missing()
        exhausted = False
        while True:
            while not exhausted and not self.suspects and len(self.flying) < AHEAD * self.engine.workers:
                job = next(waiting, None)
                exhausted = job is None
                if job is not None:
                    self._start(job)
            if self.suspects and not self.flying:
                self._start(self.suspects.popleft())
            if not self.flying:
                return
            self._collect()

    def _start(self, job: _Job) -> None:
        self.flying[self.engine.submit(run_task, job.task)] = job

    def _collect(self) -> None:
        """Take what has been done, or lost."""
        done, _ = wait(self.flying, timeout=HEARTBEAT_SECONDS, return_when=FIRST_COMPLETED)
        if not done:
            self.engine.check()
            return
        alone = len(self.flying) == 1
        lost = []
        for future in sorted(done, key=lambda each: self.flying[each].place):
            job = self.flying.pop(future)
            error = _error_of(future)
            if error is None:
                self._finish(job, future.result())
            elif self.engine.lost(error):
                lost.append(job)
            else:
                self._fail(job, error)
        if lost:
            self._recover(lost, alone)

    def _recover(self, lost: list[_Job], alone: bool) -> None:
        """Run what was in flight again, one at a time until it is clear which of it ends its worker."""
        if self.engine.one_fate:
            lost = lost + self._abandoned()
        self.engine.renew()
        for job in sorted(lost, key=lambda job: job.place):
            job.deaths += alone
            if job.deaths < MOST_DEATHS:
                self.suspects.append(job)
                continue
            self.lost_in_a_row += 1
            if self.lost_in_a_row >= MOST_LOST:
                raise CodesignError(
                    f"{self.family.where}: worker processes end as soon as they start; "
                    "try --processes 1, and look there for the reason"
                )
            reason = "ended its worker process twice; out of memory? give it fewer candidates"
            self._finish(job, Done(Outcome(status="bad", reason=reason), False, 0.0))

    def _abandoned(self) -> list[_Job]:
        """Take those in flight that went down with the pool, whether or not it is known yet; keep what was done."""
        flying, self.flying, lost = self.flying, {}, []
        for future, job in flying.items():
            if future.done() and _error_of(future) is None:
                self._finish(job, future.result())
            else:
                lost.append(job)
        return lost

    def _fail(self, job: _Job, error: BaseException) -> None:
        told = error if isinstance(error, CodesignError) else self.engine.failed(error)
        if told is not None:
            raise told
        reason = f"could not be run: {type(error).__name__}: {error}"
        self._finish(job, Done(Outcome(status="bad", reason=" ".join(reason.split())), False, 0.0))

    def _finish(self, job: _Job, done: Done) -> None:
        if done.lasting:
            self.store.put(job.variant.name, job.key, done.outcome, done.seconds)
            self.lost_in_a_row = 0
        self.run_now += 1
        self._enter(job.place, job.variant, done.outcome, job.required_cnr)

    def _enter(self, place: int, variant: Variant, outcome: Outcome, required_cnr: float | None) -> None:
        self.entries[place] = Entry(variant=variant, outcome=outcome, required_cnr=required_cnr)
        self.failures += not outcome.solved
        if self.progress is not None:
            self.progress(len(self.entries), len(self.family.variants), self.failures, self.run_now)

    def _missing(self) -> Iterator[_Job]:
        """Variants that are not in the store, each built when it is wanted."""
        sealer = Sealer()
        start: _Reference | None = None
        for place, (variant, problem) in enumerate(self.family.problems()):
            if isinstance(problem, CodesignError):
                self._enter(place, variant, Outcome(status="bad", reason=str(problem)), None)
                continue
            start = start or _Reference(self.family.base, sealer, self.gap)
            gap = _gap(problem, self.gap)
            parcel, key = sealer.sealed(problem, start.key, repr(gap))
            required = problem.spec.required_cnr
            kept = self.store.get(variant.name, key)
            if kept is not None:
                self._enter(place, variant, kept, required)
                continue
            yield _Job(place, variant, key, Task(parcel, start.packed, gap, program()), required)


class _Reference:
    """The base problem's result, from which all variants start; solved when first needed."""

    def __init__(self, base: Problem | None, sealer: Sealer, gap: float | None) -> None:
        self.key, self._parcel, self._packed = "", None, b""
        if base is not None and not base.combined:
            self._gap = _gap(base, gap)
            self._parcel, self.key = sealer.sealed(base, "reference", repr(self._gap))

    @property
    def packed(self) -> bytes:
        if self._parcel is not None:
            self._packed, self._parcel = packed_reference(self._parcel, self._gap), None
        return self._packed


def _error_of(future: Future) -> BaseException | None:
    return CancelledError() if future.cancelled() else future.exception()


def _gap(problem: Problem, gap: float | None) -> float:
    return solver_settings(problem, gap=gap).gap


@contextmanager
def _interrupts() -> Iterator[None]:
    """Ctrl-C as `Interrupted`, where it can be had."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return

    def stop(*_: object) -> None:
        raise Interrupted

    before = signal.signal(signal.SIGINT, stop)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)


@contextmanager
def _one_thread() -> Iterator[None]:
    """The matrix library on one thread in this process too: here the reference, and maybe all, is solved."""
    from threadpoolctl import threadpool_limits

    with threadpool_limits(limits=1, user_api="blas"):
        yield
