"""Run a study: solve its cases block by block and keep every one that is done."""

from __future__ import annotations

import multiprocessing
import shutil
import time
from collections.abc import Iterator
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from simkit.errors import SimkitError, StoreError
from simkit.runner.folder import ResultsFolder, Target
from simkit.runner.lock import RunLock
from simkit.runner.log import EventLog
from simkit.runner.loop import Loop
from simkit.runner.plan import (
    block_size_for,
    first_solvable,
    jobs_for,
    key_index,
    limit_for,
)
from simkit.runner.pool import DaskPool, InlinePool, Pool, core_count
from simkit.runner.prepare import Prepared, Solver, prepare
from simkit.runner.progress import Progress, choose_progress, duration_text
from simkit.runner.result import CaseResult, InternalError, RunSummary
from simkit.runner.stop import StopRequest
from simkit.runner.work import ForeignError, Worker, solve_guarded
from simkit.store.layout import create_store
from simkit.store.schema import Status
from simkit.store.size import estimate_bytes
from simkit.store.write import StoreFile

if TYPE_CHECKING:
    from simkit.study import Study

RESERVE_BYTES = 200_000_000
"""Disk that a run leaves free."""


def run(
    study: Study,
    results: str | PathLike[str] | None = None,
    workers: int | None = None,
    fresh: bool = False,
    progress: Progress | None = None,
    *,
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
    results : path, optional
        Parent folder in place of ``results`` under the current directory.
    workers : int, optional
        Worker processes, by default one a core.
    fresh : bool
        Solve everything anew. The old store stays until the new one is complete.
    progress : Progress, optional
        By default a bar on a terminal, plain lines elsewhere, both on standard error.
    solver : Solver, optional
        For tests and benchmarks.
    block_size : int, optional
        Cases per block of a new store, by default a few seconds of work.
    time_limit_s : float, optional
        Longest time for one case, by default generous for the size of the model.

    Returns
    -------
    RunSummary
        Also after Ctrl-C, with `stopped` set.

    Raises
    ------
    StoreError
        The folder holds another study, is in use or cannot be written, or the disk is full.
    InternalError
        simkit itself went wrong; ``log.txt`` has the traceback. What was stored is kept.

    Notes
    -----
    A script that calls this must do so under ``if __name__ == "__main__":``, because the worker
    processes import the script too.
    """
    _refuse_in_a_worker()
    begin = time.monotonic()
    folder = ResultsFolder(Path(results or "results") / study.path.stem)
    folder.check_title(study.title, fresh=fresh)
    folder.create()
    lock = RunLock(folder.path)
    try:
        return _Run(
            study,
            folder,
            lock,
            progress or choose_progress(),
            solver or Solver(),
            begin,
            workers=workers,
            block_size=block_size,
            time_limit_s=time_limit_s,
        ).go(fresh=fresh)
    finally:
        lock.release()


def _refuse_in_a_worker() -> None:
    # Set by multiprocessing while a new process is still importing the script it belongs to.
    if hasattr(multiprocessing.current_process(), "_inheriting"):
        raise SimkitError(
            'put the call of simkit.run under  if __name__ == "__main__":  because the worker '
            "processes import your script too"
        )


class _Run:
    """The steps of one run, in the order in which they happen."""

    def __init__(
        self,
        study: Study,
        folder: ResultsFolder,
        lock: RunLock,
        progress: Progress,
        solver: Solver,
        begin: float,
        *,
        workers: int | None,
        block_size: int | None,
        time_limit_s: float | None,
    ) -> None:
        self.study = study
        self.folder = folder
        self.lock = lock
        self.progress = progress
        self.solver = solver
        self.begin = begin
        self.workers = workers or core_count()
        self.block_size = block_size
        self.time_limit_s = time_limit_s
        self.log = EventLog(folder.log)
        self.ready: dict[int, CaseResult] = {}

    def go(self, *, fresh: bool) -> RunSummary:
        """Run to the end, or to the request to stop."""
        try:
            return self._go(fresh=fresh)
        except ForeignError as error:
            self.log.write(f"stopped by an error in simkit\n{error}")
            first = str(error).splitlines()[0]
            raise InternalError(
                f"{first}. This is an error in simkit, not in your study; everything stored is "
                f"kept and the traceback is in {self.folder.log}"
            ) from error
        except (SimkitError, OSError) as error:
            self.log.write(f"stopped: {error}")
            if isinstance(error, SimkitError):
                raise
            raise StoreError(f"{self.folder.path}: {error}") from error
        finally:
            self.progress.close()

    def _go(self, *, fresh: bool) -> RunSummary:
        self.folder.recover()
        prepared = prepare(self.study, self.solver)
        self.log.write(
            f"run of {prepared.title!r}: {len(prepared.cases)} cases, {prepared.segments} segments,"
            f" model {self.solver.version}, engine {prepared.attrs['engine_version']}"
        )
        target = self.folder.choose(prepared, fresh=fresh)
        worker = Worker(self.solver.function)
        try:
            with StopRequest(self._on_stop) as stop:
                store = self._open(target, prepared, worker)
                summary = self._solve(prepared, target, store, worker, stop)
        finally:
            worker.close()
        if summary.complete:
            self.folder.finish(target, prepared.text)
        self._say_end(summary)
        return summary

    def _on_stop(self) -> None:
        self.lock.stop_starting()
        self.progress.say("stopping: the blocks in hand are finished; Ctrl-C again stops at once")

    # -- the store -----------------------------------------------------------------------------

    def _open(self, target: Target, prepared: Prepared, worker: Worker) -> StoreFile:
        if not target.exists:
            self._check_disk(prepared)
            size = self.block_size or self._timed_block_size(prepared, worker)
            create_store(target.path, prepared.layout(size, takeover=target.takeover))
            if target.path == self.folder.store:
                self.folder.keep_text(prepared.text)
        return StoreFile(target.path)

    def _check_disk(self, prepared: Prepared) -> None:
        need = estimate_bytes(
            cases=len(prepared.cases),
            frequencies=len(prepared.frequency_hz),
            strips=len(prepared.strips),
            segments=prepared.segments,
        )
        free = shutil.disk_usage(self.folder.path).free
        if free < need // 2 + RESERVE_BYTES:
            raise StoreError(
                f"{self.folder.path}: the study needs about {need / 1e6:.0f} MB of disk and "
                f"{RESERVE_BYTES / 1e6:.0f} MB are kept free, but only {free / 1e6:.0f} MB are "
                "left; make room or choose another disk with --results"
            )

    def _timed_block_size(self, prepared: Prepared, worker: Worker) -> int:
        """Solve one case with the clock running; its result is kept for its block."""
        seconds = 0.0
        for case in first_solvable(prepared):
            result = solve_guarded(worker.child, case, prepared.plan, self._limit_s(prepared))
            self.ready[case.index] = result
            seconds = result.seconds
            if result.status in (Status.SOLVED, Status.DOUBTFUL):
                break
        return block_size_for(seconds, len(prepared.cases), self.workers)

    def _limit_s(self, prepared: Prepared) -> float:
        return self.time_limit_s or limit_for(prepared.segments)

    # -- the cases -----------------------------------------------------------------------------

    def _solve(
        self,
        prepared: Prepared,
        target: Target,
        store: StoreFile,
        worker: Worker,
        stop: StopRequest,
    ) -> RunSummary:
        index = key_index(target.sources)
        done = int(np.count_nonzero(store.read_statuses()))
        jobs = jobs_for(
            prepared,
            store,
            index,
            self.ready,
            limit_s=self._limit_s(prepared),
            lock=self.lock.path,
            token=self.lock.token,
        )
        taken = sum(case.source is not None for job in jobs for case in job.cases)
        self._say_begin(prepared, store, done, taken)
        loop = Loop(self.progress, self.log, stop, self.folder.path)
        if jobs:
            self.progress.start(len(prepared.cases), done)
            pool = self._pool(jobs, worker)
            try:
                loop.run(pool, jobs, done)
            finally:
                pool.close()
                self.progress.close()
        codes = store.read_statuses()
        return RunSummary(
            counts={status: int(np.count_nonzero(codes == status)) for status in Status},
            reused=done + loop.reused,
            solved=loop.solved,
            results_dir=self.folder.path,
            seconds=time.monotonic() - self.begin,
            stopped=loop.stopped,
        )

    def _pool(self, jobs: list[Any], worker: Worker) -> Pool:
        count = min(self.workers, len(jobs))
        if count == 1:
            return InlinePool(worker)
        worker.close()
        return DaskPool(count, self.solver.function)

    # -- what is said --------------------------------------------------------------------------

    def _say_begin(self, prepared: Prepared, store: StoreFile, done: int, taken: int) -> None:
        total = len(prepared.cases)
        parts = [f"{total} cases in {store.blocks} blocks"]
        if done:
            parts.append(f"{done} reused from the earlier run")
        if taken:
            parts.append(f"{taken} taken over unchanged from the earlier study")
        parts.append(f"{total - done - taken} to solve")
        self._say(", ".join(parts))

    def _say_end(self, summary: RunSummary) -> None:
        for line in summary_lines(summary):
            self._say(line)

    def _say(self, text: str) -> None:
        self.log.write(text)
        self.progress.say(text)


def summary_lines(summary: RunSummary) -> Iterator[str]:
    """Counts per status, where the results are and how to go on."""
    counts = ", ".join(f"{n} {status.label}" for status, n in summary.counts.items() if n)
    yield (
        f"{counts}; {summary.reused} reused, {summary.solved} settled in "
        f"{duration_text(summary.seconds)}"
    )
    yield f"results: {summary.results_dir}"
    if summary.stopped:
        yield f"stopped: {summary.stopped}. Give the same command again to continue"
