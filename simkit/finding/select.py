"""Selecting the cases that satisfy a condition, block by block."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from os import PathLike
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from simkit.errors import StoreError

if TYPE_CHECKING:
    import xarray as xr

    from simkit.finding.condition import Condition, Term

LARGEST_PART = 128
"""Cases looked at together, unless the results are stored in larger blocks."""


@dataclass(frozen=True)
class Selection:
    """The cases that satisfy a condition.

    Attributes
    ----------
    places : (K,) int array
        Their places along ``case``, ascending.
    values : dict of Term to (K,) float array
        Quantities that were asked for, SI, NaN where a case has none.
    """

    places: NDArray[np.int64]
    values: dict[Term, NDArray[np.float64]]


def query(results: xr.Dataset | str | PathLike[str], condition: str) -> xr.Dataset:
    """Select the cases that satisfy a condition.

    Parameters
    ----------
    results : xarray.Dataset or path
        What `simkit.open_results` returns, some cases of it, or the results folder.
    condition : str
        As for ``simkit query``: ``dip of 1/2 wave within 868 MHz +- 1 % and arm < 80 mm``.

    Returns
    -------
    xarray.Dataset
        The selected cases in their order, none if none fits; read when used.

    Raises
    ------
    ConditionError
        The condition cannot be understood.
    StoreError
        The folder cannot be read, or the dataset has no dimension `case`.

    Notes
    -----
    Only the variables the condition names are read, a block of cases at a time. A quantity that a
    case does not have satisfies neither a comparison nor its negation.
    """
    from simkit.finding.parser import parse_condition
    from simkit.finding.reading import known_in

    dataset = opened(results)
    parsed = parse_condition(condition, known_in(dataset))
    return dataset.isel(case=select(dataset, parsed).places)


def opened(results: xr.Dataset | str | PathLike[str]) -> xr.Dataset:
    """Return the dataset itself, or that of a results folder; it has the dimension `case`.

    Raises
    ------
    StoreError
        It has none, or the folder cannot be read.
    """
    if isinstance(results, str | PathLike):
        from simkit.store import open_results

        results = open_results(results)
    if "case" not in results.dims:
        raise StoreError(
            "the dataset has no dimension 'case': give it as simkit.open_results returns it, "
            "or cases chosen with dataset.sel(case=[...])"
        )
    return results


def parts(dataset: xr.Dataset) -> Iterator[slice]:
    """Yield places along ``case`` that are stored, and so best read, together."""
    count, block = dataset.sizes["case"], int(dataset.attrs.get("block_size", 1))
    step = block * max(1, LARGEST_PART // block)
    for first in range(0, count, step):
        yield slice(first, min(first + step, count))


def select(
    dataset: xr.Dataset,
    condition: Condition | None,
    shown: Sequence[Term] = (),
    seen: Callable[[int], None] | None = None,
) -> Selection:
    """Judge every case and read what is to be shown of those selected.

    Parameters
    ----------
    dataset : xarray.Dataset
    condition : Condition or None
        None selects every case.
    shown : sequence of Term
        Read for the selected cases only.
    seen : callable, optional
        Told after every block how many cases were looked at.
    """
    from simkit.finding.condition import terms_of
    from simkit.finding.reading import read_term

    judged = terms_of(condition)
    kept = list(dict.fromkeys([*judged, *shown]))
    places: list[NDArray[np.int64]] = []
    columns: dict[Term, list[NDArray[np.float64]]] = {term: [] for term in kept}
    for rows in parts(dataset):
        part = dataset.isel(case=rows)
        values = {term: read_term(part, term) for term in judged}
        chosen = np.arange(rows.stop - rows.start)
        if condition is not None:
            chosen = np.flatnonzero(condition.judge(values)[0])
        if len(chosen):
            places.append(chosen + rows.start)
            for term in kept:
                column = values[term] if term in values else read_term(part, term)
                columns[term].append(column[chosen])
        if seen is not None:
            seen(rows.stop)
    none = np.zeros(0)
    return Selection(
        np.concatenate(places) if places else none.astype(np.int64),
        {term: np.concatenate(found) if found else none for term, found in columns.items()},
    )
