"""Cut a study into blocks and say for each case where its results come from."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from simkit.errors import StoreError
from simkit.runner.prepare import Prepared
from simkit.runner.result import CaseResult
from simkit.runner.work import BlockJob, CaseJob
from simkit.store.layout import usable_layouts
from simkit.store.remote import Place
from simkit.store.schema import SAMPLES, VARIABLES, Status
from simkit.store.write import KEY_DTYPE, StoreFile

BLOCK_S, LONG_BLOCK_S = 6.0, 20.0
"""Work in one block of a short and of a long run."""

BESIDE_S = 0.1
"""Taken by a block beside its cases, mostly by writing it."""

MOST_FILES = 9_500
"""Files of all blocks together; blocks grow for it, and are then written several times over."""

LARGEST_BLOCK_BYTES = 200_000_000
"""What a worker holds of a block, unpacked."""

RETRIED = (Status.FAILED, Status.TIMED_OUT)
"""What `retry` solves again."""

_BLOCKS_A_RUN = 100
_EVEN_FROM = 32
_TRIES = 3


def block_size_for(seconds: float, cases: int, workers: int, case_bytes: int = 1) -> int:
    """Cases in one block, from the time one case takes and the memory its results need.

    Small studies get blocks small enough to give every worker a few, long runs longer blocks, and
    no study more blocks than a disk likes to hold as files.
    """
    wanted_s = seconds * cases / workers / _BLOCKS_A_RUN
    block_s = min(max(wanted_s, BLOCK_S), LONG_BLOCK_S)
    by_time = int(block_s / max(seconds, 1e-3))
    by_workers = math.ceil(cases / (3 * workers))
    most_blocks = max(MOST_FILES // len(VARIABLES), 4 * workers)
    size = max(min(by_time, by_workers), math.ceil(cases / most_blocks))
    most = max(1, LARGEST_BLOCK_BYTES // max(case_bytes, 1))
    size = min(size, most)
    piece = _EVEN_FROM if size >= _EVEN_FROM else 1
    size = math.ceil(size / piece) * piece
    least = max(size // 2, math.ceil(cases / most_blocks), 1)

    def taken_s(pieces: int) -> float:
        blocks = math.ceil(cases / (pieces * piece))
        return math.ceil(blocks / workers) * (pieces * piece * seconds + BESIDE_S)

    # No worker shall wait for long while another does the last block.
    like = range(size // piece // 2, size * 5 // 4 // piece + 1)
    sizes = [k for k in like if least <= k * piece <= most] or [size // piece]
    return min(sizes, key=taken_s) * piece


def limit_for(segments: int, seconds: float | None = None, *, converge: bool = False) -> float:
    """Time limit of one case in seconds, some thirty times what it needs.

    Parameters
    ----------
    segments : int
    seconds : float, optional
        Time a case of the study took.
    converge : bool
        Each case is solved on refined meshes of up to two and a half times the segments as well.
    """
    if seconds is not None:
        return 30.0 + 30.0 * seconds
    matrix_s = 0.55e-6 * segments**2
    return 60.0 + 10.0 * SAMPLES * matrix_s * (12.0 if converge else 1.0)


class Index:
    """Where the settled cases of older stores are, by their keys."""

    def __init__(self) -> None:
        self._stores: list[Place] = []
        self._keys = np.zeros(0, dtype=KEY_DTYPE)
        self._store = self._row = np.zeros(0, dtype=np.int64)

    def __len__(self) -> int:
        return len(self._keys)

    def add(self, path: Place, keys: NDArray[np.bytes_], settled: NDArray[np.bool_]) -> None:
        """Add the settled cases of one store; of equal keys the one added first counts."""
        rows = np.flatnonzero(settled & (keys != b""))
        store = np.full(len(rows), len(self._stores))
        self._stores.append(path)
        keys = np.concatenate([self._keys, keys[rows]])
        _, first = np.unique(keys, return_index=True)
        self._keys = keys[first]
        self._store = np.concatenate([self._store, store])[first]
        self._row = np.concatenate([self._row, rows])[first]

    def get(self, key: str) -> tuple[Place, int] | None:
        """Store and case of a key, None if there is none."""
        place = int(np.searchsorted(self._keys, wanted := np.bytes_(key.encode())))
        if place == len(self._keys) or self._keys[place] != wanted:
            return None
        return self._stores[int(self._store[place])], int(self._row[place])

    def has(self, keys: NDArray[np.bytes_]) -> NDArray[np.bool_]:
        """Which of many keys are there."""
        return np.asarray(np.isin(keys, self._keys), dtype=np.bool_)


def key_index(sources: Sequence[Place], *, retry: bool = False) -> Index:
    """Settled cases in older stores that can be used, without those to be tried again."""
    index = Index()
    for path in sources:
        try:
            store = StoreFile(path)
        except StoreError:
            continue  # beyond reading: its cases are solved again
        if store.attrs.get("layout_hash") not in usable_layouts():
            continue
        statuses = store.read_statuses()
        settled = statuses != Status.WAITING
        if retry:
            settled &= ~np.isin(statuses, RETRIED)
        index.add(path, store.read_keys(), settled)
    return index


def first_to_solve(prepared: Prepared, index: Index) -> Iterator[CaseJob]:
    """The first few cases that the engine will be asked for."""
    if prepared.plan is None:
        return
    found = 0
    for number in np.flatnonzero(~index.has(prepared.keys)):
        case = prepared.case(int(number))
        if case.antenna is not None:
            yield CaseJob(case.index, prepared.key(case.index), case.antenna)
            found += 1
        if found == _TRIES:
            return


@dataclass(frozen=True)
class Jobs:
    """The blocks to be done; each is made when it is about to be handed out.

    Attributes
    ----------
    todo : (N,) bool array
        Cases to be settled.
    taken : int
        Those of them taken over from older stores.
    blocks : tuple of int
        Blocks with cases to be settled.
    """

    prepared: Prepared
    store: StoreFile
    index: Index
    ready: Mapping[int, CaseResult]
    todo: NDArray[np.bool_]
    retry: bool
    limit_s: float
    lock: Place
    token: str
    taken: int = field(init=False)
    blocks: tuple[int, ...] = field(init=False)

    def __post_init__(self) -> None:
        taken = np.count_nonzero(self.index.has(self.prepared.keys[self.todo]))
        found = np.unique(np.flatnonzero(self.todo) // self.store.block_size)
        object.__setattr__(self, "taken", int(taken))
        object.__setattr__(self, "blocks", tuple(found.tolist()))

    def __len__(self) -> int:
        return len(self.blocks)

    def __iter__(self) -> Iterator[BlockJob]:
        for block in self.blocks:
            rows = self.store.rows(block)
            numbers = np.flatnonzero(self.todo[rows]) + rows.start
            yield BlockJob(
                self.store.path,
                block,
                tuple(self._case_job(int(number)) for number in numbers),
                self.prepared.plan,
                self.limit_s,
                self.lock,
                self.token,
                retried=RETRIED if self.retry else (),
            )

    def _case_job(self, number: int) -> CaseJob:
        case, key = self.prepared.case(number), self.prepared.key(number)
        refused = self.prepared.no_plan
        if case.antenna is None:
            refused = case.refused or "the values of this case make no antenna"
        if refused:
            return CaseJob(number, key, ready=CaseResult(Status.REFUSED, refused))
        return CaseJob(number, key, case.antenna, self.ready.get(number), self.index.get(key))


def waiting_cases(statuses: NDArray[np.int8], *, retry: bool) -> NDArray[np.bool_]:
    """Which cases are to be settled, those without a solution for want of luck included."""
    codes = (Status.WAITING, *RETRIED) if retry else (Status.WAITING,)
    return np.asarray(np.isin(statuses, codes), dtype=np.bool_)
