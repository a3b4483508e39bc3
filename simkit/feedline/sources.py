"""What is to be matched: a case of the results, a measured sweep, or any one-port curve."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from os import PathLike, fspath
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from simkit.feedline.candidates import MAKERS
from simkit.feedline.checks import FeedlineError
from simkit.feedline.checks import quantity as q
from simkit.feedline.line import Line
from simkit.feedline.match import WANTED_DB, check_band, find_matches
from simkit.feedline.oneport import OnePort
from simkit.feedline.parts import PartSupply
from simkit.feedline.report import MatchReport

if TYPE_CHECKING:
    import xarray as xr

    from simkit.measured import Measurement
    from simkit.response.evaluate import Plane

    Source = xr.Dataset | Measurement | OnePort | str | PathLike[str]

FEW = 5
"""With fewer measured points in the band the curve between them is a guess."""

IN_BAND = 101
"""Frequencies at which the model is asked within the band, besides those of the study."""


@dataclass(frozen=True, eq=False)
class Terminals:
    """A load with what is known of it.

    Attributes
    ----------
    load : OnePort
    reference_ohm : float
        What the source itself is to be matched to.
    where : str
        Plane at which it was seen.
    case : int or None
        Of the results; None for a measurement.
    notes : tuple of str
    """

    load: OnePort
    reference_ohm: float
    where: str
    case: int | None = None
    notes: tuple[str, ...] = ()

    def as_text(self, start_hz: float, stop_hz: float) -> str:
        """Return the impedance at the edges and in the middle of a band in one sentence."""
        f = np.array([start_hz, (start_hz + stop_hz) / 2, stop_hz])
        seen = self.load.at(f).impedance_ohm
        values = [
            f"{z.real:.1f} {z.imag:+.1f}j ohm at {q(float(x), 'Hz')}"
            for x, z in zip(f, seen, strict=True)
        ]
        return f"impedance at the {self.where}: {', '.join(values)}"


def of_measurement(measurement: Measurement, start_hz: float, stop_hz: float) -> Terminals:
    """Return a measured sweep as a load; frequency 0 is left out."""
    from simkit.measured.quality import level_notes

    f = measurement.frequency_hz
    load = OnePort(f[f > 0], measurement.reflection[f > 0], measurement.reference_ohm)
    notes = [*measurement.notes, *level_notes(measurement)]
    inside = int(np.count_nonzero((f >= start_hz) & (f <= stop_hz)))
    if inside < FEW:
        notes.append(
            f"only {inside} points of the sweep lie in the band: what is between them is taken "
            "from a smooth curve; measure the band more finely"
        )
    where = "plane of the measurement"
    return Terminals(load, measurement.reference_ohm, where, notes=tuple(notes))


def of_results(
    dataset: xr.Dataset,
    start_hz: float,
    stop_hz: float,
    *,
    case: int | None = None,
    nominal: Mapping[str, float] | None = None,
    plane: Plane = "connector",
) -> Terminals:
    """Return the impedance of one case over its whole band, finely over the band to be matched.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results, or one case of them.
    start_hz, stop_hz : float
    case : int, optional
        The solved case nearest to the nominal values if left out.
    nominal : mapping of str to float, optional
        Nominal values of what is swept; the middle of the sweep if left out.
    plane : {"feed", "connector"}
        The connector is behind what the study has for a feed line; without one it is the feed.

    Raises
    ------
    FeedlineError
        If the study's band does not hold the band to be matched.
    StoreError
        If there is no such case, or it has no solution.
    """
    from simkit.response.evaluate import chain_of_case, impedance_at
    from simkit.store.cases import nearest_case, one_case

    if case is None and "case" in dataset.dims:
        case = nearest_case(dataset, nominal)
    chosen = one_case(dataset, case)
    grid = np.asarray(chosen["frequency"].values)
    if start_hz < grid[0] or stop_hz > grid[-1]:
        raise FeedlineError(
            f"the study is solved from {q(float(grid[0]), 'Hz')} to {q(float(grid[-1]), 'Hz')}, "
            f"not from {q(start_hz, 'Hz')} to {q(stop_hz, 'Hz')}: narrow the band, or widen "
            "[frequency] in the study and run it again"
        )
    f = np.union1d(grid, np.linspace(start_hz, stop_hz, IN_BAND))
    load = OnePort.from_impedance(f, impedance_at(chosen, f, plane))
    reference = float(chosen.attrs.get("reference_ohm", 50.0))
    number = int(chosen["case"]) if "case" in chosen.coords else None
    behind = plane == "connector" and chain_of_case(chosen).elements
    return Terminals(load, reference, "connector" if behind else "feed", number)


def match(
    source: Source,
    start_hz: float,
    stop_hz: float,
    *,
    case: int | None = None,
    port: int | None = None,
    delay_s: float = 0.0,
    plane: Plane = "connector",
    reference_ohm: float | None = None,
    line: Line | None = None,
    stub_line: Line | None = None,
    kinds: Sequence[str] = tuple(MAKERS),
    supply: PartSupply | None = None,
    wanted_db: float = WANTED_DB,
    refine: bool = True,
) -> MatchReport:
    """Design networks that match an antenna to its cable over a band, the best first.

    Parameters
    ----------
    source : path, xarray.Dataset, Measurement or OnePort
        A results folder, what `simkit.open_results` returns, a Touchstone file, what
        `simkit.read_touchstone` returns, or an impedance of your own.
    start_hz, stop_hz : float
        The band.
    case : int, optional
        Of results; the solved case in the middle of the sweep if left out.
    port : int, optional
        Of a Touchstone file with several.
    delay_s : float
        Port extension for a measured sweep, one way, positive towards the antenna.
    plane : {"feed", "connector"}
        Of results: in front of, or behind, the feed line that the study has already.
    reference_ohm : float, optional
        To be matched to: that of the study's connector or of the file if left out.
    line, stub_line, kinds, supply, wanted_db, refine
        As in `simkit.feedline.find_matches`.

    Returns
    -------
    MatchReport

    Raises
    ------
    FeedlineError
        As `simkit.feedline.find_matches`.
    StoreError, MeasurementError
        If the source cannot be read, or the case has no solution.

    Examples
    --------
    >>> report = simkit.match("build_1.s1p", 863e6, 870e6)  # doctest: +SKIP
    >>> print(report.as_text())  # doctest: +SKIP
    """
    found = terminals(source, start_hz, stop_hz, case=case, port=port, delay_s=delay_s, plane=plane)
    return find_matches(
        found.load,
        start_hz,
        stop_hz,
        reference_ohm=found.reference_ohm if reference_ohm is None else reference_ohm,
        line=line,
        stub_line=stub_line,
        kinds=kinds,
        supply=supply,
        wanted_db=wanted_db,
        refine=refine,
    )


def terminals(
    source: Source,
    start_hz: float,
    stop_hz: float,
    *,
    case: int | None = None,
    nominal: Mapping[str, float] | None = None,
    port: int | None = None,
    delay_s: float = 0.0,
    plane: Plane = "connector",
) -> Terminals:
    """Return the load that a source names; parameters and errors as in `match`."""
    from simkit.measured import Measurement
    from simkit.measured.plane import extended

    if isinstance(source, str | PathLike):
        source = _read(fspath(source), port)
    elif port is not None:
        raise FeedlineError("a port is chosen when a file is read: leave it out here")
    check_band(start_hz, stop_hz)
    if isinstance(source, Measurement):
        _not_of_measurements(case)
        return of_measurement(extended(source, delay_s), start_hz, stop_hz)
    if delay_s:
        raise FeedlineError("a port extension is for measured sweeps only: leave it out here")
    if isinstance(source, OnePort):
        _not_of_measurements(case)
        return Terminals(source, source.reference_ohm, "terminals")
    return of_results(source, start_hz, stop_hz, case=case, nominal=nominal, plane=plane)


def _read(path: str, port: int | None) -> xr.Dataset | Measurement:
    from simkit.measured import read_touchstone
    from simkit.store import open_results

    if Path(path).suffix == ".toml":
        raise FeedlineError(
            f"{path} is a study: solve it with simkit run, then name its results folder here"
        )
    if Path(path).is_file():
        return read_touchstone(path, port)
    if port is not None:
        raise FeedlineError(f"{path}: a port is chosen in a Touchstone file: leave it out here")
    return open_results(path)


def _not_of_measurements(case: int | None) -> None:
    if case is not None:
        raise FeedlineError(
            f"case {case} is chosen in results; a measured sweep has none: leave it out here"
        )
