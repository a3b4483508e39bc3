"""Blocks worked on by the workers of a dask cluster that is there already."""

from __future__ import annotations

import contextlib
import logging
import os
import time
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

from simkit.engine.child import interrupts_held
from simkit.errors import SimkitError
from simkit.runner.identity import program_versions
from simkit.runner.pool import do_block, packed, set_up_dask
from simkit.runner.work import BlockJob, Receipt
from simkit.store.remote import Place

CONNECT_S = 20.0
WORKERS_S = 60.0
"""Longest wait for the first worker."""

SIGHT_S = 5.0
"""Longest wait for a worker to see the results folder."""

_LOOK_S = 2.0
_TOPIC = "simkit"


class UnlikeWorkerError(Exception):
    """A block came to a worker with other versions of simkit or engine and is to go elsewhere."""


class ClusterPool:
    """Workers of a cluster, as many as there are at the moment.

    Parameters
    ----------
    address : str
        Of the scheduler, ``tcp://host:port``.
    function : str
        Solver, as `Child` takes it.
    say : callable
        Shows one line.
    lock : Path or RemotePath, optional
        File in the results folder that every worker must see, if it is a path.

    Raises
    ------
    SimkitError
        There is no scheduler, no worker, or a worker with other versions of simkit or engine, or
        one that does not see the results folder.
    """

    def __init__(
        self, address: str, function: str, say: Callable[[str], None], lock: Place | None = None
    ) -> None:
        self._address = address
        self._function = function
        self._say = say
        self._lock = str(lock) if isinstance(lock, Path) else ""
        self._versions = program_versions()
        self._size, self._looked = 0, 0.0
        self._unlike: set[str] = set()
        self._settings = self._quietly()
        try:
            self._client = self._connect()
            self._wait_for_workers()
            check_versions(self._ask_versions(), self._versions)
            check_sight(self._client.run(sees, self._lock, SIGHT_S), self._lock)
            self._client.subscribe_topic(_TOPIC, self._told)
        except BaseException:
            self.close()
            raise
        self._say(f"{_workers_text(self.size, address)}{self._dashboard()}")

    @staticmethod
    def _quietly() -> contextlib.ExitStack:
        """Settings for dask, and no tracebacks of its own between the lines of the run."""
        settings = contextlib.ExitStack()
        settings.enter_context(set_up_dask({}))
        from distributed.utils import silence_logging_cmgr

        settings.enter_context(silence_logging_cmgr(logging.CRITICAL))
        return settings

    def _connect(self) -> Any:
        from distributed import Client

        try:
            with interrupts_held():
                return Client(self._address, timeout=CONNECT_S)  # type: ignore[no-untyped-call]
        except (OSError, ValueError) as error:
            raise SimkitError(
                f"{self._address}: there is no scheduler to reach ({error}); `dask scheduler` "
                "starts one and prints its address"
            ) from error

    def _wait_for_workers(self) -> None:
        end = time.monotonic() + WORKERS_S
        if not self._client.nthreads():
            self._say(f"waiting for workers at {self._address}")
        while not self._client.nthreads():
            if time.monotonic() > end:
                raise SimkitError(
                    f"{self._address}: no worker has joined this scheduler within "
                    f"{WORKERS_S:.0f} s; `dask worker {self._address}` starts some"
                )
            time.sleep(0.25)

    def _ask_versions(self) -> dict[str, Any]:
        def versions() -> Any:  # sent by its code: a worker without simkit can answer too
            try:
                from simkit.runner.identity import program_versions
            except ImportError:
                return None
            return program_versions()

        found: dict[str, Any] = self._client.run(versions)
        return found

    def _dashboard(self) -> str:
        info = self._client.scheduler_info()
        has_one = "dashboard" in info.get("services", {})
        return f", dashboard {self._client.dashboard_link}" if has_one else ""

    @property
    def size(self) -> int:
        """Threads of all workers now, at least 1: what is handed out waits for the next worker."""
        if time.monotonic() - self._looked > _LOOK_S:
            try:
                now = sum(self._client.nthreads().values())
            except (OSError, TimeoutError):
                now = self._size  # the blocks in flight will tell that the scheduler is gone
            if self._looked and now != self._size:
                self._say(_workers_text(now, self._address))
            self._size, self._looked = now, time.monotonic()
        return max(1, self._size)

    def _told(self, event: tuple[Any, Any]) -> None:
        """A worker says that it is unlike the run."""
        said = dict(event[1])
        self._unlike.add(str(said["worker"]))
        self._say(str(said["text"]))

    def submit(self, job: BlockJob) -> Any:
        """Start a block some time soon, on a worker that is like the run."""
        only = None
        if self._unlike:
            only = [worker for worker in self._client.nthreads() if worker not in self._unlike]
        return self._client.submit(
            do_checked_block,
            self._function,
            packed(job),
            self._versions,
            self._lock,
            pure=False,
            workers=only or None,
        )

    def close(self) -> None:
        """Leave the cluster; what its workers have in hand is dropped before it is written."""
        from distributed import TimeoutError as DaskTimeoutError

        client = getattr(self, "_client", None)
        try:
            if client is not None:
                client.close(timeout=5)
        except (OSError, DaskTimeoutError):
            logging.getLogger(__name__).debug("the scheduler was slow", exc_info=True)
        finally:
            self._settings.close()


