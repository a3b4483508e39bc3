"""``simkit trim``: how many millimetres to cut."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from simkit.cli.fitting import fitted, measured_argument, options_of_fit, plots_folder, save
from simkit.cli.folder import says_damage
from simkit.cli.options import csv_option, json_option, one_format, study_argument
from simkit.cli.output import csv_text, emit, json_text
from simkit.errors import MeasurementError

if TYPE_CHECKING:
    from simkit.measured.fit_result import FitResult
    from simkit.measured.targets import Target
    from simkit.measured.trim import Trim
    from simkit.measured.trim_model import ModeChange
    from simkit.measured.trim_pair import PairTrim
    from simkit.measured.variation import Variation

REACH = 0.1
"""A dimension without stated reach may change by this part of itself."""

DEFAULT_SCALE = "scale=0.93..1.07"


@click.command()
@study_argument
@measured_argument
@click.option(
    "--mode",
    "modes",
    multiple=True,
    required=True,
    metavar="MODE",
    help="Mode to aim with: 1/2, 1, 3/2 ...; once for each target in MHz.",
)
@click.option(
    "--target",
    "targets",
    multiple=True,
    required=True,
    metavar="TARGET",
    help="Where its dip shall be: '868 MHz'; a band to be matched as well as can be: "
    "'863 MHz..870 MHz'; or a return loss at least: '15 dB'. Two targets need two --by.",
)
@click.option(
    "--by",
    "by",
    multiple=True,
    required=True,
    metavar="NAME[=LOW..HIGH]",
    help="Dimension to change, with its reach; of several, each is a choice for one target, two "
    "together meet two targets.",
)
@options_of_fit
@json_option
@csv_option
@says_damage
def command(
    study: str,
    measured: tuple[str, ...],
    modes: tuple[str, ...],
    targets: tuple[str, ...],
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
    """Say how far to change dimensions of the build behind MEASURED to move a mode's dip.

    The study is fitted to the measurement first (--free, --known; the overall scale if neither is
    given), then the change follows from the fitted model, with its interval, beside the one from
    plain scaling. The last file's build is the one to be cut.

    \b
    Example:
      simkit trim my_antenna.toml build_1.s1p --mode 1/2 --target '868 MHz' --by arm \\
          --free carrier.permittivity=2..3.5
      simkit trim my_antenna.toml build_1.s1p --mode 1/2 --target '868 MHz' \\
          --mode 3/2 --target '2.75 GHz' --by arm --by width
    """
    form = one_format(as_json, as_csv)
    from simkit.measured import asked
    from simkit.measured.variation import Variation
    from simkit.study import load_study

    loaded = load_study(study)
    variation = Variation(loaded)
    aims = asked.targets_of(modes, targets, on_plane=asked.stands(loaded))
    reaches = dict(_reach(variation, text) for text in by)
    if results is not None:
        unsaid = [text.strip() for text in by if "=" not in text]
        reaches |= _stored_reaches(results, {name: reaches[name] for name in unsaid})
    if len(aims) == 2 and len(reaches) != 2:
        raise click.UsageError(
            f"two targets need two dimensions: give --by twice, not {len(reaches)} time(s)"
        )
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
    folder = plots_folder(study, plots)
    if len(aims) == 2:
        _together(result, (aims[0], aims[1]), reaches, form, folder)
    else:
        _by_choice(result, aims[0], reaches, form, folder)


def _by_choice(
    result: FitResult,
    aim: Target,
    reaches: dict[str, tuple[float, float]],
    form: str,
    folder: Path,
) -> None:
    """One target; each dimension is a way to reach it."""
    from simkit.measured.trim import trim_fitted, with_gain
    from simkit.measured.trim_words import factor_lines
    from simkit.plot.fit import put_source
    from simkit.plot.trim import plot_trim

    trims, refused = [], []
    for name, reach in reaches.items():
        try:
            found = trim_fitted(
                result, aim.half_waves, aim.middle_hz, name, reach, band_hz=aim.band_hz
            )
        except MeasurementError as error:
            refused.append(error)
            continue
        trims.append(with_gain(result, found))
    if not trims:
        raise refused[0]
    if form == "json":
        emit(json_text([as_data(trim) for trim in trims]))
    elif form == "csv":
        emit(csv_text([as_data(trim) | {"modes": None} for trim in trims]))
    else:
        parts = [result.as_text(), *(trim.as_text() for trim in trims)]
        factors = "\n".join(factor_lines(trims))
        emit("\n\n".join([*parts, f"for your own dimensioning sheet:\n{factors}"]))
    for reason in refused:
        click.echo(f"not by this one: {reason}", err=True)
    for trim in trims:
        ax = plot_trim(trim)
        put_source(ax, result, result.curves[-1])
        save(ax, folder, f"trim_{_file_word(trim.name)}.png")


def _together(
    result: FitResult,
    aims: tuple[Target, Target],
    reaches: dict[str, tuple[float, float]],
    form: str,
    folder: Path,
) -> None:
    """Two targets by two dimensions at once."""
    from simkit.measured.trim_pair import trim_pair
    from simkit.measured.trim_pair_words import pair_factor_lines
    from simkit.plot.fit import put_source
    from simkit.plot.trim_map import plot_trim_map

    trim = trim_pair(result, aims, reaches, gain=True)
    if form == "json":
        emit(json_text(pair_data(trim)))
    elif form == "csv":
        emit(csv_text(pair_data(trim)["dimensions"]))
    else:
        factors = "\n".join(pair_factor_lines(trim))
        text = [result.as_text(), trim.as_text(), f"for your own dimensioning sheet:\n{factors}"]
        emit("\n\n".join(text))
    words = "_".join(_file_word(name) for name in trim.names)
    ax = plot_trim_map(trim)
    put_source(ax, result, result.curves[-1])
    save(ax, folder, f"trim_{words}.png")


def _file_word(name: str) -> str:
    return name.replace(".", "_")


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


def _stored_reaches(
    results: str, reaches: dict[str, tuple[float, float]]
) -> dict[str, tuple[float, float]]:
    """Reaches that nobody stated, no wider than the stored sweep."""
    from simkit.store import open_results
    from simkit.store.read import swept_names

    stored = open_results(results)
    found = {}
    for name in set(reaches) & set(swept_names(stored)):
        values = stored[name].values
        found[name] = (
            max(reaches[name][0], float(values.min())),
            min(reaches[name][1], float(values.max())),
        )
    return found


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
        "supported_by_a_dip": trim.is_measured,
        "band_low_hz": trim.band_hz[0],
        "band_high_hz": trim.band_hz[1],
        "band_return_loss_now_db": trim.band_return_loss_now_db,
        "band_return_loss_db": trim.band_return_loss_db,
        "gain_before_dbi": trim.gain_dbi[0],
        "gain_after_dbi": trim.gain_dbi[1],
        "modes": _modes_data(trim.modes),
    }


def pair_data(trim: PairTrim) -> dict[str, Any]:
    """Everything of a trim of two dimensions as plain values, SI; targets in Hz or dB."""
    return {
        "dimensions": [
            {
                "name": name,
                "present": trim.present[k],
                "change": trim.change[k],
                "low": trim.low[k],
                "high": trim.high[k],
                "scaling_change": trim.scaling_change[k],
                "first_cut": trim.change[k] * (trim.first_share if trim.in_steps else 1.0),
            }
            for k, name in enumerate(trim.names)
        ],
        "targets": [
            {
                "target": label,
                "before": trim.before[k],
                "after": trim.after[k],
                "standard_error": trim.shown_sigma[k],
                "with_plain_scaling": trim.scaled[k],
                "slopes": trim.slopes[k].tolist(),
            }
            for k, label in enumerate(trim.labels)
        ],
        "correlation": trim.correlation,
        "angle_sine": trim.angle_sine,
        "well_conditioned": trim.well_conditioned,
        "adds_metal": trim.adds_metal,
        "unsupported_modes": list(trim.unmeasured),
        "gains_dbi": [list(pair) for pair in trim.gains_dbi],
        "modes": _modes_data(trim.modes),
    }


def _modes_data(modes: tuple[ModeChange, ...]) -> list[dict[str, Any]]:
    return [
        {
            "mode": m.label,
            "before_hz": m.before_hz,
            "after_hz": m.after_hz,
            "before_return_loss_db": m.before_return_loss_db,
            "after_return_loss_db": m.after_return_loss_db,
        }
        for m in modes
    ]
