"""Solve one block of cases and write it: what a worker does."""

from __future__ import annotations

import os
import socket
import time
from dataclasses import dataclass
from typing import Any

from simkit.engine.child import Child, Kind
from simkit.errors import SimkitError
from simkit.runner.lock import may_start, writing
from simkit.runner.result import CaseResult
from simkit.store.remote import Place
from simkit.store.schema import Status
from simkit.store.write import TORN, Block, StoreFile, is_complete
from simkit.study.model import Antenna

CHECKPOINT_S = 30.0
"""A block that takes longer is written before it is whole, so that no more than this is lost."""


@dataclass(frozen=True)
class CaseJob:
    """One case to be settled.

    Attributes
    ----------
    index : int
    key : str
    antenna : Antenna or None
        None: `ready` or `source` settles the case.
    ready : CaseResult or None
        Known already, as for a case that is refused without being tried.
    source : tuple of (place, int) or None
        Store and case there from which the unchanged case is taken over.
    """

    index: int
    key: str
    antenna: Antenna | None = None
    ready: CaseResult | None = None
    source: tuple[Place, int] | None = None


@dataclass(frozen=True)
class BlockJob:
    """One block of a store with the cases that are still waiting in it.

    Cases that stand in it with one of the statuses `retried` count as waiting too.
    """

    store: Place
    block: int
    cases: tuple[CaseJob, ...]
    plan: Any
    limit_s: float
    lock: Place
    token: str
    retried: tuple[Status, ...] = ()


@dataclass(frozen=True)
class Receipt:
    """What became of a block; small, so that nothing piles up where the run is led.

    Attributes
    ----------
    block : int
    statuses : tuple of (int, Status, str)
        Case, status and reason for each case settled by this block.
    solved, reused, solves : int
        Cases computed here, cases taken over, frequencies solved by the engine.
    seconds : float
    dropped : bool
        The run is stopping; nothing was done.
    whole : bool
        Every case of the job is settled; not so if the run was asked to stop meanwhile.
    bug : str
        Traceback of an error in simkit itself; nothing was written.
    trouble : str
        Why the block could not be written.
    worker : str
        Process and machine.
    """

    block: int
    statuses: tuple[tuple[int, Status, str], ...] = ()
    solved: int = 0
    reused: int = 0
    solves: int = 0
    seconds: float = 0.0
    dropped: bool = False
    whole: bool = True
    bug: str = ""
    trouble: str = ""
    worker: str = ""


class ForeignError(Exception):
    """An error of simkit's own met in a case; its text is a traceback."""


def solve_guarded(child: Child, job: CaseJob, plan: Any, limit_s: float) -> CaseResult:
    """Solve one case in the child; crash, hang and engine errors become its status.

    A crash is tried once more: the process may have been ended for reasons that are not the case's.

    Raises
    ------
    ForeignError
        The solver raised something that is none of simkit's errors.
    """
    start = time.monotonic()
    outcome = child.call(job.antenna, plan, limit_s=limit_s)
    if outcome.kind is Kind.CRASHED:
        outcome = child.call(job.antenna, plan, limit_s=limit_s)
    if outcome.kind is Kind.VALUE:
        result = outcome.value
        if not isinstance(result, CaseResult) or result.status is Status.WAITING:
            raise ForeignError(f"case {job.index}: the solver returned no result: {result!r:.80}")
        return result
    if outcome.kind is Kind.BUG:
        raise ForeignError(f"case {job.index}: {outcome.reason}\n{outcome.trace}")
    status = Status.TIMED_OUT if outcome.kind is Kind.TIMED_OUT else Status.FAILED
    return CaseResult(status, outcome.reason, seconds=time.monotonic() - start)


