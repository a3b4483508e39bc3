"""Keep the workers busy and count what comes back."""

from __future__ import annotations

import queue
import shutil
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

from simkit.errors import SimkitError, StoreError
from simkit.runner.log import EventLog
from simkit.runner.pool import PER_WORKER, Pool
from simkit.runner.progress import Progress
from simkit.runner.stop import StopRequest
from simkit.runner.work import BlockJob, ForeignError, Receipt
from simkit.store.schema import Status

LEAST_FREE_BYTES = 50_000_000
"""Disk below which no further block is started."""

_WITHOUT_SOLUTION = (Status.REFUSED, Status.FAILED, Status.TIMED_OUT)


class Loop:
    """Hands blocks to a pool, a bounded number at a time, and follows their receipts.

    Parameters
    ----------
    progress : Progress
    log : EventLog
    stop : StopRequest
        Looked at several times a second.
    on_stop : callable
        Called once when a stop is asked for.
    folder : Path
        Results folder, whose disk must not run full.

    Attributes
    ----------
    solved, reused : int
        Cases settled here, and cases taken over.
    stopped : str
        Why not all blocks were done.
    """

    def __init__(
        self,
        progress: Progress,
        log: EventLog,
        stop: StopRequest,
        on_stop: Callable[[], None],
        folder: Path,
    ) -> None:
        self._progress = progress
        self._log = log
        self._stop = stop
        self._on_stop = on_stop
        self._folder = folder
        self._done = 0
        self._failed = 0
        self._ended: queue.SimpleQueue[Any] = queue.SimpleQueue()
        self.solved = 0
        self.reused = 0
        self.stopped = ""
        self._disk_low = False

    def run(self, pool: Pool, jobs: list[BlockJob], done: int) -> None:
        """Do all blocks, or those in hand when the run is asked to stop.

        Raises
        ------
        StoreError
            A block could not be written.
        ForeignError
            simkit itself went wrong in a case.
        """
        self._done = done
        pending = iter(jobs)
        flying: set[Any] = set()
        try:
            while True:
                self._launch(pool, pending, flying)
                if not flying:
                    break
                self._collect(flying)
        except KeyboardInterrupt:
            self.stopped = "at once, on request"
            return
        if self._disk_low:
            raise self._full(f"less than {LEAST_FREE_BYTES / 1e6:.0f} MB of disk are free")

    def _launch(self, pool: Pool, pending: Iterator[BlockJob], flying: set[Any]) -> None:
        while self._may_go_on() and len(flying) < PER_WORKER * pool.size:
            job = next(pending, None)
            if job is None:
                return
            future = pool.submit(job)
            flying.add(future)
            future.add_done_callback(self._ended.put)

    def _may_go_on(self) -> bool:
        if self._stop.asked and not self.stopped:
            self.stopped = "on request"
            self._on_stop()
        elif shutil.disk_usage(self._folder).free < LEAST_FREE_BYTES:
            self._disk_low = True
        return not (self.stopped or self._disk_low)

    def _collect(self, flying: set[Any]) -> None:
        try:
            future = self._ended.get(timeout=0.25)
        except queue.Empty:
            return
        flying.discard(future)
        try:
            receipt: Receipt = future.result()
        except Exception as error:
            raise _worker_trouble(error) from error
        self._note(receipt)

    def _note(self, receipt: Receipt) -> None:
        if receipt.bug:
            raise ForeignError(receipt.bug)
        if receipt.trouble:
            raise self._full(receipt.trouble)
        if receipt.dropped:
            return
        self._done += len(receipt.statuses)
        self.solved += receipt.solved
        self.reused += receipt.reused
        self._log.write(
            f"block {receipt.block} stored: {receipt.solved} solved, {receipt.reused} taken over, "
            f"{receipt.solves} engine solves, {receipt.seconds:.2f} s, process {receipt.pid}"
        )
        for case, status, reason in receipt.statuses:
            if status is not Status.SOLVED:
                self._failed += status in _WITHOUT_SOLUTION
                self._log.write(f"case {case} {status.label}: {reason}")
        self._progress.update(self._done, self._failed)

    def _full(self, text: str) -> StoreError:
        return StoreError(
            f"{self._folder}: {text}. {self._done} cases are stored and kept; make room or mend "
            "the folder, then give the same command again"
        )


def _worker_trouble(error: Exception) -> Exception:
    """Turn the loss of worker processes into advice; anything else is a bug."""
    if type(error).__name__ in ("KilledWorker", "FutureCancelledError", "CancelledError"):
        return SimkitError(
            "worker processes of the run keep dying, most likely for want of memory; what is "
            f"stored is kept: try the same command with fewer --workers ({error})"
        )
    import traceback

    return ForeignError(f"{error}\n{''.join(traceback.format_exception(error))}")
