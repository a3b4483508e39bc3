from __future__ import annotations

import os
import subprocess
import sys

import pytest

from simkit.errors import StoreError
from simkit.runner.lock import RunLock, holder_of, may_start, writing


def test_one_holder_at_a_time(tmp_path):
    lock = RunLock(tmp_path)
    with pytest.raises(StoreError, match=rf"process {os.getpid()} on .*, since \d{{4}}-"):
        RunLock(tmp_path)
    assert holder_of(tmp_path)["pid"] == os.getpid()
    lock.release()
    assert holder_of(tmp_path) is None
    RunLock(tmp_path).release()


def test_a_killed_holder_frees_the_folder(tmp_path):
    script = (
        "import os, pathlib, signal\n"
        "from simkit.runner.lock import RunLock\n"
        f"RunLock(pathlib.Path({str(tmp_path)!r}))\n"
        "os.kill(os.getpid(), signal.SIGKILL)\n"
    )
    assert subprocess.run([sys.executable, "-c", script]).returncode == -9
    RunLock(tmp_path).release()


def test_workers_of_a_run_that_is_over_may_neither_start_nor_write(tmp_path):
    first = RunLock(tmp_path)
    token = first.token
    assert may_start(first.path, token)
    with writing(first.path, token) as allowed:
        assert allowed
    first.stop_starting()
    assert not may_start(first.path, token)
    with writing(first.path, token) as allowed:
        assert allowed  # a block begun is still written
    first.release()
    with writing(first.path, token) as allowed:
        assert not allowed
    second = RunLock(tmp_path)
    with writing(first.path, token) as allowed:
        assert not allowed
    with writing(second.path, second.token) as allowed:
        assert allowed
    used = second.token
    second.revoke()
    with writing(second.path, used) as allowed:
        assert not allowed
    with writing(second.path, "") as allowed:
        assert not allowed
    second.release()


def test_a_run_waits_for_a_worker_that_is_still_writing(tmp_path, monkeypatch):
    monkeypatch.setattr("simkit.runner.lock._STRAGGLERS_S", 0.1)
    first = RunLock(tmp_path)
    with writing(first.path, first.token):
        first.release()
        with pytest.raises(StoreError, match="an earlier run still has a worker writing here"):
            RunLock(tmp_path)
    RunLock(tmp_path).release()


def test_nobody_holds_a_folder_that_is_not_there(tmp_path):
    assert holder_of(tmp_path / "nowhere") is None


def test_a_folder_that_cannot_be_written_is_said(tmp_path, monkeypatch):
    def read_only(*args, **kwargs):
        raise OSError(30, "Read-only file system")

    monkeypatch.setattr(os, "open", read_only)
    with pytest.raises(StoreError, match="cannot be written: Read-only file system; choose"):
        RunLock(tmp_path)
