"""``simkit check``: say what was understood, what it will cost, and draw it."""

from __future__ import annotations

from pathlib import Path

import click

from simkit.cli.options import study_argument


@click.command()
@study_argument
@click.option(
    "-o",
    "--output",
    type=click.Path(dir_okay=False),
    metavar="FILE",
    help="Where to draw the geometry; NAME_geometry.png in this folder if left out.",
)
def command(study: str, output: str | None) -> None:
    """Check STUDY, say what was understood, estimate time and disk, draw the geometry.

    Nothing is solved but one frequency sweep of the nominal antenna, to time it. The exit status
    is 1 if a case of the sweep cannot be built.

    \b
    Example:
      simkit check studies/creek_gauge.toml
    """
    from simkit.cli import summary
    from simkit.geometry import build_wires
    from simkit.plot import plot_geometry
    from simkit.study import load_study

    loaded = load_study(study)
    click.echo(summary.study_text(loaded))
    plan = summary.mesh_of(loaded)
    problems = summary.case_problems(loaded, plan)
    click.echo(summary.problems_text(problems, loaded.case_count))
    nominal = loaded.nominal()
    wires = build_wires(nominal, plan)
    click.echo(summary.wires_text(wires, nominal))
    target = output or f"{Path(study).stem}_geometry.png"
    plot_geometry(nominal, wires, title=loaded.title).figure.savefig(target)
    click.echo(summary.labelled("Drawing", target))
    click.echo(summary.cost_text(loaded, wires, summary.timed_solve(nominal, plan)))
    if problems:
        raise click.exceptions.Exit(1)
    click.echo(f"\nNext: simkit run {study}")
