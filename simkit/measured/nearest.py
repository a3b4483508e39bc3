"""Which stored cases are nearest to a measured sweep, by features and by curve."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from simkit.errors import MeasurementError, StoreError
from simkit.measured.dips import measured_dips
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.measured.pairing import ModelledDip
from simkit.measured.selection import as_cases, is_solved, modes_of_cases
from simkit.response.features import reflection
from simkit.store.read import connector_impedance, swept_names

if TYPE_CHECKING:
    import xarray as xr

BEST = 5
CHUNK = 128
"""Cases whose curves are held at a time."""

CURVE_POINTS = 200
"""Frequencies at which curves are compared."""

CURVE_SCALE = 0.05
"""Difference in |reflection| (rms) that counts like one unit of the pairing's misfit: that of a
dip of Q 5 which is off by 1 %, averaged over an octave."""


@dataclass(frozen=True, eq=False)
class NearCase:
    """One stored case beside the measurement.

    Attributes
    ----------
    case : int
    values : dict of str to float
        Swept values, SI.
    misfit : float
        Of the dips as they stand, half a chi-square; infinite without a measured dip.
    curve : float
        Rms difference of |reflection|.
    score : float
        Both together; lower is better.
    frequency_hz, reflection : (F,) arrays
    units : dict of str to str
        SI units of the values.
    """

    case: int
    values: dict[str, float]
    misfit: float
    curve: float
    score: float
    frequency_hz: FloatArray
    reflection: ComplexArray
    units: dict[str, str] = field(default_factory=dict)

    def as_row(self) -> dict[str, Any]:
        """Plain numbers for a table."""
        return {
            "case": self.case,
            **self.values,
            "dip_misfit": self.misfit,
            "curve_rms": self.curve,
            "score": self.score,
        }


def nearest_cases(
    dataset: xr.Dataset, measurement: Measurement, best: int = BEST
) -> tuple[NearCase, ...]:
    """Rank the solved cases by how near they come to a measured sweep as they stand.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results.
    measurement : Measurement
    best : int, optional
        How many to return.

    Returns
    -------
    tuple of NearCase
        Best first.

    Raises
    ------
    StoreError
        If no case is solved.
    MeasurementError
        If there is no frequency in common.
    """
    dataset = as_cases(dataset)
    rows = np.flatnonzero(is_solved(dataset))
    if not len(rows):
        raise StoreError("no case of these results is solved, so none can be the nearest")
    reference = float(dataset.attrs.get("reference_ohm", 50.0))
    measurement = measurement.renormalised(reference)
    frequency = np.asarray(dataset["frequency"].values, dtype=float)
    curves = _curve_differences(dataset, rows, measurement, frequency, reference)
    misfits = _misfits(dataset, rows, measurement, frequency)
    dips_count = np.isfinite(misfits).any()
    score = curves / CURVE_SCALE + (misfits if dips_count else 0.0)
    swept = swept_names(dataset)
    units = {name: str(dataset[name].attrs.get("units", "1")) for name in swept}
    found = []
    for place in np.argsort(score, kind="stable")[:best]:
        chosen = dataset.isel(case=int(rows[place]))
        found.append(
            NearCase(
                case=int(chosen["case"]),
                values={name: float(chosen[name]) for name in swept},
                misfit=float(misfits[place]),
                curve=float(curves[place]),
                score=float(score[place]),
                frequency_hz=frequency,
                reflection=reflection(chosen[connector_impedance(dataset)].values, reference),
                units=units,
            )
        )
    return tuple(found)


def _curve_differences(
    dataset: xr.Dataset,
    rows: np.ndarray[tuple[int, ...], np.dtype[np.intp]],
    measurement: Measurement,
    frequency: FloatArray,
    reference: float,
) -> FloatArray:
    """Rms difference of |reflection| over the common band, (len(rows),)."""
    inside = np.flatnonzero(
        (frequency >= measurement.frequency_hz[0]) & (frequency <= measurement.frequency_hz[-1])
    )
    if len(inside) < 2:
        raise MeasurementError(
            f"{measurement.path}: measured from {measurement.frequency_hz[0] / 1e6:g} to "
            f"{measurement.frequency_hz[-1] / 1e6:g} MHz, simulated from {frequency[0] / 1e6:g} to "
            f"{frequency[-1] / 1e6:g} MHz: no frequency in common; change [frequency] of the study "
            "or measure that band"
        )
    first, last = int(inside[0]), int(inside[-1]) + 1
    step = max((last - first) // CURVE_POINTS, 1)
    chosen = slice(first, last, step)
    wanted = np.interp(frequency[chosen], measurement.frequency_hz, np.abs(measurement.reflection))
    impedance = dataset[connector_impedance(dataset)]
    total = []
    for start in range(0, len(rows), CHUNK):
        part = impedance.isel(case=rows[start : start + CHUNK]).values[:, chosen]
        off = np.abs(reflection(part, reference)) - wanted
        total.append(np.sqrt(np.mean(off**2, axis=1)))
    return np.concatenate(total)


def _misfits(
    dataset: xr.Dataset,
    rows: np.ndarray[tuple[int, ...], np.dtype[np.intp]],
    measurement: Measurement,
    frequency: FloatArray,
) -> FloatArray:
    dips, _ = measured_dips(measurement)
    if not dips:
        return np.full(len(rows), np.inf)
    heard = [ModelledDip(dip.frequency_hz, 10 ** (-dip.return_loss_db / 20)) for dip in dips]
    band = (float(frequency[0]), float(frequency[-1]))
    swept = (float(measurement.frequency_hz[0]), float(measurement.frequency_hz[-1]))
    every = modes_of_cases(dataset)
    return np.array([every[row].pair(heard, band, swept).misfit for row in rows])
