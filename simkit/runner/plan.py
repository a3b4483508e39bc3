"""Cut a study into blocks and say for each case where its results come from."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path

from simkit.errors import StoreError
from simkit.runner.prepare import Prepared
from simkit.runner.result import CaseResult
from simkit.runner.work import BlockJob, CaseJob
from simkit.store.layout import layout_hash
from simkit.store.schema import SAMPLES, Status
from simkit.store.write import StoreFile

BLOCK_S = 4.0
"""Work in one block: what is lost at most, for each worker, when the machine stops."""

LARGEST_BLOCK = 256

_TRIES = 3

Index = Mapping[str, tuple[Path, int]]


def block_size_for(seconds: float, cases: int, workers: int) -> int:
    """Cases in one block, from the time one case takes.

    Small studies get blocks small enough to give every worker a few.
    """
    by_time = int(BLOCK_S / max(seconds, 1e-3))
    by_count = math.ceil(cases / (3 * workers))
    return max(1, min(by_time, by_count, LARGEST_BLOCK))


def limit_for(segments: int, *, converge: bool = False) -> float:
    """Time limit of one case in seconds, some ten times what a slow machine needs.

    A case that is refined solves meshes of up to two and a half times the segments as well.
    """
    matrix_s = 0.55e-6 * segments**2
    return 60.0 + 10.0 * SAMPLES * matrix_s * (12.0 if converge else 1.0)


def first_to_solve(prepared: Prepared, index: Index) -> Iterator[CaseJob]:
    """The first few cases that the engine will be asked for."""
    if prepared.plan is None:
        return
    found = 0
    for case, key in zip(prepared.cases, prepared.keys, strict=True):
        if case.antenna is not None and key not in index and found < _TRIES:
            found += 1
            yield CaseJob(case.index, key, case.antenna)


def key_index(sources: Sequence[Path]) -> dict[str, tuple[Path, int]]:
    """Key -> (store, case) of every settled case in older stores of the same layout."""
    index: dict[str, tuple[Path, int]] = {}
    for path in sources:
        try:
            store = StoreFile(path)
        except StoreError:
            continue  # beyond reading: its cases are solved again
        if store.attrs.get("layout_hash") != layout_hash():
            continue
        statuses, keys = store.read_statuses(), store.read_keys()
        for case, (status, key) in enumerate(zip(statuses, keys, strict=True)):
            if status != Status.WAITING and key:
                index.setdefault(key, (path, case))
    return index


def jobs_for(
    prepared: Prepared,
    store: StoreFile,
    index: Index,
    ready: Mapping[int, CaseResult],
    *,
    limit_s: float,
    lock: Path,
    token: str,
) -> list[BlockJob]:
    """One job for each block with waiting cases."""
    statuses = store.read_statuses()
    jobs = []
    for block in range(store.blocks):
        rows = store.rows(block)
        cases = tuple(
            _case_job(prepared, case, index, ready)
            for case in range(rows.start, rows.stop)
            if statuses[case] == Status.WAITING
        )
        if cases:
            jobs.append(BlockJob(store.path, block, cases, prepared.plan, limit_s, lock, token))
    return jobs


def _case_job(
    prepared: Prepared, number: int, index: Index, ready: Mapping[int, CaseResult]
) -> CaseJob:
    case, key = prepared.cases[number], prepared.keys[number]
    refused = prepared.no_plan
    if case.antenna is None:
        refused = case.refused or "the values of this case make no antenna"
    if refused:
        return CaseJob(number, key, ready=CaseResult(Status.REFUSED, refused))
    return CaseJob(number, key, case.antenna, ready.get(number), index.get(key))
