"""Run a study: solve its cases block by block and keep every one that is done."""

from __future__ import annotations

import multiprocessing
import shutil
import time
import traceback
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from simkit.errors import SimkitError, StoreError
from simkit.runner.folder import ResultsFolder, Target
from simkit.runner.lock import RunLock
from simkit.runner.log import EventLog
from simkit.runner.loop import Loop
from simkit.runner.plan import (
    Index,
    block_size_for,
    first_to_solve,
    jobs_for,
    key_index,
    limit_for,
)
from simkit.runner.pool import DaskPool, InlinePool, Pool, core_count
from simkit.runner.prepare import Prepared, Solver, prepare
from simkit.runner.progress import Progress, choose_progress, duration_text
from simkit.runner.result import CaseResult, InternalError, RunSummary
from simkit.runner.stop import StopRequest
from simkit.runner.work import BlockJob, ForeignError, Worker, solve_guarded
from simkit.store.layout import create_store
from simkit.store.schema import Status
from simkit.store.size import estimate_bytes
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
    choices = _Choices(solver or Solver(), workers or core_count(), block_size, time_limit_s)
    lock = RunLock(folder.path)
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


@dataclass(frozen=True)
class _Choices:
    solver: Solver
    workers: int
    block_size: int | None
    time_limit_s: float | None

    def limit_s(self, prepared: Prepared) -> float:
        """Time limit of one case."""
        antennas = (case.antenna for case in prepared.cases)
        converge = any(antenna.converge for antenna in antennas if antenna is not None)
        return self.time_limit_s or limit_for(prepared.segments, converge=converge)


