"""``simkit plot``: draw one picture."""

from __future__ import annotations

import click

from simkit.cli.folder import drawing_folder, says_damage, study_of
from simkit.cli.options import case_option, results_argument
from simkit.plot.kinds import KINDS

_WIDTH = max(map(len, KINDS)) + 2
_KINDS = "\n".join(f"  {kind.name:<{_WIDTH}}{kind.about}" for kind in KINDS.values())


@click.command(
    help=f"""Draw one picture of the results in DIR.

    \b
    KIND is one of
    {_KINDS.replace(chr(10), chr(10) + "    ")}

    Without --case the solved case nearest to the study's nominal values is drawn.

    \b
    Example:
      simkit plot results/creek_gauge current --case 2 -o current.svg
      simkit plot results/creek_gauge tracks --by arm
    """
)
@results_argument
@click.argument("kind", type=click.Choice(list(KINDS)), metavar="KIND")
@case_option
@click.option("--by", metavar="NAME", help="Swept value along the axis of tracks.")
@click.option(
    "-o",
    "--output",
    type=click.Path(dir_okay=False),
    metavar="FILE",
    help="File to write: .png, .svg or .pdf; in DIR/plots if left out.",
)
@says_damage
def command(results: str, kind: str, case: int | None, by: str | None, output: str | None) -> None:
    """Draw one picture; its help is put together from the list of kinds."""
    if case is not None and not KINDS[kind].of_one_case:
        raise click.UsageError(f"{kind} shows the whole sweep: leave --case out.")
    if by is not None and kind != "tracks":
        raise click.UsageError(f"--by belongs to tracks, not to {kind}: leave it out.")
    from simkit.plot import save_plot
    from simkit.store import open_results

    dataset = open_results(results)
    with drawing_folder(results, output) as folder:
        target = output or folder / "plots" / _file_name(kind, case, by)
        path = save_plot(dataset, kind, target, case=case, study=study_of(results), by=by)
        click.echo(f"written: {path}", err=True)


def _file_name(kind: str, case: int | None, by: str | None) -> str:
    parts = [kind, f"case_{case}" if case is not None else "", (by or "").replace(".", "_")]
    return "_".join(part for part in parts if part) + ".png"
