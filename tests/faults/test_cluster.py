"""Runs on a cluster of separate processes over TCP."""

from __future__ import annotations

import itertools
import sys
import threading
from types import SimpleNamespace

import distributed
import pytest

from simkit.errors import SimkitError
from simkit.runner import cluster, run
from simkit.runner.cluster import ClusterPool, check_sight, check_versions
from simkit.runner.identity import program_versions
from simkit.runner.progress import QuietProgress
from simkit.study import load_study

from .machinery import PATHS, Cluster, Site, end, kill, wait_for, write_study


@pytest.fixture
def fake_study(tmp_path):
    return write_study(tmp_path / "ford.toml", [8, 8])


@pytest.fixture
def site(tmp_path):
    site = Site(tmp_path, 40, seconds=0.01, gated=True)
    yield site
    site.close()


def test_workers_that_are_like_the_run_are_accepted():
    own = program_versions()
    check_versions({"tcp://1": own, "tcp://2": dict(own)}, own)


def test_every_worker_that_differs_is_named_with_what_differs():
    own = program_versions()
    found = {"tcp://1": own, "tcp://2": own | {"engine": "0.9"}, "tcp://3": None}
    with pytest.raises(SimkitError, match="nothing is solved") as caught:
        check_versions(found, own)
    text = str(caught.value)
    assert f"tcp://2, which has engine 0.9 instead of {own['engine']}" in text
    assert "tcp://3, which has no simkit" in text
    assert "tcp://1" not in text


@pytest.mark.parametrize("address", ["tcp://127.0.0.1:1", "nonsense://x"])
def test_a_scheduler_that_is_not_there_is_said(monkeypatch, address):
    monkeypatch.setattr(cluster, "CONNECT_S", 0.2)
    with pytest.raises(SimkitError, match=r"no scheduler to reach.*`dask scheduler` starts one"):
        ClusterPool(address, "fake_solver:solve", print)


def test_every_worker_that_does_not_see_the_results_is_named():
    with pytest.raises(SimkitError, match=r"nothing is solved.*--results") as caught:
        check_sight({"tcp://1": True, "tcp://2": False}, "/shared/night/.lock")
    assert "tcp://2, which does not see the folder /shared/night" in str(caught.value)
    assert "tcp://1" not in str(caught.value)
    check_sight({"tcp://1": True}, "/shared/night/.lock")


def test_a_file_is_waited_for_and_an_address_needs_none(tmp_path):
    assert cluster.sees("", 0.0)
    assert not cluster.sees(str(tmp_path / ".lock"), 0.0)
    timer = threading.Timer(0.1, (tmp_path / ".lock").touch)
    timer.start()
    assert cluster.sees(str(tmp_path / ".lock"), 30.0)
    timer.join()


def test_a_worker_that_joins_without_the_folder_gets_no_case(tmp_path, monkeypatch):
    said = []
    worker = SimpleNamespace(address="tcp://9", log_event=lambda topic, event: said.append(event))
    monkeypatch.setattr(distributed, "get_worker", lambda: worker)
    monkeypatch.setattr(cluster, "SIGHT_S", 0.0)
    clock = SimpleNamespace(sleep=lambda s: None, monotonic=itertools.count().__next__)
    monkeypatch.setattr(cluster, "time", clock)
    lock = str(tmp_path / "night" / ".lock")
    for _ in range(2):
        with pytest.raises(cluster.UnlikeWorkerError, match="does not see the folder"):
            cluster.do_checked_block("fake_solver:solve", b"", program_versions(), lock)
    (once,) = said
    assert once["text"].startswith("no block is given to worker tcp://9")


def test_workers_are_given_an_absolute_folder(fake_study, monkeypatch):
    given = []

    def pool(address, function, say, lock):
        given.append(lock)
        raise SimkitError("no further")

    monkeypatch.setattr(cluster, "ClusterPool", pool)
    monkeypatch.chdir(fake_study.parent)
    with pytest.raises(SimkitError, match="no further"):
        run(load_study(fake_study), "out", scheduler="tcp://x:1", progress=QuietProgress())
    assert given == [fake_study.parent / "out" / "ford" / ".lock"]
    assert given[0].is_absolute()


