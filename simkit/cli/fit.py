"""``simkit fit``: uncertain values of a study from measured sweeps."""

from __future__ import annotations

import os
from collections.abc import Sequence
from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from simkit.cli.fitting import (
    fitted,
    measured_argument,
    options_of_fit,
    plots_folder,
    save,
)
from simkit.cli.folder import says_damage
from simkit.cli.options import csv_option, json_option, one_format, study_argument
from simkit.cli.output import csv_text, emit, json_text
from simkit.errors import StoreError

if TYPE_CHECKING:
    from simkit.measured.fit_result import FitResult
    from simkit.study import Study

FITTED_HEAD = "Fitted to "
"""How the first comment of every fitted study begins."""


@click.command()
@study_argument
@measured_argument
@options_of_fit
@json_option
@csv_option
@click.option(
    "-o",
    "--output",
    type=click.Path(dir_okay=False),
    metavar="FILE",
    help="Where to write the fitted study; STUDY_fitted.toml beside it if left out.",
)
@says_damage
def command(
    study: str,
    measured: tuple[str, ...],
    free: tuple[str, ...],
    known: tuple[str, ...],
    port: int | None,
    extension: str | None,
    pins: tuple[str, ...],
    to: str,
    results: str | None,
    plots: str | None,
    as_json: bool,
    as_csv: bool,
    output: str | None,
) -> None:
    """Fit named values of STUDY to MEASURED Touchstone files and write the fitted study.

    Prints each value with its 95 % interval and what the data cannot tell apart. `scale` stands
    for all dimensions alike. A value that is only --known is fitted within three of its widths.

    \b
    Example:
      simkit fit my_antenna.toml build_1.s1p --free carrier.permittivity=2..3.5 \\
          --known 'arm = 74.5 mm +- 0.1 mm'
    """
    form = one_format(as_json, as_csv)
    if not free and not known:
        raise click.UsageError(
            "nothing is free to fit: give --free NAME=LOW..HIGH at least once, as in "
            "--free carrier.permittivity=2..3.5"
        )
    target = Path(output) if output else Path(study).with_name(f"{Path(study).stem}_fitted.toml")
    check_target(target, study)
    from simkit.study import load_study

    loaded = load_study(study)
    check_rewritable(loaded, free, known)
    result = fitted(
        loaded,
        measured,
        free,
        known,
        port=port,
        extension=extension,
        pins=pins,
        to=to,
        results=results,
    )
    if form == "json":
        emit(json_text(as_data(result)))
    elif form == "csv":
        emit(csv_text(as_data(result)["values"]))
    else:
        emit(result.as_text())
    write_study(target, result.study_text())
    click.echo(f"written: {target}", err=True)
    folder = plots_folder(study, plots)
    from simkit.plot.fit import plot_fit, plot_fit_smith, plot_mode_ratios, plot_residuals

    for curve, stem in zip(result.curves, stems(result), strict=True):
        save(plot_fit(result, curve), folder, f"fit_{stem}.png")
        save(plot_fit_smith(result, curve), folder, f"fit_{stem}_smith.png")
        save(plot_residuals(result, curve), folder, f"fit_{stem}_residuals.png")
    save(plot_mode_ratios(result), folder, "fit_mode_ratios.png")


def check_target(target: Path, study: str) -> None:
    """Refuse to write over the study, or over anything that no fit has written."""
    if not target.exists():
        return
    if target.samefile(study):
        raise click.UsageError("-o names the study itself: give the fitted one another name.")
    try:
        first = target.read_text(encoding="utf-8").split("\n", 1)[0]
    except (OSError, UnicodeDecodeError):
        first = ""
    if not first.startswith(f"# {FITTED_HEAD}"):
        raise click.UsageError(
            f"{target} is there and was not written by a fit: move it away, or name another file "
            "with -o."
        )


def check_rewritable(study: Study, free: Sequence[str], known: Sequence[str]) -> None:
    """Refuse before anything is solved if the fitted values cannot be written into the study."""
    from simkit.measured.variation import Variation

    variation = Variation(study)
    names = [variation.bounds(text)[0] for text in free]
    names += [variation.known(text).name for text in known]
    variation.rewritten({name: variation.nominal(name) for name in names})


def write_study(target: Path, text: str) -> None:
    """Write the fitted study, whole or not at all."""
    aside = target.with_name(f".{target.name}.{os.getpid()}.part")
    try:
        aside.write_text(text, encoding="utf-8")
        os.replace(aside, target)
    except OSError as error:
        raise StoreError(
            f"{target}: the fitted study cannot be written: {error.strerror}; name another place "
            "with -o"
        ) from error
    finally:
        with suppress(OSError):
            aside.unlink(missing_ok=True)


def stems(result: FitResult) -> list[str]:
    """Names for the pictures of each file; files of one name get numbers."""
    plain = [curve.measurement.path.stem for curve in result.curves]
    return [
        f"{stem}_{plain[: k + 1].count(stem)}" if plain.count(stem) > 1 else stem
        for k, stem in enumerate(plain)
    ]


def as_data(result: FitResult) -> dict[str, Any]:
    """Everything of a fit as plain values, SI."""
    return {
        "values": [
            {
                "name": v.name,
                "study": v.nominal,
                "fitted": v.value,
                "low": v.low,
                "high": v.high,
                "standard_error": v.sigma,
                "at_bound": v.at_bound,
                "interval_is_bounds": all(v.is_cut),
            }
            for v in result.values
        ],
        "correlation": result.correlation.tolist(),
        "confounded": [
            {
                "values": [c.first, c.second],
                "correlation": c.correlation,
                "exponent": c.exponent,
                "product": c.product,
                "relative_standard_error": c.relative_sigma,
                "standard_errors_alone": list(c.alone_sigma),
                "times_narrower_if_one_is_known": c.times_narrower,
            }
            for c in result.confounded
        ],
        "rms_before": result.rms_before,
        "rms_after": result.rms_after,
        "interpolation_error": result.surrogate_error,
        "files": [
            {"file": str(c.measurement.path), "delay_s": c.errors.delay_s, "pairs": list(c.pairs)}
            for c in result.curves
        ],
        "notes": list(result.notes),
    }
