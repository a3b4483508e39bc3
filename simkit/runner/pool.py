"""Where blocks are worked on: in this process, or by dask workers on this machine."""

from __future__ import annotations

import logging
import multiprocessing
import os
import pickle
import tempfile
import threading
import zlib
from concurrent.futures import Future, ThreadPoolExecutor
from typing import Any, Protocol

from simkit.engine.child import interrupts_held
from simkit.runner.work import BlockJob, Receipt, Worker

PER_WORKER = 2
"""Blocks in flight for each worker: one in hand, one waiting, so that none is ever idle."""


class Pool(Protocol):
    """Takes blocks, hands back futures with `add_done_callback` and `result`."""

    @property
    def size(self) -> int:
        """Workers there are now; may change."""

    def submit(self, job: BlockJob) -> Any:
        """Start a block some time soon."""

    def close(self) -> None:
        """End all workers; blocks in hand are dropped before they are written."""


class InlinePool:
    """One block at a time, in a thread of this process; the engine still runs in a child.

    Parameters
    ----------
    worker : Worker
        Left as it is when the pool is closed, unless it has a block in hand.
    """

    size = 1

    def __init__(self, worker: Worker) -> None:
        self._worker = worker
        self._threads = ThreadPoolExecutor(1, thread_name_prefix="simkit-block")
        self._last: Future[Receipt] | None = None

    def submit(self, job: BlockJob) -> Any:
        """Start a block some time soon."""
        self._last = self._threads.submit(self._worker.do, job)
        return self._last

    def close(self) -> None:
        """End the thread, and the child if there is a case in hand."""
        if self._last is not None and not self._last.done():
            self._worker.abandon()
        self._threads.shutdown(cancel_futures=True)


class DaskPool:
    """One dask worker process a core on this machine, each with a child for the engine.

    Parameters
    ----------
    workers : int
    function : str
        Solver, as `Child` takes it.
    """

    def __init__(self, workers: int, function: str) -> None:
        self.size = workers
        self._function = function
        # One place for all runs: dask itself clears there what killed runs have left.
        self._scratch = os.path.join(tempfile.gettempdir(), f"simkit-{os.getuid()}")
        self._settings = set_up_dask(
            {
                # A worker that is a daemon may have no child process.
                "distributed.worker.daemon": False,
                "temporary-directory": self._scratch,
            }
        )
        self._cluster, self._client = self._start(workers)

    def _start(self, workers: int) -> tuple[Any, Any]:
        from distributed import Client, LocalCluster

        with interrupts_held():
            cluster = LocalCluster(  # type: ignore[no-untyped-call]
                n_workers=workers,
                threads_per_worker=1,
                processes=True,
                host="127.0.0.1",
                dashboard_address=None,
                # Without a dashboard the scheduler still listens, on a port that may be taken.
                scheduler_kwargs={"dashboard": False, "dashboard_address": "127.0.0.1:0"},
                memory_limit=0,
                silence_logs=logging.CRITICAL,
                local_directory=self._scratch,
            )
            return cluster, Client(cluster)  # type: ignore[no-untyped-call]

    def submit(self, job: BlockJob) -> Any:
        """Start a block some time soon."""
        return self._client.submit(do_block, self._function, packed(job), pure=False)

    def close(self) -> None:
        """End all workers."""
        from distributed import TimeoutError as DaskTimeoutError

        try:
            self._client.close(timeout=5)
            self._cluster.close(timeout=10)
        except (TimeoutError, DaskTimeoutError):
            logging.getLogger(__name__).debug("dask workers were slow to end", exc_info=True)
        finally:
            self._settings.__exit__(None, None, None)


def set_up_dask(more: dict[str, Any]) -> Any:
    """Settings that hold as long as a pool: workers that die are started anew under them."""
    import dask
    import distributed  # noqa: F401  its own defaults must be there before, to be there after

    settings = {
        "distributed.logging.distributed": "critical",
        "distributed.logging.tornado": "critical",
        "distributed.admin.large-graph-warning-threshold": "1 GB",
        "distributed.comm.timeouts.connect": "60s",
        # The scheduler remembers what it sent, a thousand blocks of work by default.
        "distributed.admin.low-level-log-length": 20,
    }
    return dask.config.set(settings | more)


def packed(job: BlockJob) -> bytes:
    """A job as the scheduler shall see it: small, and nothing it looks into."""
    return zlib.compress(pickle.dumps(job), 1)


def do_block(function: str, job: bytes) -> Receipt:
    """Task of a dask worker: one block, with the `Worker` this thread of it keeps."""
    from distributed import get_worker

    dask_worker: Any = get_worker()
    kept = dask_worker.__dict__.setdefault("simkit_workers", threading.local())
    worker = getattr(kept, "worker", None)
    if worker is None:
        may_have_children()
        keep_freed_memory()
        worker = kept.worker = Worker(function)
    receipt: Receipt = worker.do(pickle.loads(zlib.decompress(job)))
    return receipt


def may_have_children() -> None:
    """Lift the rule that a daemon process has no children of its own.

    A worker started by hand is such a process. The rule guards against orphans, and the engine's
    child ends with its parent anyway.
    """
    settings: dict[str, Any] = multiprocessing.current_process()._config  # type: ignore[attr-defined]
    settings["daemon"] = False


def keep_freed_memory() -> None:
    """Let children keep what they free, which dask forbids its workers on Linux.

    The engine takes and frees its matrix at each frequency. Given back to the system each time, it
    is cleared and mapped anew: a sixth of the solving time of 240 segments, and the child never
    holds more than one.
    """
    os.environ.pop("MALLOC_TRIM_THRESHOLD_", None)


def core_count() -> int:
    """Physical cores this process may use, at least 1."""
    import psutil

    allowed = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count()
    return max(1, min(allowed or 1, psutil.cpu_count(logical=False) or 1))
