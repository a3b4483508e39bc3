"""``simkit compare``: measured sweeps beside the simulation, mode by mode."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, cast

import click

from simkit.cli.folder import build_of, study_of
from simkit.cli.options import case_option, csv_option, json_option, one_format, results_argument
from simkit.cli.output import csv_text, emit, json_text

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from simkit.measured import Comparison


@click.command()
@results_argument
@click.argument("measured", nargs=-1, required=True, type=click.Path(exists=True, dir_okay=False))
@json_option
@csv_option
@case_option
@click.option(
    "--port", type=click.IntRange(min=1), metavar="N", help="Port to read of a file with several."
)
@click.option(
    "-o",
    "--output",
    type=click.Path(dir_okay=False),
    metavar="FILE",
    help="Where to draw both curves; compare_MEASURED.png in DIR/plots if left out.",
)
def command(
    results: str,
    measured: tuple[str, ...],
    as_json: bool,
    as_csv: bool,
    case: int | None,
    port: int | None,
    output: str | None,
) -> None:
    """Set MEASURED one-port Touchstone files beside the results in DIR: one line per mode.

    A file the study names is compared with the case nearest to its build; any other with the case
    whose dips fit best, unless --case says which.

    \b
    Example:
      simkit compare results/creek_gauge studies/creek_gauge_build_1.s1p
    """
    form = one_format(as_json, as_csv)
    if output is not None and len(measured) > 1:
        raise click.UsageError("-o names one picture: give one measured file, or leave -o out.")
    from simkit.measured import compare, read_touchstone
    from simkit.store import open_results

    dataset = open_results(results)
    study = study_of(results)
    found = [
        compare(dataset, read_touchstone(path, port), case, build=build_of(study, path))
        for path in measured
    ]
    rows = [row for comparison in found for row in comparison.as_rows()]
    if form == "json":
        emit(json_text(rows))
    elif form == "csv":
        emit(csv_text(rows))
    else:
        emit("\n\n".join(comparison.as_text() for comparison in found))
    for comparison in found:
        path = save_overlay(comparison, output or overlay_path(results, comparison))
        click.echo(f"written: {path}", err=True)


def overlay_path(results: str | Path, comparison: Comparison) -> Path:
    """Return where the picture of a comparison goes if nobody says."""
    return Path(results) / "plots" / f"compare_{comparison.measurement.path.stem}.png"


def save_overlay(comparison: Comparison, path: str | Path) -> Path:
    """Draw the measured and the simulated curve into a file."""
    from simkit.plot.overlay import plot_overlay
    from simkit.plot.save import write

    return write(cast("Figure", plot_overlay(comparison).figure), path)
