"""Where the cases of a run are solved: one child here, processes here, or a cluster."""

from __future__ import annotations

import threading
from collections.abc import Callable
from dataclasses import dataclass

from simkit.runner.pool import DaskPool, InlinePool, Pool
from simkit.runner.prepare import Solver
from simkit.runner.stop import Deadline
from simkit.runner.work import Worker
from simkit.store.remote import Place


@dataclass(frozen=True)
class Choices:
    """What the caller of a run chose."""

    solver: Solver
    workers: int
    block_size: int | None
    time_limit_s: float | None
    retry: bool
    scheduler: str | None
    deadline: Deadline | None


class Workplace:
    """Makes the pools of a run, and holds the child that solves its first case.

    Parameters
    ----------
    choices : Choices
    say : callable
        Shows one line.
    lock : Path or RemotePath
        File in the results folder that workers of a cluster must see.
    """

    def __init__(self, choices: Choices, say: Callable[[str], None], lock: Place) -> None:
        self._lock = lock
        self._choices = choices
        self._say = say
        self._cluster: Pool | None = None
        self.worker = Worker(choices.solver.function)

    def open(self) -> None:
        """Reach the cluster, if there is to be one, before anything is solved."""
        if self._choices.scheduler is not None:
            self._cluster = self._reach(self._choices.scheduler)

    def import_ahead(self) -> None:
        """Load in the background what a pool of workers will need.

        The engine's process takes a second to start, which would pass in idleness.
        """
        if self._choices.workers > 1:
            threading.Thread(target=_import_ahead).start()

    @property
    def workers(self) -> int:
        """Processes that will work, as far as known."""
        return self._cluster.size if self._cluster is not None else self._choices.workers

    def pool(self, blocks: int) -> Pool:
        """A pool for so many blocks; the cluster is reached anew if its pool was closed."""
        if self._choices.scheduler is not None:
            cluster = self._cluster or self._reach(self._choices.scheduler)
            self._cluster = None
            self.worker.close()
            return cluster
        count = min(self._choices.workers, blocks)
        if count == 1:
            return InlinePool(self.worker)
        self.worker.close()
        return DaskPool(count, self._choices.solver.function)

    def close(self) -> None:
        """End what is left."""
        self.worker.close()
        if self._cluster is not None:
            self._cluster.close()

    def _reach(self, address: str) -> Pool:
        from simkit.runner.cluster import ClusterPool

        return ClusterPool(address, self._choices.solver.function, self._say, self._lock)


def _import_ahead() -> None:
    import distributed  # noqa: F401
    import zarr  # noqa: F401
