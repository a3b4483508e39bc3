"""Write pictures to files: one of a kind, or all of a run."""

from __future__ import annotations

import os
import re
from collections.abc import Iterator
from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING, cast

import numpy as np
from matplotlib.figure import Figure

from simkit.errors import MeasurementError, StoreError
from simkit.plot.cases import (
    describe_case,
    is_solved,
    nearest_case,
    one_case,
    title_of,
)
from simkit.plot.charge import plot_charge
from simkit.plot.crosssection import plot_crosssection
from simkit.plot.current import plot_current
from simkit.plot.density import plot_charge_maps, plot_current_maps
from simkit.plot.feedline import plot_feedline, plot_feedline_match, plot_feedline_path
from simkit.plot.geometry import plot_geometry
from simkit.plot.impedance import plot_impedance
from simkit.plot.kinds import KINDS
from simkit.plot.pattern import plot_pattern_cuts
from simkit.plot.reflection import plot_reflection
from simkit.plot.smith import plot_smith
from simkit.plot.tracks import MeasuredBuild, plot_tracks
from simkit.store.read import has_feedline, swept_names

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

    from simkit.study import Study
    from simkit.study.model import Antenna

FORMATS = ("png", "svg", "pdf")
MEASURED_FOLDER = "measured"
"""In a results folder: copies of the measured files the study names."""

_OF_RESULTS = {
    "impedance": plot_impedance,
    "reflection": plot_reflection,
    "smith": plot_smith,
    "feedline": plot_feedline,
    "feedline_path": plot_feedline_path,
    "feedline_match": plot_feedline_match,
}
_ALONG = {"current": plot_current, "charge": plot_charge}
_ON_METAL = {"current_map": plot_current_maps, "charge_map": plot_charge_maps}
NEED_STUDY = ("geometry", "carrier", *_ON_METAL)


def draw(
    dataset: xr.Dataset,
    kind: str,
    *,
    case: int | None = None,
    study: Study | None = None,
    by: str | None = None,
) -> Figure:
    """Draw one kind of picture.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results with the dimension `case`.
    kind : str
        A key of `KINDS`.
    case : int, optional
        Label of the case; the solved one nearest to the study's nominal values if left out.
    study : Study, optional
        Needed for pictures of the metal; tells the others which strips are joined, the nominal
        values, and the measured builds.
    by : str, optional
        Swept value along the axis of `tracks`.

    Returns
    -------
    matplotlib.figure.Figure
        Not known to pyplot.

    Raises
    ------
    StoreError
        If there is no such kind, case or swept value, or a picture of the metal is
        wanted without a study.
    """
    if kind not in KINDS:
        raise StoreError(f"there is no picture '{kind}'; choose from {', '.join(KINDS)}")
    nominal = study.values if study is not None else None
    if kind == "tracks":
        builds = measured_builds(study, by or next(iter(swept_names(dataset)), ""))
        return _figure(plot_tracks(dataset, by, nominal=nominal, measured=builds))
    number = nearest_case(dataset, nominal) if case is None else case
    if kind == "carrier":
        return _draw_carrier(number, study)
    if kind in NEED_STUDY:
        return _draw_metal(dataset, kind, number, study)
    if kind in _ALONG:
        antenna = _antenna(number, study)
        return _figure(_ALONG[kind](dataset, number, antenna=antenna))
    if kind == "pattern":
        return plot_pattern_cuts(dataset, number)
    return _figure(_OF_RESULTS[kind](dataset, number))


def save_plot(
    dataset: xr.Dataset,
    kind: str,
    path: str | os.PathLike[str],
    *,
    case: int | None = None,
    study: Study | None = None,
    by: str | None = None,
) -> Path:
    """Draw one kind of picture into a file; its ending says the format (png, svg, pdf).

    Parameters are those of `draw`, and the file.

    Raises
    ------
    StoreError
        As `draw`, or if the file cannot be written.
    """
    return write(draw(dataset, kind, case=case, study=study, by=by), path)


