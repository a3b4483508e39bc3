"""Results at an address: in memory, and at an S3-compatible server if one is installed."""

from __future__ import annotations

import gc
import importlib.util
import os
import subprocess
import sys
import time
import urllib.request
from pathlib import Path

import fsspec
import numpy as np
import pytest

from simkit.errors import StoreError
from simkit.runner import remote_lock, run, status
from simkit.runner.lock import holder_of, may_start, take_lock, writing
from simkit.runner.overview import status_lines
from simkit.runner.progress import QuietProgress
from simkit.store import open_results
from simkit.store.files import store_exists
from simkit.store.remote import RemotePath, place
from simkit.store.schema import Status
from simkit.store.write import StoreFile

pytestmark = pytest.mark.long

ARMS = [60, 64, 70, 75, 80]


@pytest.fixture
def bucket(monkeypatch):
    """An address of an empty place in memory, with a lock that beats quickly."""
    monkeypatch.setattr(remote_lock, "BEAT_S", 0.02)
    system = fsspec.filesystem("memory")
    address = "memory://gauges"
    yield address
    if system.exists("/gauges"):
        system.rm("/gauges", recursive=True)


@pytest.fixture
def go(fake, direct, bucket):
    def go(study, results=bucket, **choices):
        settings = {"workers": 1, "block_size": 2, "solver": fake, "progress": QuietProgress()}
        return run(study, results, **settings | choices)

    return go


def numbers(folder):
    return open_results(folder).load().drop_vars("worker")


def test_addresses_and_paths_are_told_apart():
    assert place("results/ford") == Path("results/ford")
    assert place("file:///data/ford") == Path("/data/ford")
    there = place("s3://gauges/summer/")
    assert isinstance(there, RemotePath)
    assert str(there / "ford" / "store.zarr") == "s3://gauges/summer/ford/store.zarr"
    assert (there.name, (there / "store.zarr").suffix) == ("summer", ".zarr")
    assert there.with_name("winter") == RemotePath("s3://gauges/winter")
    assert there.parent.address == "s3://gauges"
    assert {there, place(there)} == {RemotePath("s3://gauges/summer")}


def test_an_address_of_no_known_kind_is_said(go, make_study):
    with pytest.raises(StoreError, match=r"nowhere://x/ford.*cannot be reached"):
        go(make_study(ARMS), "nowhere://x")


def test_a_run_at_an_address_stores_what_a_run_on_a_disk_does(go, make_study, tmp_path, marks):
    study = make_study(ARMS)
    there, here = go(study), go(study, tmp_path / "out")
    assert str(there.results_dir) == "memory://gauges/ford"
    assert there.counts[Status.SOLVED] == 5
    assert numbers(there.results_dir).identical(numbers(here.results_dir))
    again = go(study)
    assert (again.reused, again.solved) == (5, 0)
    assert len(marks()) == 10
    assert (there.results_dir / "study.toml").read_text() == study.text
    log = (there.results_dir / "log.txt").read_text()
    assert log.count(" stored: ") == 3
    assert "5 reused from the earlier run, 0 to solve" in log
    assert holder_of(there.results_dir) is None
    lines = status_lines(status(str(there.results_dir)))
    assert lines[0] == "Ford: 5 cases: 5 solved"


def test_a_changed_study_takes_over_and_takes_the_place(go, make_study, marks):
    first = go(make_study([60, 64, 70])).results_dir
    summary = go(make_study([50, 70, 60, 90]))
    assert (summary.reused, summary.solved) == (2, 2)
    assert np.round(open_results(first)["arm"].values * 1e3).tolist() == [50, 70, 60, 90]
    assert not store_exists(first / "store.new.zarr")
    names = sorted(path.name for path in first.glob("*"))
    assert names == ["log.txt", "store.zarr", "study.toml"]


@pytest.mark.parametrize("moment", ["before the copy", "in the copy", "after the copy"])
def test_a_swap_broken_off_is_finished_by_the_next_run(go, make_study, marks, moment):
    study = make_study([60, 64])
    folder = go(study).results_dir
    store, new = folder / "store.zarr", folder / "store.new.zarr"
    store.copy_tree(new)
    if moment != "after the copy":
        (store / "zarr.json").unlink()
    if moment == "in the copy":
        for path in (store / "gain").glob("*"):
            path.unlink()
    summary = go(study)
    assert summary.reused == 2
    assert len(marks()) == 2
    assert numbers(folder).sizes["case"] == 2
    assert not store_exists(new)


def test_a_store_whose_writing_fails_is_said_and_continued(go, make_study, monkeypatch):
    study = make_study(ARMS)
    whole = StoreFile.write_block

    def broken(self, block, content):
        if block == 1:
            with self._reached():
                raise CloudError
        whole(self, block, content)

    class CloudError(Exception):
        pass

    monkeypatch.setattr(StoreFile, "write_block", broken)
    with pytest.raises(StoreError, match=r"block 1 cannot be.*cannot be reached"):
        go(study)
    monkeypatch.setattr(StoreFile, "write_block", whole)
    assert go(study).reused == 2


