"""``simkit run``: solve a study, draw it, compare it with what was measured."""

from __future__ import annotations

import shutil
from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING

import click

from simkit.cli.folder import damage_said, drawing_folder
from simkit.cli.options import results_option, study_argument
from simkit.cli.output import labelled

if TYPE_CHECKING:
    import xarray as xr

    from simkit.runner import RunSummary
    from simkit.study import Study


@click.command()
@study_argument
@results_option
@click.option(
    "--workers", type=click.IntRange(min=1), metavar="N", help="Processes; one a core if left out."
)
@click.option("--fresh", is_flag=True, help="Solve every case again.")
@click.option(
    "--retry",
    is_flag=True,
    help="Solve the cases again that failed or were timed out, or whose results are damaged.",
)
@click.option(
    "--until",
    metavar="HH:MM",
    help="Start nothing new from this hour on; the same command goes on.",
)
@click.option(
    "--scheduler",
    metavar="ADDRESS",
    help="Use the workers of a dask cluster, tcp://host:port, in place of processes here.",
)
def command(
    study: str,
    results: str | None,
    workers: int | None,
    fresh: bool,
    retry: bool,
    until: str | None,
    scheduler: str | None,
) -> None:
    """Solve every case of STUDY, draw the plots, compare with the measured files it names.

    What is solved already is not solved again: after any interruption give the same command. The
    results are in results/NAME, NAME being that of the study file. Ctrl-C finishes what is in hand,
    Ctrl-C again stops at once. The exit status is 1 if a case has no solution or the run was
    stopped.

    \b
    Example:
      simkit run studies/creek_gauge.toml
      simkit run studies/creek_gauge.toml --until 07:00
      simkit run studies/creek_gauge.toml --scheduler tcp://192.168.1.20:8786
    """
    if scheduler is not None and workers is not None:
        raise click.UsageError("--workers is for processes here; a cluster has its own.")
    from simkit.runner import run
    from simkit.store import open_results
    from simkit.study import load_study

    loaded = load_study(study)
    summary = run(
        loaded,
        results=results,
        workers=workers,
        fresh=fresh,
        retry=retry,
        until=until,
        scheduler=scheduler,
    )
    trouble = False
    with damage_said(summary.results_dir):
        dataset = open_results(summary.results_dir)
        show_remarks(dataset, loaded)
        if summary.complete:
            with drawing_folder(summary.results_dir) as folder:
                keep_measured(loaded, folder)
                draw(dataset, loaded, folder)
                trouble = show_comparisons(dataset, loaded, folder)
    click.echo(end_text(summary, study))
    if trouble or not summary.ok or summary.stopped:
        raise click.exceptions.Exit(1)


def show_remarks(dataset: xr.Dataset, study: Study) -> None:
    """Print why some cases have no solution, or one to be doubted, and notes on the others."""
    from simkit.cli.status import notes_lines, remarked_cases, remarks_lines

    for line in [*remarks_lines(remarked_cases(dataset, study)), *notes_lines(dataset)]:
        click.echo(line)


def draw(dataset: xr.Dataset, study: Study, results: Path) -> None:
    """Write all pictures and say what each shows."""
    from simkit.plot import save_all

    click.echo("\nPlots")
    for path, about in save_all(dataset, results / "plots", study=study):
        click.echo(f"  {path}: {about}")


def keep_measured(study: Study, results: Path) -> None:
    """Copy the measured files the study names, so that a results folder can be moved."""
    from simkit.plot.save import MEASURED_FOLDER

    for file in study.measured:
        if not file.path.is_file():
            continue
        with suppress(OSError):
            copy = results / MEASURED_FOLDER / file.path.name
            copy.parent.mkdir(parents=True, exist_ok=True)
            shutil.copyfile(file.path, copy)


def show_comparisons(dataset: xr.Dataset, study: Study, results: Path) -> bool:
    """Compare with every measured file the study names; return whether one could not be used."""
    from simkit.cli.compare import overlay_path, save_overlay, save_smith
    from simkit.cli.folder import nominal_of
    from simkit.errors import SimkitError
    from simkit.measured import compare, read_touchstone

    trouble = False
    for file in study.measured:
        if not file.path.exists():
            click.echo(f"\n{file.path} is not there yet and is left out.", err=True)
            continue
        try:
            build = nominal_of(study) | file.build
            comparison = compare(dataset, read_touchstone(file.path), build=build)
        except SimkitError as error:
            click.echo(f"\nsimkit: {error}", err=True)
            trouble = True
            continue
        click.echo(f"\n{comparison.as_text()}")
        path = save_overlay(comparison, overlay_path(results, comparison))
        click.echo(f"  {path}: both curves")
        click.echo(f"  {save_smith(comparison, path)}: both in a Smith chart")
    return trouble


def end_text(summary: RunSummary, study: str) -> str:
    """Return counts per status, where everything is, and what to do next."""
    from simkit.store.schema import Status

    counts = ", ".join(f"{n} {status.label}" for status, n in summary.counts.items() if n)
    results = summary.results_dir
    lines = ["", labelled("Cases", f"{counts} ({summary.reused} reused)")]
    if summary.stopped or not summary.complete:
        why = f"stopped {summary.stopped}; the same command continues" if summary.stopped else ""
        return "\n".join([*lines, labelled("Next", why or f"simkit run {study} (continues)")])
    if unlucky := summary.counts[Status.FAILED] + summary.counts[Status.TIMED_OUT]:
        again = f"simkit run {study} --retry (solves {unlucky} failed or timed-out again)"
        lines.append(labelled("Again", again))
    return "\n".join(
        [
            *lines,
            labelled("Results", str(results)),
            labelled("Plots", f"{results}/plots"),
            labelled("Next", f"simkit modes {results}"),
        ]
    )
