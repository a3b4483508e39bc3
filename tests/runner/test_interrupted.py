"""Runs killed or interrupted, in processes of their own, and what the next run makes of it."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import psutil
import pytest

from simkit.errors import StoreError
from simkit.runner import run, status
from simkit.runner.progress import QuietProgress
from simkit.store import open_results
from simkit.store.schema import Status
from simkit.store.write import StoreFile

HERE = Path(__file__).parent
PATHS = os.pathsep.join([str(HERE), str(HERE.parents[1])])
"""The solver of these tests, and the simkit they belong to."""

ARMS = range(60, 84)
IN_HAND = 4
"""Cases that two workers may have in hand, in blocks of two."""


@pytest.fixture
def start(fake, marks, tmp_path):
    """Start a run of a study in its own process group; killed at the end if it still lives."""
    started = []

    def start(study, workers=2, seconds=0.1):
        process = subprocess.Popen(
            [sys.executable, str(HERE / "drive.py"), study.path, tmp_path / "out", str(workers)],
            env=os.environ | {"PYTHONPATH": PATHS, "FAKE_SECONDS": str(seconds)},
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            text=True,
            start_new_session=True,
        )
        started.append(process)
        return process

    yield start
    for process in started:
        if process.poll() is None:
            os.killpg(process.pid, signal.SIGKILL)
        process.communicate()


def settled(store):
    """Numbers of the cases that are stored, none if there is no store yet."""
    if not store.exists():
        return []
    return np.flatnonzero(StoreFile(store).read_statuses()).tolist()


def wait_until(ready, process):
    for _ in range(1200):
        if ready():
            return
        assert process.poll() is None, process.stdout.read()
        time.sleep(0.02)
    raise AssertionError("the run does not get on")


def finish(study, fake, folder):
    return run(study, folder, workers=1, block_size=2, solver=fake, progress=QuietProgress())


def reference(study, fake, tmp_path):
    """The same study, undisturbed, elsewhere."""
    return numbers(finish(study, fake, tmp_path / "calm").results_dir)


def numbers(folder):
    """Everything stored but who did it."""
    return open_results(folder).load().drop_vars("worker")


def test_a_killed_run_is_continued_without_loss(start, make_study, fake, marks, tmp_path):
    study = make_study(ARMS)
    store = tmp_path / "out" / "ford" / "store.zarr"
    process = start(study)
    wait_until(lambda: len(settled(store)) >= 6, process)
    helpers = psutil.Process(process.pid).children(recursive=True)
    os.kill(process.pid, signal.SIGKILL)
    process.wait()
    kept = settled(store)
    assert len(kept) < 24
    broken_off = numbers(store.parent).isel(case=kept)

    summary = finish(study, fake, tmp_path / "out")
    assert summary.complete
    assert summary.reused >= len(kept)
    tries = marks()
    for case in kept:
        assert tries.count(f"{(60 + case) / 1000:.6f}") == 1, case
    assert len(tries) - 24 <= IN_HAND
    calm = reference(study, fake, tmp_path)
    assert calm.identical(numbers(summary.results_dir))
    assert calm.isel(case=kept).identical(broken_off)
    _, alive = psutil.wait_procs(helpers, timeout=30)
    assert not alive


@pytest.mark.long
def test_ctrl_c_finishes_the_blocks_in_hand(start, make_study, fake, marks, tmp_path):
    study = make_study(ARMS)
    store = tmp_path / "out" / "ford" / "store.zarr"
    process = start(study)
    wait_until(lambda: len(settled(store)) >= 4, process)
    os.killpg(process.pid, signal.SIGINT)  # as a terminal does: to every process of the run
    output, _ = process.communicate(timeout=60)
    assert process.returncode == 0, output
    assert "stopped: on request" in output
    assert "give the same command again to continue" in output
    assert "Traceback" not in output
    kept = settled(store)
    assert len(marks()) == len(kept) < 24
    assert (StoreFile(store).read_statuses()[kept] == Status.SOLVED).all()
    finish(study, fake, tmp_path / "out")
    assert len(marks()) == 24


@pytest.mark.parametrize("workers", [1, pytest.param(2, marks=pytest.mark.long)])
def test_ctrl_c_twice_stops_at_once_and_marks_nothing(
    start, make_study, fake, tmp_path, workers, marks
):
    study = make_study(ARMS)
    store = tmp_path / "out" / "ford" / "store.zarr"
    process = start(study, workers=workers, seconds=600)
    wait_until(lambda: len(marks()) == workers, process)
    log = store.parent / "log.txt"
    os.killpg(process.pid, signal.SIGINT)
    wait_until(lambda: "the blocks in hand are finished" in log.read_text(), process)
    os.killpg(process.pid, signal.SIGINT)
    output, _ = process.communicate(timeout=60)
    assert "stopped: at once, on request" in output
    assert "Traceback" not in output
    assert settled(store) == []


@pytest.mark.long
def test_a_killed_worker_costs_no_case(start, make_study, marks, tmp_path):
    study = make_study(ARMS)
    store = tmp_path / "out" / "ford" / "store.zarr"
    process = start(study)
    wait_until(lambda: len(settled(store)) >= 4, process)
    log = store.parent / "log.txt"
    # A block is on the disk a little before the line that says so.
    workers = re.compile(r" stored.*process (\d+) on ")
    wait_until(lambda: workers.search(log.read_text()), process)
    os.kill(int(workers.findall(log.read_text())[-1]), signal.SIGKILL)
    output, _ = process.communicate(timeout=60)
    assert "stopped: no" in output, output
    assert (StoreFile(store).read_statuses() == Status.SOLVED).all()
    assert len(marks()) - 24 <= IN_HAND


def test_a_second_run_is_refused_and_told_who_holds_the_folder(start, make_study, fake, tmp_path):
    study = make_study(ARMS)
    store = tmp_path / "out" / "ford" / "store.zarr"
    process = start(study, workers=1)
    wait_until(lambda: settled(store), process)
    with pytest.raises(StoreError, match=rf"another run .* here: process {process.pid} on "):
        finish(study, fake, tmp_path / "out")
    state = status(store.parent)
    assert state.running.startswith(f"process {process.pid} on ")
    assert state.current.counts[Status.SOLVED] >= 2