def save_all(
    dataset: xr.Dataset,
    folder: str | os.PathLike[str],
    *,
    study: Study | None = None,
    case: int | None = None,
) -> list[tuple[Path, str]]:
    """Write all pictures of a run as PNG files with stable names.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results with the dimension `case`.
    folder : path
        Made if it is missing.
    study : Study, optional
        Without it there is no picture of the metal.
    case : int, optional
        Label of the case; the solved one nearest to the study's nominal values if left out.

    Returns
    -------
    list of (Path, str)
        Each file and what it shows. Nothing but the geometry is drawn for a case without a
        solution, and no tracks without a sweep.

    Raises
    ------
    StoreError
        If a file cannot be written.
    """
    target = Path(folder)
    nominal = study.values if study is not None else None
    number = nearest_case(dataset, nominal) if case is None else case
    chosen = one_case(dataset, number)
    written = []
    for kind in KINDS.values():
        if (kind.name in NEED_STUDY and study is None) or not kind.of_one_case:
            continue
        if kind.of_feedline and not has_feedline(dataset):
            continue
        if kind.name == "carrier" and not _has_carrier(_antenna(number, study)):
            continue
        if kind.name == "geometry" or is_solved(chosen):
            path = save_plot(
                dataset, kind.name, target / f"{kind.name}.png", case=number, study=study
            )
            written.append((path, f"{kind.about} ({describe_case(chosen)})"))
    for by, name in _tracks_files(dataset):
        path = save_plot(dataset, "tracks", target / name, study=study, by=by)
        written.append((path, f"natural modes and dips against {by}"))
    return written


def _tracks_files(dataset: xr.Dataset) -> Iterator[tuple[str, str]]:
    """Every value with at least two settings: the first in ``tracks.png``, more by their names."""
    varied = [name for name in swept_names(dataset) if np.unique(dataset[name].values).size > 1]
    for number, by in enumerate(varied):
        yield by, "tracks.png" if number == 0 else f"tracks_{re.sub(r'[^A-Za-z0-9]+', '_', by)}.png"


def measured_builds(study: Study | None, by: str) -> list[MeasuredBuild]:
    """Read the dips of the study's measured builds, each at its swept value.

    What a build does not say is taken at the study's nominal value. A file that is not where the
    study says is looked for in the folder `MEASURED_FOLDER` beside the study, where a run leaves
    copies. One that cannot be used is left out: `simkit compare` is the place that complains.
    """
    from simkit.measured import read_touchstone
    from simkit.measured.dips import measured_dips

    builds = []
    for measured in study.measured if study is not None else ():
        value = measured.build.get(by, study.values.get(by) if study is not None else None)
        if value is None:
            continue
        with suppress(MeasurementError):
            dips, _ = measured_dips(read_touchstone(_found(study, measured.path)))
            places = tuple(dip.frequency_hz for dip in dips)
            builds.append(MeasuredBuild(measured.path.stem, value, places))
    return builds


def _found(study: Study | None, path: Path) -> Path:
    if study is None or path.exists():
        return path
    copy = study.path.parent / MEASURED_FOLDER / path.name
    return copy if copy.exists() else path


def _has_carrier(antenna: Antenna | None) -> bool:
    return antenna is not None and antenna.carrier is not None


def _draw_carrier(number: int, study: Study | None) -> Figure:
    from simkit.geometry.dressing import section_of

    antenna = _antenna(number, study)
    if antenna is None or antenna.carrier is None:
        raise StoreError(
            "the picture 'carrier' needs a study with a [carrier] table; this one has its strips "
            "in air, or its copy is not in the results folder"
        )
    return _figure(plot_crosssection(section_of(antenna)))


def _antenna(number: int, study: Study | None) -> Antenna | None:
    return study.case(number).antenna if study is not None else None


def _draw_metal(dataset: xr.Dataset, kind: str, number: int, study: Study | None) -> Figure:
    """Pictures for which the shape of the metal must be known."""
    chosen = one_case(dataset, number)
    if study is None:
        raise StoreError(
            f"{kind.replace('_', ' ')}: the metal is drawn from the study file: name the study too"
        )
    antenna = _antenna(number, study)
    if antenna is None:
        raise StoreError(f"case {number} has no geometry to draw: {study.case(number).refused}")
    if kind in _ON_METAL:
        return _ON_METAL[kind](dataset, antenna, number)
    wires = chosen if is_solved(chosen) else None
    return _figure(plot_geometry(antenna, wires, title=title_of(chosen, "geometry")))


def _figure(ax: Axes) -> Figure:
    return cast("Figure", ax.figure)


def write(figure: Figure, path: str | os.PathLike[str]) -> Path:
    """Write a figure so that the file is either the whole picture or what was there before.

    Raises
    ------
    StoreError
        If the folder cannot be written or the ending names no format.
    """
    target = Path(path)
    ending = target.suffix.lstrip(".").lower()
    if ending not in FORMATS:
        raise StoreError(f"{target}: a picture's file name ends in .{', .'.join(FORMATS)}")
    aside = target.with_name(f".{target.name}.{os.getpid()}.part")
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        figure.savefig(aside, format=ending)
        os.replace(aside, target)
    except OSError as error:
        raise StoreError(f"{target}: the picture cannot be written: {error.strerror}") from error
    finally:
        with suppress(OSError):
            aside.unlink(missing_ok=True)
    return target
