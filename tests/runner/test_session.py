"""Whole runs with the stand-in solver; most in this process to be quick, some with dask workers."""

from __future__ import annotations

import numpy as np
import pytest

from simkit.errors import SimkitError, StoreError, StudyError
from simkit.runner import InternalError, run
from simkit.runner.progress import QuietProgress
from simkit.store import open_results
from simkit.store.read import damaged_cases
from simkit.store.schema import VARIABLES, Status
from simkit.store.write import StoreFile

ARMS = [60, 64, 70, 75, 80]
WIDTHS = [8, 10, 12]


@pytest.fixture
def go(fake, tmp_path):
    """Run a study into ``out`` in this process, quietly, three cases a block."""

    def go(study, **choices):
        settings = {"workers": 1, "block_size": 3, "solver": fake, "progress": QuietProgress()}
        return run(study, tmp_path / "out", **settings | choices)

    return go


def log_of(summary):
    return (summary.results_dir / "log.txt").read_text()


def test_a_study_is_solved_by_dask_workers_and_kept(go, make_study, fake, marks, tmp_path):
    import fake_solver

    study = make_study(ARMS, WIDTHS)
    summary = go(study, workers=2)
    assert summary.counts == {s: 15 * (s is Status.SOLVED) for s in Status}
    assert (summary.reused, summary.solved, summary.stopped) == (0, 15, "")
    assert summary.ok
    assert summary.complete
    assert len(marks()) == 15
    # Dask has its workers give back what they free, which costs the engine's process a sixth.
    assert {mark.read_text() for mark in (tmp_path / "marks").iterdir()} == {""}
    assert summary.results_dir == tmp_path / "out" / "ford"
    assert (summary.results_dir / "study.toml").read_text() == study.text
    dataset = open_results(summary.results_dir)
    assert dataset.attrs["title"] == "Ford"
    assert dataset.attrs["reference_ohm"] == 50
    assert dataset.attrs["block_size"] == 3
    assert dataset["solves"].values.tolist() == [12] * 15
    for case in range(15):
        expected = fake_solver.numbers(float(dataset["arm"][case]), 11)
        for name, array in expected.items():
            kept = dataset[name][case].values
            assert np.array_equal(kept, array, equal_nan=array.dtype.kind in "fc"), name
    assert log_of(summary).count(" stored: 3 solved") == 5


def test_the_same_run_again_solves_nothing(go, direct, make_study, marks):
    study = make_study(ARMS, WIDTHS)
    go(study)
    again = go(study)
    assert (again.reused, again.solved) == (15, 0)
    assert len(marks()) == 15
    assert "15 reused from the earlier run, 0 to solve" in log_of(again)


def test_a_timed_first_case_sets_the_block_size_and_is_solved_once(go, direct, make_study, marks):
    summary = go(make_study(ARMS, WIDTHS), block_size=None)
    # The stand-in reports half a second a case: eight in four seconds, but three blocks or more.
    assert open_results(summary.results_dir).attrs["block_size"] == 5
    assert len(marks()) == 15


def test_bad_cases_are_marked_and_the_good_ones_solved(go, make_study):
    widths = [8, 3, 8, 5, 8, 7, 8, 9, 8, 8, 0]
    study = make_study(range(60, 71), widths, method="list")
    summary = go(study, workers=2, time_limit_s=2.0)
    dataset = open_results(summary.results_dir)
    expected = {1: Status.FAILED, 3: Status.FAILED, 5: Status.TIMED_OUT, 7: Status.FAILED}
    expected[10] = Status.REFUSED
    for case in range(11):
        assert dataset["status"][case] == expected.get(case, Status.SOLVED), case
        assert (str(dataset["reason"][case].values) == "") == (case not in expected)
        assert bool(np.isnan(dataset["x"][case]).all()) == (case in expected)
    reasons = [str(text) for text in dataset["reason"].values]
    assert "exit code 3" in reasons[1]
    assert "SIGSEGV" in reasons[3]
    assert "time limit of 2 s" in reasons[5]
    assert reasons[7] == "the matrix is singular"
    assert "width" in reasons[10]
    assert not summary.ok
    assert summary.complete
    assert "case 5 timed-out: stopped at the time limit" in log_of(summary)


@pytest.mark.long
def test_an_innocent_case_survives_the_loss_of_its_process(go, make_study, marks):
    """As when the system ends a process for want of memory that another one took."""
    assert go(make_study([60], [11])).ok
    assert marks() == ["0.060000"] * 2


def test_failed_cases_are_not_tried_again(go, make_study, marks):
    study = make_study([60, 61], [8, 9])
    go(study)
    assert go(study).reused == 4
    assert len(marks()) == 4


