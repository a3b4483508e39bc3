"""``simkit export``: hand results on in a form other programs read."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from simkit.cli.folder import says_damage
from simkit.cli.options import results_argument

if TYPE_CHECKING:
    import xarray as xr

    from simkit.exports import Exported

FORMS = ("netcdf", "csv", "touchstone")


@click.command()
@results_argument
@click.option("--to", type=click.Choice(FORMS), required=True, help="Form to write.")
@click.option(
    "-o",
    "--output",
    type=click.Path(),
    required=True,
    metavar="PATH",
    help="File to write; for touchstone the folder for one file a case.",
)
@click.option(
    "--case",
    "cases",
    type=click.IntRange(min=0),
    multiple=True,
    metavar="N",
    help="Case number, from 0; may be repeated. All cases if left out.",
)
@click.option("--where", metavar="CONDITION", help="Cases to write, as for simkit query.")
@click.option("--curves", is_flag=True, help="csv: one row a case and frequency instead.")
@click.option(
    "--only", multiple=True, metavar="VARIABLE", help="netcdf: a variable; may be repeated."
)
@click.option("--overwrite", is_flag=True, help="Replace what is there.")
@says_damage
def command(
    results: str,
    to: str,
    output: str,
    cases: tuple[int, ...],
    where: str | None,
    curves: bool,
    only: tuple[str, ...],
    overwrite: bool,
) -> None:
    """Write the results in DIR in a form other programs read.

    netcdf: everything in one file, complex numbers as NAME_real and NAME_imag, up to 1 GB. csv: one
    row a case and mode, SI units, or with --curves impedance and reflection at every frequency.
    touchstone: one file a case, DIR_case_0007.s1p, with the swept values as comments; curves are at
    the connector.

    Nothing is overwritten unasked. Files are written aside and appear when they are whole.

    \b
    Example:
      simkit export results/creek_gauge --to csv -o creek_gauge_modes.csv
      simkit export results/creek_gauge --to touchstone -o for_the_bench --case 7
      simkit export results/creek_gauge --to netcdf -o creek.nc --where 'arm < 75 mm'
    """
    if cases and where is not None:
        raise click.UsageError("--case and --where exclude each other: give one of them.")
    if curves and to != "csv":
        raise click.UsageError(f"--curves belongs to --to csv; {to} has the curves in any case.")
    if only and to != "netcdf":
        raise click.UsageError(f"--only belongs to --to netcdf, not to {to}.")
    from simkit.cli.patience import patiently
    from simkit.exports import export, folder_name
    from simkit.store import open_results

    dataset = chosen(open_results(results), cases, where)
    try:
        with patiently(dataset.sizes["case"]) as seen:
            done = export(
                dataset,
                output,
                to,
                only=only,
                curves=curves,
                overwrite=overwrite,
                name=folder_name(results),
                seen=seen,
            )
    except KeyboardInterrupt:
        click.echo(f"\nstopped; nothing was written to {output}", err=True)
        raise click.exceptions.Exit(130) from None
    click.echo(done_text(done, to), err=True)


def chosen(dataset: xr.Dataset, cases: tuple[int, ...], where: str | None) -> xr.Dataset:
    """Return the cases asked for by number or by condition."""
    if where is not None:
        from simkit.finding import query

        return query(dataset, where)
    if not cases:
        return dataset
    known = set(dataset["case"].values.tolist())
    for case in cases:
        if case not in known:
            raise click.UsageError(
                f"--case {case}: these results hold the cases 0 to {max(known)}."
            )
    return dataset.sel(case=sorted(set(cases)))


def done_text(done: Exported, to: str) -> str:
    """Return what was written, and what was left out."""
    what = "1 case" if done.cases == 1 else f"{done.cases} cases"
    text = f"written: {done.path} ({what})"
    if done.left_out:
        few = "1 case without a solution is" if done.left_out == 1 else ""
        text += f"; {few or f'{done.left_out} cases without a solution are'} left out"
    if to == "touchstone" and done.cases > 1:
        text += "; one file a case"
    return text
