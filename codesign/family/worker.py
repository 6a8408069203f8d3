"""One variant solved, in whatever process: from a parcel to an outcome.

Everything that could make the last digits depend on where it runs is held: the matrix library keeps to one thread, and
the search starts from the same reference for all.
"""

from __future__ import annotations

import logging
import os
import pickle
import signal
import threading
import time
import traceback
from dataclasses import dataclass, replace
from functools import lru_cache
from pathlib import Path

from codesign.catalog import Catalog
from codesign.errors import CertificateError, CodesignError, InfeasibleError
from codesign.family.outcome import Outcome, outcome_of
from codesign.family.sealed import program
from codesign.problem import Problem
from codesign.solve import solve
from codesign.study.common import Resolved, resolve

log = logging.getLogger(__name__)

_held = threading.Lock()
_limiter: list[object] = []


@dataclass(frozen=True, slots=True)
class Task:
    """A problem to solve and where to start: a parcel of `Sealer`, and the packed reference (empty: from nothing)."""

    problem: Problem
    reference: bytes
    gap: float
    program: str


@dataclass(frozen=True, slots=True)
class Done:
    """An outcome; ``lasting`` where it follows from the content alone, so that it is worth keeping."""

    outcome: Outcome
    lasting: bool
    seconds: float


def run_task(task: Task) -> Done:
    """Solve one variant; what goes wrong becomes part of the outcome.

    Raises CodesignError when this process runs another version of the program than the one that sent the task.
    """
    if task.program != program():
        raise CodesignError(
            f"a worker runs codesign {program()}, this is {task.program}; use the same version for both, "
            "what is done is kept"
        )
    started = time.perf_counter()
    outcome, lasting = _outcome(task)
    return Done(outcome, lasting, time.perf_counter() - started)


def run_packed(task: bytes) -> bytes:
    """`run_task` in a worker of a cluster, which nobody prepared; packed, so that only workers need this program."""
    hold_threads()
    return pickle.dumps(run_task(pickle.loads(task)))


def _outcome(task: Task) -> tuple[Outcome, bool]:
    try:
        return outcome_of(solved(task.problem, task.gap, unpacked(task.reference)), task.gap), True
    except InfeasibleError as error:
        return Outcome(status="impossible", reason=_plain_reason(error), limits=error.limits), True
    except CertificateError as error:
        return Outcome(status="bad", reason=f"its result failed the proof check: {_plain_reason(error)}"), False
    except CodesignError as error:
        return Outcome(status="bad", reason=_plain_reason(error)), True
    except MemoryError:
        return Outcome(status="bad", reason="out of memory; give fewer candidates, or run fewer processes"), False
    except Exception as error:  # a fault of the program: the other variants go on
        log.exception("a variant failed")
        last = traceback.extract_tb(error.__traceback__)[-1]
        place = f"{Path(last.filename).name}:{last.lineno}"
        reason = f"fault of the program at {place}: {type(error).__name__}: {error}; please report it"
        return Outcome(status="bad", reason=" ".join(reason.split())), False


def solved(problem: Problem, gap: float, reference: Resolved | None):
    """Solution of one variant to a relative gap, with proof."""
    if problem.combined:
        return solve(problem, gap=gap, alternatives=0)
    found = resolve(problem, reference, gap=gap)
    solution = found.solution()
    if solution is None or (found.optimum.leds and not solution.recipe.leds):
        from codesign.assemble_conflicts import no_step_fits

        raise no_step_fits(problem)
    return solution


def packed_reference(problem: Problem, gap: float) -> bytes:
    """Solve the base problem once, for all variants to start from; empty where it has no solution."""
    try:
        found = resolve(problem, gap=gap)
    except CodesignError:
        return b""
    if found.known is None:
        return b""
    # A search looks at the specification of its neighbour, not at its parts.
    bare = replace(found.problem, channels=(), filters=(), cameras=(), guards=(), catalog=Catalog("", ""))
    return pickle.dumps(replace(found, problem=bare, evidence=()))


@lru_cache(maxsize=2)
def unpacked(reference: bytes) -> Resolved | None:
    """The reference, unpacked once in each process."""
    return pickle.loads(reference) if reference else None


def hold_threads() -> None:
    """Keep the matrix library to one thread from now on: its threads fight over cores and change last digits."""
    with _held:
        if not _limiter:
            from threadpoolctl import threadpool_limits

            _limiter.append(threadpool_limits(limits=1, user_api="blas"))


def start_worker() -> None:
    """Prepare a local worker process: interrupts are for its parent, and it does not outlive that one."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_end_with_parent, daemon=True).start()
    hold_threads()


def _end_with_parent() -> None:
    from multiprocessing import connection, parent_process

    parent = parent_process()
    if parent is not None:
        connection.wait([parent.sentinel])
        os._exit(1)


def _plain_reason(error: CodesignError) -> str:
    return " ".join(str(error).removeprefix(": ").split())
