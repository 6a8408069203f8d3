"""Variants on an existing cluster of Dask workers, through its executor interface."""

from __future__ import annotations

import logging
import pickle
import time
from collections.abc import Callable
from concurrent.futures import CancelledError, Future
from functools import partial
from typing import Any

from codesign.errors import CodesignError
from codesign.family.worker import run_task

log = logging.getLogger(__name__)

#: How to get the engine.
INSTALL = "pip install 'codesign[cluster]'"
#: A scheduler must answer within this time, and a cluster not be without workers for longer. [s]
PATIENCE_SECONDS = 10.0
DESERTED_SECONDS = 60.0


class ClusterEngine:
    """Workers of a scheduler at an address such as ``tcp://10.0.0.5:8786``."""

    one_fate = False

    def __init__(self, address: str) -> None:
        self.address = address
        self._client = _connected(address)
        self.workers = max(sum(self._threads().values()), 1)
        if not self._threads():
            self._client.close()
            raise CodesignError(
                f"--scheduler {address}: no worker has joined it; start one with 'dask worker {address}'"
            )
        self._executor = self._client.get_executor(pure=False)
        self._last_seen = time.monotonic()

    def submit(self, function: Callable[[Any], Any], task: Any) -> Future:
        """Send a task; of the function there is but one."""
        assert function is run_task
        found: Future = Future()
        found.set_running_or_notify_cancel()
        self._executor.submit(_sent(), pickle.dumps(task)).add_done_callback(partial(_hand_over, found))
        return found

    def lost(self, error: BaseException) -> bool:
        """The scheduler gives a task up after it ended several workers."""
        return type(error).__name__ == "KilledWorker"

    def renew(self) -> None:
        """The scheduler sees to its workers."""

    def check(self) -> None:
        """Raise CodesignError when the scheduler is gone, or has been without workers for long."""
        if self._client.status not in ("running", "connecting"):
            raise self._gone()
        if self._threads():
            self._last_seen = time.monotonic()
        elif time.monotonic() - self._last_seen > DESERTED_SECONDS:
            raise CodesignError(
                f"--scheduler {self.address}: has had no worker for {DESERTED_SECONDS:.0f} s; what is done is kept, "
                "start workers and run the same command again"
            )

    def failed(self, error: BaseException) -> CodesignError | None:
        """What the error of a task says about the cluster as a whole."""
        if isinstance(error, CancelledError):
            return self._gone()
        # Anything else that reaches this place went wrong before or after the task, which tells its own mistakes.
        said = " ".join(str(error).split())[:160]
        return CodesignError(
            f"--scheduler {self.address}: its workers cannot run this program ({said}); "
            "install the same version of codesign there, what is done is kept"
        )

    def close(self, *, now: bool = False) -> None:
        """Leave the cluster; ``now`` takes back what it has not done."""
        if self._client.status == "closed":
            return
        try:
            self._executor.shutdown(wait=not now)
        except Exception as error:  # the scheduler may be gone, and with it what there was to take back
            log.debug("leaving %s: %s", self.address, error)
        finally:
            self._client.close()

    def _threads(self) -> dict[str, int]:
        """Worker → threads."""
        workers = self._client.scheduler_info(n_workers=-1).get("workers", {})
        return {name: worker["nthreads"] for name, worker in workers.items()}

    def _gone(self) -> CodesignError:
        return CodesignError(
            f"--scheduler {self.address}: the scheduler is gone; what is done is kept, run the same command again"
        )


def _sent() -> Callable[[bytes], bytes]:
    """What a worker is told to do.

    A function inside a function travels by its content, not by its name: the scheduler, which looks at it, does not
    need this program.
    """

    def run(task: bytes) -> bytes:
        from codesign.family.worker import run_packed

        return run_packed(task)

    return run


def _hand_over(found: Future, sent: Future) -> None:
    """Unpack what came back."""
    error = CancelledError() if sent.cancelled() else sent.exception()
    if error is None:
        found.set_result(pickle.loads(sent.result()))
    else:
        found.set_exception(error)


def _connected(address: str):
    """A client of the scheduler."""
    try:
        from distributed import Client
    except ImportError:
        raise CodesignError(f"--scheduler needs the package distributed; {INSTALL}") from None
    try:
        return Client(address, timeout=PATIENCE_SECONDS, set_as_default=False)
    except (OSError, TimeoutError, ValueError) as error:
        said = " ".join(str(error).split())[:120]
        raise CodesignError(
            f"--scheduler {address}: cannot be reached ({said}); give the address 'dask scheduler' shows, "
            "e.g. tcp://10.0.0.5:8786"
        ) from None
