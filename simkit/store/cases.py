"""Picking one case out of the results."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from simkit.errors import StoreError
from simkit.store.read import swept_names
from simkit.store.schema import Status

if TYPE_CHECKING:
    import xarray as xr

HAS_DATA = (int(Status.SOLVED), int(Status.DOUBTFUL))


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
