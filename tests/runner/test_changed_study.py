"""A study that was changed between two runs: what is taken over, and what stays meanwhile."""

from __future__ import annotations

import shutil

import numpy as np
import pytest

from simkit.errors import StoreError
from simkit.runner import run, status
from simkit.runner.overview import status_lines
from simkit.runner.prepare import Solver
from simkit.runner.progress import QuietProgress
from simkit.store import open_results
from simkit.store.schema import Status
from simkit.store.write import StoreFile
from simkit.study import load_study

pytestmark = pytest.mark.long


@pytest.fixture
def go(fake, direct, tmp_path):
    """Run a study in this process, quietly, two cases a block."""

    def go(study, **choices):
        settings = {"workers": 1, "block_size": 2, "solver": fake, "progress": QuietProgress()}
        return run(study, tmp_path / "out", **settings | choices)

    return go


@pytest.fixture
def break_after(monkeypatch):
    """Let a run fail as on a full disk after so many blocks; call with None to mend the disk."""
    whole = StoreFile.write_block
    left = {"blocks": None}

    def write_block(self, block, content):
        if left["blocks"] == 0:
            raise OSError(28, "No space left on device")
        if left["blocks"] is not None:
            left["blocks"] -= 1
        whole(self, block, content)

    monkeypatch.setattr(StoreFile, "write_block", write_block)
    return lambda blocks: left.update(blocks=blocks)


def arms_of(folder):
    return np.round(open_results(folder)["arm"].values * 1e3).tolist()


def names_in(folder):
    return sorted(path.name for path in folder.iterdir())


WHOLE = [".lock", ".writers", "log.txt", "store.zarr", "study.toml"]


def test_unchanged_cases_are_taken_over_and_the_rest_is_solved(go, make_study, marks):
    first = go(make_study([60, 64, 70]))
    before = open_results(first.results_dir).load()
    study = make_study([50, 70, 60, 90])
    summary = go(study)
    assert (summary.reused, summary.solved) == (2, 2)
    assert len(marks()) == 5
    assert arms_of(summary.results_dir) == [50, 70, 60, 90]
    after = open_results(summary.results_dir).load()
    for new, old in ((1, 2), (2, 0)):
        for name in before.data_vars:
            assert np.array_equal(
                after[name][new], before[name][old], equal_nan=before[name].dtype.kind in "fc"
            ), name
    assert names_in(summary.results_dir) == WHOLE
    assert (summary.results_dir / "study.toml").read_text() == study.text
    assert "2 taken over unchanged" in (summary.results_dir / "log.txt").read_text()


def test_another_text_for_the_same_cases_is_the_same_study(go, make_study, marks):
    study = make_study([60, 64])
    go(study)
    study.path.write_text("# as cut\n" + study.text.replace('"64 mm"', '"6.4 cm"'))
    changed = load_study(study.path)
    summary = go(changed)
    assert (summary.reused, summary.solved) == (2, 0)
    assert len(marks()) == 2
    assert (summary.results_dir / "study.toml").read_text() == changed.text


def test_the_old_store_stays_until_the_new_one_is_complete(
    go, make_study, marks, break_after, tmp_path
):
    go(make_study([60, 64, 70]))
    folder = tmp_path / "out" / "ford"
    changed = make_study([60, 71, 72, 73, 74])
    break_after(1)
    with pytest.raises(StoreError, match="2 cases are stored and kept"):
        go(changed)
    assert arms_of(folder) == [60, 64, 70]
    state = status(folder)
    assert state.current.cases == 3
    assert state.unfinished.counts[Status.SOLVED] == 2
    *lines, last = status_lines(state)
    assert "last event: " in last
    assert "stored and kept" in last
    assert lines == [
        "Ford: 3 cases: 3 solved",
        "being computed beside it: 5 cases: 3 waiting, 2 solved",
        "not running; `simkit run` with the same study continues and reuses 2 cases",
    ]
    break_after(None)
    summary = go(changed)
    assert (summary.reused, summary.solved) == (2, 3)
    tries = marks()
    assert [tries.count(f"0.{arm:03}000") for arm in (60, 64, 70, 71)] == [1] * 4
    assert arms_of(folder) == [60, 71, 72, 73, 74]
    assert names_in(folder) == WHOLE