def test_one_holder_at_a_time_and_a_silent_one_is_taken_for_dead(bucket):
    folder = place(bucket) / "ford"
    lock = take_lock(folder)
    assert holder_of(folder)["pid"] == os.getpid()
    with pytest.raises(StoreError, match=rf"another run is writing here: process {os.getpid()} on"):
        take_lock(folder)
    assert may_start(lock.path, lock.token)
    lock.stop_starting()
    assert not may_start(lock.path, lock.token)
    with writing(lock.path, lock.token) as allowed:
        assert allowed
    dead = (folder / ".lock").read_text()
    lock.release()
    assert holder_of(folder) is None
    with writing(lock.path, lock.token) as allowed:
        assert not allowed
    (folder / ".lock").write_text(dead)  # as a run leaves it that was killed
    take_lock(folder).release()


def test_a_run_that_lost_its_folder_in_its_sleep_stops(bucket):
    folder = place(bucket) / "ford"
    lock = take_lock(folder)
    (folder / ".lock").unlink()
    (folder / ".lock").write_text('{"own": "somebody else", "pid": 1}')
    for _ in range(200):
        time.sleep(0.02)
        if lock._ended.is_set():
            break
    with pytest.raises(StoreError, match="another run has taken over"):
        lock.note({})
    lock.release()
    assert "somebody else" in (folder / ".lock").read_text()


# -- an S3-compatible server ---------------------------------------------------------------------

missing = [name for name in ("moto", "s3fs") if importlib.util.find_spec(name) is None]
needs_s3 = pytest.mark.skipif(bool(missing), reason=f"not installed: {', '.join(missing)}")


@pytest.fixture
def server(tmp_path, monkeypatch):
    """Environment of a server of an empty bucket, in a process of its own."""
    from tests.faults.machinery import free_port

    port = free_port()
    process = subprocess.Popen(
        [sys.executable, "-m", "moto.server", "-H", "127.0.0.1", "-p", str(port)],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )
    url = f"http://127.0.0.1:{port}"
    settings = {
        "AWS_ENDPOINT_URL": url,
        "AWS_ACCESS_KEY_ID": "gauge",
        "AWS_SECRET_ACCESS_KEY": "gauge",
        "AWS_DEFAULT_REGION": "us-east-1",
    }
    for name, value in settings.items():
        monkeypatch.setenv(name, value)
    for _ in range(300):
        try:
            urllib.request.urlopen(url, timeout=5).close()
            break
        except OSError:
            time.sleep(0.1)
    system = fsspec.filesystem("s3", use_listings_cache=False)
    system.mkdir("gauges")
    yield system
    process.kill()
    process.wait()
    type(system).clear_instance_cache()
    del system
    gc.collect()  # sessions end here, where their complaints are allowed


@needs_s3
@pytest.mark.long
@pytest.mark.filterwarnings("default")
def test_a_run_into_an_object_store(server, fake, make_study, marks, tmp_path):
    """Two worker processes write, a second run reuses, a changed one takes over."""

    def go(study, results="s3://gauges/summer", workers=2):
        settings = {"block_size": 2, "solver": fake, "progress": QuietProgress()}
        return run(study, results, workers=workers, **settings)

    study = make_study(ARMS)
    summary = go(study)
    assert str(summary.results_dir) == "s3://gauges/summer/ford"
    assert summary.counts[Status.SOLVED] == 5
    calm = go(study, tmp_path / "out", workers=1)
    assert numbers(summary.results_dir).identical(numbers(calm.results_dir))
    assert go(study).reused == 5
    changed = go(make_study([64, 70, 90]))
    assert (changed.reused, changed.solved) == (2, 1)
    assert numbers(changed.results_dir).sizes["case"] == 3


@needs_s3
@pytest.mark.long
@pytest.mark.filterwarnings("default")
def test_a_run_into_an_object_store_is_killed_and_continued(server, make_study, tmp_path):
    from tests.faults.machinery import Site, wait_for

    site = Site(tmp_path / "site", 12, seconds=0.2)
    site.out = "s3://gauges/night"
    process = site.start("2")
    log = RemotePath("s3://gauges/night/ford/store.zarr/status/c.0")
    assert wait_for(log.exists), site.output(process)
    site.close()
    again = site.start("2")
    again.wait(timeout=240)
    assert "stopped: no" in site.output(again), site.output(again)
    codes = StoreFile(place("s3://gauges/night/ford/store.zarr")).read_statuses()
    assert (codes == Status.SOLVED).all()
    tries = site.tries()
    assert sum(tries.values()) - 12 <= 6
    assert all(tries[site.key(case)] == 1 for case in range(3))