@pytest.mark.long
def test_workers_come_and_go_and_the_run_goes_on(site):
    here = Cluster.start(site)
    process = site.start(here.address)
    assert wait_for(lambda: site.settled()), site.output(process)
    late = Cluster.worker(site, here.address)
    assert wait_for(lambda: "3 workers at" in site.output(process)), site.output(process)
    end(here.workers[0])
    assert wait_for(lambda: "2 workers at" in site.output(process).rpartition("3 workers")[2])
    site.open_gate()
    process.wait(timeout=120)
    output = site.output(process)
    assert "stopped: no" in output
    assert "2 workers at tcp://127.0.0.1:" in output
    assert len(site.settled()) == 40
    used = {line.rpartition("process ")[2] for line in site.log.splitlines() if " stored" in line}
    assert len(used) >= 2
    end(late)
    here.close()


@pytest.mark.long
def test_without_workers_the_run_waits_for_them(site):
    here = Cluster.start(site)
    for worker in here.workers:
        end(worker)
    process = site.start(here.address)
    assert wait_for(lambda: "waiting for workers at" in site.output(process))
    Cluster.worker(site, here.address)
    site.open_gate()
    process.wait(timeout=120)
    assert "stopped: no" in site.output(process)
    here.close()


@pytest.mark.long
def test_all_workers_gone_for_a_while_costs_time_only(site):
    here = Cluster.start(site)
    process = site.start(here.address)
    assert wait_for(lambda: site.settled()), site.output(process)
    for worker in here.workers:
        end(worker)
    assert wait_for(lambda: "0 workers at" in site.output(process)), site.output(process)
    assert process.poll() is None
    Cluster.worker(site, here.address)
    site.open_gate()
    process.wait(timeout=120)
    assert "stopped: no" in site.output(process)
    here.close()


def other_simkit(folder, monkeypatch, content):
    """Give every process started from now on another simkit than this one."""
    folder.mkdir()
    (folder / "sitecustomize.py").write_text(content)
    monkeypatch.setattr(sys.modules[Site.__module__], "PATHS", f"{folder}:{PATHS}")


OTHER = "import simkit\nsimkit.__version__ = '99.0'\n"


@pytest.mark.long
def test_other_versions_are_refused_before_anything_is_solved(site, tmp_path, monkeypatch):
    with monkeypatch.context() as patched:
        other_simkit(tmp_path / "other", patched, OTHER)
        here = Cluster.start(site)
    process = site.start(here.address)
    assert process.wait(timeout=120) == 1
    output = site.output(process)
    assert "nothing is solved, because not all workers are alike: worker tcp://" in output
    assert "simkit 99.0 instead of" in output
    assert not site.tries()
    here.close()


@pytest.mark.long
def test_a_worker_of_another_version_that_joins_gets_no_case(site, tmp_path, monkeypatch):
    here = Cluster.start(site)
    process = site.start(here.address)
    assert wait_for(lambda: site.settled()), site.output(process)
    with monkeypatch.context() as patched:
        other_simkit(tmp_path / "other", patched, OTHER)
        Cluster.worker(site, here.address)
    assert wait_for(lambda: "3 workers at" in site.output(process)), site.output(process)
    site.open_gate()
    process.wait(timeout=180)
    output = site.output(process)
    assert "stopped: no" in output
    assert "no block is given to worker tcp://" in output, output
    assert sum(site.tries().values()) == 40
    here.close()


@pytest.mark.long
def test_a_scheduler_that_dies_ends_the_run_with_a_sentence(site):
    here = Cluster.start(site)
    process = site.start(here.address)
    assert wait_for(lambda: site.settled()), site.output(process)
    kill(here.scheduler.pid)
    assert process.wait(timeout=180) == 1
    output = site.output(process)
    assert "the scheduler of the run is gone; what is stored is kept" in output
    assert "Traceback" not in output
    here.close()
