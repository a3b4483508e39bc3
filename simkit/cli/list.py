"""``simkit list``: what results there are."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from simkit.cli.options import RESULTS, csv_option, json_option, one_format
from simkit.cli.output import csv_text, emit, json_text, table

if TYPE_CHECKING:
    from simkit.runner.listing import FolderEntry, StoreEntry

Row = dict[str, Any]

_SETTLED = ("solved", "doubtful", "refused", "failed", "timed-out", "waiting")


@click.command()
@click.argument("folders", type=RESULTS, metavar="[FOLDER]...", nargs=-1)
@json_option
@csv_option
def command(folders: tuple[str, ...], as_json: bool, as_csv: bool) -> None:
    """List the results in FOLDER, results/ if left out: studies, cases, how they stand, when.

    A study that was changed since shows a second line for the store that will replace the results,
    and one for each store set aside for its cases. Folders that hold no results, or damaged ones,
    are listed with what is wrong.

    \b
    Example:
      simkit list
      simkit list results /shared/results --json
    """
    form = one_format(as_json, as_csv)
    from simkit.runner.listing import list_results

    found = list(list_results(list(folders) or ["results"]))
    if form == "json":
        emit(json_text([folder_row(entry) for entry in found]))
    elif form == "csv":
        emit(csv_text([row for entry in found for row in flat_rows(entry)]))
    elif found:
        emit(listing_text(found))
    else:
        emit("no results yet: simkit run STUDY makes some")


def folder_row(entry: FolderEntry) -> Row:
    """Return one folder as plain data; what is not known is None."""
    first = entry.stores[0] if entry.stores else None
    return {
        "folder": str(entry.folder),
        "title": _title(first),
        "cases": first.counts.cases if first and first.counts else None,
        "counts": _counts(first) if first and first.counts else None,
        "written": entry.written.isoformat(" ", "seconds") if entry.written else None,
        "running": entry.running or None,
        "problem": entry.problem or (first.problem if first else "") or None,
        "others": [
            {
                "store": store.role,
                "cases": store.counts.cases if store.counts else None,
                "counts": _counts(store) if store.counts else None,
                "problem": store.problem or None,
            }
            for store in entry.stores[1:]
        ],
    }


def flat_rows(entry: FolderEntry) -> list[Row]:
    """Return one row a store, one for a folder without any."""
    when = entry.written.isoformat(" ", "seconds") if entry.written else ""
    start = {"folder": str(entry.folder)}
    end = {"written": when, "running": entry.running}
    if not entry.stores:
        return [start | {"store": "", "title": "", "cases": ""} | end | {"problem": entry.problem}]
    return [
        start
        | {"store": store.role, "title": _title(store) or ""}
        | {"cases": store.counts.cases if store.counts else ""}
        | (_counts(store) if store.counts else {})
        | end
        | {"problem": store.problem}
        for store in entry.stores
    ]


def _title(store: StoreEntry | None) -> str | None:
    return store.counts.title if store is not None and store.counts is not None else None


def _counts(store: StoreEntry) -> dict[str, int]:
    assert store.counts is not None
    return {status.label: count for status, count in store.counts.counts.items()}


def listing_text(found: list[FolderEntry]) -> str:
    """Return the table for people, and below it what is wrong."""
    rows, wrong = [], []
    for entry in found:
        rows += _lines(entry)
        problems = [entry.problem, *(_problem(store) for store in entry.stores)]
        wrong += [f"{entry.folder}: {problem}" for problem in problems if problem]
    head = ["folder", "study", "cases", "how they stand", "last written", "running"]
    return "\n".join([table(head, rows), *([""] if wrong else []), *wrong])


def _problem(store: StoreEntry) -> str:
    if not store.problem or store.role == "results":
        return store.problem
    return f"{store.role} store: {store.problem}"


def _lines(entry: FolderEntry) -> list[list[str]]:
    when = entry.written.strftime("%Y-%m-%d %H:%M") if entry.written else ""
    folder = str(entry.folder)
    if not entry.stores:
        return [[folder, "-", "", "preparing" if entry.running else "-", when, entry.running]]
    lines: list[list[str]] = []
    for store in entry.stores:
        if store.role == "results" or not lines:
            start, end = [folder, _title(store) or "-"], [when, entry.running]
        else:
            start, end = ["", ""], ["", ""]
        stands = "cannot be read" if store.counts is None else _counts_text(store)
        role = "" if store.role == "results" else f"{store.role}: "
        cases = str(store.counts.cases) if store.counts else ""
        lines.append([*start, cases, role + stands, *end])
    return lines


def _counts_text(store: StoreEntry) -> str:
    counts = _counts(store)
    return ", ".join(f"{counts[label]} {label}" for label in _SETTLED if counts[label]) or "none"