class Worker:
    """Does blocks one after another with one child and one open store.

    Parameters
    ----------
    function : str
        Solver, as `Child` takes it.
    """

    def __init__(self, function: str) -> None:
        self.child = Child(function)
        self.name = f"process {os.getpid()} on {socket.gethostname()}"
        self._stores: dict[Place, StoreFile] = {}

    def close(self) -> None:
        """End the child; a later block starts another."""
        self.child.close()

    def abandon(self) -> None:
        """From another thread: drop the block in hand, if there is one, and end the child."""
        self.child.abandon()

    def do(self, job: BlockJob) -> Receipt:
        """Settle the waiting cases of one block and write it."""
        start = time.monotonic()
        if not may_start(job.lock, job.token):
            return Receipt(job.block, dropped=True)
        try:
            receipt = self._do(job, start)
        except ForeignError as error:
            receipt = Receipt(job.block, bug=str(error))
        except OSError as error:
            text = error.strerror or str(error)
            receipt = Receipt(job.block, trouble=f"block {job.block} cannot be written: {text}")
        except SimkitError as error:
            receipt = Receipt(job.block, trouble=f"block {job.block} cannot be done: {error}")
        return receipt

    def _do(self, job: BlockJob, start: float) -> Receipt:
        store = self._store(job.store)
        content, waiting = self._begin(store, job)
        settled: list[int] = []
        solves = reused = 0
        written = time.monotonic()
        for case in waiting:
            if settled and time.monotonic() - written > CHECKPOINT_S:
                if not self._write(store, job, content):
                    return Receipt(job.block, dropped=True)
                written = time.monotonic()
                if not may_start(job.lock, job.token):
                    break
            if case.source is not None and self._take(content, case):
                reused += 1
            else:
                result = case.ready or solve_guarded(self.child, case, job.plan, job.limit_s)
                if self.child.abandoned:
                    return Receipt(job.block, dropped=True)
                self._put(content, case, result)
                solves += result.solves
            settled.append(case.index)
        if not self._write(store, job, content):
            return Receipt(job.block, dropped=True)
        return Receipt(
            job.block,
            tuple(_settled(content, index) for index in settled),
            solved=len(settled) - reused,
            reused=reused,
            solves=solves,
            seconds=time.monotonic() - start,
            whole=len(settled) == len(waiting),
            worker=self.name,
        )

    @staticmethod
    def _write(store: StoreFile, job: BlockJob, content: Block) -> bool:
        """Write the block as it stands; False if another run has taken over."""
        with writing(job.lock, job.token) as allowed:
            if allowed:
                store.write_block(job.block, content)
        return allowed

    def _store(self, path: Place) -> StoreFile:
        if path not in self._stores:
            self._stores[path] = StoreFile(path)
        return self._stores[path]

    @staticmethod
    def _begin(store: StoreFile, job: BlockJob) -> tuple[Block, list[CaseJob]]:
        """The block as stored, and those of the job's cases that are not settled in it.

        A block may be given out again after its worker died just behind the last write.
        """
        content = store.new_block(job.block)
        if store.read_waiting(job.block):
            return content, list(job.cases)
        try:
            stored = store.read_arrays(job.block)
        except TORN:
            return content, list(job.cases)
        if not is_complete(store.path, job.block, stored["status"]):
            return content, list(job.cases)
        again = {case.index - content.first for case in job.cases}
        for row, code in enumerate(stored["status"]):
            if code != Status.WAITING and not (code in job.retried and row in again):
                content.take(content.first + row, stored, row)
        statuses = content.statuses()
        waiting = [c for c in job.cases if statuses[c.index - content.first] is Status.WAITING]
        return content, waiting

    def _take(self, content: Block, case: CaseJob) -> bool:
        """Copy an unchanged case from an older store; False if it cannot be read there."""
        assert case.source is not None
        path, row = case.source
        store = self._store(path)
        block, place = divmod(row, store.block_size)
        try:
            stored = self._old_block(store, block)
            content.take(case.index, stored, place)
        except TORN:
            return False
        if "mismatch_factor" not in stored and case.antenna is not None:
            from simkit.runner.connector import added_later

            old = {name: array[place] for name, array in stored.items()}
            content.put(case.index, added_later(case.antenna, old))
        return True

    def _old_block(self, store: StoreFile, block: int) -> dict[str, Any]:
        """The arrays of one block of an older store; neighbours are usually asked for next."""
        key = (store.path, block)
        if getattr(self, "_old_key", None) != key:
            self._old_arrays = store.read_arrays(block)
            self._old_key = key
        return self._old_arrays

    def _put(self, content: Block, case: CaseJob, result: CaseResult) -> None:
        try:
            content.put(case.index, result.arrays)
            content.put(
                case.index,
                {
                    "status": int(result.status),
                    "reason": result.reason,
                    "case_key": case.key,
                    "seconds": float(result.seconds),
                    "solves": int(result.solves),
                    "worker": self.name,
                },
            )
        except ValueError as error:
            raise ForeignError(f"the solver's arrays do not fit the store: {error}") from error


def _settled(content: Block, index: int) -> tuple[int, Status, str]:
    row = index - content.first
    status = Status(int(content.arrays["status"][row]))
    return index, status, str(content.arrays["reason"][row])