def test_a_study_changed_again_half_way_uses_both_stores(go, make_study, break_after):
    go(make_study([60, 64]))
    break_after(1)
    with pytest.raises(StoreError, match="stored and kept"):
        go(make_study([71, 72, 73, 74]))
    break_after(None)
    summary = go(make_study([64, 72, 75]))
    assert (summary.reused, summary.solved) == (2, 1)
    assert names_in(summary.results_dir) == WHOLE


def test_going_back_to_the_old_study_finds_it_untouched(go, make_study, break_after, marks):
    go(make_study([60, 64]))
    break_after(0)
    with pytest.raises(StoreError, match="stored and kept"):
        go(make_study([71, 72]))
    break_after(None)
    assert go(make_study([60, 64])).reused == 2


def test_damaged_cases_are_not_taken_over(go, make_study, marks):
    first = go(make_study([60, 64, 70, 75]))
    chunk = first.results_dir / "store.zarr" / "gain" / "c.1.0.0.0"
    chunk.write_bytes(chunk.read_bytes()[:-5])
    summary = go(make_study([60, 70, 80]))
    assert (summary.reused, summary.solved) == (1, 2)
    assert np.isfinite(open_results(summary.results_dir)["x"].values).all()


def test_cases_whose_status_was_never_written_are_not_taken_over(go, make_study):
    """A run killed between the data and the status of a block."""
    first = go(make_study([60, 64, 70, 75]))
    (first.results_dir / "store.zarr" / "status" / "c.0").unlink()
    summary = go(make_study([60, 70, 80]))
    assert (summary.reused, summary.solved) == (1, 2)


def test_another_model_version_solves_all_anew_and_says_so(go, make_study, fake, marks):
    study = make_study([60, 64])
    go(study)
    newer = Solver(fake.function, fake.mesh, "test 2")
    summary = go(study, solver=newer)
    assert (summary.reused, summary.solved) == (0, 2)
    assert open_results(summary.results_dir).attrs["model_version"] == "test 2"
    log = (summary.results_dir / "log.txt").read_text()
    assert "earlier results are of model test, engine" in log
    assert "all is solved anew" in log


def test_fresh_solves_all_anew_beside_the_old_store(go, make_study, marks, break_after, tmp_path):
    study = make_study([60, 64, 70])
    go(study)
    break_after(1)
    with pytest.raises(StoreError, match="stored and kept"):
        go(study, fresh=True)
    assert status(tmp_path / "out" / "ford").current.waiting == 0
    break_after(None)
    summary = go(study)  # goes on with the fresh one
    assert (summary.reused, summary.solved) == (2, 1)
    assert names_in(summary.results_dir) == WHOLE


def test_another_title_is_refused_and_nothing_is_touched(go, make_study, tmp_path):
    summary = go(make_study([60]))
    store = summary.results_dir / "store.zarr"
    before = {p: p.stat().st_mtime_ns for p in summary.results_dir.rglob("*")}
    with pytest.raises(StoreError, match="results of another study, 'Ford'; this one is 'Weir'"):
        go(make_study([60], title="Weir"))
    with pytest.raises(StoreError, match="Nothing was changed"):
        go(make_study([60], title="Weir"), fresh=True)
    assert before == {p: p.stat().st_mtime_ns for p in summary.results_dir.rglob("*")}
    assert store.exists()


def test_a_damaged_store_is_refused_and_fresh_replaces_it(go, make_study):
    study = make_study([60, 64])
    summary = go(study)
    (summary.results_dir / "store.zarr" / "zarr.json").write_text("{")
    with pytest.raises(StoreError, match=r"zarr\.json is damaged.*--fresh"):
        go(study)
    assert go(study, fresh=True).solved == 2
    assert len(arms_of(summary.results_dir)) == 2


@pytest.mark.parametrize("moment", ["before the new one is moved", "after it is moved"])
def test_a_swap_broken_off_is_finished_by_the_next_run(go, make_study, marks, moment):
    study = make_study([60, 64])
    folder = go(study).results_dir
    store = folder / "store.zarr"
    shutil.copytree(store, folder / "store.old.zarr")
    (folder / "store.new.zarr.part").mkdir()
    (store / "gain" / "c.0.0.0.0123abc.partial").write_text("half")
    if moment == "before the new one is moved":
        store.rename(folder / "store.new.zarr")
    assert go(study).reused == 2
    assert names_in(folder) == WHOLE
