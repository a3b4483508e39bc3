"""``simkit status``: how far a run has come."""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING, Any

import click

from simkit.cli.options import json_option, results_argument
from simkit.cli.output import duration_text, emit, json_text, table

if TYPE_CHECKING:
    import xarray as xr

_SHOWN_REASONS = 20


@click.command()
@results_argument
@json_option
def command(results: str, as_json: bool) -> None:
    """Count the cases in DIR by how they stand and say why some have no solution.

    Works while a run is going on.

    \b
    Example:
      simkit status results/creek_gauge
    """
    from simkit.store import open_results

    dataset = open_results(results)
    if as_json:
        emit(json_text(status_data(dataset)))
    else:
        emit(status_text(dataset, results))


def count_text(counts: dict[str, int]) -> str:
    """Return counts per status in one line, as in "9 solved, 1 refused"."""
    return ", ".join(f"{count} {label}" for label, count in counts.items() if count) or "no cases"


def status_data(dataset: xr.Dataset) -> dict[str, Any]:
    """Return title, counts per status, solves and time spent as plain data."""
    from simkit.store.schema import Status

    codes = [Status(int(code)) for code in dataset["status"].values]
    counts = Counter(codes)
    done = dataset["status"].values != int(Status.WAITING)
    return {
        "title": str(dataset.attrs.get("title", "")),
        "cases": len(codes),
        "counts": {status.label: counts[status] for status in Status},
        "solves": int(dataset["solves"].values[done].sum()),
        "seconds": float(dataset["seconds"].values[done].sum()),
        "unsolved": [
            {"case": int(case), "status": code.label, "reason": str(reason)}
            for case, code, reason in zip(
                dataset["case"].values, codes, dataset["reason"].values, strict=True
            )
            if code not in (Status.WAITING, Status.SOLVED)
        ],
    }


def status_text(dataset: xr.Dataset, results: str) -> str:
    """Return the same for people."""
    data = status_data(dataset)
    counts, unsolved = data["counts"], data["unsolved"]
    lines = [
        f"{data['title']}: {data['cases']} cases: {count_text(counts)}",
        f"{data['solves']} engine solves, {duration_text(data['seconds'])} of computing",
    ]
    if unsolved:
        shown = [[str(u["case"]), u["status"], u["reason"]] for u in unsolved[:_SHOWN_REASONS]]
        lines += ["", table(["case", "status", "reason"], shown)]
        if len(unsolved) > _SHOWN_REASONS:
            lines.append(f"... and {len(unsolved) - _SHOWN_REASONS} more: --json lists all")
    if counts.get("waiting"):
        lines += ["", "Waiting cases: give the same  simkit run  command again to continue."]
    else:
        lines += ["", f"Next: simkit modes {results}"]
    return "\n".join(lines)
