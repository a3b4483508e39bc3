"""Run a study: solve its cases block by block and keep every one that is done."""

from __future__ import annotations

import multiprocessing
import shutil
import time
import traceback
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from simkit.errors import SimkitError, StoreError
from simkit.runner.folder import ResultsFolder, Target
from simkit.runner.lock import Lock, take_lock
from simkit.runner.log import EventLog
from simkit.runner.loop import Loop
from simkit.runner.overview import count_statuses
from simkit.runner.plan import (
    Index,
    Jobs,
    block_size_for,
    first_to_solve,
    key_index,
    limit_for,
    waiting_cases,
)
from simkit.runner.pool import core_count
from simkit.runner.prepare import Prepared, Solver, prepare
from simkit.runner.progress import Progress, Tally, choose_progress
from simkit.runner.result import CaseResult, InternalError, RunSummary
from simkit.runner.said import begin_text, stopping_text, summary_lines, versions_text
from simkit.runner.stop import Deadline, StopRequest
from simkit.runner.work import ForeignError, Worker, solve_guarded
from simkit.runner.workplace import Choices, Workplace
from simkit.store.layout import create_store, layout_hash
from simkit.store.remote import place
from simkit.store.schema import Status
from simkit.store.size import case_bytes, estimate_bytes
from simkit.store.write import StoreFile, read_attrs

if TYPE_CHECKING:
    from simkit.study import Study

RESERVE_BYTES = 200_000_000
"""Disk that a run leaves free."""

_PASSES = 3
"""A block found damaged while it is completed is done anew in the next pass."""


def run(
    study: Study,
    results: str | PathLike[str] | None = None,
    workers: int | None = None,
    fresh: bool = False,
    progress: Progress | None = None,
    *,
    retry: bool = False,
    until: str | None = None,
    scheduler: str | None = None,
    solver: Solver | None = None,
    block_size: int | None = None,
    time_limit_s: float | None = None,
) -> RunSummary:
    """Solve every case of a study that is not solved yet.

    The results go to ``results/<stem of the study file>/``. Give the same call again after any
    interruption: what is stored is not solved again. If the study was changed meanwhile, a new
    store grows beside the old one, takes over every case whose inputs are the same, and replaces
    the old one when it is complete.

    Parameters
    ----------
    study : Study
        From `simkit.load_study`.
    results : path or address, optional
        Parent folder in place of ``results`` under the current directory; an fsspec address such
        as ``s3://bucket/folder`` will do.
    workers : int, optional
        Worker processes, by default one a core.
    fresh : bool
        Solve everything anew. The old store stays until the new one is complete.
    progress : Progress, optional
        By default a bar on a terminal, plain lines elsewhere, both on standard error.
    retry : bool
        Solve cases again that failed or were timed out, and those whose results are damaged.
    until : str, optional
        Hour of the day, ``07:00``, from which on no further block is started.
    scheduler : str, optional
        Address of a dask scheduler whose workers do the work, in place of processes here.
    solver : Solver, optional
        For tests and benchmarks.
    block_size : int, optional
        Cases per block of a new store, by default a few seconds of work.
    time_limit_s : float, optional
        Longest time for one case, by default many times what a first case took.

    Returns
    -------
    RunSummary
        Also after Ctrl-C, with `stopped` set.

    Raises
    ------
    StoreError
        The folder holds another study, is in use or cannot be written, or the disk is full.
    SimkitError
        The hour cannot be read; the cluster cannot be reached, or its workers are not like this
        installation.
    InternalError
        simkit itself went wrong; ``log.txt`` has the traceback. What was stored is kept.

    Notes
    -----
    A script that calls this must do so under ``if __name__ == "__main__":``, because the worker
    processes import the script too.
    """
    _refuse_in_a_worker()
    begin = time.monotonic()
    deadline = Deadline.at(until) if until else None
    parent = place(results or "results")
    if scheduler is not None and isinstance(parent, Path):
        parent = parent.absolute()  # workers have current folders of their own
    folder = ResultsFolder(parent / study.path.stem)
    choices = Choices(
        solver or Solver(),
        workers or core_count(),
        block_size,
        time_limit_s,
        retry,
        scheduler,
        deadline,
    )
    folder.check_title(study.title, fresh=fresh)
    folder.create()
    lock = take_lock(folder.path)
    try:
        session = _Session(folder, lock, progress or choose_progress(), choices)
        return session.guarded(study, fresh=fresh, begin=begin)
    finally:
        lock.release()


def _refuse_in_a_worker() -> None:
    # Set by multiprocessing while a new process is still importing the script it belongs to.
    if hasattr(multiprocessing.current_process(), "_inheriting"):
        raise SimkitError(
            'put the call of simkit.run under  if __name__ == "__main__":  because the worker '
            "processes import your script too"
        )


