"""``simkit trim``: how many millimetres to cut."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from simkit.cli.fitting import fitted, measured_argument, options_of_fit, plots_folder, save
from simkit.cli.options import csv_option, json_option, one_format, study_argument
from simkit.cli.output import csv_text, emit, json_text

if TYPE_CHECKING:
    from simkit.measured.trim import Trim
    from simkit.measured.variation import Variation

REACH = 0.1
"""A dimension without stated reach may change by this part of itself."""

DEFAULT_SCALE = "scale=0.93..1.07"


@click.command()
@study_argument
@measured_argument
@click.option("--mode", required=True, metavar="MODE", help="Mode to aim with: 1/2, 1, 3/2 ...")
@click.option(
    "--target",
    required=True,
    metavar="FREQUENCY",
    help="Where its dip shall be: '868 MHz', or a band '863 MHz..870 MHz'.",
)
@click.option(
    "--by",
    "by",
    multiple=True,
    required=True,
    metavar="NAME[=LOW..HIGH]",
    help="Dimension to change, with its reach; may be repeated for a choice.",
)
@options_of_fit
@json_option
@csv_option
def command(
    study: str,
    measured: tuple[str, ...],
    mode: str,
    target: str,
    by: tuple[str, ...],
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
) -> None:
    """Say how far to change a dimension of the build behind MEASURED to move a mode's dip.

    The study is fitted to the measurement first (--free, --known; the overall scale if neither is
    given), then the change follows from the fitted model, with its interval, beside the one from
    plain scaling. The last file's build is the one to be cut.

    \b
    Example:
      simkit trim my_antenna.toml build_1.s1p --mode 1/2 --target '868 MHz' --by arm \\
          --free carrier.permittivity=2..3.5
    """
    form = one_format(as_json, as_csv)
    from simkit.measured import asked
    from simkit.measured.trim import trim_fitted, with_gain
    from simkit.measured.variation import Variation
    from simkit.plot.trim import plot_trim
    from simkit.study import load_study

    loaded = load_study(study)
    variation = Variation(loaded)
    low, high = asked.band_hz("--target", target)
    half_waves = asked.half_waves_of(mode, on_plane=asked.stands(loaded))
    reaches = dict(_reach(variation, text) for text in by)
    result = fitted(
        loaded,
        measured,
        free or (() if known else (DEFAULT_SCALE,)),
        known,
        port=port,
        extension=extension,
        pins=pins,
        to=to,
        also=reaches,
        results=results,
    )
    middle = (low * high) ** 0.5
    trims = [
        with_gain(result, trim_fitted(result, half_waves, middle, name, reach, band_hz=(low, high)))
        for name, reach in reaches.items()
    ]
    if form == "json":
        emit(json_text([as_data(trim) for trim in trims]))
    elif form == "csv":
        emit(csv_text([as_data(trim) | {"modes": None} for trim in trims]))
    else:
        from simkit.measured.trim_words import factor_lines

        emit(
            "\n\n".join(
                [
                    result.as_text(),
                    *(trim.as_text() for trim in trims),
                    "for your own dimensioning sheet:\n" + "\n".join(factor_lines(trims)),
                ]
            )
        )
    for trim in trims:
        name = f"trim_{trim.name.replace('.', '_')}.png"
        save(plot_trim(trim), plots_folder(study, plots), name)


def _reach(variation: Variation, text: str) -> tuple[str, tuple[float, float]]:
    if "=" in text:
        return variation.bounds(text)
    name = variation.check(text.strip())
    present = variation.nominal(name)
    if not present:
        raise click.UsageError(
            f"--by {name}: it is 0 in the study; give its reach, {name}=LOW..HIGH"
        )
    low, high = sorted((present * (1 - REACH), present * (1 + REACH)))
    return name, (low, high)


def as_data(trim: Trim) -> dict[str, Any]:
    """Everything of a trim as plain values, SI."""
    return {
        "name": trim.name,
        "mode": trim.label,
        "target_hz": trim.target_hz,
        "present_hz": trim.present_hz,
        "present": trim.present,
        "change": trim.change,
        "low": trim.low,
        "high": trim.high,
        "scaling_change": trim.scaling_change,
        "correction_factor": trim.correction_factor,
        "slope_hz_per_unit": trim.slope_hz_per_m,
        "first_cut": trim.first_step if trim.in_steps else trim.change,
        "adds_metal": trim.adds_metal,
        "band_return_loss_db": trim.band_return_loss_db,
        "gain_before_dbi": trim.gain_dbi[0],
        "gain_after_dbi": trim.gain_dbi[1],
        "modes": [
            {
                "mode": m.label,
                "before_hz": m.before_hz,
                "after_hz": m.after_hz,
                "before_return_loss_db": m.before_return_loss_db,
                "after_return_loss_db": m.after_return_loss_db,
            }
            for m in trim.modes
        ],
    }
