"""Notes of solved cases: each sentence once, with the number of cases it holds for."""

from __future__ import annotations

import xarray as xr

from simkit.cli.status import notes_lines
from simkit.store.schema import Status


def cases(*rows: tuple[Status, str]) -> xr.Dataset:
    return xr.Dataset(
        {
            "status": ("case", [int(status) for status, _ in rows]),
            "reason": ("case", [reason for _, reason in rows]),
        }
    )


def test_notes_are_of_solved_cases_only_and_said_once() -> None:
    dataset = cases(
        (Status.SOLVED, "far"), (Status.DOUBTFUL, "bad"), (Status.SOLVED, ""),
        (Status.SOLVED, "near"), (Status.SOLVED, "far"), (Status.WAITING, ""),
    )  # fmt: skip
    assert notes_lines(dataset) == ["", "note (2 cases): far", "note (1 case): near"]


def test_no_notes_no_lines() -> None:
    assert notes_lines(cases((Status.SOLVED, ""), (Status.REFUSED, "bad"))) == []


def test_many_notes_are_cut() -> None:
    lines = notes_lines(cases(*((Status.SOLVED, f"note {n}") for n in range(5))))
    assert len(lines) == 5
    assert lines[-1] == "... and 2 more notes, in `reason` of the results"
