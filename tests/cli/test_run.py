"""Options of `simkit run` and what `simkit status` says while a run goes on."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import fsspec
import pytest

from simkit.cli.folder import drawing_folder
from simkit.cli.run import end_text
from simkit.runner import RunStatus, RunSummary
from simkit.runner.lock import take_lock
from simkit.runner.overview import StoreCounts, status_lines
from simkit.store.remote import place
from simkit.store.schema import Status

from .hook import Session


def test_a_cluster_has_its_own_workers(session: Session) -> None:
    words = ("run", session.study, "--workers", "2", "--scheduler", "tcp://127.0.0.1:1")
    result = session.simkit(*words)
    assert result.exit_code == 2
    assert "--workers is for processes here" in result.output


def test_an_hour_that_is_none_is_said_before_anything_is_done(
    session: Session, tmp_path: Path
) -> None:
    out = tmp_path / "out"
    result = session.simkit("run", session.study, "--results", out, "--until", "25:00")
    assert result.exit_code == 1
    assert "write an hour and a minute of the day" in result.stderr
    assert not out.exists()


def test_retry_leaves_refused_cases_alone(session: Session) -> None:
    words = ("run", session.study, "--results", session.results.parent, "--workers", "1")
    result = session.simkit(*words, "--retry")
    assert "3 reused from the earlier run, 0 to solve" in result.stderr


def test_cases_without_luck_are_offered_another_try(tmp_path: Path) -> None:
    counts = dict.fromkeys(Status, 0) | {Status.SOLVED: 3, Status.FAILED: 2, Status.TIMED_OUT: 1}
    summary = RunSummary(counts, reused=0, solved=6, results_dir=tmp_path, seconds=1.0)
    assert "simkit run hook.toml --retry (solves 3 failed" in end_text(summary, "hook.toml")
    state = RunStatus(tmp_path, StoreCounts("Hook", 6, counts), None, "")
    assert "`simkit run` with --retry solves 3 failed or timed-out again" in status_lines(state)
    calm = summary.counts | {Status.FAILED: 0, Status.TIMED_OUT: 0}
    assert "--retry" not in end_text(replace(summary, counts=calm), "hook.toml")


def test_status_before_anything_is_stored(session: Session, tmp_path: Path) -> None:
    lock = take_lock(tmp_path)
    try:
        lock.note({"per_second": 12.5, "left_s": 400.0})
        text = session.simkit("status", tmp_path).output
        row = json.loads(session.simkit("status", tmp_path, "--json").stdout)
    finally:
        lock.release()
    assert "the first run is preparing; nothing is stored yet" in text
    assert "running now: process " in text
    assert "12.5 cases a second, about 6 min 40 s left" in text
    assert row["running"] is True
    assert row["counts"] is None
    assert session.simkit("status", tmp_path).exit_code == 1


def test_pictures_for_an_address_are_sent_there(capsys: pytest.CaptureFixture[str]) -> None:
    results = place("memory://pictures/hook")
    with drawing_folder(results) as folder:
        (folder / "plots").mkdir()
        (folder / "plots" / "geometry.png").write_bytes(b"picture")
    assert fsspec.filesystem("memory").cat("/pictures/hook/plots/geometry.png") == b"picture"
    assert "sent to memory://pictures/hook" in capsys.readouterr().err
    fsspec.filesystem("memory").rm("/pictures", recursive=True)


def test_results_at_an_address_are_read_by_every_command(
    session: Session, measured: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    there = place("memory://reading/hook")
    there.upload_tree(session.results)  # type: ignore[union-attr]
    for words in (("status",), ("modes", "--json")):
        one = session.simkit(words[0], session.results, *words[1:])
        other = session.simkit(words[0], "memory://reading/hook", *words[1:])
        assert other.exit_code == 0, other.output
        assert other.stdout == one.stdout
    system = fsspec.filesystem("memory")
    drawn = session.simkit("plot", "memory://reading/hook", "geometry", "--case", "0")
    assert drawn.exit_code == 0, drawn.output
    assert system.cat("/reading/hook/plots/geometry_case_0.png").startswith(b"\x89PNG")
    for words in (
        ("check", session.study, "--results", "memory://reading"),
        ("compare", "memory://reading/hook", measured),
        ("compare", "memory://reading/hook", measured, "--nearest"),
    ):
        done = session.simkit(*words)
        assert done.exit_code in (0, 1), done.output  # 1: a case of the study cannot be built
        assert "sent to memory://reading/hook" in done.stderr
    assert system.exists("/reading/hook/plots/compare_hook_build.png")
    assert not (tmp_path / "memory:").exists()
    fsspec.filesystem("memory").rm("/reading", recursive=True)
