"""``simkit status``: how far a run has come, and why some cases have no solution."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from simkit.cli.options import csv_option, json_option, one_format, results_argument
from simkit.cli.output import csv_text, emit, json_text, table

if TYPE_CHECKING:
    import xarray as xr

_SHOWN = 20


@click.command()
@results_argument
@json_option
@csv_option
def command(results: str, as_json: bool, as_csv: bool) -> None:
    """Count the cases in DIR by how they stand, and say why some have no solution.

    Works while a run is going on.

    \b
    Example:
      simkit status results/creek_gauge
    """
    form = one_format(as_json, as_csv)
    from simkit.runner import status
    from simkit.runner.overview import status_lines
    from simkit.store import open_results

    state = status(results)
    dataset = open_results(results)
    remarks = remarked_cases(dataset)
    if form == "csv":
        emit(csv_text(remarks))
    elif form == "json":
        current = state.current
        emit(
            json_text(
                {
                    "title": current.title,
                    "cases": current.cases,
                    "counts": {code.label: count for code, count in current.counts.items()},
                    "running": bool(state.running),
                    "remarks": remarks,
                }
            )
        )
    else:
        emit("\n".join([*status_lines(state), *remarks_lines(remarks)]))


def remarked_cases(dataset: xr.Dataset) -> list[dict[str, Any]]:
    """Return case, status and reason of every settled case that is not simply solved."""
    from simkit.store.schema import Status

    columns = (dataset["case"].values, dataset["status"].values, dataset["reason"].values)
    return [
        {"case": int(case), "status": Status(int(code)).label, "reason": str(reason)}
        for case, code, reason in zip(*columns, strict=True)
        if code not in (Status.WAITING, Status.SOLVED)
    ]


def remarks_lines(remarks: list[dict[str, Any]]) -> list[str]:
    """Return the same as a table, the first twenty of them."""
    if not remarks:
        return []
    rows = [[str(r["case"]), r["status"], r["reason"]] for r in remarks[:_SHOWN]]
    lines = ["", table(["case", "status", "reason"], rows)]
    if len(remarks) > _SHOWN:
        lines.append(f"... and {len(remarks) - _SHOWN} more: simkit status DIR --csv lists all")
    return lines
