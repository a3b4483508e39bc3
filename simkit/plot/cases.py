"""Picking one case out of the results, and saying in words which one it is."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from simkit.errors import StoreError
from simkit.plot.style import DisplayUnit, written_unit
from simkit.response.labels import half_wave_label
from simkit.store.read import swept_names
from simkit.store.schema import Status

if TYPE_CHECKING:
    import xarray as xr

HAS_DATA = (int(Status.SOLVED), int(Status.DOUBTFUL))


@dataclass(frozen=True)
class Mode:
    """One natural mode of one case; `slot` is its place along the store's mode dimension."""

    slot: int
    half_waves: int
    frequency_hz: float
    q: float
    on_plane: bool = False

    @property
    def label(self) -> str:
        """The mode's length, as in ``3/2 wave``; ``3/4 wave`` where it stands on a plane."""
        return half_wave_label(self.half_waves, self.on_plane)


def has_data(dataset: xr.Dataset) -> np.ndarray[tuple[int, ...], np.dtype[np.bool_]]:
    """Return which cases were solved, doubtful ones included, one bool per case."""
    return np.isin(dataset["status"].values, HAS_DATA)


def nearest_case(dataset: xr.Dataset, nominal: Mapping[str, float] | None = None) -> int:
    """Return the solved case whose swept values lie nearest to the nominal ones.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results with the dimension `case`.
    nominal : mapping of str to float, optional
        Nominal value per swept name, SI. A name left out counts as the middle of its sweep.

    Returns
    -------
    int
        Label of the case. Distances are measured in spans of each swept value; of equally near
        cases the first is taken, and unsolved ones only if there is no other.
    """
    distance = np.zeros(dataset.sizes["case"])
    for name in swept_names(dataset):
        values = np.asarray(dataset[name].values, dtype=float)
        span = float(np.ptp(values))
        if span > 0.0:
            middle = float(values.min() + span / 2)
            wanted = (nominal or {}).get(name, middle)
            distance += ((values - wanted) / span) ** 2
    solved = has_data(dataset)
    if solved.any():
        distance = np.where(solved, distance, np.inf)
    return int(dataset["case"].values[int(np.argmin(distance))])


def one_case(dataset: xr.Dataset, case: int | None = None) -> xr.Dataset:
    """Return one case without the dimension `case`.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results, or one case of them.
    case : int, optional
        Label of the case. If it is left out the solved case in the middle of the sweep is taken.

    Raises
    ------
    StoreError
        If there is no such case.
    """
    if "case" not in dataset.dims:
        return dataset
    labels = dataset["case"].values
    if case is None:
        case = nearest_case(dataset)
    if case not in labels:
        raise StoreError(
            f"case {case} is not in these results: they hold the cases "
            f"{int(labels.min())} to {int(labels.max())}"
        )
    return dataset.sel(case=case)


def is_solved(case: xr.Dataset) -> bool:
    """Return whether one case holds a solution."""
    return int(case["status"]) in HAS_DATA


def reference_ohm(case: xr.Dataset) -> float:
    """Return the connector's reference resistance in ohm, 50 if the results do not say."""
    return float(case.attrs.get("reference_ohm", 50.0))


def why_empty(case: xr.Dataset) -> str:
    """Return the status of an unsolved case and its reason, for the middle of an empty picture."""
    status = Status(int(case["status"])).label
    reason = str(case["reason"].values) if "reason" in case else ""
    return f"{status}: {reason}" if reason else status


def swept_unit(dataset: xr.Dataset, name: str) -> DisplayUnit:
    """Return the unit in which to show a swept value, from its attributes."""
    attrs = dataset[name].attrs
    return written_unit(str(attrs.get("units", "1")), str(attrs.get("display_unit", "")))


def describe_case(case: xr.Dataset) -> str:
    """Return number and swept values of one case: ``case 7: arm 76 mm, width 8 mm``."""
    if "case" not in case.coords:
        return ""
    values = [
        f"{name} {swept_unit(case, name).value(float(case[name]))}" for name in swept_names(case)
    ]
    text = f"case {int(case['case'])}" + (": " + ", ".join(values) if values else "")
    if int(case["status"]) == Status.DOUBTFUL:
        text += " (doubtful)"
    return text


def title_of(case: xr.Dataset, what: str) -> str:
    """Return two lines: the study with what the picture shows, and which case it is."""
    study = str(case.attrs.get("title", ""))
    first = f"{study}: {what}" if study else what
    second = describe_case(case)
    return f"{first}\n{second}" if second else first


def on_plane(dataset: xr.Dataset) -> bool:
    """Return whether metal of any case stands on a ground plane, so that modes count quarters."""
    return "path_on_plane" in dataset and bool((dataset["path_on_plane"].values == 1).any())


def numbered_modes(case: xr.Dataset) -> list[Mode]:
    """Return the natural modes of one case from the lowest frequency up, empty slots left out."""
    frequency = np.asarray(case["mode_frequency"].values, dtype=float)
    half_waves = np.asarray(case["mode_half_waves"].values)
    q = np.asarray(case["mode_q"].values, dtype=float)
    found = [
        Mode(slot, int(half_waves[slot]), float(frequency[slot]), float(q[slot]), on_plane(case))
        for slot in range(frequency.size)
        if np.isfinite(frequency[slot])
    ]
    return sorted(found, key=lambda mode: mode.frequency_hz)