class _Session:
    """The steps of one run, in the order in which they happen."""

    def __init__(
        self, folder: ResultsFolder, lock: RunLock, progress: Progress, choices: _Choices
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

    def _go(self, study: Study, *, fresh: bool, begin: float) -> RunSummary:
        self.folder.recover()
        prepared = prepare(study, self.choices.solver)
        self.log.write(
            f"run of {prepared.title!r}: {len(prepared.cases)} cases, {prepared.segments} segments,"
            f" {_versions(prepared.attrs)}"
        )
        target = self.folder.choose(prepared, fresh=fresh)
        self._say_versions(target, prepared)
        worker = Worker(self.choices.solver.function)
        try:
            with StopRequest() as stop:
                loop = Loop(self.progress, self.log, stop, self._on_stop, self.folder.path)
                store, done = self._settle(prepared, target, worker, loop)
        finally:
            worker.close()
        codes = store.read_statuses()
        counts = {status: int(np.count_nonzero(codes == status)) for status in Status}
        summary = RunSummary(
            counts=counts,
            reused=done + loop.reused,
            solved=loop.solved,
            results_dir=self.folder.path,
            seconds=time.monotonic() - begin,
            stopped=loop.stopped if counts[Status.WAITING] else "",
        )
        if summary.complete:
            self.folder.finish(target, prepared.text)
        self._say_end(summary)
        return summary

    def _settle(
        self, prepared: Prepared, target: Target, worker: Worker, loop: Loop
    ) -> tuple[StoreFile, int]:
        """Settle all waiting cases; return the store and how many cases were settled before."""
        index = key_index(target.sources)
        ready: dict[int, CaseResult] = {}
        if not target.exists:
            size, ready = self._before_layout(prepared, target, index, worker)
            create_store(target.path, prepared.layout(size, takeover=target.takeover))
            if target.path == self.folder.store:
                self.folder.keep_text(prepared.text)
        store = StoreFile(target.path)
        done = int(np.count_nonzero(store.read_statuses()))
        for turn in range(_PASSES):
            jobs = jobs_for(
                prepared,
                store,
                index,
                ready,
                limit_s=self.choices.limit_s(prepared),
                lock=self.lock.path,
                token=self.lock.token,
            )
            if turn == 0:
                self._say_begin(store, jobs, done)
                self.progress.start(store.cases, done)
            if not jobs or loop.stopped:
                break
            self._work(jobs, worker, loop, store)
        return store, done

    def _work(self, jobs: list[BlockJob], worker: Worker, loop: Loop, store: StoreFile) -> None:
        pool = self._pool(len(jobs), worker)
        over = False
        try:
            loop.run(pool, jobs, int(np.count_nonzero(store.read_statuses())))
            over = not loop.stopped
        finally:
            if not over:
                # A case cut short by the end of its process must not be stored as failed.
                self.lock.revoke()
            pool.close()
            self.progress.close()

    def _pool(self, blocks: int, worker: Worker) -> Pool:
        count = min(self.choices.workers, blocks)
        if count == 1:
            return InlinePool(worker)
        worker.close()
        return DaskPool(count, self.choices.solver.function)

    # -- before a new store --------------------------------------------------------------------

    def _before_layout(
        self, prepared: Prepared, target: Target, index: Index, worker: Worker
    ) -> tuple[int, dict[int, CaseResult]]:
        """Block size of a new store, and the results of the cases solved to find it."""
        self._check_disk(prepared)
        if self.choices.block_size:
            return self.choices.block_size, {}
        ready: dict[int, CaseResult] = {}
        seconds = 0.0
        for case in first_to_solve(prepared, index):
            limit_s = self.choices.limit_s(prepared)
            result = solve_guarded(worker.child, case, prepared.plan, limit_s)
            ready[case.index] = result
            seconds = result.seconds
            if result.status in (Status.SOLVED, Status.DOUBTFUL):
                break
        if not ready and target.sources and index:
            return int(read_attrs(target.sources[0])["block_size"]), {}
        return block_size_for(seconds, len(prepared.cases), self.choices.workers), ready

    def _check_disk(self, prepared: Prepared) -> None:
        need = estimate_bytes(
            cases=len(prepared.cases),
            frequencies=len(prepared.frequency_hz),
            strips=len(prepared.strips),
            segments=prepared.segments,
        )
        free = shutil.disk_usage(self.folder.path).free
        # The estimate may be twice too high, and a study is not refused for that.
        if free < need // 2 + RESERVE_BYTES:
            raise StoreError(
                f"{self.folder.path}: the study needs about {need / 1e6:.0f} MB of disk and "
                f"{RESERVE_BYTES / 1e6:.0f} MB are kept free, but only {free / 1e6:.0f} MB are "
                "left; make room or choose another disk with --results"
            )

    # -- what is said --------------------------------------------------------------------------

    def _on_stop(self) -> None:
        self.lock.stop_starting()
        self._say("stopping: the blocks in hand are finished; Ctrl-C again stops at once")

    def _say_versions(self, target: Target, prepared: Prepared) -> None:
        """Other versions never mix with these: say so where it makes cases be solved anew."""
        if target.exists or not target.sources:
            return
        before, now = _versions(read_attrs(target.sources[0])), _versions(prepared.attrs)
        if before != now:
            self._say(f"earlier results are of {before}; this is {now}: all is solved anew")

    def _say_begin(self, store: StoreFile, jobs: list[BlockJob], done: int) -> None:
        taken = sum(case.source is not None for job in jobs for case in job.cases)
        parts = [f"{store.cases} cases in {store.blocks} blocks"]
        if done:
            parts.append(f"{done} reused from the earlier run")
        if taken:
            parts.append(f"{taken} taken over unchanged from the earlier study")
        parts.append(f"{store.cases - done - taken} to solve")
        self._say(", ".join(parts))

    def _say_end(self, summary: RunSummary) -> None:
        """All into the log; the caller shows the summary, so only a stop is said at once."""
        for line in summary_lines(summary):
            self.log.write(line)
            if summary.stopped:
                self.progress.say(line)

    def _say(self, text: str) -> None:
        self.log.write(text)
        self.progress.say(text)


def _versions(attrs: Mapping[str, object]) -> str:
    return f"model {attrs.get('model_version')}, engine {attrs.get('engine_version')}"


def summary_lines(summary: RunSummary) -> Iterator[str]:
    """Counts per status, where the results are and how to go on."""
    counts = ", ".join(f"{n} {status.label}" for status, n in summary.counts.items() if n)
    yield (
        f"{counts}; {summary.reused} reused, {summary.solved} settled in "
        f"{duration_text(summary.seconds)}"
    )
    yield f"results: {summary.results_dir}"
    if summary.stopped:
        yield f"stopped {summary.stopped}; give the same command again to continue"
