"""``simkit compare``: measured sweeps beside the simulation, mode by mode."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, cast

import click

from simkit.cli.folder import build_of, drawing_folder, says_damage, study_of
from simkit.cli.options import case_option, csv_option, json_option, one_format, results_argument
from simkit.cli.output import csv_text, emit, json_text

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.figure import Figure

    from simkit.measured import Comparison, Measurement


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
    "--extension",
    metavar="DELAY",
    help="Move the reference plane towards the antenna: '120 ps', '35 mm' or '35 mm in 2.1'.",
)
@click.option(
    "--pin",
    "pins",
    multiple=True,
    metavar="MODE=FREQUENCY",
    help="The measured dip that is certainly of a mode: '3/2=2.81 GHz'; may be repeated.",
)
@click.option(
    "--natural",
    is_flag=True,
    help="Say more of the natural modes read from the sweep itself, with 95 % intervals.",
)
@click.option(
    "--nearest",
    is_flag=True,
    help="Rank the stored cases by how near they come, and draw the best five.",
)
@click.option(
    "-o",
    "--output",
    type=click.Path(dir_okay=False),
    metavar="FILE",
    help="Where to draw both curves; compare_MEASURED.png in DIR/plots if left out.",
)
@says_damage
def command(
    results: str,
    measured: tuple[str, ...],
    as_json: bool,
    as_csv: bool,
    case: int | None,
    port: int | None,
    extension: str | None,
    pins: tuple[str, ...],
    natural: bool,
    nearest: bool,
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
    from simkit.measured import asked, compare
    from simkit.store import open_results

    dataset = open_results(results)
    study = study_of(results)
    on_plane = study is not None and asked.stands(study)
    if nearest and natural:
        raise click.UsageError("--nearest ranks cases and reads no natural modes: choose one.")
    fixed = asked.pins_of(pins, on_plane=on_plane) if pins else {}
    files = asked.measurements(measured, port, extension)
    if nearest:
        _show_nearest(results, dataset, files, form, output)
        return
    found = [
        compare(dataset, file, case, build=build_of(study, file.path), pins=fixed) for file in files
    ]
    rows = [row for comparison in found for row in comparison.as_rows()]
    if form == "json":
        emit(json_text(rows))
    elif form == "csv":
        emit(csv_text(rows))
    else:
        emit("\n\n".join(_text(comparison, natural=natural) for comparison in found))
    seen: list[str] = []
    with drawing_folder(results, output) as folder:
        for comparison in found:
            path = Path(output) if output else overlay_path(folder, comparison)
            seen.append(path.stem)
            if seen.count(path.stem) > 1:  # repeats of one name, from several folders
                path = path.with_stem(f"{path.stem}_{seen.count(path.stem)}")
            path = save_overlay(comparison, path)
            click.echo(f"written: {path}", err=True)
            click.echo(f"written: {save_smith(comparison, path)}", err=True)


def _text(comparison: Comparison, *, natural: bool) -> str:
    if not natural:
        return comparison.as_text()
    from simkit.measured.wording import natural_text

    return f"{comparison.as_text()}\n{natural_text(comparison.natural)}"


def _show_nearest(
    results: str, dataset: xr.Dataset, files: list[Measurement], form: str, output: str | None
) -> None:
    """Table and picture of the stored cases that come nearest to each file."""
    from simkit.measured.nearest import nearest_cases
    from simkit.measured.wording import nearest_text
    from simkit.plot.nearest import plot_nearest
    from simkit.plot.save import write

    ranked = [nearest_cases(dataset, file) for file in files]
    rows = [
        {"file": str(file.path), "rank": rank + 1} | near.as_row()
        for file, cases in zip(files, ranked, strict=True)
        for rank, near in enumerate(cases)
    ]
    if form == "json":
        emit(json_text(rows))
    elif form == "csv":
        emit(csv_text(rows))
    else:
        emit(
            "\n\n".join(
                nearest_text(file, cases) for file, cases in zip(files, ranked, strict=True)
            )
        )
    reference = float(dataset.attrs.get("reference_ohm", 50.0))
    with drawing_folder(results, output) as folder:
        for file, cases in zip(files, ranked, strict=True):
            target = output or folder / "plots" / f"nearest_{file.path.stem}.png"
            axes = plot_nearest(file.renormalised(reference), cases)
            click.echo(f"written: {write(cast('Figure', axes.figure), target)}", err=True)


def overlay_path(results: str | Path, comparison: Comparison) -> Path:
    """Return where the picture of a comparison goes if nobody says."""
    return Path(results) / "plots" / f"compare_{comparison.measurement.path.stem}.png"


def save_overlay(comparison: Comparison, path: str | Path) -> Path:
    """Draw the measured and the simulated curve into a file."""
    from simkit.plot.overlay import plot_overlay
    from simkit.plot.save import write

    return write(cast("Figure", plot_overlay(comparison).figure), path)


def save_smith(comparison: Comparison, path: str | Path) -> Path:
    """Draw the same in a Smith chart, into a file beside the first, and return its name."""
    from simkit.plot.overlay import plot_overlay_smith
    from simkit.plot.save import write

    beside = Path(path).with_stem(f"{Path(path).stem}_smith")
    return write(cast("Figure", plot_overlay_smith(comparison).figure), beside)
