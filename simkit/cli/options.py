"""Arguments and options several commands share."""

from __future__ import annotations

from typing import Any

import click


class PathOrAddress(click.Path):
    """A path as click checks it, or an fsspec address (``s3://bucket/folder``) as it stands."""

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Any:
        """Return the text; only paths can be checked."""
        if isinstance(value, str) and "://" in value:
            return value
        return super().convert(value, param, ctx)


STUDY = click.Path(exists=True, dir_okay=False)
RESULTS = PathOrAddress(exists=True, file_okay=False)

study_argument = click.argument("study", type=STUDY, metavar="STUDY")
results_argument = click.argument("results", type=RESULTS, metavar="DIR")
results_option = click.option(
    "--results",
    type=PathOrAddress(file_okay=False),
    metavar="DIR",
    help="Folder, or address as s3://bucket/folder, that holds the results folders; results/ if "
    "left out.",
)
json_option = click.option("--json", "as_json", is_flag=True, help="Print JSON, SI units.")
csv_option = click.option("--csv", "as_csv", is_flag=True, help="Print CSV, SI units.")
case_option = click.option(
    "--case", "case", type=click.IntRange(min=0), metavar="N", help="Case number, from 0."
)


def one_format(as_json: bool, as_csv: bool) -> str:
    """Return "json", "csv" or "text"; asking for two at once is an error of usage."""
    if as_json and as_csv:
        raise click.UsageError("--json and --csv exclude each other: give one of them.")
    return "json" if as_json else "csv" if as_csv else "text"
