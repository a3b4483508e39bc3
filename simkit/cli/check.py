"""``simkit check``: say what was understood, what it will cost, and draw it."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, cast

import click

from simkit.cli.folder import drawing_folder
from simkit.cli.options import results_option, study_argument
from simkit.cli.output import labelled

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from simkit.geometry import WireGrid
    from simkit.study import Study
    from simkit.study.model import Antenna


@click.command()
@study_argument
@results_option
@click.option(
    "-o",
    "--output",
    type=click.Path(dir_okay=False),
    metavar="FILE",
    help="Where to draw the geometry; geometry.png in results/NAME/plots if left out.",
)
@click.option(
    "--converge",
    is_flag=True,
    help="Solve the nominal antenna on coarser and finer meshes too, and say what they change.",
)
def command(study: str, results: str | None, output: str | None, converge: bool) -> None:
    """Check STUDY, say what was understood, estimate time and disk, draw the geometry.

    Nothing is solved but one frequency sweep of the nominal antenna, to time it, and with
    --converge a few more to estimate the error of its mode frequencies. The exit status is 1 if a
    case of the sweep cannot be built.

    \b
    Example:
      simkit check studies/creek_gauge.toml
      simkit check studies/creek_gauge.toml --converge
    """
    from simkit.cli import summary
    from simkit.cli.study_lines import lines_named
    from simkit.geometry import build_wires
    from simkit.study import load_study

    loaded = load_study(study)
    click.echo(summary.study_text(loaded))
    with lines_named(loaded):
        plan = summary.mesh_of(loaded)
        problems = summary.case_problems(loaded, plan)
        looked_at = len(summary.looked_at(loaded))
        click.echo(summary.problems_text(problems, looked_at, loaded.case_count))
        shown, which = summary.shown_antenna(loaded, plan)
    wires = build_wires(shown, plan)
    click.echo(labelled("Shown below", which))
    click.echo(summary.wires_text(wires, plan))
    title = f"{loaded.title}: {which}"
    click.echo(labelled("Drawing", str(draw(loaded, shown, wires, title, results, output))))
    click.echo(summary.cost_text(loaded, wires, summary.timed_solve(shown, plan)))
    if converge:
        click.echo(f"\nConvergence\n{summary.convergence_text(summary.refine(shown, plan))}")
    if problems:
        raise click.exceptions.Exit(1)
    click.echo(f"\nNext: simkit run {study}")


def draw(
    study: Study,
    antenna: Antenna,
    wires: WireGrid,
    title: str,
    results: str | None,
    output: str | None,
) -> Path:
    """Draw an antenna where the run will put its plots, or into a file of its own.

    Raises
    ------
    StoreError
        If the results folder belongs to another study.
    """
    from simkit.plot import plot_geometry
    from simkit.plot.save import write
    from simkit.runner.folder import ResultsFolder
    from simkit.store.remote import place

    there = place(results or "results") / study.path.stem
    if output is None:
        ResultsFolder(there).check_title(study.title, fresh=False)
    axes = plot_geometry(antenna, wires, title=title)
    with drawing_folder(there, output) as folder:
        return write(cast("Figure", axes.figure), output or folder / "plots" / "geometry.png")