@pytest.mark.long
def test_failed_cases_are_tried_again_if_asked_for(go, make_study, marks, monkeypatch):
    study = make_study([60, 61], [8, 9, 0])
    first = go(study)
    assert first.counts[Status.FAILED] == first.counts[Status.REFUSED] == 2
    monkeypatch.setenv("FAKE_MENDED", "1")
    summary = go(study, retry=True)
    assert (summary.reused, summary.solved, summary.stopped) == (4, 2, "")
    assert summary.counts[Status.SOLVED] == 4
    assert len(marks()) == 6
    assert "4 reused from the earlier run, 2 to solve" in log_of(summary)
    dataset = open_results(summary.results_dir)
    assert [str(text) for text in dataset["reason"][[1, 4]].values] == ["", ""]
    assert np.isfinite(dataset["x"][[0, 1, 3, 4]]).all()
    assert go(study, retry=True).solved == 0


@pytest.mark.long
def test_what_fails_again_is_tried_once_a_run(go, make_study, marks):
    study = make_study([60, 61], [8, 9])
    go(study)
    summary = go(study, retry=True)
    assert (summary.reused, summary.solved) == (2, 2)
    assert summary.counts[Status.FAILED] == 2
    assert len(marks()) == 6


@pytest.mark.long
def test_failed_cases_of_an_earlier_study_are_not_taken_over_if_retried(go, make_study, marks):
    go(make_study([60, 61], [8, 9]))
    summary = go(make_study([60, 61, 62], [8, 9]), retry=True)
    assert (summary.reused, summary.solved) == (2, 4)


def test_at_the_hour_no_further_block_is_started(go, direct, make_study, marks, monkeypatch):
    from simkit.runner.stop import Deadline

    study = make_study(ARMS, WIDTHS)
    monkeypatch.setattr(Deadline, "passed", lambda self: len(marks()) > 3)
    summary = go(study, until="07:00")
    assert summary.stopped == "at 07:00, as asked"
    assert not summary.complete
    assert 4 <= len(marks()) == summary.solved < 15
    assert "stopping at 07:00, as asked: the blocks in hand are finished" in log_of(summary)
    monkeypatch.undo()
    with pytest.raises(SimkitError, match="an hour and a minute of the day"):
        go(study, until="seven")


def test_a_long_block_is_written_before_it_is_whole(go, direct, make_study, marks, monkeypatch):
    """A worker killed in it loses no more than came after."""
    monkeypatch.setattr("simkit.runner.work.CHECKPOINT_S", 0.0)
    written = []
    whole = StoreFile.write_block

    def note(self, block, content):
        whole(self, block, content)
        written.append(int(np.count_nonzero(content.arrays["status"])))
        if len(written) == 3:
            raise OSError(28, "No space left on device")

    monkeypatch.setattr(StoreFile, "write_block", note)
    study = make_study(range(60, 67))
    with pytest.raises(StoreError, match="No space left"):
        go(study, block_size=7)
    assert written == [1, 2, 3]
    monkeypatch.setattr(StoreFile, "write_block", whole)
    summary = go(study)
    assert (summary.reused, summary.solved) == (3, 4)
    assert len(marks()) == 7


def test_a_long_block_ends_early_when_the_run_is_stopping(
    go, direct, make_study, marks, monkeypatch
):
    monkeypatch.setattr("simkit.runner.work.CHECKPOINT_S", 0.0)
    monkeypatch.setattr("simkit.runner.work.may_start", lambda *_: len(marks()) < 3)
    study = make_study(range(60, 67))
    summary = go(study, block_size=7)
    assert not summary.complete
    assert summary.solved == 3
    assert "block 0 stored in part: 3 solved" in log_of(summary)
    monkeypatch.undo()


def test_a_bug_stops_the_run_with_a_traceback_and_keeps_what_is_stored(go, make_study):
    study = make_study(range(60, 69), [8] * 6 + [13, 8, 8], method="list")
    with pytest.raises(InternalError, match=r"case 6: KeyError.*error in simkit"):
        go(study)
    folder = study.path.parent / "out" / "ford"
    assert StoreFile(folder / "store.zarr").read_statuses().tolist() == [1] * 6 + [0] * 3
    log = (folder / "log.txt").read_text()
    assert "Traceback" in log
    assert "fake_solver.py" in log


@pytest.mark.parametrize("workers", [1, pytest.param(2, marks=pytest.mark.long)])
def test_arrays_that_do_not_fit_the_store_are_a_bug(go, make_study, workers):
    study = make_study([60, 61, 62, 63], [8, 8, 15, 8], method="list")
    with pytest.raises(InternalError, match=r"do not fit the store: case 2: x has shape \(8,\)"):
        go(study, workers=workers, block_size=2)


def test_without_any_layout_all_cases_are_refused(go, direct, make_study, fake, marks):
    import fake_solver

    solver = type(fake)(fake.function, fake_solver.no_mesh, fake.version)
    summary = go(make_study(ARMS), solver=solver, block_size=None)
    assert summary.counts[Status.REFUSED] == 5
    assert marks() == []
    reasons = open_results(summary.results_dir)["reason"].values
    assert set(map(str, reasons)) == {"nothing can be laid out"}


def test_a_study_without_any_sound_case_is_an_error(go, make_study, tmp_path):
    study = make_study(ARMS, [0])
    with pytest.raises(StudyError, match=r"ford\.toml: no case of the study resolves: .*width"):
        go(study)
    assert not (tmp_path / "out" / "ford" / "store.zarr").exists()