class _Session:
    """The steps of one run, in the order in which they happen."""

    def __init__(
        self, folder: ResultsFolder, lock: Lock, progress: Progress, choices: Choices
    ) -> None:
        self.folder = folder
        self.lock = lock
        self.progress = progress
        self.choices = choices
        self.log = EventLog(folder.log)

    def guarded(self, study: Study, *, fresh: bool, begin: float) -> RunSummary:
        """Run to the end or to the request to stop; every other end is logged with its cause."""
        try:
            return self._go(study, fresh=fresh, begin=begin)
        except ForeignError as error:
            self.log.write(f"stopped by an error in simkit\n{error}")
            first = str(error).splitlines()[0]
            raise InternalError(
                f"{first}. This is an error in simkit, not in your study; everything stored is "
                f"kept and the traceback is in {self.folder.log}"
            ) from error
        except KeyboardInterrupt:
            self.log.write("stopped at once, on request")
            raise
        except SimkitError as error:
            self.log.write(f"stopped: {error}")
            raise
        except OSError as error:
            self.log.write(f"stopped: {error}")
            raise StoreError(
                f"{self.folder.path}: cannot be written: {error}; what is stored is kept"
            ) from error
        except Exception:
            self.log.write(f"stopped by an error in simkit\n{traceback.format_exc()}")
            raise
        finally:
            self.progress.close()
            self.log.flush()

    def _go(self, study: Study, *, fresh: bool, begin: float) -> RunSummary:
        self.folder.recover()
        prepared = prepare(study, self.choices.solver)
        self.log.write(
            f"run of {prepared.title!r}: {prepared.count} cases, {prepared.segments} segments,"
            f" {versions_text(prepared.attrs)}"
        )
        target = self.folder.choose(prepared, fresh=fresh)
        self._say_versions(target, prepared)
        workplace = Workplace(self.choices, self._say, self.lock.path)
        try:
            workplace.open()
            with StopRequest(self.choices.deadline) as stop:
                loop = Loop(
                    self.progress, self.log, stop, self.lock, self._on_stop, self.folder.path
                )
                store, done = self._settle(prepared, target, workplace, loop)
        finally:
            workplace.close()
        counts = count_statuses(store.read_statuses())
        summary = RunSummary(
            counts=counts,
            reused=done + loop.reused,
            solved=loop.solved,
            results_dir=self.folder.path,
            seconds=time.monotonic() - begin,
            stopped=loop.stopped if done + loop.reused + loop.solved < prepared.count else "",
        )
        if summary.complete:
            self.folder.finish(target, prepared.text)
        self._say_end(summary)
        return summary

    def _settle(
        self, prepared: Prepared, target: Target, workplace: Workplace, loop: Loop
    ) -> tuple[StoreFile, int]:
        """Settle all waiting cases; return the store and how many cases were settled before."""
        index = key_index(target.sources, retry=self.choices.retry)
        ready: dict[int, CaseResult] = {}
        if not target.exists:
            ready = self._create(prepared, target, index, workplace)
        store = StoreFile(target.path)
        limit_s = self.choices.time_limit_s or float(
            store.attrs.get("time_limit_s", limit_for(prepared.segments))
        )
        done = 0
        for turn in range(_PASSES):
            statuses = store.read_statuses()
            retry = self.choices.retry and turn == 0
            todo = waiting_cases(statuses, retry=retry)
            if retry:
                todo |= self._damaged(store)
            jobs = Jobs(
                prepared,
                store,
                index,
                ready,
                todo,
                retry,
                limit_s,
                self.lock.path,
                self.lock.token,
            )
            if turn == 0:
                done = int(np.count_nonzero(~todo))
                self._say(begin_text(jobs, done))
            if not jobs or loop.stopped:
                break
            self._work(jobs, workplace, loop, _tally(statuses, jobs, done, loop))
        return store, done

    def _damaged(self, store: StoreFile) -> NDArray[np.bool_]:
        """Which cases are settled but cannot be read, as after a fault of the disk."""
        found = np.zeros(store.cases, dtype=np.bool_)
        for block in range(store.blocks):
            if store.is_damaged(block):
                rows = store.rows(block)
                found[rows] = True
                self._say(f"cases {rows.start} to {rows.stop - 1}: damaged, solved anew")
        return found

    def _work(self, jobs: Jobs, workplace: Workplace, loop: Loop, tally: Tally) -> None:
        self.progress.start(tally)
        pool = workplace.pool(len(jobs))
        over = False
        try:
            loop.run(pool, jobs, tally)
            over = not loop.stopped
        finally:
            if not over:
                # A case cut short by the end of its process must not be stored as failed.
                self.lock.revoke()
            pool.close()
            self.progress.close()

    # -- before a new store --------------------------------------------------------------------

    def _create(
        self, prepared: Prepared, target: Target, index: Index, workplace: Workplace
    ) -> dict[int, CaseResult]:
        """Lay out a new store; return the results of the cases solved to size its blocks."""
        self._check_disk(prepared)
        size, limit_s = self.choices.block_size, limit_for(prepared.segments)
        ready: dict[int, CaseResult] = {}
        if size is None:
            workplace.import_ahead()
            ready, seconds = self._timed(prepared, index, workplace.worker)
            limit_s = limit_for(prepared.segments, seconds)
            size = self._block_size(prepared, target, workplace, index, seconds)
        layout = prepared.layout(size, takeover=target.takeover, limit_s=limit_s)
        create_store(target.path, layout)
        if target.path == self.folder.store:
            self.folder.keep_text(prepared.text)
        return ready

    def _block_size(
        self,
        prepared: Prepared,
        target: Target,
        workplace: Workplace,
        index: Index,
        seconds: float | None,
    ) -> int:
        if seconds is None and target.sources and len(index):
            return int(read_attrs(target.sources[0])["block_size"])
        return block_size_for(
            seconds or 0.0, prepared.count, workplace.workers, case_bytes(**_sizes(prepared))
        )

    def _timed(
        self, prepared: Prepared, index: Index, worker: Worker
    ) -> tuple[dict[int, CaseResult], float | None]:
        """Results of the first cases, up to one with a solution, and the time it took."""
        ready: dict[int, CaseResult] = {}
        for case in first_to_solve(prepared, index):
            converge = bool(getattr(case.antenna, "converge", False))
            limit_s = self.choices.time_limit_s or limit_for(prepared.segments, converge=converge)
            result = solve_guarded(worker.child, case, prepared.plan, limit_s)
            ready[case.index] = result
            if result.status in (Status.SOLVED, Status.DOUBTFUL):
                return ready, result.seconds
        return ready, None

    def _check_disk(self, prepared: Prepared) -> None:
        if not isinstance(self.folder.path, Path):
            return
        need = estimate_bytes(cases=prepared.count, **_sizes(prepared))
        free = shutil.disk_usage(self.folder.path).free
        # The estimate may be twice too high, and a study is not refused for that.
        if free < need // 2 + RESERVE_BYTES:
            raise StoreError(
                f"{self.folder.path}: the study needs about {need / 1e6:.0f} MB of disk and "
                f"{RESERVE_BYTES / 1e6:.0f} MB are kept free, but only {free / 1e6:.0f} MB are "
                "left; make room or choose another disk with --results"
            )

    # -- what is said --------------------------------------------------------------------------

    def _on_stop(self, reason: str) -> None:
        self.lock.stop_starting()
        self._say(stopping_text(reason))

    def _say_versions(self, target: Target, prepared: Prepared) -> None:
        """Other versions never mix with these: say so where it makes cases be solved anew."""
        if target.exists or not target.sources:
            return
        earlier = read_attrs(target.sources[0])
        before, now = versions_text(earlier), versions_text(prepared.attrs)
        if before != now:
            self._say(f"earlier results are of {before}; this is {now}: all is solved anew")
        elif earlier.get("layout_hash") != layout_hash():
            self._say("earlier results lack variables of this version: all is solved anew")

    def _say_end(self, summary: RunSummary) -> None:
        """All into the log; the caller shows the summary, so only a stop is said at once."""
        for line in summary_lines(summary):
            self.log.write(line)
            if summary.stopped:
                self.progress.say(line)

    def _say(self, text: str) -> None:
        self.log.write(text)
        self.progress.say(text)


def _sizes(prepared: Prepared) -> dict[str, int]:
    return {
        "frequencies": len(prepared.frequency_hz),
        "strips": len(prepared.strips),
        "segments": prepared.segments,
    }


def _tally(statuses: NDArray[np.int8], jobs: Jobs, done: int, loop: Loop) -> Tally:
    """Where a run stands before its blocks are handed out."""
    kept = statuses[~jobs.todo]
    return Tally(
        total=len(statuses),
        done=len(kept),
        reused=done + loop.reused,
        refused=int(np.count_nonzero(kept == Status.REFUSED)),
        failed=int(np.count_nonzero(np.isin(kept, (Status.FAILED, Status.TIMED_OUT)))),
        to_solve=int(np.count_nonzero(jobs.todo)) - jobs.taken,
    )
