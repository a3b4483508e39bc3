"""What ``simkit list`` finds, also where things are damaged or of somebody else."""

from __future__ import annotations

import csv
import io
import json
import shutil
from datetime import datetime

import fsspec
import pytest
from click.testing import CliRunner

from simkit.cli import main
from simkit.errors import StoreError
from simkit.runner.listing import list_results
from simkit.runner.lock import RunLock
from simkit.store.schema import Status


@pytest.fixture
def results(creek_results, tmp_path):
    """``results/`` with one good folder in it."""
    parent = tmp_path / "results"
    shutil.copytree(creek_results, parent / "creek_gauge")
    (parent / "README.md").write_text("not a folder")
    return parent


def one(found, name):
    (entry,) = [entry for entry in found if entry.folder.name == name]
    return entry


def simkit(*words):
    return CliRunner().invoke(main, ["list", *map(str, words)])


def test_a_folder_of_results(results):
    (entry,) = list_results([results])
    (store,) = entry.stores
    assert entry.folder == results / "creek_gauge"
    assert (store.role, store.counts.title) == ("results", "Creek gauge, made up")
    assert store.counts.cases == 14
    assert store.counts.counts[Status.SOLVED] == 10
    assert store.counts.counts[Status.WAITING] == 2
    age = datetime.now().astimezone() - entry.written
    assert abs(age.total_seconds()) < 3600
    assert (entry.running, entry.problem, store.problem) == ("", "", "")


def test_a_results_folder_itself_may_be_named(results):
    assert [entry.folder.name for entry in list_results([results / "creek_gauge"])] == [
        "creek_gauge"
    ]


def test_who_runs_is_named_while_it_does(results):
    lock = RunLock(results / "creek_gauge")
    try:
        assert one(list_results([results]), "creek_gauge").running.startswith("process ")
    finally:
        lock.release()
    assert one(list_results([results]), "creek_gauge").running == ""


def test_a_first_run_that_prepares(results):
    (results / "night").mkdir()
    lock = RunLock(results / "night")
    try:
        entry = one(list_results([results]), "night")
        assert entry.running
        assert entry.problem == ""
        assert "preparing" in simkit(results).stdout
    finally:
        lock.release()


def test_stores_of_a_changed_study_are_shown_as_what_they_are(results):
    folder = results / "creek_gauge"
    for name in ("store.new.zarr", "store.left-1.zarr", "store.left-2.zarr"):
        shutil.copytree(folder / "store.zarr", folder / name)
    entry = one(list_results([results]), "creek_gauge")
    assert [store.role for store in entry.stores] == [
        "results",
        "unfinished",
        "set aside",
        "set aside",
    ]
    text = simkit(results).stdout
    assert text.count("set aside: 10 solved") == 2
    assert "unfinished: 10 solved" in text


DAMAGE = {
    "empty root": ("store.zarr/zarr.json", b"", "zarr.json is damaged"),
    "torn root": ("store.zarr/zarr.json", b'{"attributes": [', "zarr.json is damaged"),
    "list as root": ("store.zarr/zarr.json", b"[]", "zarr.json is damaged"),
    "foreign root": ("store.zarr/zarr.json", b'{"attributes": {}}', "not written by simkit"),
    "other version": (
        "store.zarr/zarr.json",
        b'{"attributes": {"store_version": 99}}',
        "store version 99",
    ),
    "no block size": ("store.zarr/zarr.json", b'{"attributes": {"store_version": 1}}', "damaged"),
    "torn array": ("store.zarr/status/zarr.json", b"{", "damaged"),
    "foreign array": ("store.zarr/status/zarr.json", b'{"shape": 3}', "damaged"),
    "torn status": ("store.zarr/status/c.1", b"x", "1 block is damaged"),
    "empty status": ("store.zarr/status/c.2", b"", "1 block is damaged"),
}


@pytest.mark.parametrize(("name", "content", "message"), DAMAGE.values(), ids=DAMAGE)
def test_what_is_damaged_is_listed_with_what_is_wrong(
    results, creek_results, name, content, message
):
    shutil.copytree(creek_results, results / "other")
    (results / "other" / name).write_bytes(content)
    entry = one(list_results([results]), "other")
    assert message in entry.stores[0].problem
    assert one(list_results([results]), "creek_gauge").stores[0].problem == ""
    done = simkit(results)
    assert done.exit_code == 0, done.output
    assert f"{results / 'other'}: " in done.stdout.splitlines()[-1]


@pytest.mark.parametrize("kind", ["empty", "files", "store is a file", "log alone"])
def test_foreign_folders_are_listed_as_such(results, kind):
    folder = results / "photos"
    folder.mkdir()
    if kind == "files":
        (folder / "mast.jpg").write_bytes(b"\xff\xd8")
    if kind == "store is a file":
        (folder / "store.zarr").write_text("hello")
    if kind == "log alone":
        (folder / "log.txt").write_text("no date here\n")
    entry = one(list_results([results]), "photos")
    said = entry.problem or entry.stores[0].problem
    assert said
    assert simkit(results).exit_code == 0


def test_a_folder_that_is_not_there(tmp_path):
    with pytest.raises(StoreError, match="there is no such folder"):
        list(list_results([tmp_path / "results"]))


def test_json_and_csv(results):
    (results / "photos").mkdir()
    shutil.copytree(
        results / "creek_gauge" / "store.zarr", results / "creek_gauge" / "store.left-1.zarr"
    )
    creek, photos = json.loads(simkit(results, "--json").stdout)
    assert creek["counts"]["refused"] == 1
    assert [other["store"] for other in creek["others"]] == ["set aside"]
    assert creek["problem"] is None
    assert photos["title"] is None
    assert photos["problem"].startswith("no results")
    rows = list(csv.DictReader(io.StringIO(simkit(results, "--csv").stdout)))
    assert [row["store"] for row in rows] == ["results", "set aside", ""]
    assert rows[0]["solved"] == "10"


def test_nothing_there_yet(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    none = simkit()
    assert none.exit_code == 1
    assert "simkit run STUDY" in none.stderr
    (tmp_path / "results").mkdir()
    assert "no results yet" in simkit().stdout


def test_results_at_an_address(results):
    system = fsspec.filesystem("memory")
    system.put(str(results), "/gauges", recursive=True)
    (results / "creek_gauge" / "log.txt").write_text("2026-06-01 07:00:00+02:00 done\n")
    system.put(str(results / "creek_gauge" / "log.txt"), "/gauges/creek_gauge/log.txt")
    try:
        (entry,) = list_results(["memory://gauges"])
        assert entry.stores[0].counts.counts[Status.SOLVED] == 10
        assert entry.written.isoformat() == "2026-06-01T07:00:00+02:00"
    finally:
        system.rm("/gauges", recursive=True)
