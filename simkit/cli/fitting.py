"""Options and steps that ``simkit fit`` and ``simkit trim`` share."""

from __future__ import annotations

import sys
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, cast

import click

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from simkit.measured.fit_result import FitResult
    from simkit.measured.variation import Variation
    from simkit.study import Study

Decorator = Callable[[Callable[..., None]], Callable[..., None]]

measured_argument = click.argument(
    "measured", nargs=-1, required=True, type=click.Path(exists=True, dir_okay=False)
)
port_option = click.option(
    "--port", type=click.IntRange(min=1), metavar="N", help="Port to read of a file with several."
)
extension_option = click.option(
    "--extension",
    metavar="DELAY",
    help="Move the reference plane towards the antenna: '120 ps', '35 mm' or '35 mm in 2.1'.",
)
pin_option = click.option(
    "--pin",
    "pins",
    multiple=True,
    metavar="MODE=FREQUENCY",
    help="The measured dip that is certainly of a mode: '3/2=2.81 GHz'; may be repeated.",
)
free_option = click.option(
    "--free",
    "free",
    multiple=True,
    metavar="NAME=LOW..HIGH",
    help="A value to fit and its bounds: carrier.permittivity=2..3.5; may be repeated.",
)
known_option = click.option(
    "--known",
    "known",
    multiple=True,
    metavar="'NAME=VALUE +- WIDTH'",
    help="What is known of a value, 95 %: 'arm = 74.5 mm +- 0.1 mm'; may be repeated.",
)
to_option = click.option(
    "--to",
    type=click.Choice(["complex", "magnitude", "features"]),
    default="complex",
    show_default=True,
    help="Fit the complex reflection, its magnitude, or the dips of the modes alone.",
)
stored_option = click.option(
    "--results",
    type=click.Path(exists=True, file_okay=False),
    metavar="DIR",
    help="Interpolate the stored sweep in DIR instead of solving; it must cover the bounds.",
)
plots_option = click.option(
    "--plots",
    type=click.Path(file_okay=False),
    metavar="DIR",
    help="Folder for the pictures; plots/ beside the study if left out.",
)


def options_of_fit(function: Callable[..., None]) -> Callable[..., None]:
    """Add the options both commands take."""
    for option in (
        plots_option,
        stored_option,
        to_option,
        pin_option,
        extension_option,
        port_option,
        known_option,
        free_option,
    ):
        function = option(function)
    return function


def fitted(
    study: Study,
    measured: Sequence[str],
    free: Sequence[str],
    known: Sequence[str],
    *,
    port: int | None,
    extension: str | None,
    pins: Sequence[str],
    to: str,
    also: dict[str, tuple[float, float]] | None = None,
    results: str | None = None,
) -> FitResult:
    """Read the files and fit, with a line of progress on standard error."""
    from simkit.measured import asked
    from simkit.measured.fit import fit
    from simkit.measured.variation import Variation

    variation = Variation(study)
    files = asked.measurements(measured, port, extension)
    fixed = asked.pins_of(pins, on_plane=asked.stands(study)) if pins else {}
    bounds = dict(variation.bounds(text) for text in free)
    beliefs = [variation.known(text) for text in known]
    surrogate = None
    if results is not None:
        from simkit.measured.stored import surrogate_of_results
        from simkit.store import open_results

        stored = open_results(results)
        needed = {k.name: k.bounds for k in beliefs} | bounds | (also or {})
        builds = [asked.build_in(study, file) for file in files]
        needed = _held(variation, stored, builds) | needed
        surrogate = surrogate_of_results(stored, needed, variation)
    return fit(
        study,
        files,
        bounds,
        known=beliefs,
        surrogate=surrogate,
        to=cast("Any", to),
        builds=[asked.build_in(study, file) for file in files],
        pins=[fixed] * len(files),
        also=also,
        progress=_progress,
    )


def _held(
    variation: Variation, stored: xr.Dataset, builds: Sequence[dict[str, float]]
) -> dict[str, tuple[float, float]]:
    """Where the swept values of a store are needed if nobody frees them: at the builds' values."""
    from simkit.store.read import swept_names

    known = variation.names()
    found = {}
    for name in swept_names(stored):
        if name in known:
            values = [build.get(name, variation.nominal(name)) for build in builds]
            found[name] = (min(values), max(values))
    return found


def _progress(done: int, total: int) -> None:
    if sys.stderr.isatty():
        click.echo(
            f"\rsolving {done} of {total} points over the bounds", nl=done == total, err=True
        )


def save(axes: Axes, folder: Path, name: str) -> None:
    """Write the figure of some axes and say so."""
    from simkit.plot.save import write

    path = write(cast("Figure", axes.figure), folder / name)
    click.echo(f"written: {path}", err=True)


def plots_folder(study: str, plots: str | None) -> Path:
    """Return the folder for pictures."""
    return Path(plots) if plots is not None else Path(study).parent / "plots"
