"""``simkit status``: how far a run has come, and why some cases have no solution."""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING, Any

import click

from simkit.cli.folder import says_damage, study_of
from simkit.cli.options import csv_option, json_option, one_format, results_argument
from simkit.cli.output import csv_text, emit, json_text, table
from simkit.cli.study_lines import with_line
from simkit.errors import StudyError

if TYPE_CHECKING:
    import xarray as xr

    from simkit.runner.overview import RunStatus, StoreCounts
    from simkit.study import Study

_SHOWN = 20
_NOTES = 3


@click.command()
@results_argument
@json_option
@csv_option
@says_damage
def command(results: str, as_json: bool, as_csv: bool) -> None:
    """Count the cases in DIR by how they stand, and say why some have no solution.

    Works at any time, also while a run is going on: then it says who is running, how many cases a
    second, and about how long it will take.

    \b
    Example:
      simkit status results/creek_gauge
    """
    form = one_format(as_json, as_csv)
    from simkit.runner import status
    from simkit.runner.overview import status_lines
    from simkit.store import open_results

    state = status(results)
    remarks, notes = [], []
    if state.current is not None:
        dataset = open_results(results)
        remarks, notes = remarked_cases(dataset, _copied_study(results)), notes_lines(dataset)
    if form == "csv":
        emit(csv_text(remarks))
    elif form == "json":
        emit(json_text(status_row(state) | {"remarks": remarks}))
    else:
        emit("\n".join([*status_lines(state), *remarks_lines(remarks), *notes]))


def _copied_study(results: str) -> Study | None:
    """The study copied into a results folder; None if it is not there or no longer understood."""
    try:
        return study_of(results)
    except StudyError:
        return None


def status_row(state: RunStatus) -> dict[str, Any]:
    """Return the state of a results folder as plain data; a part that is not there is None."""
    current = state.current
    return {
        "title": current.title if current else None,
        "cases": current.cases if current else None,
        "counts": _counts(current),
        "unfinished": _counts(state.unfinished),
        "running": bool(state.running),
        "holder": state.running or None,
        "pace": state.pace or None,
        "last_event": state.last_event or None,
    }


def _counts(store: StoreCounts | None) -> dict[str, int] | None:
    return {code.label: n for code, n in store.counts.items()} if store is not None else None


def remarked_cases(dataset: xr.Dataset, study: Study | None = None) -> list[dict[str, Any]]:
    """Return case, status and reason of every settled case that is not simply solved.

    With the study, a reason that is about a strip or the feed ends with its line there.
    """
    from simkit.store.schema import Status

    columns = (dataset["case"].values, dataset["status"].values, dataset["reason"].values)
    return [
        {
            "case": int(case),
            "status": Status(int(code)).label,
            "reason": _with_line(str(reason), study, int(case)),
        }
        for case, code, reason in zip(*columns, strict=True)
        if code not in (Status.WAITING, Status.SOLVED)
    ]


def notes_lines(dataset: xr.Dataset) -> list[str]:
    """Return what is to be known of cases that are simply solved, each sentence once."""
    from simkit.store.schema import Status

    solved = dataset["status"].values == Status.SOLVED
    counts = Counter(str(reason) for reason in dataset["reason"].values[solved] if reason)
    lines = [
        f"note ({count} case{'s' if count > 1 else ''}): {reason}"
        for reason, count in counts.most_common(_NOTES)
    ]
    if len(counts) > _NOTES:
        lines.append(f"... and {len(counts) - _NOTES} more notes, in `reason` of the results")
    return ["", *lines] if lines else []


def _with_line(reason: str, study: Study | None, case: int) -> str:
    if study is None or case >= study.case_count:
        return reason
    return with_line(reason, study, study.case(case).antenna)


def remarks_lines(remarks: list[dict[str, Any]]) -> list[str]:
    """Return the same as a table, the first twenty of them."""
    if not remarks:
        return []
    rows = [[str(r["case"]), r["status"], r["reason"]] for r in remarks[:_SHOWN]]
    lines = ["", table(["case", "status", "reason"], rows)]
    if len(remarks) > _SHOWN:
        lines.append(f"... and {len(remarks) - _SHOWN} more: simkit status DIR --csv lists all")
    return lines