def _workers_text(count: int, address: str) -> str:
    return f"{count} {'worker' if count == 1 else 'workers'} at {address}"


def do_checked_block(
    function: str, job: bytes, versions: Mapping[str, str], lock: str = ""
) -> Receipt:
    """Task of a worker: one block, unless it joined meanwhile and is not like the others."""
    alike = program_versions() == versions
    if not alike or not sees(lock, SIGHT_S):
        from distributed import get_worker

        worker: Any = get_worker()
        text = _blindness(worker.address, lock)
        if not alike:
            text = _difference(worker.address, program_versions(), versions)
        if not hasattr(worker, "simkit_said"):
            worker.simkit_said = True
            said = {"worker": worker.address, "text": f"no block is given to {text}"}
            worker.log_event(_TOPIC, said)
        time.sleep(1.0)  # the run is to hear of it before it hands the block out again
        raise UnlikeWorkerError(text)
    return do_block(function, job)


def sees(lock: str, patience_s: float) -> bool:
    """Whether a file is there, at once or soon: a shared disk may take its time to show it."""
    end = time.monotonic() + patience_s
    while lock and not os.path.exists(lock):
        if time.monotonic() > end:
            return False
        time.sleep(0.2)
    return True


def check_sight(found: Mapping[str, bool], lock: str) -> None:
    """Refuse to run where results would be written to another place, or nowhere.

    Raises
    ------
    SimkitError
        With every worker that does not see the results folder.
    """
    blind = [_blindness(worker, lock) for worker, sight in found.items() if not sight]
    if blind:
        raise SimkitError(
            f"nothing is solved, because not all workers reach the results: {'; '.join(blind)}. "
            "Name a folder on a disk all machines share, or an address, by --results"
        )


def _blindness(worker: str, lock: str) -> str:
    return f"worker {worker}, which does not see the folder {os.path.dirname(lock)}"


def check_versions(found: Mapping[str, Any], wanted: Mapping[str, str]) -> None:
    """Refuse to run where numbers of two kinds would come out.

    Raises
    ------
    SimkitError
        With every worker that differs.
    """
    others = [
        _difference(worker, versions, wanted)
        for worker, versions in found.items()
        if versions != dict(wanted)
    ]
    if others:
        raise SimkitError(
            f"nothing is solved, because not all workers are alike: {'; '.join(others)}. Install "
            "the same simkit and engine everywhere and start these workers again"
        )


def _difference(worker: str, found: Mapping[str, str] | None, wanted: Mapping[str, str]) -> str:
    if found is None:
        return f"worker {worker}, which has no simkit"
    parts = [
        f"{name} {found.get(name)} instead of {value}"
        for name, value in wanted.items()
        if found.get(name) != value
    ]
    return f"worker {worker}, which has {', '.join(parts)}"