def test_a_full_disk_is_said_and_the_run_continues(go, direct, make_study, monkeypatch):
    study = make_study(ARMS)
    whole = StoreFile.write_block

    def full(self, block, content):
        if block == 1:
            raise OSError(28, "No space left on device")
        whole(self, block, content)

    monkeypatch.setattr(StoreFile, "write_block", full)
    with pytest.raises(StoreError, match=r"No space left on device\. 2 cases are stored and kept"):
        go(study, block_size=2)
    monkeypatch.setattr(StoreFile, "write_block", whole)
    summary = go(study)
    assert (summary.reused, summary.solved) == (2, 3)


def test_a_disk_too_small_is_said_before_anything_is_solved(
    go, direct, make_study, marks, monkeypatch
):
    usage = type("Usage", (), {"free": 1_000_000})
    monkeypatch.setattr("shutil.disk_usage", lambda path: usage)
    with pytest.raises(StoreError, match=r"needs about \d+ MB of disk .* only 1 MB are left"):
        go(make_study(ARMS))
    assert marks() == []


def test_a_disk_filling_up_stops_the_run_before_it_is_full(
    go, direct, make_study, monkeypatch, tmp_path
):
    store = tmp_path / "out" / "ford" / "store.zarr"

    def usage(path):
        filled = store.exists() and StoreFile(store).read_statuses().any()
        return type("Usage", (), {"free": 10**6 if filled else 10**9})

    monkeypatch.setattr("shutil.disk_usage", usage)
    with pytest.raises(StoreError, match=r"less than 50 MB .* free\. \d cases are stored"):
        go(make_study(range(60, 69)), block_size=1)
    monkeypatch.undo()
    # One block showed it, two more may have been in hand or waiting: those are finished.
    assert 1 <= np.count_nonzero(StoreFile(store).read_statuses()) <= 3


def test_a_folder_that_cannot_be_made_is_said(go, make_study, tmp_path):
    (tmp_path / "out").write_text("a file in the way")
    with pytest.raises(StoreError, match=r"results folder cannot be made: .*--results"):
        go(make_study(ARMS))


@pytest.mark.long
def test_a_torn_status_is_solved_anew(go, direct, make_study, marks):
    study = make_study(ARMS)
    summary = go(study, block_size=2)
    before = open_results(summary.results_dir).load()
    chunk = summary.results_dir / "store.zarr" / "status" / "c.1"
    chunk.write_bytes(b"torn")
    again = go(study)
    assert (again.reused, again.solved) == (3, 2)
    assert len(marks()) == 7
    assert before.identical(open_results(again.results_dir).load())


@pytest.mark.long
def test_a_case_lost_from_a_torn_block_is_solved_anew(go, direct, make_study):
    """A block with one waiting case whose data are damaged: all its cases are done again."""
    study = make_study(ARMS)
    summary = go(study, block_size=5)
    before = open_results(summary.results_dir).load()
    store = StoreFile(summary.results_dir / "store.zarr")
    codes = store.read_statuses()
    codes[3] = Status.WAITING
    store.array("status")[:] = codes
    (store.path / "gain" / "c.0.0.0.0").write_bytes(b"torn")
    again = go(study)
    assert again.complete
    assert before.identical(open_results(again.results_dir).load())


def test_damaged_results_are_solved_anew_on_request(go, direct, make_study, marks):
    study = make_study(ARMS)
    summary = go(study, block_size=2)
    before = open_results(summary.results_dir).load()
    assert damaged_cases(summary.results_dir) == []
    (summary.results_dir / "store.zarr" / "gain" / "c.1.0.0.0").write_bytes(b"torn")
    assert damaged_cases(summary.results_dir) == [range(2, 4)]
    assert go(study).solved == 0  # reading everything is left to those who ask for it
    again = go(study, retry=True)
    assert (again.reused, again.solved) == (3, 2)
    assert len(marks()) == 7
    assert before.identical(open_results(again.results_dir).load())
    assert "cases 2 to 3: damaged, solved anew" in again.results_dir.joinpath("log.txt").read_text()


def test_results_that_are_gone_are_solved_anew_on_request(go, direct, make_study):
    study = make_study(ARMS)
    summary = go(study, block_size=2)
    before = open_results(summary.results_dir).load()
    (summary.results_dir / "store.zarr" / "impedance" / "c.1.0").unlink()
    assert damaged_cases(summary.results_dir) == [range(2, 4)]
    assert go(study, retry=True).solved == 2
    assert before.identical(open_results(summary.results_dir).load())


def test_every_variable_of_a_refused_case_is_at_its_fill(go, direct, make_study):
    summary = go(make_study([60, 61], [8, 0], method="list"))
    case = open_results(summary.results_dir).isel(case=1).load()
    for name, variable in VARIABLES.items():
        if variable.dtype[0] in "fc" and name != "seconds":
            assert np.isnan(case[name]).all(), name
