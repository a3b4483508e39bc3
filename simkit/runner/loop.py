"""Keep the workers busy and count what comes back."""

from __future__ import annotations

import queue
import shutil
import time
from collections.abc import Callable, Iterable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

from simkit.errors import SimkitError, StoreError
from simkit.runner.lock import Lock
from simkit.runner.log import EventLog
from simkit.runner.pool import PER_WORKER, Pool
from simkit.runner.progress import Pace, Progress, Tally
from simkit.runner.stop import StopRequest
from simkit.runner.work import BlockJob, ForeignError, Receipt
from simkit.store.remote import Place
from simkit.store.schema import Status

LEAST_FREE_BYTES = 50_000_000
"""Disk below which no further block is started."""

MOST_LOSSES = 3
"""Times a block may take its workers with it before the run gives up."""

_NOTE_S = 2.0


class Loop:
    """Hands blocks to a pool, a bounded number at a time, and follows their receipts.

    Parameters
    ----------
    progress : Progress
    log : EventLog
    stop : StopRequest
        Looked at several times a second.
    lock : Lock
        Told how far the run is.
    on_stop : callable
        Called once, with the reason, when no further block is to be started.
    folder : Path or RemotePath
        Results folder, whose disk must not run full.

    Attributes
    ----------
    tally : Tally
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
        lock: Lock,
        on_stop: Callable[[str], None],
        folder: Place,
    ) -> None:
        self._progress = progress
        self._log = log
        self._stop = stop
        self._lock = lock
        self._on_stop = on_stop
        self._folder = folder
        self._ended: queue.SimpleQueue[Any] = queue.SimpleQueue()
        self._losses: dict[int, int] = {}
        self._again: list[BlockJob] = []
        self._pace = Pace()
        self._noted = 0.0
        self.tally = Tally(0)
        self.solved = 0
        self.reused = 0
        self.stopped = ""
        self._disk_low = False

    def run(self, pool: Pool, jobs: Iterable[BlockJob], tally: Tally) -> None:
        """Do all blocks, or those in hand when the run is asked to stop.

        Raises
        ------
        StoreError
            A block could not be written.
        ForeignError
            simkit itself went wrong in a case.
        """
        self.tally = tally
        self._pace = Pace()
        pending = iter(jobs)
        flying: dict[Any, BlockJob] = {}
        try:
            while True:
                self._launch(pool, pending, flying)
                if not flying:
                    break
                self._collect(flying)
                self._tell()
        except KeyboardInterrupt:
            self.stopped = "at once, on request"
            return
        if self._disk_low:
            raise self._full(f"less than {LEAST_FREE_BYTES / 1e6:.0f} MB of disk are free")

    def _launch(self, pool: Pool, pending: Iterator[BlockJob], flying: dict[Any, BlockJob]) -> None:
        while self._may_go_on() and len(flying) < PER_WORKER * pool.size:
            job = self._again.pop() if self._again else next(pending, None)
            if job is None:
                return
            future = pool.submit(job)
            flying[future] = job
            future.add_done_callback(self._ended.put)

    def _may_go_on(self) -> bool:
        if self.stopped or self._disk_low:
            return False
        if reason := self._stop.reason():
            self.stopped = reason
            self._on_stop(reason)
        elif isinstance(self._folder, Path):
            self._disk_low = shutil.disk_usage(self._folder).free < LEAST_FREE_BYTES
        return not (self.stopped or self._disk_low)

    def _collect(self, flying: dict[Any, BlockJob]) -> None:
        try:
            future = self._ended.get(timeout=0.25)
        except queue.Empty:
            return
        job = flying.pop(future)
        try:
            receipt: Receipt = future.result()
        except Exception as error:
            self._lost(job, error)
        else:
            self._note(receipt)

    def _lost(self, job: BlockJob, error: Exception) -> None:
        """Give a block out again whose workers died; all else that goes wrong ends the run."""
        if type(error).__name__ == "UnlikeWorkerError":
            self._again.append(job)
            return
        if type(error).__name__ != "KilledWorker":
            raise _worker_trouble(error) from error
        losses = self._losses[job.block] = self._losses.get(job.block, 0) + 1
        if losses >= MOST_LOSSES:
            raise _worker_trouble(error) from error
        self._log.write(f"block {job.block} is given out again: its workers died")
        self._again.append(job)

    def _note(self, receipt: Receipt) -> None:
        if receipt.bug:
            raise ForeignError(receipt.bug)
        if receipt.trouble:
            raise self._full(receipt.trouble)
        if receipt.dropped:
            return
        self.solved += receipt.solved
        self.reused += receipt.reused
        self._count(receipt)
        self._log.write(
            f"block {receipt.block} stored{'' if receipt.whole else ' in part'}: "
            f"{receipt.solved} solved, {receipt.reused} taken over, "
            f"{receipt.solves} engine solves, {receipt.seconds:.2f} s, {receipt.worker}"
        )
        for case, status, reason in receipt.statuses:
            if status is not Status.SOLVED:
                self._log.write(f"case {case} {status.label}: {reason} ({receipt.worker})")
        self._progress.update(self.tally)

    def _count(self, receipt: Receipt) -> None:
        codes = [status for _, status, _ in receipt.statuses]
        now = self.tally
        self.tally = replace(
            now,
            done=now.done + len(codes),
            reused=now.reused + receipt.reused,
            refused=now.refused + codes.count(Status.REFUSED),
            failed=now.failed + codes.count(Status.FAILED) + codes.count(Status.TIMED_OUT),
            solved=now.solved + receipt.solved,
        )

    def _tell(self) -> None:
        """Leave word of the pace with the lock, now and then, for `simkit status`."""
        if time.monotonic() - self._noted < _NOTE_S:
            return
        self._noted = time.monotonic()
        rate, left = self._pace.per_second(self.tally), self._pace.left_s(self.tally)
        if rate is not None and left is not None:
            self._lock.note({"per_second": float(f"{rate:.4g}"), "left_s": float(round(left))})
        else:
            self._lock.note({})

    def _full(self, text: str) -> StoreError:
        return StoreError(
            f"{self._folder}: {text}. {self.tally.done} cases are stored and kept; make room or "
            "mend the folder, then give the same command again"
        )


def _worker_trouble(error: Exception) -> Exception:
    """Turn the loss of worker processes into advice; anything else is a bug."""
    name = type(error).__name__
    if name == "KilledWorker":
        return SimkitError(
            "worker processes of the run keep dying, most likely for want of memory; what is "
            f"stored is kept: try the same command with fewer --workers ({error})"
        )
    if name in ("FutureCancelledError", "CancelledError", "CommClosedError"):
        return SimkitError(
            "the scheduler of the run is gone; what is stored is kept: start it again, then give "
            f"the same command again ({str(error).splitlines()[0]})"
        )
    if isinstance(error, ModuleNotFoundError):
        return SimkitError(
            f"a worker lacks what the run needs ({error}); install simkit for all workers"
        )
    import traceback

    return ForeignError(f"{error}\n{''.join(traceback.format_exception(error))}")
